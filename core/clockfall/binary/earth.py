"""Where the centre of the Earth is, and how it moves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from clockfall.binary.constants import LIGHT_SECONDS_PER_AU, SECONDS_PER_DAY
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import FloatArray, Range
from clockfall.errors import OutOfRange

EARTH_ACCURACY: Final = (
    "The Earth's place comes from a shortened planetary theory: light-travel times are right to 15 us rms, "
    "45 us at worst, in 1900-2100."
)
"""For outputs that rest on `earth_motion`."""

JULIAN_DATE_OF_MJD_ZERO: Final = 2_400_000.5
"""[d]. Exact by definition of the Modified Julian Date."""

# 100 Julian years on either side of J2000, MJD 51544.5: the span in which the theory was compared.
_SPAN = Range(at_least=15_019.5, at_most=88_069.5)


@dataclass(frozen=True, slots=True, eq=False)
class EarthMotion:
    """Place and velocity of the centre of the Earth, along the ICRS axes.

    Attributes
    ----------
    position : ndarray, shape (..., 3) [ls]
        From the barycentre of the solar system.
    velocity : ndarray, shape (..., 3) [c]
        Relative to that barycentre.
    from_sun : ndarray, shape (..., 3) [ls]
        From the centre of the Sun.
    """

    position: FloatArray
    velocity: FloatArray
    from_sun: FloatArray


def earth_motion(tdb: Epoch) -> EarthMotion:
    """Return where the centre of the Earth is.

    Parameters
    ----------
    tdb : Epoch, any shape
        From 1900 to 2100 (MJD 15019.5 to 88069.5).

    Returns
    -------
    EarthMotion, arrays of shape tdb.shape + (3,)

    Raises
    ------
    OutOfRange
        An instant outside 1900-2100. A ValueError.

    Notes
    -----
    Moisson & Bretagnon (2001), Celest. Mech. Dyn. Astron. 80, 205 (VSOP2000), in the shortened form of ERFA's `epv00`.
    Its documentation compares it with the ephemeris JPL DE405 over 1900-2100: the barycentric place is wrong by 4.6 km
    rms, 13.4 km at most (15 us and 45 us of light), the velocity by 1.4 mm/s rms, 4.9 mm/s at most; the heliocentric
    place by 3.7 km and 11.2 km. The errors double by 1800 and 2200 and grow fast beyond.
    """
    import erfa  # 10 ms, needed here alone

    check_span(tdb)
    heliocentric, barycentric = erfa.epv00(*two_part_julian_date(tdb))
    speed = LIGHT_SECONDS_PER_AU / SECONDS_PER_DAY
    return EarthMotion(
        position=_locked(barycentric["p"] * LIGHT_SECONDS_PER_AU),
        velocity=_locked(barycentric["v"] * speed),
        from_sun=_locked(heliocentric["p"] * LIGHT_SECONDS_PER_AU),
    )


def check_span(tdb: Epoch) -> None:
    """Raise OutOfRange naming the first instant outside 1900-2100."""
    mjd = np.asarray(tdb.to_mjd())
    outside = np.argwhere(~_SPAN.holds(mjd))
    if outside.size:
        first = tuple(int(i) for i in outside[0])
        where = f" at index {first}" if first else ""
        raise OutOfRange(
            "epoch",
            _SPAN.text("MJD", "d, TDB"),
            f"{float(mjd[first])!r}{where}",
            "the Earth's place is known to clockfall from 1900 to 2100 alone",
        )


def two_part_julian_date(epoch: Epoch) -> tuple[FloatArray, FloatArray]:
    """Return the Julian date [d] as two numbers whose sum it is, without loss; each of the epoch's shape."""
    return epoch.day.astype(np.float64) + JULIAN_DATE_OF_MJD_ZERO, epoch.fraction


def _locked(values: Any) -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    array.flags.writeable = False
    return array
