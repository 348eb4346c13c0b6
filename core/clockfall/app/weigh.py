"""`clockfall weigh`: both masses from two measured parameters."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import click

from clockfall.analysis.outcome import Finding, Outcome
from clockfall.analysis.weigh import weigh
from clockfall.app.analyses import Analysis, Block
from clockfall.app.numbers import as_json, as_text, finite
from clockfall.app.options import Wishes, analysis_options, run_analysis
from clockfall.files.shown import aligned

_MASSES = ("mass_1", "mass_2", "total_mass", "mass_ratio", "sin_inclination")


def _tested(outcome: Outcome) -> list[str]:
    return [finding.quantity for finding in outcome.findings if finding.role == "observed"]


def _plain(finding: Finding | None) -> float | None:
    return None if finding is None else finite(finding.drawn.central)


def report(outcome: Outcome) -> dict[str, Any]:
    """Return masses and tests as programs read them."""
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
    return {
        **{name: None if finding is None else as_json(finding) for name, finding in masses.items()},
        "correlation": _plain(outcome.get("mass_correlation")),
        "used": outcome.facts["used"].split(),
        "tests": tests,
    }


def blocks(outcome: Outcome) -> Iterator[Block]:
    """Yield the masses and the tests."""
    used = outcome.facts["used"].split()
    yield Block(tuple((name, as_text(outcome[name, "used"])) for name in used), ("parameter", "measured"), "Weighed by")
    found = [finding for name in _MASSES if (finding := outcome.get(name))]
    texts = aligned([as_text(finding) for finding in found])
    rows = [(f.quantity, text, f.meaning) for f, text in zip(found, texts, strict=True)]
    correlation = _plain(outcome.get("mass_correlation"))
    if correlation is not None:
        rows.append(("correlation", f"{correlation:.6f}", "of the two masses"))
    yield Block(tuple(rows), title="Masses")
    tests = [row for name in _tested(outcome) for row in _test_rows(outcome, name)]
    if tests:
        yield Block(tuple(tests), title="Tests by what was measured besides (apparent parts taken off)")


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
@analysis_options
def command(system: Path | None, wishes: Wishes) -> None:
    """Both masses of SYSTEM from two measured parameters.

    Masses given in the file are not used. Every measured parameter that did not weigh the bodies is compared with
    what the masses predict for it.
    """
    run_analysis(ANALYSIS, system, wishes)
