"""`clockfall draw`: a picture of a result file."""

from __future__ import annotations

from pathlib import Path

import click

from clockfall.app.analyses import system_of
from clockfall.app.pictures import PICTURES, USUAL, Shift, picture
from clockfall.effects.loading import load_host
from clockfall.errors import BadInput
from clockfall.figures.saving import check_picture, save
from clockfall.files.results import read_result


@click.command("draw")
@click.argument("result", type=click.Path(path_type=Path))
@click.option(
    "--picture",
    "kind",
    type=click.Choice(PICTURES),
    help="Default: the budget of a decay, the masses of a weighing, the delays of delays.",
)
@click.option("--out", required=True, type=click.Path(path_type=Path), help="Where to: .svg, .pdf or .png.")
@click.option("--years", nargs=2, type=float, metavar="FROM TO", help="Of the shift, in Julian years.")
@click.option(
    "--shifts",
    type=click.Path(path_type=Path),
    help="Measured shifts: a text table of year, shift [s], uncertainty [s].",
)
@click.option("--overwrite", is_flag=True, help="Let --out replace a file.")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
def command(
    result: Path,
    *,
    kind: str | None,
    out: Path,
    years: tuple[float, float] | None,
    shifts: Path | None,
    overwrite: bool,
    debug: bool,
) -> None:
    """Draw the file RESULT.

    budget: what each effect adds to the rate of the orbital period. masses: the plane of the two masses with the band
    that each measured parameter allows. shift: how far periastron runs ahead of a constant period. delays: each
    effect's delay against orbital phase or time.
    """
    del debug  # read by clockfall.app.main before any option is parsed
    check_picture(out, overwrite=overwrite)
    found = read_result(result)
    kind = kind or USUAL.get(found.command)
    if kind is None:
        raise BadInput(f"{result} is a result of {found.command!r}, which has no picture")
    host = load_host()
    system = system_of(found, result, host)
    figure = picture(kind, found.command, found.outcome, system, host, found.choices, Shift(years, shifts))
    save(figure, out, overwrite=overwrite)
    click.echo(f"Drawn to {out}")
