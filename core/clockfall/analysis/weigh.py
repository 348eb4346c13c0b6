"""Weighing: both masses from measured parameters, what they say of the other measurements, and the fit of all."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from clockfall.analysis.comparison import against_given, comparison
from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.likelihood import theory_of
from clockfall.analysis.modes import NoOverlap
from clockfall.analysis.outcome import Drawn, Finding, Outcome, Said
from clockfall.analysis.posterior import Posterior
from clockfall.analysis.study import Choices, Study
from clockfall.analysis.system import System
from clockfall.analysis.weighing import (
    CannotWeigh,
    ambiguities,
    by_measured_advance,
    central_solutions,
    finished,
    has_masses,
    posterior_of,
    solved,
    unused_correlations,
    weighing_parameters,
    with_masses_of,
)
from clockfall.effects.host import Host

SAME_DELAY = (("shapiro_range", "shapiro_shape"), ("orthometric_amplitude", "orthometric_ratio"))
"""Two ways to give one delay: who uses both counts it twice."""


def weigh(host: Host, system: System, choices: Choices | None = None) -> Outcome:
    """Weigh both bodies by measured parameters, test every other one, and fit all of them together.

    The masses have the posterior of the parameters that weigh them, with a flat prior and every other input averaged
    over; exact parameters, which have none, are solved.

    Returns
    -------
    Outcome
        Findings: ``mass_1``, ``mass_2``, ``total_mass`` [Msun], ``mass_ratio`` (m_1/m_2), ``sin_inclination``,
        ``mass_correlation``; for each parameter that was not used ``observed``, ``predicted``, ``ratio`` and
        ``tension_sigma``; of three parameters or more ``chi_squared``, ``degrees_of_freedom``, ``p_value`` and each
        one's ``pull``, in the roles ``used`` for those that weigh and ``joint`` for all that were measured.

    Raises
    ------
    CannotWeigh
        The parameters are not measured or not predicted, or no masses give them.
    NoOverlap
        No masses give the parameters together.
    """
    choices = (choices or Choices()).with_system(system)
    sample = draw(system, host.cards, draws=choices.draws, seed=choices.seed)
    sample = by_measured_advance(sample)
    used = weighing_parameters(host, system, sample, choices)
    found: Posterior | None = None
    if _have_uncertainties(system, used):
        found = posterior_of(host, system, sample, choices, used)
        # two parameters may be met at two places, of which the same one is to be taken by every analysis
        met = central_solutions(host, sample, choices, (used[0], used[1])) if len(used) == 2 else []
        weighed = with_masses_of(found, sample, met[0] if met else None)
        cautions = (*unused_correlations(system, used), *ambiguities(met), *_modes(found))
    elif len(used) == 2:
        weighed, cautions = solved(host, sample, choices, (used[0], used[1]))
    else:
        raise CannotWeigh(f"three parameters or more need an uncertainty each to weigh the bodies: {', '.join(used)}")
    of = finished(host, system, choices, weighed, used, cautions)
    joint, said = _joint(host, system, sample, choices, of)
    findings = [*_mass_findings(of), *_used(of), *_tests(of), *_fit(found, "used"), *_fit(joint, "joint")]
    if joint is not None:
        findings += _joint_masses(joint, of)
    facts = {"used": " ".join(used), "joint": " ".join(joint.names) if joint else ""}
    given = {n: v for n in ("mass_1", "mass_2") if has_masses(sample) and (v := getattr(sample.state, n)) is not None}
    return of.outcome(findings, facts, [*said, *_twice(joint.names if joint else used), *against_given(of, given)])


def _have_uncertainties(system: System, names: tuple[str, ...]) -> bool:
    return all(system.measured[name].plus > 0.0 and system.measured[name].minus > 0.0 for name in names)


def _modes(found: Posterior) -> Iterator[Said]:
    if found.modes > 1:
        shares = ", ".join(f"{share:.1%}" for share in found.mode_weights)
        yield Said("", f"weighing: {found.modes} separate pairs of masses fit, with the probabilities {shares}; the "
                       "intervals reach over all of them")  # fmt: skip
    if not found.degrees_of_freedom and found.chi_squared > 0.01:
        yield Said("", "weighing: no masses give the two measured values; the nearest are "
                       f"{np.sqrt(found.chi_squared):.1f} sigma off")  # fmt: skip
    if not found.converged:
        yield Said("", "weighing: the grid of the posterior did not converge to 0.2 % of the error bar")


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
        found.append(_number("mass_correlation", "", float(correlation), "correlation of the two masses"))
    return found


def _number(quantity: str, role: str, value: float, meaning: str) -> Finding:
    """Return a pure number that has no draws."""
    return Finding(quantity, role, Drawn(value, np.empty(0)), "", "", meaning)


def _used(of: Study) -> list[Finding]:
    return [
        of.finding(p.name, "used", of.sample.measured[p.name], p.unit, p.shown_in, p.meaning)
        for p in (of.predicted[name] for name in of.used)
    ]


def _tests(of: Study) -> list[Finding]:
    return [
        finding
        for name in of.sample.measured
        if name in of.predicted and name not in of.used
        for finding in comparison(of, of.predicted[name])
    ]


def _fit(found: Posterior | None, role: str) -> Iterator[Finding]:
    """Yield how well the best masses fit three parameters or more."""
    if found is None or not found.degrees_of_freedom:
        return
    yield _number("chi_squared", role, found.chi_squared, "of the best masses")
    yield _number("degrees_of_freedom", role, float(found.degrees_of_freedom), "parameters less two masses")
    yield _number("p_value", role, found.p_value, "probability of a larger chi-squared by chance")
    for name, pull in found.pulls.items():
        yield _number(name, f"{role}_pull", pull, "predicted minus measured, over the uncertainty, at the best masses")


def _joint(
    host: Host, system: System, sample: Sample, choices: Choices, of: Study
) -> tuple[Posterior | None, list[Said]]:
    """Return the posterior from all measured parameters that depend on the masses, where they are more than used."""
    names = tuple(name for name in system.measured if name in of.predicted and _have_uncertainties(system, (name,)))
    if len(names) < 3:
        return None, []
    apart = theory_of(host, sample, choices, names)(np.array([[1.0, 1.0], [1.0, 1.1], [1.1, 1.0]]), 0)[:, 0]
    names = tuple(name for name, values in zip(names, apart.T, strict=True) if np.ptp(values) != 0.0)
    if len(names) < 3 or set(names) <= set(of.used):
        return None, []
    try:
        found = posterior_of(host, system, sample, choices, names)
    except NoOverlap as error:
        return None, [Said("", f"joint fit: {error}")]
    return found, list(unused_correlations(system, names))


def _joint_masses(joint: Posterior, of: Study) -> Iterator[Finding]:
    """Yield both masses from all parameters together."""
    masses = of.sample.draws and joint.draws(of.sample.draws, of.sample.seed)
    for k, name in enumerate(("mass_1", "mass_2")):
        draws = masses[:, k] if isinstance(masses, np.ndarray) else np.empty(0)
        drawn = Drawn(float(joint.best_fit[k]), draws)
        yield Finding(name, "joint", drawn, "Msun", "Msun", f"{name} from all measured parameters")


def _twice(names: tuple[str, ...]) -> Iterator[Said]:
    if all(any(name in names for name in pair) for pair in SAME_DELAY):
        yield Said("shapiro-delay", "range and shape and the orthometric pair describe one delay; used together they "
                                    "count it twice")  # fmt: skip
