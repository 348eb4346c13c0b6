"""`clockfall delays`: what each effect adds to the arrival times."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any, Final

import click
import numpy as np

from clockfall.analysis.delays import delays_of
from clockfall.analysis.outcome import Column, Outcome
from clockfall.app.analyses import Analysis, Block, masses_from
from clockfall.app.options import Wishes, analysis_options, draw_option, run_analysis
from clockfall.binary.epoch import Epoch
from clockfall.errors import BadInput
from clockfall.figures.delay_chart import DelayCurves, unit_of

ROWS: Final = 60
"""The most rows that are printed; a longer table is for --json, --out and --draw."""

ACROSS: Final = 5
"""Columns side by side."""


def effects_of(outcome: Outcome) -> list[Column]:
    """Return the columns of delays, the total last."""
    return [column for column in outcome.columns if column.name.startswith("delay_")]


def times_of(outcome: Outcome) -> Epoch:
    """Return the times of the table; shape (rows,)."""
    return Epoch(np.asarray(outcome.column("time_day").values), outcome.column("time_fraction").values)


def curves_of(outcome: Outcome) -> DelayCurves:
    """Return the delays as a picture shows them."""
    over_orbit = bool(outcome.facts["over"])
    times = times_of(outcome)
    at = outcome.column("orbital_phase").values if over_orbit else times.to_mjd()
    label = "orbital phase, mean anomaly from periastron [turns]" if over_orbit else f"{outcome.facts['by']} [MJD, TDB]"
    return DelayCurves(
        np.asarray(at), label, over_orbit, tuple((c.effect or "total", c.values) for c in effects_of(outcome))
    )


def report(outcome: Outcome) -> dict[str, Any]:
    """Return the delays as programs read them; a time is text with all its digits."""
    times = times_of(outcome)
    columns = effects_of(outcome)
    return {
        "times_mjd_tdb": [_mjd(times, k) for k in range(times.shape[0])],
        "times_are": outcome.facts["by"],
        "orbital_phase": outcome.column("orbital_phase").values.tolist(),
        "delays": {c.effect: c.values.tolist() for c in columns if c.effect},
        "total": outcome.column("delay_total").values.tolist(),
        "unit": "s",
        "rates_from": outcome.facts["rates_from"],
        "sources": {c.effect: list(c.sources) for c in columns if c.effect},
    }


def _mjd(times: Epoch, k: int, digits: int = 15) -> str:
    fraction = f"{float(times.fraction[k]):.{digits}f}"
    whole = int(times.day[k]) + (1 if fraction.startswith("1") else 0)
    return f"{whole}.{fraction.split('.')[1]}"


def blocks(outcome: Outcome) -> Iterator[Block]:
    """Yield what the columns are, and the table, as many columns at once as 80 characters hold."""
    columns = effects_of(outcome)
    units = [unit_of(column.values) for column in columns]
    letters = [chr(ord("a") + k) for k in range(len(columns) - 1)] + ["sum"]
    spans = [(letter, c.effect, *_span(c, unit)) for letter, c, unit in zip(letters, columns, units, strict=True)]
    yield Block(tuple(spans), ("", "effect", "least", "most"), "Delays, and how far each goes")
    size = outcome.column("delay_total").values.size
    first, label = _first_column(outcome)
    for start in range(0, len(columns), ACROSS):
        part = range(start, min(start + ACROSS, len(columns)))
        heading = (label, *(f"{letters[k]} [{units[k][1]}]" for k in part))
        rows = tuple(
            (first[row], *(f"{columns[k].values[row] / units[k][0]:.5f}" for k in part))
            for row in range(min(size, ROWS))
        )
        yield Block(rows, heading)
    if size > ROWS:
        yield Block(((f"{size - ROWS} more rows; --json, --out and --draw give them all",),))
    yield Block((("rates", outcome.facts["rates_from"]), ("masses", masses_from(outcome))))


def _first_column(outcome: Outcome) -> tuple[list[str], str]:
    """Return the cells that say which row it is, and their heading."""
    if outcome.facts["over"]:
        return [f"{phase:.5f}" for phase in outcome.column("orbital_phase").values[:ROWS]], "phase"
    times = times_of(outcome)
    return [_mjd(times, k, 6) for k in range(min(times.shape[0], ROWS))], f"{outcome.facts['by']}, MJD"


def _span(column: Column, unit: tuple[float, str]) -> tuple[str, str]:
    size, name = unit
    low, high = float(np.min(column.values)) / size, float(np.max(column.values)) / size
    return f"{low:.6g} {name}", f"{high:.6g} {name}"


def headline(outcome: Outcome) -> str:
    """Return the total delay at each time [s]."""
    return "\n".join(f"{value:.12f}" for value in outcome.column("delay_total").values)


ANALYSIS = Analysis("delays", delays_of, report, blocks, headline)


@click.command("delays")
@click.argument("system", required=False, type=click.Path(path_type=Path))
@click.option("--at", "instants", multiple=True, metavar="TIME", help="At this MJD (TDB) or date (repeatable).")
@click.option("--from", "start", metavar="TIME", help="From this time, with --to and --number.")
@click.option("--to", "end", metavar="TIME", help="To this time.")
@click.option("--number", type=click.IntRange(2, 10_000_000), metavar="N", help="How many times from start to end.")
@click.option("--times", type=click.Path(path_type=Path), help="A file of times: text, one in a line, or HDF5.")
@click.option("--phases", type=int, default=24, show_default=True, metavar="N", help="Without times: over one orbit.")
@click.option(
    "--by", type=click.Choice(["arrival", "emission"]), default="arrival", show_default=True, help="What times are."
)
@click.option(
    "--rates",
    type=click.Choice(["predicted", "measured"]),
    default="predicted",
    show_default=True,
    help="By which rates and parameters the orbit runs, where they were measured.",
)
@draw_option
@analysis_options
def command(
    system: Path | None,
    *,
    instants: tuple[str, ...],
    start: str | None,
    end: str | None,
    number: int | None,
    times: Path | None,
    phases: int,
    by: str,
    rates: str,
    picture: Path | None,
    wishes: Wishes,
) -> None:
    """Say what each effect adds to the arrival times of SYSTEM's signals.

    A delay is that from emission to the arrival at the solar system's barycentre, the constant distance left out.
    Every input is at its central value.
    """
    wanted = _times(instants, start, end, number, times)
    choices = replace(
        wishes.choices,
        times=wanted,
        phases=phases if wanted is None else 0,
        by="emission" if by == "emission" else "arrival",
        rates="measured" if rates == "measured" else "predicted",
    )
    run_analysis(ANALYSIS, system, replace(wishes, choices=choices, picture=picture))


def _times(
    instants: tuple[str, ...], start: str | None, end: str | None, number: int | None, file: Path | None
) -> Epoch | None:
    """Return the times asked for; None for none."""
    from clockfall.files.times import parse_time, parse_times, read_times

    ways = [bool(instants), start is not None or end is not None or number is not None, file is not None]
    if sum(ways) > 1:
        raise BadInput("give times in one way: --at, or --from with --to and --number, or --times")
    if instants:
        return parse_times(instants, "--at")
    if file is not None:
        return read_times(file)
    if not ways[1]:
        return None
    if start is None or end is None or number is None:
        raise BadInput("--from, --to and --number belong together")
    first, last = parse_time(start, "--from"), parse_time(end, "--to")
    span = float(last.seconds_since(first))
    if not span > 0.0:
        raise BadInput(f"--to: expected a time after --from, found {end}")
    return first.plus_seconds(np.linspace(0.0, span, number))
