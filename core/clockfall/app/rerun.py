"""`clockfall rerun`: repeat a result from its file alone."""

from __future__ import annotations

import json
from pathlib import Path

import click
import numpy as np

from clockfall.analysis.outcome import Outcome
from clockfall.app.analyses import analysis, system_of
from clockfall.binary.ranges import FloatArray
from clockfall.effects.loading import load_host
from clockfall.files.results import read_result

ROUNDING = 1e-12
"""Relative difference that another processor or library version may cause by rounding alone."""


@click.command("rerun")
@click.argument("result", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Print JSON.")
@click.option("--quiet", "-q", is_flag=True, help="Print nothing; the exit code says it.")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
@click.pass_context
def command(ctx: click.Context, result: Path, *, as_json: bool, quiet: bool, debug: bool) -> None:
    """Repeat the computation of the file RESULT, and say whether the numbers agree.

    Exit code 0: they agree, exactly or to rounding (1e-12). 1: they do not.
    """
    del debug  # read by clockfall.app.main before any option is parsed
    recorded = read_result(result)
    host = load_host()
    system = system_of(recorded, result, host)
    repeated = analysis(recorded.command).compute(host, system, recorded.choices)
    differences = compare(recorded.outcome, repeated)
    worst = max(differences.values(), default=0.0)
    changed = _changed_effects(recorded.outcome, repeated)
    agrees = worst <= ROUNDING
    if as_json:
        report = {"agrees": agrees, "largest_relative_difference": _finite(worst), "changed_effects": changed}
        click.echo(json.dumps(report, indent=2))
    elif not quiet:
        _say(differences, worst, changed, agrees=agrees)
    ctx.exit(0 if agrees else 1)


def compare(first: Outcome, second: Outcome) -> dict[str, float]:
    """Return the largest relative difference of each finding; infinite where one of the two lacks it."""
    one, other = _numbers(first), _numbers(second)
    return {
        name: _difference(one[name], other[name]) if name in one and name in other else float("inf")
        for name in sorted({*one, *other})
    }


def _numbers(outcome: Outcome) -> dict[str, FloatArray]:
    """Return every finding with its draws, and every column, by name."""
    numbers = {f.name: np.append(f.drawn.draws, f.drawn.central) for f in outcome.findings}
    return numbers | {column.name: column.values.astype(np.float64) for column in outcome.columns}


def _difference(a: FloatArray, b: FloatArray) -> float:
    if a.shape != b.shape or not np.array_equal(np.isnan(a), np.isnan(b)):
        return float("inf")
    scale = np.nanmax(np.abs(a), initial=0.0)
    largest = np.nanmax(np.abs(a - b), initial=0.0)
    return float(largest / scale) if scale > 0.0 else float(largest)


def _changed_effects(first: Outcome, second: Outcome) -> list[str]:
    """Say which effects are new, gone, or of another version."""
    one, other = ({(e.name, e.distribution): e.version for e in outcome.used} for outcome in (first, second))
    lines = []
    for key in sorted({*one, *other}):
        before, now = one.get(key, "absent"), other.get(key, "absent")
        if before != now:
            lines.append(f"{key[0]} ({key[1]}): {before} then, {now} now")
    return lines


def _say(differences: dict[str, float], worst: float, changed: list[str], *, agrees: bool) -> None:
    for line in changed:
        click.echo(f"effect changed: {line}")
    count = len(differences)
    if worst == 0.0:
        click.echo(f"All {count} numbers agree, bit for bit.")
    elif agrees:
        click.echo(f"All {count} numbers agree to rounding (largest relative difference {worst:.1e}).")
    else:
        click.echo("The numbers do not agree:")
        for name, difference in differences.items():
            if difference > ROUNDING:
                text = (
                    "only in one of the two, or set aside differently" if np.isinf(difference) else f"{difference:.1e}"
                )
                click.echo(f"  {name}: {text}")


def _finite(number: float) -> float | None:
    return number if np.isfinite(number) else None
