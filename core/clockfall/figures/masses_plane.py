"""The plane of the two masses: each measured parameter allows a band of them, and theory has to let all bands meet."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from clockfall.analysis.outcome import Drawn
from clockfall.binary.ranges import FloatArray
from clockfall.figures.plane import Curve, Plane
from clockfall.figures.style import BLACK, GREY, NARROW, SERIES, WIDE, look, sheet

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_PANEL: Final = 89.0  # mm, the height of a panel with its axis and title
_LEGEND_ROW: Final = 4.2  # mm
_DOTS: Final = 300  # draws of the posterior that are shown
_JOINT: Final = -2.0 * math.log1p(-0.682689)
"""chi^2 of two degrees of freedom below which 68.27 % lie, 2.296."""


@dataclass(frozen=True, slots=True)
class WeighedMasses:
    """The solution: both masses [Msun], with draws of the same order."""

    mass_1: Drawn
    mass_2: Drawn

    def ellipse(self) -> FloatArray | None:
        """Return the ellipse that holds 68.3 % of the draws, shape (2, points) [Msun]; None where they form none.

        The covariance is that of the draws.
        """
        both = self.kept()
        if both.shape[1] < 3 or not self._is_an_ellipse(both):
            return None
        sizes, axes = np.linalg.eigh(np.cov(both))
        angle = np.linspace(0.0, 2.0 * np.pi, 181)
        circle = np.stack([np.cos(angle), np.sin(angle)])
        outline = axes @ (np.sqrt(_JOINT * np.maximum(sizes, 0.0))[:, None] * circle)
        return np.asarray(outline + np.array([[self.mass_1.central], [self.mass_2.central]]))

    def kept(self) -> FloatArray:
        """Return the draws that have a meaning, shape (2, kept) [Msun]."""
        both = np.stack([self.mass_1.draws, self.mass_2.draws])
        return both[:, np.isfinite(both).all(axis=0)]

    def _is_an_ellipse(self, both: FloatArray) -> bool:
        """Whether the ellipse of the covariance round the central masses holds the share of draws that it should."""
        covariance = np.cov(both)
        if np.linalg.matrix_rank(covariance, tol=0.0, hermitian=True) < 2:
            return False
        away = both - np.array([[self.mass_1.central], [self.mass_2.central]])
        sizes, axes = np.linalg.eigh(covariance)
        inside = np.sum((axes.T @ away) ** 2 / np.maximum(sizes, np.finfo(float).tiny)[:, None], axis=0) < _JOINT
        return abs(float(np.mean(inside)) - 0.683) < 0.05


def masses_plane(
    plane: Plane, masses: WeighedMasses | None = None, close_up: Plane | None = None, title: str = ""
) -> Figure:
    """Draw the plane m_1 against m_2 with the band of each measured parameter.

    A line is where the prediction equals the measurement, the band round it where it lies within the 68.3 % interval.
    Where sin i > 1 the plane is hatched. Numbers on the lines are those of the legend.

    Parameters
    ----------
    plane : Plane
        The whole of it.
    masses : WeighedMasses, optional
        The solution, drawn with the ellipse that holds 68.3 % of it.
    close_up : Plane, optional
        The same curves, on a grid of their own round the solution; drawn in a second panel.

    Raises
    ------
    NoMatplotlib
        The extra is not installed.
    """
    panels = [plane] if close_up is None else [plane, close_up]
    styles = {curve.name: (number + 1, *SERIES[number % len(SERIES)]) for number, curve in enumerate(plane.curves)}
    with look():
        height = _PANEL + _LEGEND_ROW * math.ceil((len(plane.curves) + 3) / len(panels))
        figure = sheet(NARROW if close_up is None else WIDE, height)
        for number, (axes, shown) in enumerate(
            zip(figure.subplots(1, len(panels), squeeze=False)[0], panels, strict=True)
        ):
            _draw_panel(axes, shown, styles, masses)
            if number == 0:
                axes.set_title(title)
        if close_up is not None:
            axes.set_title("round the solution")
            _frame(figure.axes[0], close_up)
        _legend(figure, plane, styles, masses, columns=len(panels))
    return figure


Style = tuple[int, str, Any]
"""The number, colour and dashes of a curve."""


def _draw_panel(axes: Axes, plane: Plane, styles: dict[str, Style], masses: WeighedMasses | None) -> None:
    from matplotlib.ticker import MaxNLocator

    m_1, m_2 = plane.mass_1, plane.mass_2
    if _has_edge(plane):
        sine = np.asarray(plane.sin_inclination).T
        axes.contourf(m_1, m_2, sine, [1.0, np.inf], colors=["none"], hatches=["////"])
        axes.contour(m_1, m_2, sine, [1.0], colors=[GREY], linewidths=0.5)
    lines = {curve.name: _draw_curve(axes, plane, curve, styles[curve.name]) for curve in plane.curves}
    if masses is not None:
        _draw_masses(axes, masses)
    axes.set_xlim(m_1[0], m_1[-1])
    axes.set_ylim(m_2[0], m_2[-1])
    for axis, masses_shown in ((axes.xaxis, m_1), (axes.yaxis, m_2)):
        digits = math.log10(masses_shown[-1] / (masses_shown[-1] - masses_shown[0]))  # the longer, the fewer have room
        axis.set_major_locator(MaxNLocator(4 if digits > 1.0 else 6, steps=[1, 2, 5, 10]))
    axes.set_xlabel("mass of body 1, $m_1$ [Msun]")
    axes.set_ylabel("mass of body 2, $m_2$ [Msun]")
    axes.set_box_aspect(1.0)
    _note_everywhere(axes, plane, styles)
    _number_lines(axes, plane, lines, styles, masses)


def _draw_curve(axes: Axes, plane: Plane, curve: Curve, style: Style) -> list[FloatArray]:
    """Draw a band and its line; return the pieces of the line, each of shape (points, 2) [Msun]."""
    _, colour, dashes = style
    values = past_the_edge(curve.predicted).T
    low, high = curve.value - curve.minus, curve.value + curve.plus
    if high > low and not _everywhere(curve):
        axes.contourf(plane.mass_1, plane.mass_2, values, [low, high], colors=[colour], alpha=0.28)
    finite = values[np.isfinite(values)]
    if not finite.size or not finite.min() < curve.value < finite.max():
        return []
    drawn = axes.contour(
        plane.mass_1, plane.mass_2, values, [curve.value], colors=[colour], linestyles=[dashes], linewidths=1.1
    )
    return [np.asarray(piece) for piece in drawn.allsegs[0]]


def _has_edge(plane: Plane) -> bool:
    """Whether the orbits of some masses of the plane are impossible."""
    return plane.sin_inclination is not None and bool(np.any(plane.sin_inclination > 1.0))


def _everywhere(curve: Curve) -> bool:
    """Whether the whole grid lies within the interval, as far as the prediction has a meaning."""
    finite = curve.predicted[np.isfinite(curve.predicted)]
    return bool(np.all((finite >= curve.value - curve.minus) & (finite <= curve.value + curve.plus)))


def _note_everywhere(axes: Axes, plane: Plane, styles: dict[str, Style]) -> None:
    """Say which parameters allow all of a panel, and so have no edge in it."""
    numbers = [str(styles[curve.name][0]) for curve in plane.curves if _everywhere(curve)]
    if numbers:
        axes.text(
            0.98,
            0.98,
            f"all of this lies in the band of {', '.join(numbers)}",
            transform=axes.transAxes,
            ha="right",
            va="top",
            fontsize=7.0,
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.5},
            zorder=6.0,
        )


def past_the_edge(values: FloatArray) -> FloatArray:
    """Carry a prediction on by one cell to where it has no meaning, along straight lines.

    So a line that runs closer to the edge than a cell, as where sin i is all but 1, is drawn nevertheless.
    """
    filled = values.copy()
    for axis in (0, 1):
        for back in (1, -1):
            near, far = (_moved(values, axis, back * cells) for cells in (1, 2))
            carried = 2.0 * near - far
            filled = np.where(np.isnan(filled) & np.isfinite(carried), carried, filled)
    return filled


def _moved(values: FloatArray, axis: int, cells: int) -> FloatArray:
    """Return an array moved by some cells, with NaN moving in."""
    moved = np.roll(values, cells, axis)
    rim = [slice(None), slice(None)]
    rim[axis] = slice(0, cells) if cells > 0 else slice(cells, None)
    moved[tuple(rim)] = np.nan
    return moved


def _draw_masses(axes: Axes, masses: WeighedMasses) -> None:
    outline = masses.ellipse()
    if outline is not None:
        axes.plot(*outline, color=BLACK, linewidth=0.9, zorder=4.0)
    axes.plot(*masses.kept()[:, :_DOTS], ".", color=BLACK, markersize=1.2, markeredgewidth=0.0, alpha=0.6, zorder=3.8)
    axes.plot([masses.mass_1.central], [masses.mass_2.central], "P", color=BLACK, markersize=5.0,
              markeredgecolor="white", markeredgewidth=0.5, zorder=5.0)  # fmt: skip


def _frame(axes: Axes, close_up: Plane) -> None:
    """Outline the close-up in the whole plane, where it is large enough to be seen."""
    left, right, low, high = close_up.mass_1[0], close_up.mass_1[-1], close_up.mass_2[0], close_up.mass_2[-1]
    axes.plot([left, right, right, left, left], [low, low, high, high, low], color=GREY, linewidth=0.6, zorder=3.5)


def _number_lines(
    axes: Axes, plane: Plane, lines: dict[str, list[FloatArray]], styles: dict[str, Style], masses: WeighedMasses | None
) -> None:
    """Write each line's number on it, as far as may be from the other lines, the solution and the numbers before."""
    corner = np.array([plane.mass_1[0], plane.mass_2[0]])
    size = np.array([plane.mass_1[-1], plane.mass_2[-1]]) - corner
    scaled = {name: _inside([(piece - corner) / size for piece in pieces]) for name, pieces in lines.items()}
    taken = np.empty((0, 2))
    if masses is not None:
        taken = (np.array([[masses.mass_1.central, masses.mass_2.central]]) - corner) / size
    for name, own in scaled.items():
        if not own.size:
            continue
        others = np.concatenate([np.empty((0, 2)), *(points for other, points in scaled.items() if other != name)])
        place = _freest(own, others, taken)
        taken = np.concatenate([taken, place[None, :]])
        number, colour, _ = styles[name]
        x, y = corner + place * size
        axes.text(x, y, str(number), color=colour, fontsize=7.5, fontweight="bold",
                  ha="center", va="center", zorder=6.0,
                  bbox={"boxstyle": "circle,pad=0.22", "facecolor": "white", "edgecolor": colour, "linewidth": 0.6},
                  )  # fmt: skip


def _inside(pieces: list[FloatArray]) -> FloatArray:
    """Return points of a line, in shares of the panel, that leave room for a number; shape (points, 2)."""
    points = np.concatenate([np.empty((0, 2)), *pieces])
    kept: FloatArray = points[((points > 0.06) & (points < 0.94)).all(axis=1)]
    return kept[:: max(1, len(kept) // 150)]


def _freest(own: FloatArray, lines: FloatArray, taken: FloatArray) -> FloatArray:
    """Return the point of `own`, shape (2,), that is far from other lines and, above all, from what is `taken`."""
    room = np.minimum(_distance(own, lines), 0.15) + 2.0 * np.minimum(_distance(own, taken), 0.2)
    chosen: FloatArray = own[int(np.argmax(room))]
    return chosen


def _distance(own: FloatArray, others: FloatArray) -> FloatArray:
    """Return how far each of `own` is from the nearest of `others`, shape (points,)."""
    apart = np.linalg.norm(own[:, None, :] - others[None, :, :], axis=-1)
    nearest: FloatArray = apart.min(axis=1, initial=np.inf)
    return nearest


def _said_of(masses: WeighedMasses) -> str:
    if not masses.kept().size:
        return "masses"
    shape = "" if masses.ellipse() is None else ", 68.3 % ellipse"
    return f"masses: best, draws (dots){shape}"


def _legend(figure: Figure, plane: Plane, styles: dict[str, Style], masses: WeighedMasses | None, columns: int) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    handles: list[Line2D | Patch] = []
    for curve in plane.curves:
        number, colour, dashes = styles[curve.name]
        handles.append(Line2D([], [], color=colour, linestyle=dashes, label=f"{number}  {curve.label}"))
    handles.append(Patch(color=GREY, alpha=0.28, label="band: 68.3 % interval"))
    if masses is not None:
        handles.append(Line2D([], [], color=BLACK, marker="P", linewidth=0.9, markersize=5.0, markeredgecolor="white",
                              markeredgewidth=0.5, label=_said_of(masses)))  # fmt: skip
    if _has_edge(plane):
        handles.append(
            Patch(facecolor="none", edgecolor=GREY, hatch="////", linewidth=0.0, label="sin i > 1: no orbit")
        )
    figure.legend(handles=handles, loc="outside lower left", ncols=columns, handlelength=3.0)
