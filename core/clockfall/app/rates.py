"""`clockfall rates`: every secular rate and predicted parameter, by effect."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import click

from clockfall.analysis.outcome import Finding, Outcome
from clockfall.analysis.rates import rates
from clockfall.app.analyses import Analysis, Block, masses_from
from clockfall.app.numbers import as_json, as_text, unit_heading
from clockfall.app.options import Wishes, analysis_options, run_analysis
from clockfall.files.shown import Shown, aligned, common_power


def _of_role(outcome: Outcome, role: str) -> list[Finding]:
    return [finding for finding in outcome.findings if finding.role == role]


def _measured(outcome: Outcome, quantity: str) -> dict[str, Any] | None:
    finding = outcome.get(quantity, "measured")
    return None if finding is None else as_json(finding)


def report(outcome: Outcome) -> dict[str, Any]:
    """Return rates and predicted parameters as programs read them."""
    return {
        "rates": {
            total.quantity: {
                "total": as_json(total),
                "measured": _measured(outcome, total.quantity),
                "contributions": [
                    {"effect": f.effect, "nature": f.nature, **as_json(f), "sources": list(f.sources)}
                    for f in outcome.contributions(total.quantity)
                ],
            }
            for total in _of_role(outcome, "total")
        },
        "predicted": {
            f.quantity: {
                **as_json(f),
                "effect": f.effect,
                "sources": list(f.sources),
                "measured": _measured(outcome, f.quantity),
            }
            for f in _of_role(outcome, "predicted")
        },
    }


def blocks(outcome: Outcome) -> Iterator[Block]:
    """Yield one block for each rate, and one for the predicted parameters."""
    for total in _of_role(outcome, "total"):
        contributions = outcome.contributions(total.quantity)
        measured = outcome.get(total.quantity, "measured")
        labelled = [(f.whose, f.nature, f) for f in contributions]
        labelled.append(("total", "", total))
        if measured:
            labelled.append(("measured", "", measured))
        power = common_power([Shown.finding(total)])
        texts = aligned([as_text(f, power=power, with_unit=False) for _, _, f in labelled])
        rows = tuple((label, nature, text) for (label, nature, _), text in zip(labelled, texts, strict=True))
        yield Block(rows, ("effect", "nature", unit_heading(total.shown_in, power)), total.quantity)
    parameters = _of_role(outcome, "predicted")
    if parameters:
        predicted = [row for f in parameters for row in _parameter_rows(outcome, f)]
        yield Block(tuple(predicted), title="Predicted parameters")
    yield Block((("masses", masses_from(outcome)),))


def _parameter_rows(outcome: Outcome, finding: Finding) -> Iterator[tuple[str, ...]]:
    """Yield the prediction, and below it the effect and what was measured."""
    measured = outcome.get(finding.quantity, "measured")
    yield finding.quantity, "predicted", as_text(finding)
    yield f"  by {finding.effect}", *(("measured", as_text(measured)) if measured else ())


def headline(outcome: Outcome) -> str:
    """Return every total and prediction, a line each."""
    findings = [*_of_role(outcome, "total"), *_of_role(outcome, "predicted")]
    return "\n".join(f"{f.quantity} {as_text(f)}" for f in findings)


ANALYSIS = Analysis("rates", rates, report, blocks, headline)


@click.command("rates")
@click.argument("system", required=False, type=click.Path(path_type=Path))
@analysis_options
def command(system: Path | None, wishes: Wishes) -> None:
    """Every secular rate and predicted parameter of SYSTEM, by effect."""
    run_analysis(ANALYSIS, system, wishes)
