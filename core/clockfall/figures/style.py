"""The look that the pictures share: sizes, type, colours; and the door to matplotlib, which is an optional extra.

The eight colours were chosen by M. Okabe and K. Ito (2002, "Color Universal Design") to be told apart by the
colour-blind. Their greys differ too little for print, so each picture also varies line, marker or fill.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, Final

from clockfall.errors import ClockfallError

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

NARROW: Final = 85.0
WIDE: Final = 175.0
"""Widths of one column and of two [mm]."""

_MM_PER_INCH: Final = 25.4

BLACK: Final = "#000000"
GREY: Final = "#6e6e6e"
PALE: Final = "#dcdcdc"
BLUE: Final = "#0072b2"
VERMILION: Final = "#d55e00"
SKY: Final = "#56b4e9"
PURPLE: Final = "#cc79a7"
ORANGE: Final = "#e69f00"
GREEN: Final = "#009e73"

SERIES: Final = (
    (BLUE, (0, ())),
    (VERMILION, (0, (6, 1.5))),
    (GREEN, (0, (1.2, 1.2))),
    (PURPLE, (0, (6, 1.5, 1.2, 1.5))),
    (ORANGE, (0, (3, 1.2))),
    (SKY, (0, (6, 1.5, 1.2, 1.5, 1.2, 1.5))),
)
"""Colour and dashes of each curve in turn; with more curves than these the colours repeat, and the numbers tell."""

_LOOK: Final[dict[str, Any]] = {
    "font.family": "DejaVu Sans",  # comes with matplotlib, so the same everywhere
    "font.size": 8.0,
    "mathtext.fontset": "dejavusans",
    "axes.titlesize": 9.0,
    "axes.titlelocation": "left",
    "axes.labelsize": 8.0,
    "axes.linewidth": 0.5,
    "axes.formatter.useoffset": False,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "xtick.major.width": 0.5,
    "ytick.major.width": 0.5,
    "xtick.minor.width": 0.4,
    "ytick.minor.width": 0.4,
    "xtick.major.size": 3.0,
    "ytick.major.size": 3.0,
    "xtick.minor.size": 1.6,
    "ytick.minor.size": 1.6,
    "legend.fontsize": 7.5,
    "legend.frameon": False,
    "lines.linewidth": 1.0,
    "hatch.linewidth": 0.4,
    "hatch.color": GREY,
    "figure.dpi": 100.0,
    "savefig.dpi": 300.0,
    "svg.hashsalt": "clockfall",
    "svg.fonttype": "path",
    "pdf.fonttype": 42,
}


class NoMatplotlib(ClockfallError):
    """Matplotlib, which draws the pictures, is not installed."""

    def __init__(self) -> None:
        super().__init__("pictures need matplotlib, which is not installed; pip install 'clockfall[figures]'")


@contextmanager
def look() -> Iterator[None]:
    """Set the shared look while drawing and saving; whatever the user has set otherwise is back afterwards."""
    try:
        import matplotlib  # an extra, and 0.3 s
    except ImportError as error:
        raise NoMatplotlib from error
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        settings: Any = matplotlib.rcParams
        settings.update(_LOOK)
        yield


def sheet(width: float, height: float) -> Figure:
    """Return an empty figure that lays itself out; width and height in mm. To be called within `look`."""
    from matplotlib.figure import Figure  # as above

    return Figure(figsize=(width / _MM_PER_INCH, height / _MM_PER_INCH), layout="constrained")


def open_frame(axes: Axes) -> None:
    """Leave the lower and left edge of a frame alone."""
    axes.spines[["top", "right"]].set_visible(False)
