"""Weighing: both masses from two measured parameters, and what those masses say of the other measurements."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from typing import Final

import numpy as np

from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.masses import HEAVIEST, LIGHTEST, Misfit, newton_masses, search_masses
from clockfall.analysis.outcome import Drawn, Finding, Outcome, Said
from clockfall.analysis.study import Choices, Prediction, Study, applied_to, predicted_at, predictions
from clockfall.analysis.system import System
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Host
from clockfall.errors import BadInput

USUAL_PAIR: Final = ("longitude_of_periastron_rate", "einstein_delay_amplitude")
"""What weighs most eccentric binaries: the sum of the masses, and a second combination of them."""


class CannotWeigh(BadInput):
    """The masses are not given and the measured parameters do not give them."""


def study(host: Host, system: System, choices: Choices | None = None, *, weigh_anew: bool = False) -> Study:
    """Draw a system, see to its masses, and sum what the effects predict.

    Parameters
    ----------
    weigh_anew : bool
        Weigh the bodies by measured parameters even where the system gives masses.

    Raises
    ------
    CannotWeigh
        Masses are needed and neither given nor to be had from `system.measured`.
    BadInput, EffectError
        As `Host.apply` raises them, and (with a strict host) for an effect that fails.
    """
    choices = (choices or Choices()).with_system(system)
    sample = draw(system, host.cards, draws=choices.draws, seed=choices.seed)
    given = sample.state.mass_1 is not None and sample.state.mass_2 is not None
    used: tuple[str, ...] = ()
    cautions: tuple[Said, ...] = ()
    if weigh_anew or not given:
        used = _chosen_pair(system, choices)
        sample, cautions = _weighed(host, sample, choices, used)
    applied = applied_to(host, sample, choices)
    predicted = predictions(applied, sample.apparent)
    masses_from = "given" if not used else "weighed"
    return Study(system, choices, sample, applied, predicted, masses_from, used, cautions)


def weigh(host: Host, system: System, choices: Choices | None = None) -> Outcome:
    """Weigh both bodies by two measured parameters, and test every other measured parameter.

    Returns
    -------
    Outcome
        Findings: ``mass_1``, ``mass_2``, ``total_mass`` [Msun], ``mass_ratio`` (m_1/m_2), ``sin_inclination``,
        ``mass_correlation``, and for each parameter ``observed``, ``predicted``, ``ratio`` and ``tension_sigma``.

    Raises
    ------
    CannotWeigh
        The two parameters are not measured or not predicted, or no masses give them.
    """
    weighed = study(host, system, choices, weigh_anew=True)
    tests = [
        finding
        for name in sorted(weighed.sample.measured)
        if name in weighed.predicted and name not in weighed.used
        for finding in comparison(weighed, weighed.predicted[name])
    ]
    used = [
        weighed.finding(p.name, "used", weighed.sample.measured[p.name], p.unit, p.shown_in, p.meaning)
        for p in (weighed.predicted[name] for name in weighed.used)
    ]
    return weighed.outcome([*_mass_findings(weighed), *used, *tests], {"used": " ".join(weighed.used)})


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


def _mass_findings(of: Study) -> list[Finding]:
    """Return the masses and what follows from them."""
    state = of.sample.state
    m_1, m_2, M = state.known("mass_1", "mass_2", "total_mass")
    found = [
        of.finding("mass_1", "", m_1, "Msun", "Msun", "mass of body 1, the timed one"),
        of.finding("mass_2", "", m_2, "Msun", "Msun", "mass of body 2, the companion"),
        of.finding("total_mass", "", M, "Msun", "Msun", "sum of the masses"),
        of.finding("mass_ratio", "", m_1 / m_2, "", "", "m_1/m_2"),
    ]
    if state.sin_inclination is not None:
        found.append(of.finding("sin_inclination", "", state.sin_inclination, "", "", "sine of the inclination"))
    kept = of.sample.possible[1:]
    if np.sum(kept) > 1:
        with np.errstate(invalid="ignore", divide="ignore"):  # without spread there is no correlation: NaN
            correlation = np.corrcoef(m_1[1:][kept], m_2[1:][kept])[0, 1]
        drawn = Drawn(float(correlation), np.empty(0))
        found.append(Finding("mass_correlation", "", drawn, "", "", "correlation of the two masses"))
    return found


def _chosen_pair(system: System, choices: Choices) -> tuple[str, str]:
    """Return the two measured parameters that weigh the bodies."""
    measured = sorted(system.measured)
    listed = ", ".join(measured) or "nothing"
    if choices.use:
        for name in choices.use:
            if name not in system.measured:
                near = difflib.get_close_matches(name, measured, n=1)
                hint = f"; did you mean {near[0]!r}?" if near else ""
                raise CannotWeigh(f"{name!r} is not in [measured] of {system.name}{hint} (measured: {listed})")
        if len(set(choices.use)) != 2:
            raise CannotWeigh(f"two different measured parameters weigh the bodies, found {', '.join(choices.use)}")
        return choices.use[0], choices.use[1]
    if all(name in system.measured for name in USUAL_PAIR):
        return USUAL_PAIR
    raise CannotWeigh(
        f"the masses of {system.name} are not both given, and weighing them needs {' and '.join(USUAL_PAIR)} in "
        f"[measured] (measured: {listed}); give mass_1 and mass_2 in [masses], or name two measured parameters to use"
    )


def _weighed(host: Host, sample: Sample, choices: Choices, pair: tuple[str, str]) -> tuple[Sample, tuple[Said, ...]]:
    """Return the sample with both masses filled in, and what is to be said of them."""
    central = sample.central()
    solutions = search_masses(_misfit(host, central, choices, pair))
    if not solutions:
        values = " and ".join(f"{name} = {central.measured[name][0]:.9g}" for name in pair)
        raise CannotWeigh(
            f"no masses between {LIGHTEST:g} and {HEAVIEST:g} Msun give the measured {values} [clockfall's units]; "
            "check the values and their units, or use another pair"
        )
    start = np.broadcast_to(solutions[0], (sample.possible.size, 2))
    masses, solved = newton_masses(_misfit(host, sample, choices, pair), start)
    masses = np.where(solved[:, None], masses, solutions[0])
    cautions = []
    if lost := int(np.sum(~solved)):
        share = lost / sample.draws
        cautions.append(Said("", f"weighing: {share:.1%} of the draws set aside, since no masses give their values"))
    for m_1, m_2 in solutions[1:]:
        cautions.append(
            Said("", f"weighing: these two parameters allow m_1 = {m_1:.4f}, m_2 = {m_2:.4f} Msun just as well")
        )
    state = sample.state.replace(mass_1=masses[:, 0], mass_2=masses[:, 1])
    return sample.with_state(state, sample.possible & solved), tuple(cautions)


def _misfit(host: Host, sample: Sample, choices: Choices, pair: tuple[str, str]) -> Misfit:
    """Return the misfit of the pair as a function of trial masses."""
    observed = [sample.measured[name] for name in pair]

    def misfit(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        state = sample.state.replace(mass_1=m_1, mass_2=m_2)
        predicted = predicted_at(host, sample, choices, state)
        return np.stack([_named(predicted, name) / o - 1.0 for name, o in zip(pair, observed, strict=True)], axis=-1)

    return misfit


def _named(predicted: Mapping[str, Prediction], name: str) -> FloatArray:
    if name not in predicted:
        raise CannotWeigh(f"no active effect predicts {name}, so it cannot weigh the bodies")
    return predicted[name].total
