"""Each effect's delay, a panel for each, against orbital phase or against time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from clockfall.binary.ranges import FloatArray
from clockfall.errors import BadInput
from clockfall.figures.style import BLACK, BLUE, WIDE, look, open_frame, sheet

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_PANEL: Final = 30.0  # mm
_AROUND: Final = 16.0  # mm, for the axis below and the title
_DOTS: Final = 400  # points up to which each is marked

UNITS: Final = ((1.0, "s"), (1e-3, "ms"), (1e-6, "us"), (1e-9, "ns"), (1e-12, "ps"))
"""Size [s] and name of the units in which delays are read."""


def unit_of(values: FloatArray) -> tuple[float, str]:
    """Return the unit [s] in which the largest of some delays reads well, and its name."""
    largest = float(np.max(np.abs(values), initial=0.0))
    return next(((size, name) for size, name in UNITS if largest >= size), UNITS[-1] if largest else UNITS[0])


@dataclass(frozen=True, slots=True)
class DelayCurves:
    """What is drawn.

    Attributes
    ----------
    at : array, shape (points,)
        Orbital phase [turns], or time [d].
    label : str
        What `at` is, with its unit.
    over_orbit : bool
        Whether `at` is a phase: then the curve is joined over one turn.
    delays : tuple of (name, array of shape (points,) [s])
        The total last.
    """

    at: FloatArray
    label: str
    over_orbit: bool
    delays: tuple[tuple[str, FloatArray], ...]


def delay_chart(curves: DelayCurves, title: str = "") -> Figure:
    """Draw one panel for each effect, all over one axis of phase or time; each has a unit of its own.

    Raises
    ------
    BadInput
        There is no delay to draw.
    NoMatplotlib
        The extra is not installed.
    """
    if not curves.delays or not curves.at.size:
        raise BadInput("there is no delay to draw")
    order = np.argsort(curves.at, kind="stable")
    with look():
        figure = sheet(WIDE, _AROUND + _PANEL * len(curves.delays))
        panels = figure.subplots(len(curves.delays), 1, sharex=True, squeeze=False)[:, 0]
        for axes, (name, values) in zip(panels, curves.delays, strict=True):
            _draw(axes, curves.at[order], name, values[order], joined=curves.over_orbit)
        panels[0].set_title(title)
        panels[-1].set_xlabel(curves.label)
        if curves.over_orbit:
            panels[-1].set_xlim(0.0, 1.0)
        figure.align_ylabels(list(panels))
    return figure


def _draw(axes: Axes, at: FloatArray, name: str, values: FloatArray, *, joined: bool) -> None:
    size, unit = unit_of(values)
    if joined:  # close the curve at the end of the orbit
        at, values = np.append(at, at[0] + 1.0), np.append(values, values[0])
    marked = at.size <= _DOTS and not joined
    axes.plot(
        at,
        values / size,
        color=BLUE if name != "total" else BLACK,
        linewidth=1.0 if joined else 0.5,
        marker="o" if marked else None,
        markersize=2.0,
    )
    axes.axhline(0.0, color=BLACK, linewidth=0.3)
    axes.set_ylabel(f"{name}\n[{unit}]")
    axes.margins(y=0.08)
    open_frame(axes)
