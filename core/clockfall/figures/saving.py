"""Figures into files: SVG, PDF or PNG, the same bytes each time."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING, Final

from clockfall.errors import BadInput
from clockfall.figures.style import look
from clockfall.files.whole import check_target, written_whole

if TYPE_CHECKING:
    from matplotlib.figure import Figure

WITHOUT_DATES: Final[dict[str, dict[str, None]]] = {
    ".svg": {"Date": None},
    ".pdf": {"CreationDate": None},
    ".png": {"Software": None},
}
"""Suffix -> what is left out of the file's metadata."""


class UnknownFormat(BadInput):
    """A picture was asked for in a format that is not written.

    Attributes
    ----------
    file, suffix : str
        Which, and its suffix ("" for none).
    """

    def __init__(self, path: Path) -> None:
        self.file = os.fspath(path)
        self.suffix = path.suffix
        found = f"the suffix {path.suffix!r}" if path.suffix else "no suffix"
        super().__init__(f"{path}: expected one of {', '.join(WITHOUT_DATES)}, found {found}")


def check_picture(path: Path, *, overwrite: bool = False) -> None:
    """Raise where a picture could not be written to `path`; called before long work, and again by `save`.

    Raises
    ------
    UnknownFormat
        Its suffix is none of .svg, .pdf, .png.
    CannotWrite
        It exists (without `overwrite`), is a directory, or lies in no directory.
    """
    if path.suffix.lower() not in WITHOUT_DATES:
        raise UnknownFormat(path)
    check_target(path, overwrite=overwrite)


def save(figure: Figure, path: Path, *, overwrite: bool = False) -> None:
    """Write a figure whole or not at all, in the format that the suffix names.

    Raises
    ------
    UnknownFormat, CannotWrite
        As `check_picture` raises them, or where the system refuses.
    """
    check_picture(path, overwrite=overwrite)
    suffix = path.suffix.lower()
    with written_whole(path, overwrite=overwrite) as unfinished, look():
        figure.savefig(unfinished, format=suffix[1:], metadata=WITHOUT_DATES[suffix])
