"""What each effect adds to the arrival times: at given times, or over one orbit."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace
from typing import Final

import numpy as np

from clockfall.analysis.motion import secular_motion
from clockfall.analysis.outcome import Column, Outcome, Said
from clockfall.analysis.study import Choices, Prediction, Study, applied_to
from clockfall.analysis.system import System
from clockfall.analysis.timing import Delays, delays
from clockfall.analysis.weighing import study
from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import LARGEST_PERIOD_CHANGE, SecularMotion
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Applied, Host
from clockfall.errors import BadInput

MOST_PHASES: Final = 100_000
FAR_CHANGE: Final = 1e-3
"""Of the period: beyond it the two rates are a rough description, and it is said."""

_NEEDS: Final = (
    "orbital_period",
    "eccentricity",
    "longitude_of_periastron",
    "projected_semi_major_axis",
    "periastron_epoch",
)


def delays_of(host: Host, system: System, choices: Choices | None = None) -> Outcome:
    """Return the delay that each effect causes, with every input at its median.

    Returns
    -------
    Outcome
        Columns: ``time_day`` and ``time_fraction`` (MJD, TDB; arrivals, or emissions where the choices say so),
        ``emission`` [s since periastron], ``orbital_phase`` [turns of mean anomaly], one ``delay_<effect>`` [s] for
        each effect, and their ``delay_total`` [s].

    Raises
    ------
    BadInput
        The system lacks an element of the orbit, there are no times, or too many phases are asked for.
    OutOfRange
        A time at which the period's polynomial fails.
    NotInverted
        An arrival has no one emission.
    """
    choices = choices or Choices()
    _check(system, choices)
    of = study(host, system, replace(choices, draws=1))
    central = of.sample.central()
    applied = applied_to(host, central, of.choices)
    motion = secular_motion(host, central, of.choices, _at_centre(of), choices.rates)
    instead = {name: values for name, values in central.measured.items() if choices.rates == "measured"}
    if choices.times is not None:
        times = choices.times
        found = delays(applied, motion, times, choices.by, instead)
    else:
        emissions = _one_orbit(motion, choices.phases)
        found = delays(applied, motion, emissions, "emission", instead)
        times = emissions.plus_seconds(found.total[0]) if choices.by == "arrival" else emissions
    facts = {"by": choices.by, "rates_from": choices.rates, "over": "" if choices.times is not None else "one orbit"}
    said = (*_said(applied, motion, found), *_far(motion, found))
    central_of = replace(of, sample=replace(of.sample.central(), seed=of.sample.seed))
    return central_of.outcome([], facts, said, tuple(_columns(times, found)))


def _check(system: System, choices: Choices) -> None:
    known = {*system.fields, *(["periastron_epoch"] if system.periastron_epoch is not None else [])}
    known |= {"eccentricity"} & {"eccentricity" for name in known if name == "one_minus_eccentricity"}
    if system.node_elements is not None:
        known |= {"eccentricity", "longitude_of_periastron", "periastron_epoch"}
    missing = [name for name in _NEEDS if name not in known]
    if missing:
        raise BadInput(f"delays need {', '.join(missing)} in [orbit] of {system.name}")
    if choices.times is not None and not choices.times.shape[0]:
        raise BadInput("no times are given; leave them out for one orbit")
    if choices.times is None and not 1 <= choices.phases <= MOST_PHASES:
        raise BadInput(f"phases of an orbit: expected 1 to {MOST_PHASES}, found {choices.phases}")


def _at_centre(of: Study) -> Mapping[str, Prediction]:
    """Return the predictions of the central element."""
    return {name: replace(p, intrinsic=p.intrinsic[:1], apparent=p.apparent[:1]) for name, p in of.predicted.items()}


def _one_orbit(motion: SecularMotion, phases: int) -> Epoch:
    """Return emissions evenly spaced over the orbit that begins at the periastron epoch; shape (phases,)."""
    epoch, P = motion.state.periastron_epoch, motion.state.orbital_period
    assert epoch is not None
    assert P is not None
    return epoch.plus_seconds(np.arange(phases) / phases * P[0])


def _columns(times: Epoch, found: Delays) -> Iterator[Column]:
    yield Column("time_day", times.day, "d", "d", "whole days of the time (MJD, TDB)")
    yield Column("time_fraction", times.fraction, "d", "d", "the rest of the time")
    yield Column("emission", found.emission[0], "s", "d", "emission since the periastron epoch")
    yield Column("orbital_phase", found.orbital_phase[0], "", "", "mean anomaly of the emission, in turns")
    for name, values in found.by_effect.items():
        card = found.cards[name]
        yield Column(
            f"delay_{name.replace('-', '_')}", values[0], "s", "s", card.delay, name, card.nature, card.sources
        )
    yield Column("delay_total", found.total[0], "s", "s", "sum of all delays")


def _said(applied: Applied, motion: SecularMotion, found: Delays) -> Iterator[Said]:
    if not found.by_effect:
        yield Said("", "no active effect has a delay")
    s = motion.state.sin_inclination
    if s is not None and np.any(s > 1.0):
        yield Said("shapiro-delay", f"no delay, since the central values give sin i = {float(np.max(s)):.6f}, above 1")
    elif s is None and any(effect.name == "shapiro-delay" for effect in applied.active):
        yield Said("shapiro-delay", "no delay, since the inclination is not known")


def _far(motion: SecularMotion, found: Delays) -> Iterator[Said]:
    change = _change(motion, found.emission)
    if change > FAR_CHANGE:
        yield Said(
            "",
            f"the period changes by {change:.1%} until the farthest time: a constant rate and its change describe it "
            f"roughly, and beyond {LARGEST_PERIOD_CHANGE:.0%} not at all",
        )


def _change(motion: SecularMotion, emission: FloatArray) -> float:
    (P,) = motion.state.known("orbital_period")
    change = motion.period_rate[..., None] * emission / P[..., None]
    return float(np.max(np.abs(change), initial=0.0))
