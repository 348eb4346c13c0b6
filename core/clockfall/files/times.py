"""Times as text or in files: Modified Julian Dates of TDB, with any number of digits, or ISO 8601."""

from __future__ import annotations

import re
from collections.abc import Sequence
from datetime import date
from decimal import Decimal, InvalidOperation
from pathlib import Path
from typing import Final

import numpy as np

from clockfall.binary.epoch import Epoch
from clockfall.errors import BadInput

EARLIEST: Final = -700_000
LATEST: Final = 3_000_000
"""Days within which a date is one; a Julian Date, not modified, lies beyond most of them and gets a hint."""

_MJD_OF_1858: Final = date(1858, 11, 17).toordinal()
_ISO: Final = re.compile(
    r"(\d{4})-(\d{2})-(\d{2})(?:[T ](\d{2}):(\d{2})(?::(\d{2}(?:\.\d*)?))?)?\s*(Z|[+-]\d{2}:?\d{2}|UTC)?"
)


class BadTime(BadInput):
    """A text is no time.

    Attributes
    ----------
    text, hint : str
        What was found, and how to mend it.
    """

    def __init__(self, text: str, where: str = "", hint: str = "") -> None:
        self.text, self.hint = text, hint
        place = f"{where}: " if where else ""
        super().__init__(
            f"{place}expected a time as MJD (TDB), for instance 57241.118205, or 2015-08-07T02:50:13, found {text!r}"
            + (f"; {hint}" if hint else "")
        )


def parse_time(text: str, where: str = "") -> Epoch:
    """Read one instant, TDB; shape (). A Modified Julian Date keeps all its digits.

    Raises
    ------
    BadTime
        It is neither a date nor a number, names another time scale, or looks like a Julian Date.
    """
    stripped = text.strip()
    iso = _ISO.fullmatch(stripped)
    if iso:
        return _from_iso(stripped, iso, where)
    try:
        number = Decimal(stripped)
    except InvalidOperation:
        raise BadTime(text, where) from None
    if not number.is_finite():
        raise BadTime(text, where, "it is not finite")
    if 2_300_000 < number < 2_600_000:
        raise BadTime(text, where, "it looks like a Julian Date; subtract 2400000.5")
    if not EARLIEST <= number <= LATEST:
        raise BadTime(text, where, f"Modified Julian Dates lie between {EARLIEST} and {LATEST} here")
    return Epoch.from_decimal(number)


def _from_iso(text: str, iso: re.Match[str], where: str) -> Epoch:
    year, month, day, hour, minute, second, zone = iso.groups()
    if zone:
        raise BadTime(text, where, "times are TDB, which runs 69 s ahead of UTC; convert it and leave the zone out")
    try:
        days = date(int(year), int(month), int(day)).toordinal() - _MJD_OF_1858
    except ValueError as error:
        raise BadTime(text, where, str(error)) from None
    seconds = Decimal(second or 0) + 60 * int(minute or 0) + 3600 * int(hour or 0)
    if int(hour or 0) > 23 or int(minute or 0) > 59 or Decimal(second or 0) >= 60:
        raise BadTime(text, where, "hours go to 23, minutes and seconds to 59")
    return Epoch.from_decimal(Decimal(days) + seconds / 86400)


def parse_times(texts: Sequence[str], where: str = "") -> Epoch:
    """Read many instants; shape (times,)."""
    each = [parse_time(text, where) for text in texts]
    return Epoch(
        np.array([int(epoch.day) for epoch in each], dtype=np.int64), np.array([float(e.fraction) for e in each])
    )


def read_times(path: Path) -> Epoch:
    """Read times from a file; shape (times,).

    Text: one time in a line, lines that begin with # are comments. HDF5: ``time_day`` (whole numbers) and
    ``time_fraction``, as in clockfall's own results.

    Raises
    ------
    BadInput
        It cannot be read, or a line is no time: the first few are told with their numbers.
    """
    try:
        with path.open("rb") as file:
            head = file.read(8)
    except OSError as error:
        raise BadInput(f"{path}: cannot be read ({error.strerror})") from error
    return _from_hdf5(path) if head == b"\x89HDF\r\n\x1a\n" else _from_text(path)


def _from_text(path: Path) -> Epoch:
    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise BadInput(f"{path}: is neither text nor HDF5 ({error})") from error
    texts, faults = [], []
    for number, line in enumerate(lines, start=1):
        body = line.split("#")[0].strip()
        if body:
            try:
                texts.append(parse_time(body, f"line {number}"))
            except BadTime as error:
                faults.append(str(error))
    if faults:
        more = f"\n  and {len(faults) - 5} more" if len(faults) > 5 else ""
        raise BadInput(f"{path}: {len(faults)} faults\n  " + "\n  ".join(faults[:5]) + more)
    return Epoch(
        np.array([int(epoch.day) for epoch in texts], dtype=np.int64), np.array([float(e.fraction) for e in texts])
    )


def _from_hdf5(path: Path) -> Epoch:
    import h5py  # 0.2 s, needed only with such a file

    try:
        with h5py.File(path, "r") as file:
            day, fraction = (np.asarray(file[name][()]) for name in ("time_day", "time_fraction"))
    except (OSError, KeyError, ValueError, TypeError, RuntimeError) as error:
        raise BadInput(f"{path}: expected time_day and time_fraction ({error})") from error
    if day.dtype.kind not in "iu" or day.ndim != 1 or day.shape != fraction.shape:
        raise BadInput(f"{path}: expected time_day as whole numbers and time_fraction of the same length")
    return Epoch(day.astype(np.int64), fraction)
