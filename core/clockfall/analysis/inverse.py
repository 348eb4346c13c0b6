"""The inverse questions: which value of a quantity would make theory meet the measurement, and how large it may be."""

from __future__ import annotations

import difflib
from collections.abc import Callable
from dataclasses import replace
from typing import Final

import numpy as np

from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.outcome import Drawn, Finding, Said
from clockfall.analysis.study import Choices, Study, predicted_at
from clockfall.analysis.system import System, Uncertain
from clockfall.analysis.weighing import has_masses, study, study_of, weighing_parameters
from clockfall.binary.ranges import BoolArray, FloatArray
from clockfall.binary.state import FIELDS
from clockfall.effects.host import Host
from clockfall.errors import BadInput

SOLVABLE: Final = {
    "distance": ("orbital_period_rate", 1e9, 1e13),
    "moment_of_inertia_1": ("longitude_of_periastron_rate", 1e-13, 1e-6),
}
"""Field -> (the measured rate that is to be met, the smallest and largest value tried [the field's unit])."""

CONFIDENCE: Final = 0.95

Mismatch = Callable[[FloatArray], FloatArray]
"""Trial values, shape trials + (1 + draws,) -> measured minus predicted, same shape."""

_GRID: Final = 400
_STEPS: Final = 60
_LIMIT_DRAWS: Final = 1024  # mean and spread need no more


def solve_for(host: Host, system: System, choices: Choices, field: str) -> tuple[list[Finding], list[Said]]:
    """Return the value of a state field at which the predicted rate is the measured one.

    The distance is sought that makes the decay agree, the moment of inertia that explains the advance; masses are those
    given, or weighed by `choices.use`. Every draw is solved on its own.

    Raises
    ------
    BadInput
        `field` is none of `SOLVABLE`, the rate is not measured, or no value between the ends meets it.
    """
    if field not in SOLVABLE:
        raise BadInput(f"--solve-for: expected one of {', '.join(SOLVABLE)}, found {field!r}")
    rate, low, high = SOLVABLE[field]
    _require_measured(system, rate)
    known = replace(system, parallax=None, fields={**system.fields, field: Uncertain(np.sqrt(low * high))})
    of = study(host, known, choices)
    if rate in of.used:
        raise BadInput(
            f"--solve-for {field}: {rate} weighed the bodies already; give the masses, or --use another pair"
        )
    roots = _central_roots(_mismatch(host, of, of.sample.central(), field, rate), low, high)
    description = FIELDS[field]
    if not roots:
        raise BadInput(
            f"--solve-for {field}: no value from {low:.3g} to {high:.3g} {description.unit} makes {rate} agree; "
            "the effects that depend on it may be idle, or replaced by [apparent], or too weak"
        )
    values, solved = _newton(_mismatch(host, of, of.sample, field, rate), roots[0], of.sample.possible.size)
    drawn = Drawn.from_batch(values, of.sample.possible & solved)
    meaning = f"{description.meaning} at which {rate} agrees"
    finding = Finding(field, "solved", drawn, description.unit, description.shown_in, meaning)
    return [finding], list(_said_of_roots(of, field, roots, solved))


def _said_of_roots(of: Study, field: str, roots: list[float], solved: BoolArray) -> list[Said]:
    said = []
    if lost := int(np.sum(~solved[1:] & of.sample.possible[1:])):
        share = lost / of.sample.draws
        said.append(Said("", f"{field}: in {share:.1%} of the draws no value agrees; they are set aside"))
    if len(roots) > 1:
        ratios = ", ".join(f"{root / roots[0]:.3g}" for root in roots[1:])
        said.append(Said("", f"{field}: values larger by the factors {ratios} agree as well"))
    return said


def _require_measured(system: System, rate: str) -> None:
    if rate not in system.measured:
        listed = ", ".join(sorted(system.measured)) or "nothing"
        raise BadInput(f"{rate} is not in [measured] of {system.name} (measured: {listed})")


def _mismatch(host: Host, of: Study, sample: Sample, field: str, rate: str) -> Mismatch:
    def mismatch(values: FloatArray) -> FloatArray:
        state = sample.state.replace(**{field: values})
        predicted = predicted_at(host, sample, of.choices, state).get(rate)
        if predicted is None:
            raise BadInput(f"no active effect contributes to {rate}")
        return sample.measured[rate] - predicted.total

    return mismatch


def _central_roots(mismatch: Mismatch, low: float, high: float) -> list[float]:
    """Return the values between which the central mismatch changes sign, smallest first."""
    trials = np.geomspace(low, high, _GRID)
    value = mismatch(trials[:, None])[:, 0]
    changes = np.flatnonzero(np.sign(value[:-1]) != np.sign(value[1:]))
    return [float(np.sqrt(trials[k] * trials[k + 1])) for k in changes]


def _newton(mismatch: Mismatch, start: float, size: int) -> tuple[FloatArray, BoolArray]:
    """Solve every draw by Newton's method in the logarithm; return values and where they solve."""
    logs = np.full(size, np.log(start))
    step_of_ln = 1e-6
    for _ in range(_STEPS):
        value, ahead = mismatch(np.exp(np.stack([logs, logs + step_of_ln])))
        slope = (ahead - value) / step_of_ln
        step = np.where(slope != 0.0, -value / np.where(slope != 0.0, slope, 1.0), 0.0)
        logs = logs + np.clip(step, -0.5, 0.5)
        # beyond these no quantity here means anything, and powers would overflow
        logs = np.clip(logs, np.log(start) - 30.0, np.log(start) + 30.0)
        if np.max(np.abs(step)) < 1e-11:
            break
    value = mismatch(np.exp(logs))
    # the finite difference leaves some 1e-6 of the last step
    solved = np.abs(step) < 1e-6
    return np.exp(logs), solved & np.isfinite(value)


def limit_of(host: Host, system: System, choices: Choices, path: str) -> tuple[list[Finding], list[Said]]:
    """Return the largest value of an effect's own parameter that the measured decay allows, at 95 %.

    The prior is flat from 0 upwards. The likelihood is that of measured minus predicted decay, with the mean and the
    spread of the draws. The effect's other parameters without a value are set to 0.

    Parameters
    ----------
    path : str
        ``<effect>.<parameter>``, for instance ``dipole-radiation.charge_1``.

    Raises
    ------
    BadInput
        No such parameter, the decay is not measured, or the parameter does not change it.
    """
    name, _, parameter = path.partition(".")
    card = host.effect(name).card
    own = card.own(parameter)
    if own is None:
        near = difflib.get_close_matches(parameter, [p.name for p in card.parameters], n=1)
        hint = f"; did you mean {name}.{near[0]}?" if near else ""
        raise BadInput(f"--limit: effect {name!r} has no parameter {parameter!r}{hint}")
    rate = "orbital_period_rate"
    _require_measured(system, rate)
    others = {p.name: Uncertain(0.0) for p in card.parameters if p.default is None}
    given = {**others, **system.settings.get(name, {}), parameter: Uncertain(0.0)}
    system = replace(system, settings={**system.settings, name: given})
    few = replace(choices, draws=min(choices.draws, _LIMIT_DRAWS)).with_system(system)
    sample = draw(system, host.cards, draws=few.draws, seed=few.seed)
    if not has_masses(sample):  # by the same parameters, whatever the trial
        few = replace(few, use=weighing_parameters(host, system, sample, few))

    def off(value: float) -> tuple[float, float]:
        """Return mean and spread of measured minus predicted, the bodies weighed anew."""
        tried = {**sample.settings[name], parameter: np.full(sample.possible.size, value)}
        of = study_of(host, system, few, replace(sample, settings={**sample.settings, name: tried}))
        difference = (of.sample.measured[rate] - of.predicted[rate].total)[1:][of.sample.possible[1:]]
        return float(np.mean(difference)), float(np.std(difference))

    limit = _upper_limit(off, path, min(own.within.at_most, own.within.below))
    drawn = Drawn(limit, np.empty(0))
    finding = Finding(
        f"{name}.{parameter}", "limit_95", drawn, own.unit, own.unit, f"{own.meaning}: less than this at 95 %"
    )
    zeros = [other for other in others if other != parameter and given[other] == others[other]]
    said = [Said(name, f"{' and '.join(zeros)} taken as 0")] if zeros else []
    return [finding], [*said, Said(name, "the limit is for a flat prior from 0 upwards")]


def _upper_limit(off: Callable[[float], tuple[float, float]], path: str, end: float) -> float:
    """Return the 95 % quantile of the likelihood over values from 0, up to `end` at most."""
    from scipy.interpolate import CubicSpline  # 0.2 s, needed here alone

    base, spread = off(0.0)
    if spread == 0.0:
        raise BadInput(f"--limit {path}: the measured decay has no uncertainty, so nothing can be limited")
    value, farthest = 1e-8, 0.0
    for _ in range(60):
        if value >= end:
            farthest = end * (1.0 - 1e-9)  # the end itself may be excluded
            break
        mean, width = off(value)
        if abs(mean - base) > 12.0 * max(width, spread):
            farthest = value
            break
        value *= 2.0
    if farthest == 0.0:
        raise BadInput(f"--limit {path}: it does not change the decay, or its effect is idle")
    coarse = np.linspace(0.0, farthest, 81)
    trials = np.linspace(0.0, farthest, 4001)
    mean, width = CubicSpline(coarse, [off(float(trial)) for trial in coarse])(trials).T  # both are smooth
    likelihood = np.exp(-0.5 * ((mean / width) ** 2 - np.min((mean / width) ** 2))) / width
    mass = np.concatenate([[0.0], np.cumsum(0.5 * (likelihood[1:] + likelihood[:-1]) * np.diff(trials))])
    return float(np.interp(CONFIDENCE * mass[-1], mass, trials))
