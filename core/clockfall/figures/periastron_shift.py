"""How far the passages of periastron have slid against a clock of constant period, and how well theory follows."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from clockfall.analysis.budget import DECAY
from clockfall.analysis.outcome import Drawn, Finding, Outcome
from clockfall.binary.constants import SECONDS_PER_YEAR
from clockfall.binary.ranges import FloatArray
from clockfall.errors import BadInput
from clockfall.figures.style import BLACK, BLUE, NARROW, SKY, VERMILION, look, open_frame, sheet

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_HEIGHT: Final = 95.0  # mm
_MOMENTS: Final = 301
_J2000_MJD: Final = 51544.5
_DAYS_PER_YEAR: Final = 365.25


@dataclass(frozen=True, slots=True)
class TimedShifts:
    """Shifts that were timed.

    Attributes
    ----------
    year : array, shape (points,) [Julian years]
        When.
    shift, uncertainty : array, shape (points,) [s]
        Against a constant period, and its standard uncertainty.
    """

    year: FloatArray
    shift: FloatArray
    uncertainty: FloatArray

    def __post_init__(self) -> None:
        shapes = {np.shape(array) for array in (self.year, self.shift, self.uncertainty)}
        if len(shapes) != 1 or len(next(iter(shapes))) != 1:
            raise BadInput(f"year, shift and uncertainty: expected one shape (points,), found {sorted(shapes)}")
        if not all(np.isfinite(array).all() for array in (self.year, self.shift, self.uncertainty)):
            raise BadInput("year, shift and uncertainty: expected finite numbers")


def shift_of(rate: float | FloatArray, period: float, years: FloatArray) -> FloatArray:
    """Return the shift of periastron [s] after `years` [Julian years] of a constant rate [s/s]; period [s].

    delta_t = (1/2) (P_b rate/P_b) (t - t_0)^2: periastron comes early, and delta_t is negative, where the orbit decays.
    """
    elapsed = years * SECONDS_PER_YEAR
    return np.asarray(0.5 * (rate / period) * elapsed**2, dtype=np.float64)


def julian_year(mjd: float) -> float:
    """Return the Julian year of a Modified Julian Date [d]."""
    return 2000.0 + (mjd - _J2000_MJD) / _DAYS_PER_YEAR


def periastron_shift(
    outcome: Outcome, period: float, years: tuple[float, float], timed: TimedShifts | None = None
) -> Figure:
    """Draw the shift that the rate of the orbital period adds up to, and below it what differs from the prediction.

    The prediction is that of what is seen, intrinsic and apparent together.

    Parameters
    ----------
    outcome : Outcome
        Of `clockfall.analysis.budget.decay`; its epoch is where the shift is zero.
    period : float [s]
        The orbital period at that epoch.
    years : pair of float [Julian years]
        From when to when.
    timed : TimedShifts, optional
        Points with error bars.

    Raises
    ------
    BadInput
        The outcome has no epoch or no predicted rate, or the period or the years make no sense.
    NoMatplotlib
        The extra is not installed.
    """
    start = _start(outcome, period, years)
    predicted, measured = _predicted(outcome), outcome.get(DECAY, "measured")
    year = np.linspace(*years, _MOMENTS)
    with look():
        from matplotlib.ticker import MaxNLocator

        figure = sheet(NARROW, _HEIGHT)
        above, below = figure.subplots(2, 1, sharex=True, height_ratios=(1.7, 1.0))
        for axes, reference in ((above, 0.0), (below, predicted.central)):
            _draw_curves(axes, predicted, measured, reference, lambda rate: shift_of(rate, period, year - start), year)
            _draw_points(axes, timed, reference, period, start)
            axes.yaxis.set_major_locator(MaxNLocator(7 if axes is above else 4, steps=[1, 2, 5, 10]))
            open_frame(axes)
        above.set_title(outcome.facts.get("system", ""))
        above.set_ylabel("shift of periastron [s]")
        above.legend(loc="best")
        below.set_ylabel("minus the\nprediction [s]")
        below.set_xlabel("Julian year [yr]")
        below.set_xlim(*years)
        figure.align_ylabels()
    return figure


def _start(outcome: Outcome, period: float, years: tuple[float, float]) -> float:
    """Return the Julian year in which the shift is zero, all input checked."""
    epoch = outcome.facts.get("epoch_mjd_tdb")
    if epoch is None:
        raise BadInput("the shift of periastron needs periastron_epoch in the system file")
    if not 0.0 < period < np.inf:
        raise BadInput(f"period: expected a positive number [s], found {period}")
    if not (np.isfinite(years).all() and years[0] < years[1]):
        raise BadInput(f"years: expected the earlier and the later one, found {years[0]} and {years[1]}")
    return julian_year(float(epoch))


def _predicted(outcome: Outcome) -> Drawn:
    """Return the predicted rate as seen [s/s]: the intrinsic part and the apparent one."""
    intrinsic, apparent = outcome.get(DECAY, "predicted_intrinsic"), outcome.get(DECAY, "apparent")
    if intrinsic is None:
        raise BadInput(f"this result predicts no {DECAY}; clockfall decay does where an effect contributes to it")
    if apparent is None:
        return intrinsic.drawn
    return Drawn(intrinsic.drawn.central + apparent.drawn.central, intrinsic.drawn.draws + apparent.drawn.draws)


def _draw_curves(
    axes: Axes,
    predicted: Drawn,
    measured: Finding | None,
    reference: float,
    shift: Callable[[float], FloatArray],
    year: FloatArray,
) -> None:
    """Draw the predicted and the measured parabola with their bands, less that of the `reference` rate."""
    axes.plot(year, shift(predicted.central - reference), color=BLUE, label="predicted")
    if predicted.interval is not None:
        low, high = (shift(rate - reference) for rate in predicted.interval)
        axes.fill_between(
            year, low, high, color=SKY, alpha=0.45, linewidth=0.0, zorder=1.0, label="  its 68.3 % interval"
        )
    if measured is None:
        return
    axes.plot(
        year, shift(measured.drawn.central - reference), color=VERMILION, dashes=(4, 1.6), label="by the measured rate"
    )
    for edge, label in zip(measured.drawn.interval or (), ("  its 68.3 % interval", ""), strict=False):
        axes.plot(year, shift(edge - reference), color=VERMILION, linewidth=0.5, dashes=(1.5, 1.5), label=label)


def _draw_points(axes: Axes, timed: TimedShifts | None, reference: float, period: float, start: float) -> None:
    if timed is None:
        return
    axes.errorbar(
        timed.year,
        timed.shift - shift_of(reference, period, timed.year - start),
        timed.uncertainty,
        fmt="o",
        color=BLACK,
        markersize=2.4,
        elinewidth=0.6,
        label="timed",
    )
