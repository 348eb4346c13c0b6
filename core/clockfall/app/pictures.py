"""Which picture shows an outcome, and how it is made from what was computed."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from clockfall.analysis.outcome import Outcome
from clockfall.analysis.study import Choices
from clockfall.analysis.system import System
from clockfall.analysis.weighing import study
from clockfall.app.delays import curves_of
from clockfall.effects.host import Host
from clockfall.errors import BadInput
from clockfall.figures.budget_chart import budget_chart
from clockfall.figures.delay_chart import delay_chart
from clockfall.figures.masses_plane import WeighedMasses, masses_plane
from clockfall.figures.periastron_shift import TimedShifts, periastron_shift
from clockfall.figures.plane import close_axis, plane, whole_axis
from clockfall.figures.saving import save

if TYPE_CHECKING:
    from matplotlib.figure import Figure

USUAL: Final = {"decay": "budget", "weigh": "masses", "delays": "delays"}
"""Analysis -> the picture of it."""

PICTURES: Final = ("budget", "masses", "shift", "delays")


@dataclass(frozen=True, slots=True)
class Shift:
    """What the picture of the shift of periastron needs besides: its years, and a table of measured shifts."""

    years: tuple[float, float] | None = None
    table: Path | None = None


def draw_to(
    path: Path, analysis: str, outcome: Outcome, system: System, host: Host, choices: Choices, *, overwrite: bool
) -> None:
    """Write the usual picture of an analysis; errors as `clockfall.figures.saving.save` raises them."""
    save(picture(USUAL[analysis], analysis, outcome, system, host, choices), path, overwrite=overwrite)


def picture(
    kind: str,
    analysis: str,
    outcome: Outcome,
    system: System,
    host: Host,
    choices: Choices,
    shift: Shift | None = None,
) -> Figure:
    """Make one of `PICTURES`.

    Raises
    ------
    BadInput
        The analysis does not hold what the picture shows, or `shift` lacks its years.
    NoMatplotlib
        The extra is not installed.
    """
    allowed = ("budget", "masses", "shift") if analysis == "decay" else (USUAL.get(analysis),)
    if kind not in allowed:
        owner = "delays" if kind == "delays" else "decay"
        raise BadInput(f"a result of {analysis!r} has no picture {kind!r}; one of {owner!r} has")
    if kind == "budget":
        return budget_chart(outcome)
    if kind == "delays":
        return delay_chart(curves_of(outcome), system.name)
    if kind == "masses":
        return _masses(analysis, outcome, system, host, choices)
    return _shift(outcome, system, shift or Shift())


def _masses(analysis: str, outcome: Outcome, system: System, host: Host, choices: Choices) -> Figure:
    """Draw the plane of the masses: the outcome's own masses, among curves computed from the system."""
    of = study(host, system, choices, weigh_anew=analysis == "weigh")
    m_1, m_2 = outcome["mass_1", ""].drawn, outcome["mass_2", ""].drawn
    whole = whole_axis(m_1.central, m_2.central)
    close_up = plane(of, host, close_axis(m_1), close_axis(m_2))
    return masses_plane(plane(of, host, whole, whole), WeighedMasses(m_1, m_2), close_up, system.name)


def _shift(outcome: Outcome, system: System, shift: Shift) -> Figure:
    """Draw the shift of periastron, with the user's points where they are given."""
    if shift.years is None:
        raise BadInput("--picture shift needs --years FROM TO, for instance --years 1975 2035")
    if "orbital_period" not in system.fields:
        raise BadInput(f"{system.name} has no orbital_period")
    timed = None if shift.table is None else TimedShifts(*_table(shift.table))
    return periastron_shift(outcome, system.fields["orbital_period"].value, shift.years, timed)


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
