"""Coordinated universal time: what clocks on Earth show at a TDB instant."""

from __future__ import annotations

from typing import Final, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from clockfall.binary.constants import SECONDS_PER_DAY
from clockfall.binary.earth import check_span, two_part_julian_date
from clockfall.binary.epoch import Epoch, IntArray
from clockfall.binary.ranges import ANY, BoolArray, FloatArray, common_shape, real_array
from clockfall.errors import OutOfRange

Digits = Literal[0, 3, 6, 9]

TT_MINUS_TAI: Final = 32.184
"""[s]. Exact by IAU 1991 Resolution A4, recommendation IV."""

# MJD (UTC) from whose first second TAI - UTC has grown by one more second than before; it is 10 s from the first one
# on. The table that IERS publishes, as of its Bulletin C 72 (July 2026), which says that it expires on 2027-06-28. A
# copy of our own, since ERFA's can be changed by anyone in the process and does not say until when it holds.
_FIRST_TAI_MINUS_UTC = 10
_STEPS = np.array(
    [
        41317, 41499, 41683, 42048, 42413, 42778, 43144, 43509, 43874, 44239, 44786, 45151, 45516, 46247, 47161, 47892,
        48257, 48804, 49169, 49534, 50083, 50630, 51179, 53736, 54832, 56109, 57204, 57754,
    ],
    dtype=np.int64,
)  # fmt: skip
_KNOWN_UNTIL = 61584  # MJD, 2027-06-28

_OFFSETS = _FIRST_TAI_MINUS_UTC + np.arange(_STEPS.size, dtype=np.int64)
_DAY = int(SECONDS_PER_DAY)
_MJD_ZERO = np.datetime64("1858-11-17", "D")

FUTURE_UTC: Final = (
    f"Leap seconds are announced half a year ahead. They are known to clockfall until {_MJD_ZERO + _KNOWN_UNTIL}; "
    "UTC of later instants is given as if none were added."
)
"""For outputs that show UTC."""

_UNITS: Final[dict[int, Literal["s", "ms", "us", "ns"]]] = {0: "s", 3: "ms", 6: "us", 9: "ns"}


def tdb_minus_tt(tdb: Epoch) -> FloatArray:
    """Return TDB - TT at the centre of the Earth.

    Parameters
    ----------
    tdb : Epoch, any shape
        From 1900 to 2100.

    Returns
    -------
    ndarray, shape of the epoch [s]
        Right to 3 ns in 1950-2050. A numpy scalar if the shape is ().

    Raises
    ------
    OutOfRange
        An instant outside 1900-2100. A ValueError.

    Notes
    -----
    Fairhead & Bretagnon (1990), Astron. Astrophys. 229, 240; the accuracy is that stated by ERFA's `dtdb`.
    """
    import erfa  # 10 ms

    check_span(tdb)
    difference: FloatArray = erfa.dtdb(*two_part_julian_date(tdb), 0.0, 0.0, 0.0, 0.0)
    return difference


def tdb_minus_utc(tdb: Epoch) -> FloatArray:
    """Return TDB - UTC at the centre of the Earth; within a leap second, as if UTC went on counting.

    Parameters
    ----------
    tdb : Epoch, any shape
        From 1972 to 2100.

    Returns
    -------
    ndarray, shape of the epoch [s]
        After the last known leap second its value is kept. A numpy scalar if the shape is ().

    Raises
    ------
    OutOfRange
        An instant after 2100, or before 1972, when UTC was no whole number of seconds from TAI. A ValueError.
    """
    tdb_minus_tai = TT_MINUS_TAI + tdb_minus_tt(tdb)
    tai = tdb.plus_seconds(-tdb_minus_tai)
    tai_minus_utc, _ = _tai_minus_utc_and_leap(tai.day, np.floor(tai.fraction * _DAY).astype(np.int64))
    difference: FloatArray = tdb_minus_tai + tai_minus_utc
    return difference


def leap_seconds_known(tdb: Epoch) -> BoolArray:
    """Return where all leap seconds up to an instant are known; shape of the epoch [bool]."""
    known: BoolArray = np.asarray(tdb.day < _KNOWN_UNTIL)
    return known[()]


def utc_text(tdb: Epoch, *, digits: Digits = 6, tdb_minus_tt_here: ArrayLike | None = None) -> NDArray[np.str_]:
    """Return UTC as text, ISO 8601, for instance ``2016-12-31T23:59:60.250000Z``.

    Parameters
    ----------
    tdb : Epoch, any shape
        From 1972 to 2100.
    digits : 0, 3, 6 or 9
        Decimals of the second, correctly rounded.
    tdb_minus_tt_here : array_like, broadcasts with tdb [s], optional
        TDB - TT where the clock stands; that of the Earth's centre where None. On the ground it differs by 2 us at
        most.

    Returns
    -------
    ndarray of str, common shape of the arguments
        For an instant at the barycentre: what clocks on Earth show at the same TDB, no light-travel time added. See
        `leap_seconds_known` for how far it is sure.

    Raises
    ------
    OutOfRange
        An instant outside 1972-2100, another number of digits, or shapes that do not broadcast together. A ValueError.
    """
    if digits not in _UNITS:
        raise OutOfRange("digits", "0, 3, 6 or 9", repr(digits))
    check_span(tdb)
    late = tdb_minus_tt(tdb) if tdb_minus_tt_here is None else real_array("TDB - TT", tdb_minus_tt_here)
    ANY.check("TDB - TT", late, "s")
    common_shape(epoch=tdb.shape, tdb_minus_tt=late.shape)
    return _text_of_tai(tdb.plus_seconds(-TT_MINUS_TAI - late), digits)


def _text_of_tai(tai: Epoch, digits: Digits) -> NDArray[np.str_]:
    """Round first and look for leap seconds then, so that a second rounded up into one is shown as such."""
    unit = _UNITS[digits]
    ticks_per_second = 10**digits
    # Ticks since the start of the day: below 2**53, hence exact.
    ticks = np.rint(tai.fraction * (_DAY * ticks_per_second)).astype(np.int64)
    whole, part = np.divmod(ticks, ticks_per_second)
    offset, in_leap = _tai_minus_utc_and_leap(tai.day, whole)
    # A leap second is counted as the second before it, and renamed below.
    second = tai.day * _DAY + whole - offset - in_leap
    instants = _MJD_ZERO.astype(f"datetime64[{unit}]") + (second * ticks_per_second + part).astype(
        f"timedelta64[{unit}]"
    )
    text = np.datetime_as_string(instants, unit=unit, timezone="UTC")
    if not in_leap.any():
        return np.asarray(text)[()]
    return np.where(in_leap, np.char.replace(text, ":59:59", ":59:60"), text)[()]


def _tai_minus_utc_and_leap(day: IntArray, second_of_day: IntArray) -> tuple[IntArray, BoolArray]:
    """Return TAI - UTC [s] and whether an instant, in whole days (MJD) and seconds of TAI, lies in a leap second.

    With TAI - UTC = A before a step at the start of UTC day D and A + 1 after it, the leap second lasts in TAI from
    86400 D + A to 86400 D + A + 1, and is counted to what is before it.
    """
    now = day * _DAY + second_of_day
    steps = _STEPS * _DAY + _OFFSETS
    if (now < steps[0]).any():
        raise OutOfRange(
            "epoch",
            "an instant from 1972-01-01 on (MJD 41317, UTC)",
            f"MJD {float(now.min()) / _DAY:.6f}",
            "only since then has UTC kept whole seconds from TAI",
        )
    index = np.searchsorted(steps, now, side="right")
    following = np.append(steps, np.iinfo(np.int64).max)[index]
    return _OFFSETS[index - 1], now == following - 1
