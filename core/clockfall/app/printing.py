"""Printing an outcome: JSON for programs, or tables that read well in 80 columns, without colour, in a pipe."""

from __future__ import annotations

import json
import sys
from collections.abc import Iterable, Iterator

import click
from rich.console import Console
from rich.table import Table
from rich.text import Text

from clockfall.analysis.outcome import Column, Finding, Outcome
from clockfall.app.analyses import Analysis, Block, full_report


def print_outcome(analysis: Analysis, outcome: Outcome, *, as_json: bool, quiet: bool, demo: bool = False) -> None:
    """Print what an analysis found on standard output; warnings of failed effects go to standard error."""
    for said in outcome.failed:
        click.echo(f"clockfall: warning: {said.text}; it is left out of all sums", err=True)
    if as_json:
        click.echo(json.dumps(full_report(analysis, outcome), indent=2, ensure_ascii=False))
        return
    if quiet:
        click.echo(analysis.headline(outcome))
        return
    blocks = [*analysis.blocks(outcome), *_notes(outcome)]
    print_blocks(f"{outcome.facts.get('system', '')}: {analysis.name}", blocks)
    if demo:
        click.echo("\nThis is the invented demo binary; give a system file to analyse your own.")


def print_blocks(title: str, blocks: Iterable[Block]) -> None:
    """Print a title and the blocks under it."""
    console = Console(file=sys.stdout, highlight=False, markup=False, emoji=False)
    with console.capture() as capture:
        console.print(Text(title, style="bold"))
        for block in blocks:
            console.print()
            if block.title:
                console.print(Text(block.title, style="bold"))
            console.print(_table(block))
    click.echo("\n".join(line.rstrip() for line in capture.get().rstrip().split("\n")))


def _table(block: Block) -> Table:
    columns = max((len(row) for row in (block.heading, *block.rows)), default=0)
    table = Table(
        box=None, show_header=bool(block.heading), pad_edge=False, padding=(0, 2, 0, 2), header_style="italic"
    )
    for index in range(columns):
        heading = block.heading[index] if index < len(block.heading) else ""
        table.add_column(heading, no_wrap=index < columns - 1, overflow="fold")
    for row in block.rows:
        table.add_row(*(Text(cell) for cell in row))
    return table


def _notes(outcome: Outcome) -> Iterator[Block]:
    """Yield what stands below every analysis: cautions, idle effects, sources."""
    if outcome.cautions:
        rows = tuple((said.effect or "all", said.text) for said in outcome.cautions)
        yield Block(rows, title="Cautions")
    if outcome.idle:
        yield Block(tuple((said.effect, said.text) for said in outcome.idle), title="Idle effects")
    found: list[Finding | Column] = [*outcome.findings, *outcome.columns]
    sources = {item.effect: item.sources for item in found if item.effect and item.sources}
    if sources:
        rows = tuple(
            (effect if first else "", source)
            for effect, listed in sources.items()
            for first, source in zip((True, *[False] * len(listed)), listed, strict=False)
        )
        yield Block(rows, title="Sources")
    if outcome.draws:
        line = f"Uncertainties are 68.3 % intervals from {outcome.draws} draws (seed {outcome.seed})."
        yield Block(((line,),))
