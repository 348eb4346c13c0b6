"""`clockfall weigh`: both masses from measured parameters."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import click

from clockfall.analysis.outcome import Finding, Outcome
from clockfall.analysis.weigh import weigh
from clockfall.app.analyses import Analysis, Block
from clockfall.app.numbers import as_json, as_text, finite
from clockfall.app.options import Wishes, analysis_options, draw_option, run_analysis
from clockfall.files.shown import aligned

_MASSES = ("mass_1", "mass_2", "total_mass", "mass_ratio", "sin_inclination")


def _tested(outcome: Outcome) -> list[str]:
    return [finding.quantity for finding in outcome.findings if finding.role == "observed"]


def _plain(finding: Finding | None) -> float | None:
    return None if finding is None else finite(finding.drawn.central)


def report(outcome: Outcome) -> dict[str, Any]:
    """Return masses, tests and fits as programs read them."""
    masses = {name: outcome.get(name) for name in _MASSES}
    tests = []
    for name in _tested(outcome):
        ratio = outcome.get(name, "ratio")
        tests.append(
            {
                "parameter": name,
                "observed": as_json(outcome[name, "observed"]),
                "predicted": as_json(outcome[name, "predicted"]),
                "ratio": None if ratio is None else as_json(ratio),
                "tension_sigma": _plain(outcome.get(name, "tension_sigma")),
            }
        )
    joint = _fit(outcome, "joint")
    if joint is not None:
        joint |= {name: as_json(outcome[name, "joint"]) for name in ("mass_1", "mass_2")}
    return {
        **{name: None if finding is None else as_json(finding) for name, finding in masses.items()},
        "correlation": _plain(outcome.get("mass_correlation")),
        "used": outcome.facts["used"].split(),
        "tests": tests,
        "fit": _fit(outcome, "used"),
        "joint_fit": joint,
    }


def _fit(outcome: Outcome, role: str) -> dict[str, Any] | None:
    """Return how well the masses fit the parameters that weighed them, or (role "joint") all; None for two."""
    if outcome.get("chi_squared", role) is None:
        return None
    return {
        "chi_squared": _plain(outcome["chi_squared", role]),
        "degrees_of_freedom": int(outcome["degrees_of_freedom", role].drawn.central),
        "p_value": _plain(outcome["p_value", role]),
        "pulls": {f.quantity: _plain(f) for f in outcome.findings if f.role == f"{role}_pull"},
    }


def blocks(outcome: Outcome) -> Iterator[Block]:
    """Yield the masses, the tests and the fits."""
    used = outcome.facts["used"].split()
    yield Block(tuple((name, as_text(outcome[name, "used"])) for name in used), ("parameter", "measured"), "Weighed by")
    found = [finding for name in _MASSES if (finding := outcome.get(name))]
    texts = aligned([as_text(finding) for finding in found])
    rows = [(f.quantity, text, f.meaning) for f, text in zip(found, texts, strict=True)]
    correlation = _plain(outcome.get("mass_correlation"))
    if correlation is not None:
        rows.append(("correlation", f"{correlation:.6f}", "of the two masses"))
    rows += _goodness(outcome, "used")
    yield Block(tuple(rows), title="Masses")
    tests = [row for name in _tested(outcome) for row in _test_rows(outcome, name)]
    if tests:
        yield Block(tuple(tests), title="Tests by what was measured besides (apparent parts taken off)")
    if goodness := _goodness(outcome, "joint"):
        masses = [(name, as_text(outcome[name, "joint"]), "") for name in ("mass_1", "mass_2")]
        pulls = [
            (f.quantity, f"{f.drawn.central:+.2f} sigma".replace("-0.00", "+0.00"), "")
            for f in outcome.findings
            if f.role == "joint_pull"
        ]
        yield Block((*masses, *goodness, (), *pulls), title="Fit of all together, and what each is off by")


def _goodness(outcome: Outcome, role: str) -> list[tuple[str, str, str]]:
    fit = _fit(outcome, role)
    if fit is None:
        return []
    freedom = f"for {fit['degrees_of_freedom']} degrees of freedom"
    return [
        ("chi-squared", f"{fit['chi_squared']:.2f}", freedom),
        ("p-value", f"{fit['p_value']:.2g}", "chance of a larger chi-squared"),
    ]


def _test_rows(outcome: Outcome, name: str) -> Iterator[tuple[str, ...]]:
    """Yield three rows, since a name and four numbers do not fit in 80 columns."""
    ratio, tension = outcome.get(name, "ratio"), _plain(outcome.get(name, "tension_sigma"))
    yield name, "observed", as_text(outcome[name, "observed"])
    yield "", "predicted", as_text(outcome[name, "predicted"])
    if ratio is not None:
        sigma = "" if tension is None else f"   ({tension:+.1f} sigma)"
        yield "", "ratio", f"{as_text(ratio)}{sigma}"


def headline(outcome: Outcome) -> str:
    """Return the two masses."""
    return "\n".join(f"{name} {as_text(outcome[name, ''])}" for name in ("mass_1", "mass_2"))


ANALYSIS = Analysis("weigh", weigh, report, blocks, headline)


@click.command("weigh")
@click.argument("system", required=False, type=click.Path(path_type=Path))
@draw_option
@analysis_options
def command(system: Path | None, picture: Path | None, wishes: Wishes) -> None:
    """Both masses of SYSTEM from measured parameters.

    Those named by --use weigh the bodies, two or more; without it the two that leave the smallest area of the plane of
    masses, the orbital decay apart. Masses given in the file are not used. Every other measured parameter is compared
    with what the masses predict for it, and all are fitted together.
    """
    run_analysis(ANALYSIS, system, replace(wishes, picture=picture))
