"""What was measured against what is predicted: ratio, difference, and how many sigma apart they are."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np

from clockfall.analysis.outcome import Drawn, Finding, Said
from clockfall.analysis.study import Prediction, Study
from clockfall.binary.ranges import FloatArray

CONTRADICTION: Final = 5.0
"""Sigma beyond which inputs are said to contradict each other; a test of theory is no input."""


def comparison(of: Study, prediction: Prediction) -> list[Finding]:
    """Return observed, predicted, ratio and tension of one measured parameter, apparent parts taken off."""

    def finding(role: str, values: FloatArray, meaning: str, *, pure: bool = False) -> Finding:
        unit, shown_in = ("", "") if pure else (prediction.unit, prediction.shown_in)
        return of.finding(prediction.name, role, values, unit, shown_in, meaning)

    cleaned = of.sample.measured[prediction.name] - prediction.apparent
    predicted = prediction.intrinsic
    found = [
        finding("observed", cleaned, f"measured {prediction.meaning}, apparent part taken off"),
        finding("predicted", predicted, f"predicted {prediction.meaning}"),
    ]
    if np.all(predicted != 0.0):  # what no effect predicts has no ratio
        ratio = finding("ratio", cleaned / predicted, "observed over predicted", pure=True)
        difference = finding("difference", cleaned - predicted, "observed minus predicted")
        tension = Finding(
            prediction.name, "tension_sigma", tension_of(difference.drawn), "", "", "difference over its uncertainty"
        )
        found += [ratio, tension]
    return found


def tension_of(difference: Drawn) -> Drawn:
    """Return a difference over its uncertainty on the side of zero, with its sign; NaN where it has none."""
    nothing = np.empty(0)
    if difference.interval is None:
        return Drawn(np.nan, nothing)
    low, high = difference.interval
    side = difference.central - low if difference.central > 0.0 else high - difference.central
    return Drawn(difference.central / side if side > 0.0 else np.nan, nothing)


def contradictions(of: Study) -> Iterator[Said]:
    """Say where what the system gives contradicts itself: masses against measurements, inclination against masses.

    Only where something is given twice over. The orbital decay is left out: it is the test of theory.
    """
    if of.masses_from == "given":
        for name, measured in of.sample.measured.items():
            if name in of.predicted and name != "orbital_period_rate":
                sigma = _sigmas(of, measured - of.predicted[name].total)
                if abs(sigma) > CONTRADICTION:
                    yield Said("", f"contradictory inputs: the masses given predict a {name} that is "
                                   f"{abs(sigma):.1f} sigma from the one measured")  # fmt: skip
    yield from _inclinations(of)


def against_given(of: Study, masses: dict[str, FloatArray]) -> Iterator[Said]:
    """Say where masses given in the system contradict those that it was weighed to have.

    Parameters
    ----------
    masses : mapping of "mass_1" or "mass_2" to array, shape (1 + draws,) [Msun]
        As given.
    """
    for name, given in masses.items():
        (weighed,) = of.sample.state.known(name)
        sigma = _sigmas(of, given - weighed)
        if abs(sigma) > CONTRADICTION:
            yield Said("", f"contradictory inputs: the {name} given, which is not used here, is {abs(sigma):.1f} sigma "
                           "from the one weighed")  # fmt: skip


def _inclinations(of: Study) -> Iterator[Said]:
    state = of.sample.state
    if state.inclination is None or state.projected_semi_major_axis is None or state.sin_inclination is None:
        return
    sigma = _sigmas(of, state.sin_inclination - np.sin(state.inclination))
    if abs(sigma) > CONTRADICTION:
        yield Said("", f"contradictory inputs: the inclination given is {abs(sigma):.1f} sigma from the one that the "
                       "masses and the projected semi-major axis give")  # fmt: skip


def _sigmas(of: Study, difference: FloatArray) -> float:
    """Return how many sigma a difference is from zero; 0 where it is near, or nothing can be said."""
    drawn = Drawn.from_batch(difference, of.sample.possible)
    if abs(drawn.central) < 2.0 * np.nanstd(drawn.draws):
        return 0.0  # near enough not to be sorted
    if drawn.interval is None:
        return 0.0
    sigma = tension_of(drawn).central
    return sigma if np.isfinite(sigma) else 0.0
