"""How the masses of a study are had: given, solved from two measured parameters, or drawn from a posterior of more."""

from __future__ import annotations

import difflib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from itertools import combinations
from typing import Final

import numpy as np

from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.likelihood import theory_of
from clockfall.analysis.masses import HEAVIEST, LIGHTEST, Misfit, mass_grid, newton_masses, search_masses
from clockfall.analysis.node_elements import anomalistic
from clockfall.analysis.outcome import Said
from clockfall.analysis.posterior import Posterior, posterior
from clockfall.analysis.study import Choices, Prediction, Study, applied_to, predicted_at, predictions
from clockfall.analysis.system import System, Uncertain
from clockfall.binary.constants import SECONDS_PER_DAY
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Host
from clockfall.errors import BadInput

ADVANCE: Final = "longitude_of_periastron_rate"

TESTED: Final = "orbital_period_rate"
"""Kept for the test of theory: it weighs the bodies only where it is named."""

_STEP: Final = 1e-5  # of ln m, for the slopes by which pairs of parameters are compared


class CannotWeigh(BadInput):
    """The masses are not given and the measured parameters do not give them."""


def study(host: Host, system: System, choices: Choices | None = None, *, weigh_anew: bool = False) -> Study:
    """Draw a system, see to its masses, and sum what the effects predict.

    Two measured parameters are solved draw by draw, which keeps the correlations with all other inputs; more are
    weighed by their posterior.

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
    return study_of(host, system, choices, sample, weigh_anew=weigh_anew)


def study_of(host: Host, system: System, choices: Choices, sample: Sample, *, weigh_anew: bool = False) -> Study:
    """Return the study of a system that is drawn already, the choices being joined with its own; see `study`."""
    sample = by_measured_advance(sample)
    if not weigh_anew and has_masses(sample):
        return finished(host, system, choices, sample)
    used = weighing_parameters(host, system, sample, choices)
    if len(used) == 2:
        sample, cautions = solved(host, sample, choices, (used[0], used[1]))
    else:
        found = posterior_of(host, system, sample, choices, used)
        sample, cautions = with_masses_of(found, sample), unused_correlations(system, used)
    return finished(host, system, choices, sample, used, cautions)


def finished(
    host: Host,
    system: System,
    choices: Choices,
    sample: Sample,
    used: tuple[str, ...] = (),
    cautions: tuple[Said, ...] = (),
) -> Study:
    """Return the study of a sample whose masses are known."""
    if sample.counts_nodes:

        def advance(of: Sample) -> FloatArray:
            found = predicted_at(host, of, choices, of.state).get(ADVANCE)
            return np.zeros(of.state.shape) if found is None else found.intrinsic

        sample = anomalistic(sample, advance)
    if system.node_elements is not None:
        cautions = (*cautions, _said_of_the_period(sample))
    applied = applied_to(host, sample, choices)
    predicted = predictions(applied, sample.apparent)
    return Study(system, choices, sample, applied, predicted, "weighed" if used else "given", used, cautions)


def by_measured_advance(sample: Sample) -> Sample:
    """Return the sample with its period from periastron to periastron, if the advance was measured; else as it is."""
    if not (sample.counts_nodes and ADVANCE in sample.measured):
        return sample
    return anomalistic(sample, lambda of: of.measured[ADVANCE] - of.apparent.get(ADVANCE, 0.0))


def _said_of_the_period(sample: Sample) -> Said:
    by = "measured" if ADVANCE in sample.measured else "predicted"
    P = float(sample.state.known("orbital_period")[0][0]) / SECONDS_PER_DAY
    return Said(
        "",
        f"the period given counts passages of the node; from periastron to periastron it is {P:.12f} d by the {by} "
        "advance",
    )


def has_masses(sample: Sample) -> bool:
    """Whether both masses are known."""
    return sample.state.mass_1 is not None and sample.state.mass_2 is not None


def weighing_parameters(host: Host, system: System, sample: Sample, choices: Choices) -> tuple[str, ...]:
    """Return the measured parameters that weigh the bodies: those chosen, or the best two.

    Raises
    ------
    CannotWeigh
        One that was chosen is not measured, or no two of them weigh the bodies.
    """
    if choices.use:
        return _checked(system, choices.use)
    pair = best_pair(host, sample, choices, system.measured)
    if pair is None:
        raise CannotWeigh(
            f"the masses of {system.name} are not both given, and no two of what was measured weigh the bodies "
            f"(measured: {', '.join(system.measured) or 'nothing'}; {TESTED} is kept for the test unless --use names "
            "it); give mass_1 and mass_2 in [masses], or two parameters such as longitude_of_periastron_rate and "
            "einstein_delay_amplitude in [measured]"
        )
    return pair


def _checked(system: System, use: tuple[str, ...]) -> tuple[str, ...]:
    measured = sorted(system.measured)
    for name in use:
        if name not in system.measured:
            near = difflib.get_close_matches(name, measured, n=1)
            hint = f"; did you mean {near[0]!r}?" if near else ""
            listed = ", ".join(measured) or "nothing"
            raise CannotWeigh(f"{name!r} is not in [measured] of {system.name}{hint} (measured: {listed})")
    if len(set(use)) < 2:
        raise CannotWeigh(f"two different measured parameters or more weigh the bodies, found {', '.join(use)}")
    return tuple(dict.fromkeys(use))


def best_pair(
    host: Host, sample: Sample, choices: Choices, measured: Mapping[str, Uncertain]
) -> tuple[str, str] | None:
    """Return the two parameters whose bands enclose the smallest area of the plane of masses; None of less than two.

    The orbital decay is not among them. Bands are taken as straight where they cross, with every other input at its
    median.
    """
    predicted = predicted_at(host, (central := sample.central()), choices, with_masses(central, np.ones((1, 2))).state)
    names = tuple(name for name in measured if name in predicted and name != TESTED)
    if len(names) < 2:
        return None
    theory = theory_of(host, sample, choices, names)
    observed = np.array([measured[name].value for name in names])
    # an exact value is better than any other, but not infinitely so: the areas must be comparable
    widths = np.array([0.5 * (measured[n].plus + measured[n].minus) for n in names])
    sharpness = np.abs(observed) / np.maximum(widths, 1e-13 * np.abs(observed))

    def misfits(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        masses = np.stack(np.broadcast_arrays(m_1, m_2), axis=-1)
        found = theory(masses.reshape(-1, 2), 0)[:, 0] / observed - 1.0
        return np.reshape(found, (*masses.shape[:-1], len(names)))

    on_grid = misfits(*mass_grid())
    areas = {}
    for pair in combinations(range(len(names)), 2):
        solutions = search_masses(lambda m_1, m_2, pair=pair: misfits(m_1, m_2)[..., pair], on_grid[..., pair])  # type: ignore[misc]
        if solutions:
            areas[pair] = _area(misfits, solutions[0], pair) / np.prod(sharpness[list(pair)])
    usable = {pair: area for pair, area in areas.items() if np.isfinite(area)}
    if not usable:  # nor do any others: whoever weighs says how far off the masses are
        return names[0], names[1]
    first, second = min(usable, key=lambda pair: usable[pair])
    return names[first], names[second]


def _area(misfits: Misfit, masses: FloatArray, pair: tuple[int, int]) -> float:
    """Return the area in (ln m_1, ln m_2) that bands of unit width enclose at a solution; infinite where parallel."""
    # of the two differences, ahead and behind, that with a meaning counts: a solution may lie at the edge of sin i = 1
    shifts = _STEP * np.array([[0.0, 0.0], [1.0, 0.0], [-1.0, 0.0], [0.0, 1.0], [0.0, -1.0]])
    trials = masses * np.exp(shifts)
    values = misfits(trials[:, 0], trials[:, 1])[:, list(pair)]
    slopes = []
    for ahead, behind in ((1, 2), (3, 4)):
        forward, backward = (values[ahead] - values[0]) / _STEP, (values[0] - values[behind]) / _STEP
        slopes.append(np.where(np.isfinite(forward), forward, backward))
    determinant = abs(float(np.linalg.det(np.stack(slopes))))
    return 1.0 / determinant if determinant > 1e-9 else np.inf


def solved(host: Host, sample: Sample, choices: Choices, pair: tuple[str, str]) -> tuple[Sample, tuple[Said, ...]]:
    """Return the sample with the masses at which both predictions are the measured values, and what is to be said.

    Raises
    ------
    CannotWeigh
        No masses give the central values.
    """
    solutions = central_solutions(host, sample, choices, pair)
    if not solutions:
        central = sample.central()
        values = " and ".join(f"{name} = {central.measured[name][0]:.9g}" for name in pair)
        raise CannotWeigh(
            f"no masses between {LIGHTEST:g} and {HEAVIEST:g} Msun give the measured {values} [clockfall's units]; "
            "check the values and their units, or use another pair"
        )
    start = np.broadcast_to(solutions[0], (sample.possible.size, 2))
    masses, reached = newton_masses(_misfit(host, sample, choices, pair), start)
    masses = np.where(reached[:, None], masses, solutions[0])
    cautions = list(ambiguities(solutions))
    if lost := int(np.sum(~reached)):
        share = lost / sample.draws
        cautions.append(Said("", f"weighing: {share:.1%} of the draws set aside, since no masses give their values"))
    return with_masses(replace(sample, possible=sample.possible & reached), masses), tuple(cautions)


def central_solutions(host: Host, sample: Sample, choices: Choices, pair: tuple[str, str]) -> list[FloatArray]:
    """Return all masses at which both predictions are the measured values, every input at its median."""
    return search_masses(_misfit(host, sample.central(), choices, pair))


def ambiguities(solutions: list[FloatArray]) -> Iterator[Said]:
    """Say which other masses two parameters allow."""
    for m_1, m_2 in solutions[1:]:
        yield Said("", f"weighing: these two parameters allow m_1 = {m_1:.4f}, m_2 = {m_2:.4f} Msun just as well")


def _misfit(host: Host, sample: Sample, choices: Choices, pair: tuple[str, str]) -> Misfit:
    """Return the misfit of the pair as a function of trial masses, asking only the effects that contribute to it."""
    observed = [sample.measured[name] for name in pair]
    central = sample.central()
    known = predicted_at(host, central, choices, with_masses(central, np.ones((1, 2))).state)
    contributors = {part.card.name for name in pair for part in _named(known, name).contributions}
    choices = replace(choices, only=tuple(contributors))

    def misfit(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        state = sample.state.replace(mass_1=m_1, mass_2=m_2)
        predicted = predicted_at(host, sample, choices, state)
        return np.stack(
            [_named(predicted, name).total / o - 1.0 for name, o in zip(pair, observed, strict=True)], axis=-1
        )

    return misfit


def _named(predicted: Mapping[str, Prediction], name: str) -> Prediction:
    if name not in predicted:
        raise CannotWeigh(f"no active effect predicts {name}, so it cannot weigh the bodies")
    return predicted[name]


def posterior_of(host: Host, system: System, sample: Sample, choices: Choices, names: Sequence[str]) -> Posterior:
    """Return the posterior of both masses from the named measured parameters; errors as `posterior` raises them."""
    return posterior(host, sample, choices, {name: system.measured[name] for name in names}, system.correlations)


def with_masses_of(found: Posterior, sample: Sample, central: FloatArray | None = None) -> Sample:
    """Return the sample with masses drawn from a posterior; the central ones, shape (2,), are by default the best."""
    best = (found.best_fit if central is None else central)[None]
    drawn = [found.draws(sample.draws, sample.seed)] if sample.draws else []
    return with_masses(sample, np.concatenate([best, *drawn]))


def with_masses(sample: Sample, masses: FloatArray) -> Sample:
    """Return the sample with other masses, shape (1 + draws, 2) [Msun]."""
    return replace(sample, state=sample.state.replace(mass_1=masses[:, 0], mass_2=masses[:, 1]))


def unused_correlations(system: System, names: Sequence[str]) -> tuple[Said, ...]:
    """Say which correlations a posterior from the named parameters leaves out."""
    left_out = [
        f"{c.first[-1]} and {c.second[-1]}"
        for c in system.correlations
        if sum(path[0] == "measured" and path[1] in names for path in (c.first, c.second)) == 1
    ]
    if not left_out:
        return ()
    return (Said("", f"weighing: the correlation of {', '.join(left_out)} is not used by the posterior"),)
