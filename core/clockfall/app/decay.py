"""The main job: `clockfall decay`."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import click

from clockfall.analysis import inverse
from clockfall.analysis.budget import DECAY, decay, sums
from clockfall.analysis.outcome import Finding, Outcome
from clockfall.analysis.study import Choices
from clockfall.analysis.system import System
from clockfall.app.analyses import Analysis, Block, masses_from
from clockfall.app.numbers import (
    as_json,
    as_text,
    finite,
    time_unit,
    unit_heading,
)
from clockfall.app.options import Wishes, analysis_options, draw_option, run_analysis
from clockfall.effects.host import Host
from clockfall.files.shown import Shown, aligned, common_power


def report(outcome: Outcome) -> dict[str, Any]:
    """Return the budget as programs read it."""
    tension = outcome.get(DECAY, "tension_sigma")
    numbers = ("predicted_intrinsic", "apparent", "measured", "intrinsic_observed", "ratio")
    found = {role: outcome.get(DECAY, role) for role in numbers}
    as_numbers = {role: None if finding is None else as_json(finding) for role, finding in found.items()}
    merger = outcome.get("merger_time")
    epoch = outcome.facts.get("epoch_mjd_tdb")
    return {
        "epoch_mjd_tdb": None if epoch is None else float(epoch),
        DECAY: {
            "contributions": [
                {"effect": f.effect, "nature": f.nature, **as_json(f), "sources": list(f.sources)}
                for f in outcome.contributions(DECAY)
            ],
            "predicted_intrinsic": as_numbers["predicted_intrinsic"],
            "apparent": as_numbers["apparent"],
            "observed": as_numbers["measured"],
            "intrinsic_observed": as_numbers["intrinsic_observed"],
            "ratio": as_numbers["ratio"],
            "tension_sigma": None if tension is None else finite(tension.drawn.central),
        },
        "masses": {
            "mass_1": as_json(outcome["mass_1", ""]),
            "mass_2": as_json(outcome["mass_2", ""]),
            "from": outcome.facts["masses_from"],
        },
        "merger_time": None if merger is None else as_json(merger),
        "inverse": {f.quantity: {**as_json(f), "role": f.role, "meaning": f.meaning} for f in _inverse(outcome)},
    }


def blocks(outcome: Outcome) -> Iterator[Block]:
    """Yield the budget, and what follows from it."""
    contributions, totals = outcome.contributions(DECAY), sums(outcome, DECAY)
    if totals:
        power = common_power(Shown.finding(f) for _, _, f in totals)
        shown = [*contributions, *(f for _, _, f in totals)]
        texts = aligned([as_text(f, power=power, with_unit=False) for f in shown])
        labels = [
            *((f.whose, f.nature) for f in contributions),
            *((label, nature) for label, nature, _ in totals),
        ]
        rows: list[tuple[str, ...]] = [(*label, text) for label, text in zip(labels, texts, strict=True)]
        rows.insert(len(contributions), ())
        heading = ("effect", "nature", unit_heading(totals[0][2].shown_in, power))
        yield Block(tuple(rows), heading, "Rate of the orbital period")
    yield Block(tuple(_conclusions(outcome)))


def _conclusions(outcome: Outcome) -> Iterator[tuple[str, str]]:
    if ratio := outcome.get(DECAY, "ratio"):
        yield "measured/predicted", f"{as_text(ratio)}   {_tension(outcome)}".rstrip()
    m_1, m_2 = (as_text(outcome[name, ""], with_unit=False) for name in ("mass_1", "mass_2"))
    yield "masses", f"m_1 = {m_1}, m_2 = {m_2} Msun ({masses_from(outcome)})"
    if merger := outcome.get("merger_time"):
        yield "time to merger", as_text(merger, time_unit(merger))
    for finding in _inverse(outcome):
        sign = "< " if finding.role == "limit_95" else ""
        yield finding.quantity, f"{sign}{as_text(finding)}   ({finding.meaning})"


def _tension(outcome: Outcome) -> str:
    """Say by how many sigma the decay differs, in words that do not depend on its sign."""
    tension = outcome.get(DECAY, "tension_sigma")
    if tension is None or finite(tension.drawn.central) is None:
        return ""
    return f"({abs(tension.drawn.central):.1f} sigma from prediction)"


def headline(outcome: Outcome) -> str:
    """Return the ratio, or the prediction where nothing was measured."""
    finding: Finding | None = outcome.get(DECAY, "ratio") or outcome.get(DECAY, "predicted_intrinsic")
    return "no effect contributes to the orbital period's rate" if finding is None else as_text(finding)


def compute(host: Host, system: System, choices: Choices) -> Outcome:
    """Return the budget, with the answers to the inverse questions where they are put."""
    outcome = decay(host, system, choices)
    for question, answer in ((choices.solve_for, inverse.solve_for), (choices.limit, inverse.limit_of)):
        if question:
            findings, said = answer(host, system, choices, question)
            outcome = replace(outcome, findings=(*outcome.findings, *findings), cautions=(*said, *outcome.cautions))
    return outcome


def _inverse(outcome: Outcome) -> list[Finding]:
    return [finding for finding in outcome.findings if finding.role in ("solved", "limit_95")]


ANALYSIS = Analysis("decay", compute, report, blocks, headline)


@click.command("decay")
@click.argument("system", required=False, type=click.Path(path_type=Path))
@click.option("--solve-for", metavar="FIELD", help="Which distance, or moment_of_inertia_1, would make theory agree?")
@click.option("--limit", metavar="EFFECT.PARAMETER", help="How large may this parameter be, at 95 %?")
@draw_option
@analysis_options
def command(
    system: Path | None, solve_for: str | None, limit: str | None, picture: Path | None, wishes: Wishes
) -> None:
    """Take the orbital decay of SYSTEM apart by effect.

    Says what each effect adds to the rate of the orbital period, takes the apparent part off the measured rate,
    compares the rest with theory, and gives the time to merger. Without masses in the file, the two bodies are
    weighed by what was measured.
    """
    choices = replace(wishes.choices, solve_for=solve_for or "", limit=limit or "")
    run_analysis(ANALYSIS, system, replace(wishes, choices=choices, picture=picture))
