"""The budget of a rate as a chart: a row for each effect and for the sums, over many powers of ten and both signs."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from clockfall.analysis.budget import sums
from clockfall.analysis.outcome import Outcome
from clockfall.errors import BadInput
from clockfall.figures.style import BLACK, BLUE, GREY, PALE, VERMILION, WIDE, look, sheet
from clockfall.files.shown import Shown, aligned, common_power

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_DECADES: Final = 9
"""How far below the largest number the axis goes; smaller numbers stand at its middle."""

_ROW: Final = 5.4  # mm
_SEEN: Final = 0.3  # an interval narrower than this share of its value hides behind the marker
_AROUND: Final = 31.0  # mm: title, axis and legend
_COLOURS: Final = {"intrinsic": BLUE, "apparent": VERMILION}


@dataclass(frozen=True, slots=True)
class Row:
    """One row of the chart: whose number, of which nature, whether a sum, and how far down [rows]."""

    label: str
    nature: str
    number: Shown
    is_sum: bool
    place: float

    @property
    def colour(self) -> str:
        """By nature; sums are black."""
        return BLACK if self.is_sum else _COLOURS.get(self.nature, GREY)

    @property
    def fill(self) -> str:
        """The marker's inside: open for what is apparent, so that it reads without colour."""
        return "white" if self.nature == "apparent" else self.colour


def budget_chart(outcome: Outcome, rate: str = "orbital_period_rate") -> Figure:
    """Draw the budget of a rate.

    Each number stands on an axis in powers of ten that runs both ways from its middle: triangles to the right are
    positive, triangles to the left negative. The small upright stroke stands at the size of the uncertainty itself, so
    that it can be held against the other rows; a thick bar is the 68.3 % interval, where it is wide enough to be seen.

    Parameters
    ----------
    outcome : Outcome
        Of `clockfall.analysis.budget.decay`, or any with a budget of `rate`.

    Raises
    ------
    BadInput
        The outcome has no budget of this rate.
    NoMatplotlib
        The extra is not installed.
    """
    rows, unit = _rows(outcome, rate)
    lowest, end = _decades(rows)
    with look():
        figure = sheet(WIDE, _AROUND + _ROW * (rows[-1].place + 1.0))
        axes = figure.add_subplot()
        _scale(axes, lowest, end, f"{_rate_words(rate)} [{unit}]")
        for row in rows:
            _draw(axes, row, 10.0**lowest)
        _threshold(axes, rows)
        _label_rows(axes, rows, unit)
        axes.set_title(f"{outcome.facts.get('system', '')}: {_rate_words(rate)} by effect".lstrip(": "))
        _legend(figure, rows)
    return figure


def _rate_words(rate: str) -> str:
    return f"rate of the {rate.removesuffix('_rate').replace('_', ' ')}"


def _rows(outcome: Outcome, rate: str) -> tuple[list[Row], str]:
    """Return the rows from top to bottom, and their unit."""
    parts = outcome.contributions(rate)
    totals = sums(outcome, rate)
    if not totals:
        raise BadInput(f"this result has no budget of {rate}; clockfall decay gives one")
    rows = [Row(f.whose, f.nature, Shown.finding(f), is_sum=False, place=i) for i, f in enumerate(parts)]
    gap = 0.6 if rows else 0.0
    for label, nature, finding in totals:
        rows.append(Row(label, nature, Shown.finding(finding), is_sum=True, place=len(rows) + gap))
    return rows, totals[0][2].shown_in


def _decades(rows: list[Row]) -> tuple[int, float]:
    """Return the power of ten about which the axis is folded, and where the axis ends."""
    sizes = [abs(size) for row in rows for size in (row.number.value, row.number.uncertainty)]
    shown = [size for size in sizes if math.isfinite(size) and size > 0.0] or [1.0]
    lowest = math.floor(math.log10(min(shown)) - 0.05)
    return max(lowest, math.floor(math.log10(max(shown))) - MOST_DECADES), 2.2 * max(shown)


def _scale(axes: Axes, lowest: int, end: float, label: str) -> None:
    """Set the two-sided axis in powers of ten, with a mark at each decade and a name at some."""
    highest = math.floor(math.log10(end))
    step = 1 + (highest - lowest) // 4
    named = [float(f"1e{power}") for power in range(highest, lowest, -step)]
    others = [size for power in range(highest, lowest - 1, -1) if (size := float(f"1e{power}")) not in named]
    axes.set_xscale("symlog", linthresh=10.0**lowest, linscale=0.5)
    axes.set_xlim(-end, end)
    axes.set_xticks([*(-size for size in named), 0.0, *reversed(named)])
    axes.set_xticks([*others, *(-size for size in others)], minor=True)
    axes.set_xlabel(f"{label}; powers of ten both ways, linear within 1e{lowest} of 0")
    axes.axvline(0.0, color=BLACK, linewidth=0.5)
    axes.spines[["top", "right", "left"]].set_visible(False)
    for size in (*named, *(-size for size in named)):
        axes.axvline(size, color=PALE, linewidth=0.4, zorder=0.5)


def _draw(axes: Axes, row: Row, smallest: float) -> None:
    """Draw one row: a thin line from the middle, the interval, the size of the uncertainty, the marker."""
    number, y = row.number, row.place
    if not math.isfinite(number.value):
        return
    sign = math.copysign(1.0, number.value)
    axes.plot([0.0, number.value], [y, y], color=row.colour, linewidth=0.7, solid_capstyle="butt")
    if number.uncertainty > 0.0:
        if _wide(number):
            interval = [number.value - number.minus, number.value + number.plus]
            axes.plot(interval, [y, y], color=row.colour, linewidth=2.6, solid_capstyle="butt")
        axes.plot([sign * number.uncertainty], [y], "|", color=row.colour, markersize=6.5, markeredgewidth=1.1)
    marker = "o" if abs(number.value) < smallest else ">" if sign > 0.0 else "<"
    axes.plot([number.value], [y], marker, color=row.colour, markerfacecolor=row.fill, markersize=4.8)


def _wide(number: Shown) -> bool:
    """Whether the interval shows beside the marker."""
    return number.uncertainty > _SEEN * abs(number.value)


def _threshold(axes: Axes, rows: list[Row]) -> None:
    """Shade what is smaller than the uncertainty of the measured rate, apparent parts taken off where they are."""
    measured = [row.number.uncertainty for row in rows if row.is_sum and row.label.startswith("measured")]
    if measured and measured[-1] > 0.0:
        axes.axvspan(-measured[-1], measured[-1], color=PALE, alpha=0.5, linewidth=0.0, zorder=0.4)


def _label_rows(axes: Axes, rows: list[Row], unit: str) -> None:
    """Write who stands in each row on the left, and the number on the right."""
    axes.set_ylim(rows[-1].place + 0.6, -0.6)
    axes.set_yticks([row.place for row in rows], [row.label for row in rows])
    axes.tick_params(axis="y", length=0.0)
    power = common_power([row.number for row in rows])
    numbers = axes.secondary_yaxis("right")
    numbers.set_yticks(
        [row.place for row in rows], aligned([row.number.text(power=power) for row in rows]), family="DejaVu Sans Mono"
    )
    numbers.tick_params(axis="y", length=0.0, labelsize=7.0)
    numbers.spines["right"].set_visible(False)
    heading = f"[1e{power} {unit}]" if power else f"[{unit}]"
    axes.annotate(
        heading, (1.0, 1.0), (4.0, 4.0), xycoords="axes fraction", textcoords="offset points", annotation_clip=False
    )


def _legend(figure: Figure, rows: list[Row]) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    def mark(marker: str, label: str, colour: str = GREY, fill: str = "") -> Line2D:
        return Line2D([], [], linestyle="", marker=marker, color=colour, markerfacecolor=fill or colour, label=label,
                      markersize=4.8)  # fmt: skip

    natures = {row.nature for row in rows if not row.is_sum}
    handles: list[Line2D | Patch] = []
    if "intrinsic" in natures:
        handles.append(mark("s", "intrinsic", BLUE))
    if "apparent" in natures:
        handles.append(mark("s", "apparent", VERMILION, "white"))
    handles += [
        mark("s", "sum or measurement", BLACK),
        mark("<", "negative"),
        mark(">", "positive"),
    ]
    if any(row.number.uncertainty > 0.0 for row in rows):
        handles.append(mark("|", "size of the uncertainty"))
    if any(_wide(row.number) for row in rows):
        handles.append(Line2D([], [], color=GREY, linewidth=2.6, label="68.3 % interval"))
    if any(row.label.startswith("measured") and row.number.uncertainty > 0.0 for row in rows):
        handles.append(Patch(color=PALE, alpha=0.5, label="below the measurement's uncertainty"))
    figure.legend(handles=handles, loc="outside lower left", ncols=4, columnspacing=1.4, handletextpad=0.5)
