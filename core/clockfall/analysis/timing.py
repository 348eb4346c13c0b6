"""When the signals arrive: each effect's delay at many times, and the emission that belongs to an arrival.

The barycentric arrival time is t = T + sum of all delays(T), T the emission time (Damour & Deruelle 1986). It is
inverted exactly, by Newton's method on the sum of all effects' delays, a third party's included.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

import numpy as np

from clockfall.analysis.study import By
from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import Orbit, SecularMotion
from clockfall.binary.ranges import FloatArray
from clockfall.effects.card import Card
from clockfall.effects.contributions import Delay
from clockfall.effects.host import Applied
from clockfall.errors import ClockfallError

BLOCK: Final = 16_384
"""Times worked on at once for one binary: they stay in the cache."""

_ROUNDS: Final = 30
_STRAIGHT: Final = 1e-6  # s; over it delays are straight: their curvature, below 1e-2 per second, leaves 1e-14 s
_STILL: Final = 1e-13  # s, of emission time; the step after it would be smaller by a thousand and more


class NotInverted(ClockfallError):
    """No emission time was found for an arrival."""


@dataclass(frozen=True, slots=True)
class Delays:
    """Delays at many times.

    Attributes
    ----------
    by_effect : mapping of effect name to array, shape batch + (times,) [s]
    cards : mapping of effect name to Card
        Of the effects that have a delay.
    total : array, shape batch + (times,) [s]
    emission : array, shape batch + (times,) [s]
        Emission times since the periastron epoch, one number each.
    orbital_phase : array, shape batch + (times,) [turns]
        Mean anomaly of the emission as a share of a turn, from 0 to 1.
    """

    by_effect: Mapping[str, FloatArray]
    cards: Mapping[str, Card]
    total: FloatArray
    emission: FloatArray
    orbital_phase: FloatArray


def delays(
    applied: Applied,
    motion: SecularMotion,
    times: Epoch,
    by: By = "arrival",
    instead: Mapping[str, FloatArray] | None = None,
) -> Delays:
    """Return each effect's delay.

    Parameters
    ----------
    applied : Applied
        The effects, applied to the state that moves.
    motion : SecularMotion, shape batch
        How its elements run.
    times : Epoch, shape (times,)
        Barycentric arrivals, or emissions; TDB.
    instead : mapping of parameter to array, shape batch
        Values that stand in for the parameters that effects predict.

    Raises
    ------
    OutOfRange
        The motion does not describe the period at one of the times.
    NotInverted
        The delays of neighbouring emissions differ by more than these, so that arrival has no one emission.
    """
    parameters = applied.delay_parameters(instead)
    size = times.shape[0]
    shape = (*motion.state.shape, size)
    total, emission, phase = (np.empty(shape) for _ in range(3))
    by_effect: dict[str, FloatArray] = {}
    cards: dict[str, Card] = {}
    for part in _blocks(size, motion.state.shape):
        seconds, low = motion.seconds(Epoch(times.day[part], times.fraction[part]))
        orbit, found = _found(applied, motion, seconds, low, parameters, by)
        sum_here = np.zeros(seconds.shape)
        for card, delay in found:
            cards[card.name] = card
            column = by_effect.setdefault(card.name, np.empty(shape))
            column[..., part] = delay.seconds
            sum_here = sum_here + delay.seconds
        total[..., part], emission[..., part] = sum_here, orbit.seconds
        phase[..., part] = np.mod(orbit.mean_anomaly / (2.0 * np.pi), 1.0)
    return Delays(MappingProxyType(by_effect), MappingProxyType(cards), total, emission, phase)


Found = tuple[tuple[Card, Delay], ...]


def _found(
    applied: Applied,
    motion: SecularMotion,
    seconds: FloatArray,
    low: FloatArray,
    parameters: Mapping[str, Mapping[str, FloatArray]],
    by: By,
) -> tuple[Orbit, Found]:
    """Return the orbit at emission and the delays there."""
    start = motion.at(seconds, low)
    found = applied.delays(start, parameters)
    if by == "emission":
        return start, found
    since = np.zeros(seconds.shape)  # of the emission, before the arrival
    orbit = start
    for _ in range(_ROUNDS):
        value, rate = _sum(found, seconds.shape)
        # Newton's step on T + sum(T) = t
        step = -(since + value) / (1.0 + rate)
        since = since + step
        largest = float(np.max(np.abs(step), initial=0.0))
        if largest < _STRAIGHT and all(delay.rate is not None for _, delay in found):
            return orbit.shifted(step), tuple((card, _shifted(delay, step)) for card, delay in found)
        orbit = start.moved(since)
        found = applied.delays(orbit, parameters)
        if largest < _STILL:
            return orbit, found
    lost = int(np.sum(np.abs(step) >= _STILL))
    raise NotInverted(
        f"{lost} of {step.size} arrivals have no one emission time: the delays change as fast as time itself; check "
        "the projected semi-major axis and the period"
    )


def _shifted(delay: Delay, step: FloatArray) -> Delay:
    assert delay.rate is not None
    return Delay(delay.seconds + delay.rate * step, delay.rate)


def _sum(found: Found, shape: tuple[int, ...]) -> tuple[FloatArray, FloatArray]:
    value, rate = np.zeros(shape), np.zeros(shape)
    for _, delay in found:
        value = value + delay.seconds
        if delay.rate is not None:
            rate = rate + delay.rate
    return value, rate


def _blocks(size: int, batch: tuple[int, ...]) -> Iterator[slice]:
    lanes = max(1, BLOCK // max(1, int(np.prod(batch))))
    for start in range(0, size, lanes):
        yield slice(start, min(start + lanes, size))
