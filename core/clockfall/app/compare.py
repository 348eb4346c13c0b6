"""`clockfall compare`: what changed between two results, by effect, in sigma."""

from __future__ import annotations

import json
import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click

from clockfall.analysis.outcome import Finding, Outcome
from clockfall.app.analyses import Block
from clockfall.app.numbers import as_json, as_text, finite
from clockfall.app.printing import print_blocks
from clockfall.errors import BadInput
from clockfall.files.results import Result, read_result


@dataclass(frozen=True, slots=True)
class Change:
    """One number in both results.

    Attributes
    ----------
    before, after : Finding or None
        None where one of the two lacks it.
    sigma : float
        The change over the larger of the two uncertainties; NaN where there is none.
    """

    name: str
    before: Finding | None
    after: Finding | None
    sigma: float


def changes(first: Outcome, second: Outcome) -> list[Change]:
    """Return every number that is not the same in both, in the order of the first result."""
    before, after = ({f.name: f for f in outcome.findings} for outcome in (first, second))
    found = [_change(name, before.get(name), after.get(name)) for name in dict.fromkeys([*before, *after])]
    return [change for change in found if change is not None]


def _change(name: str, before: Finding | None, after: Finding | None) -> Change | None:
    if before is None or after is None:
        return Change(name, before, after, math.nan)
    moved = after.drawn.central - before.drawn.central
    widths = [finding.drawn.uncertainty or 0.0 for finding in (before, after)]
    if moved == 0.0 and widths[0] == widths[1]:
        return None
    return Change(name, before, after, moved / max(widths) if max(widths) > 0.0 else math.nan)


def _same_analysis(first: Result, second: Result) -> None:
    if first.command != second.command:
        raise BadInput(f"a result of {first.command!r} cannot be compared with one of {second.command!r}")


@click.command("compare")
@click.argument("first", type=click.Path(path_type=Path))
@click.argument("second", type=click.Path(path_type=Path))
@click.option("--json", "as_json_text", is_flag=True, help="Print JSON.")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
def command(first: Path, second: Path, *, as_json_text: bool, debug: bool) -> None:
    """Say what changed from the result FIRST to the result SECOND.

    A change is given in sigma: over the larger of the two uncertainties. Numbers that are the same are left out.
    """
    del debug  # read by clockfall.app.main before any option is parsed
    results = read_result(first), read_result(second)
    _same_analysis(*results)
    found = changes(results[0].outcome, results[1].outcome)
    if as_json_text:
        click.echo(json.dumps({"changes": [_as_json(change) for change in found]}, indent=2, ensure_ascii=False))
    else:
        print_blocks(f"{first} to {second}", [_block(found)])


def _as_json(change: Change) -> dict[str, Any]:
    return {
        "name": change.name,
        "before": None if change.before is None else as_json(change.before),
        "after": None if change.after is None else as_json(change.after),
        "sigma": finite(change.sigma),
    }


def _block(found: list[Change]) -> Block:
    rows: list[tuple[str, ...]] = []
    for change in found:
        sigma = "" if math.isnan(change.sigma) else f"{change.sigma:+.2f} sigma"
        rows.append((change.name, "before", "absent" if change.before is None else as_text(change.before)))
        rows.append((f"  {sigma}", "after", "absent" if change.after is None else as_text(change.after)))
    return Block(tuple(rows) or (("nothing changed",),))
