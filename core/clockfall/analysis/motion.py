"""How the elements of a binary run with time, by the sum of all effects or as measured."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np

from clockfall.analysis.draws import Sample
from clockfall.analysis.study import Choices, Prediction, RatesFrom, predicted_at
from clockfall.binary.orbit import SecularMotion
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects.host import Host

_SHARE: Final = 1e-3  # of the time in which an element changes by itself: the step of the second rates
_LONG: Final = 1e9  # s, the step where nothing changes


def secular_motion(
    host: Host, sample: Sample, choices: Choices, predicted: Mapping[str, Prediction], rates: RatesFrom = "predicted"
) -> SecularMotion:
    """Return how the elements of a sample run.

    First rates are the sums over effects, intrinsic and apparent, or (with "measured") what was measured where it was.
    Second rates are the change of those sums along the orbit's own evolution. A projected axis shrinks with the period
    by Kepler's third law, besides what effects say of it.

    Parameters
    ----------
    predicted : mapping of name to Prediction
        Those of the sample's own state, as `study` has them.
    """
    state = sample.state
    P, n = state.known("orbital_period", "mean_motion")
    own, seen = {}, {}
    for field in ("orbital_period", "eccentricity", "longitude_of_periastron", "projected_semi_major_axis"):
        own[field], seen[field] = _rates(sample, predicted.get(f"{field}_rate"), f"{field}_rate", rates)
    second = _second_rates(host, sample, choices, own)
    k = own["longitude_of_periastron"] / n
    n_rate = -n * (own["orbital_period"] + seen["orbital_period"]) / P
    axis = own["projected_semi_major_axis"] + seen["projected_semi_major_axis"]
    if state.projected_semi_major_axis is not None:
        axis = axis + 2.0 / 3.0 * own["orbital_period"] / P * state.projected_semi_major_axis
    return SecularMotion(
        state=state,
        period_rate=own["orbital_period"] + seen["orbital_period"],
        period_second_rate=second["orbital_period_rate"],
        advance_per_radian=k,
        drift=seen["longitude_of_periastron"],
        # the advance that follows the true anomaly quickens with the mean motion; the rest of its change follows time
        second_drift=second["longitude_of_periastron_rate"] - k * n_rate,
        eccentricity_rate=own["eccentricity"] + seen["eccentricity"],
        axis_rate=axis,
    )


def _rates(sample: Sample, prediction: Prediction | None, name: str, rates: RatesFrom) -> tuple[FloatArray, FloatArray]:
    """Return the intrinsic and the apparent rate, shape batch."""
    zero = np.zeros(sample.state.shape)
    own = zero if prediction is None else prediction.intrinsic + zero
    seen = zero if prediction is None else prediction.apparent + zero
    if rates == "measured" and name in sample.measured:
        own = sample.measured[name] - seen
    return own, seen


def _second_rates(
    host: Host, sample: Sample, choices: Choices, own: Mapping[str, FloatArray]
) -> Mapping[str, FloatArray]:
    """Return the change of the summed rates of period and advance along the evolution [their unit per second]."""
    state = sample.state
    P, o = state.known("orbital_period", "one_minus_eccentricity")
    quickest = np.maximum(np.abs(own["orbital_period"]) / P, np.abs(own["eccentricity"]) / o)
    h = np.where(quickest > 0.0, _SHARE / np.where(quickest > 0.0, quickest, 1.0), _LONG)

    def totals(time: FloatArray) -> Mapping[str, Prediction]:
        return predicted_at(host, sample, choices, _evolved(state, own, time))

    later, earlier = totals(h), totals(-h)
    zero = np.zeros(state.shape)
    return {
        name: (later[name].total - earlier[name].total) / (2.0 * h) if name in later else zero
        for name in ("orbital_period_rate", "longitude_of_periastron_rate")
    }


def _evolved(state: BinaryState, own: Mapping[str, FloatArray], time: FloatArray) -> BinaryState:
    """Return the state a while later by its intrinsic first rates; an eccentricity stays at 0 or above."""
    P, e, o = state.known("orbital_period", "eccentricity", "one_minus_eccentricity")
    changed = {"orbital_period": P + own["orbital_period"] * time}
    de = np.maximum(own["eccentricity"] * time, -e)
    if np.any(de != 0.0):
        changed |= {"one_minus_eccentricity": np.minimum(o - de, 1.0)}
    return state.replace(**changed)
