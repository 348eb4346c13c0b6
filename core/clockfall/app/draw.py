"""`clockfall draw`: a picture of a result file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click
import numpy as np

from clockfall.analysis.outcome import Drawn
from clockfall.analysis.weighing import study
from clockfall.app.analyses import system_of
from clockfall.effects.loading import load_host
from clockfall.errors import BadInput
from clockfall.figures.budget_chart import budget_chart
from clockfall.figures.masses_plane import WeighedMasses, masses_plane
from clockfall.figures.periastron_shift import TimedShifts, periastron_shift
from clockfall.figures.plane import close_axis, plane, whole_axis
from clockfall.figures.saving import check_picture, save
from clockfall.files.results import Result, read_result

if TYPE_CHECKING:
    from matplotlib.figure import Figure

PICTURES = ("budget", "masses", "shift")


@click.command("draw")
@click.argument("result", type=click.Path(path_type=Path))
@click.option(
    "--picture", type=click.Choice(PICTURES), help="Default: the budget of a decay, the masses of a weighing."
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
    picture: str | None,
    out: Path,
    years: tuple[float, float] | None,
    shifts: Path | None,
    overwrite: bool,
    debug: bool,
) -> None:
    """Draw the file RESULT.

    budget: what each effect adds to the rate of the orbital period. masses: the plane of the two masses with the band
    that each measured parameter allows. shift: how far periastron runs ahead of a constant period.
    """
    del debug  # read by clockfall.app.main before any option is parsed
    check_picture(out, overwrite=overwrite)
    found = read_result(result)
    picture = picture or ("masses" if found.command == "weigh" else "budget")
    if picture != "masses" and found.command != "decay":
        raise BadInput(f"{result} is a result of {found.command!r}; the picture {picture!r} needs one of 'decay'")
    if picture == "budget":
        figure = budget_chart(found.outcome)
    elif picture == "masses":
        figure = _masses(found, result)
    else:
        figure = _shift(found, result, years, shifts)
    save(figure, out, overwrite=overwrite)
    click.echo(f"Drawn to {out}")


def _masses(found: Result, file: Path) -> Figure:
    """Draw the plane of the masses; its curves are computed anew from the result's own system file."""
    host = load_host()
    system = system_of(found, file, host)
    of = study(host, system, found.choices, weigh_anew=found.command == "weigh")
    m_1, m_2 = (Drawn.from_batch(values, of.sample.possible) for values in of.sample.state.known("mass_1", "mass_2"))
    whole = whole_axis(m_1.central, m_2.central)
    close_up = plane(of, host, close_axis(m_1), close_axis(m_2))
    return masses_plane(plane(of, host, whole, whole), WeighedMasses(m_1, m_2), close_up, of.system.name)


def _shift(found: Result, file: Path, years: tuple[float, float] | None, shifts: Path | None) -> Figure:
    """Draw the shift of periastron, with the user's points where they are given."""
    if years is None:
        raise BadInput("--picture shift needs --years FROM TO, for instance --years 1975 2035")
    system = system_of(found, file, load_host())
    if "orbital_period" not in system.fields:
        raise BadInput(f"{file}: its system has no orbital_period")
    timed = None if shifts is None else TimedShifts(*_table(shifts))
    return periastron_shift(found.outcome, system.fields["orbital_period"].value, years, timed)


def _table(path: Path) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Read three columns of numbers; lines that begin with # are comments."""
    try:
        columns = np.loadtxt(path, ndmin=2, dtype=np.float64)
    except (OSError, ValueError) as error:
        raise BadInput(
            f"{path}: expected three columns of numbers, year, shift [s], uncertainty [s] ({error})"
        ) from error
    if columns.shape[1:] != (3,):
        raise BadInput(f"{path}: expected three columns, found {columns.shape[1] if columns.ndim > 1 else 0}")
    return columns[:, 0], columns[:, 1], columns[:, 2]
