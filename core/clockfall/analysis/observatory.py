"""When a signal that passes the solar system's barycentre is seen on Earth, and how high its source then stands."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from clockfall.analysis.utc import Digits, leap_seconds_known, tdb_minus_tt, tdb_minus_utc, utc_text
from clockfall.binary.constants import LIGHT_SECONDS_PER_AU, SOLAR_RADIUS, SPEED_OF_LIGHT, T_SUN
from clockfall.binary.earth import earth_motion, two_part_julian_date
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import BoolArray, FloatArray, Range, common_shape, real_array
from clockfall.binary.sky import equatorial_direction

EARTH_ROTATION: Final = (
    "The turn of the Earth is taken from UTC as if it were UT1. While they differ by less than 0.9 s, elevations are "
    "wrong by less than 0.004 deg and arrivals by 1.4 us; each second more adds as much again. The motion of the pole "
    "(0.0002 deg) and refraction (0.6 deg at the horizon, 0.02 deg at 45 deg) are left out."
)
"""For outputs that rest on an observatory."""

LEFT_OUT: Final = (
    "The source is taken to be far away: the curvature of the wavefront (up to 1.2 us for a source at 1 kpc, as its "
    "inverse distance) and the Shapiro delays of the planets (below 0.2 us) are left out; that of the Sun is included."
)
"""For outputs that show arrivals on Earth."""

_TURN = 2.0 * math.pi
_LONGITUDE = Range(at_least=-_TURN, at_most=_TURN)
_LATITUDE = Range(at_least=-math.pi / 2, at_most=math.pi / 2)
_HEIGHT = Range(at_least=-1e4, at_most=1e5)
_RIGHT_ASCENSION = Range(at_least=-_TURN, at_most=_TURN)
_DECLINATION = _LATITUDE
_WGS84 = 1  # ERFA's number for it
_SOLAR_RADIUS = SOLAR_RADIUS / SPEED_OF_LIGHT


@dataclass(frozen=True, slots=True)
class Observatory:
    """A place that turns with the Earth.

    Parameters
    ----------
    longitude : float [rad]
        East of Greenwich; from -2 pi to 2 pi.
    latitude : float [rad]
        Geodetic, north positive; from -pi/2 to pi/2.
    height : float [m]
        Above the ellipsoid WGS84; from -1e4 to 1e5.

    Raises
    ------
    OutOfRange
        A number outside its range. A ValueError.
    """

    longitude: float
    latitude: float
    height: float = 0.0

    def __post_init__(self) -> None:
        _LONGITUDE.check("longitude", real_array("longitude", self.longitude), "rad")
        _LATITUDE.check("latitude", real_array("latitude", self.latitude), "rad")
        _HEIGHT.check("height", real_array("height", self.height), "m")


@dataclass(frozen=True, slots=True, eq=False)
class Horizontal:
    """Where a source stands in the sky of an observatory; no refraction.

    Attributes
    ----------
    elevation : ndarray, common shape of instants and directions [rad]
        Above the plane normal to the ellipsoid's vertical; negative below the horizon.
    azimuth : ndarray, the same shape [rad]
        From north over east, in [0, 2 pi).
    """

    elevation: FloatArray
    azimuth: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Seen:
    """When a signal reaches an observatory, or the centre of the Earth.

    Attributes
    ----------
    tdb : Epoch
        Arrivals.
    utc : ndarray of str, shape of tdb
        The same instants on the observatory's clocks, ISO 8601.
    leap_seconds_known : ndarray of bool, shape of tdb
        False where leap seconds may yet be added, so that `utc` is provisional (see `utc.FUTURE_UTC`).
    light_travel_time : ndarray, shape of tdb [s]
        TDB of the passage at the barycentre less TDB of the arrival.
    behind_sun : ndarray of bool, shape of tdb
        True where the Sun's disc hides the source; the Shapiro delay is then that at its limb.
    horizontal : Horizontal, arrays of the shape of tdb, or None
        None at the centre of the Earth.
    """

    tdb: Epoch
    utc: NDArray[np.str_]
    leap_seconds_known: BoolArray
    light_travel_time: FloatArray
    behind_sun: BoolArray
    horizontal: Horizontal | None


def as_seen(
    at_barycentre: Epoch,
    right_ascension: ArrayLike,
    declination: ArrayLike,
    *,
    at: Observatory | None,
    digits: Digits = 6,
) -> Seen:
    """Return when signals that pass the barycentre of the solar system are seen on Earth.

    Parameters
    ----------
    at_barycentre : Epoch, any shape
        TDB of the passage at the barycentre, the Sun's Shapiro delay taken off; from 1972 to 2100.
    right_ascension, declination : array_like, broadcast with the epochs [rad]
        ICRS, at the instants. -2 pi <= right_ascension <= 2 pi, -pi/2 <= declination <= pi/2.
    at : Observatory or None
        None for the centre of the Earth.
    digits : 0, 3, 6 or 9
        Decimals of the seconds of UTC.

    Returns
    -------
    Seen, arrays of the common shape of instants and directions
        The arrival solves its equation to 1e-9 s; what limits its truth is in `earth.EARTH_ACCURACY`, `LEFT_OUT` and,
        at an observatory, `EARTH_ROTATION`.

    Raises
    ------
    OutOfRange
        A number outside its range, or shapes that do not broadcast together. A ValueError.
    """
    n = _direction(right_ascension, declination)
    shape = common_shape(epochs=at_barycentre.shape, directions=n.shape[:-1])
    barycentric = at_barycentre.broadcast_to(shape)
    # Two steps of Newton's method. The first is wrong by half the Earth's acceleration times (500 s)^2, 3e-6 s, the
    # second by less than the resolution of an Epoch; in 3e-6 s nothing else of `here` changes that can be told.
    here = _stand(barycentric, at)
    arrival = _better_arrival(barycentric, barycentric, here, n)
    here = _stand(arrival, at)
    arrival = _better_arrival(barycentric, arrival, here, n)
    return Seen(
        tdb=arrival,
        utc=utc_text(arrival, digits=digits, tdb_minus_tt_here=here.tdb_minus_tt),
        leap_seconds_known=leap_seconds_known(arrival),
        light_travel_time=barycentric.seconds_since(arrival),
        behind_sun=_behind_sun(here.from_sun, n),
        horizontal=_horizontal(here, n) if isinstance(here, _Ground) else None,
    )


def light_travel_time(
    arrival: Epoch, right_ascension: ArrayLike, declination: ArrayLike, *, at: Observatory | None
) -> FloatArray:
    """Return TDB of a signal's passage at the barycentre less TDB of its arrival on Earth.

    Parameters
    ----------
    arrival : Epoch, any shape
        TDB of the arrival; from 1972 to 2100, for the centre of the Earth from 1900.
    right_ascension, declination : array_like, broadcast with the epochs [rad]
        ICRS, at the instants. -2 pi <= right_ascension <= 2 pi, -pi/2 <= declination <= pi/2.
    at : Observatory or None
        None for the centre of the Earth.

    Returns
    -------
    ndarray, common shape of the arguments [s]
        n . r less the Sun's Shapiro delay; behind the Sun's disc the Shapiro delay is that at its limb.

    Raises
    ------
    OutOfRange
        A number outside its range, or shapes that do not broadcast together. A ValueError.

    Notes
    -----
    The delay -2 T_sun ln((|s| + n . s)/1 au), with s from the Sun to the observer: I. I. Shapiro, Phys. Rev. Lett. 13,
    789 (1964), for a source so far away that its distance adds a constant alone; that constant is dropped, which fixes
    what is called the instant at the barycentre. It runs from -7 us opposite the Sun to 113 us at the Sun's limb.
    """
    n = _direction(right_ascension, declination)
    common_shape(epochs=arrival.shape, directions=n.shape[:-1])
    return _light_travel_time(_stand(arrival, at), n)


def horizontal(arrival: Epoch, right_ascension: ArrayLike, declination: ArrayLike, *, at: Observatory) -> Horizontal:
    """Return where a source stands in the sky, with the aberration of light and without refraction.

    Parameters
    ----------
    arrival : Epoch, any shape
        TDB at the observatory, from 1972 to 2100.
    right_ascension, declination : array_like, broadcast with the epochs [rad]
        ICRS, at the instants. -2 pi <= right_ascension <= 2 pi, -pi/2 <= declination <= pi/2.
    at : Observatory
        The place.

    Returns
    -------
    Horizontal, arrays of the common shape of instants and directions
        Right to 0.004 deg while UT1 is within 0.9 s of UTC; see `EARTH_ROTATION`.

    Raises
    ------
    OutOfRange
        A number outside its range, or shapes that do not broadcast together. A ValueError.
    """
    n = _direction(right_ascension, declination)
    common_shape(epochs=arrival.shape, directions=n.shape[:-1])
    return _horizontal(_ground(arrival, at), n)


@dataclass(frozen=True, slots=True, eq=False)
class _Stand:
    """Where an observer is at some instants; arrays of the instants' shape, vectors with (3,) appended, ICRS axes.

    `position` [ls] and `velocity` [c] are barycentric, `from_sun` [ls] is from the Sun's centre; `tdb_minus_tt` [s].
    """

    position: FloatArray
    velocity: FloatArray
    from_sun: FloatArray
    tdb_minus_tt: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class _Ground(_Stand):
    """The same on the ground.

    `to_meridian`, with (3, 3) appended, turns ICRS axes to those of the observatory's meridian: towards where its plane
    meets the equator, east, and along the Earth's axis.
    """

    to_meridian: FloatArray
    latitude: float


def _stand(tdb: Epoch, at: Observatory | None) -> _Stand:
    if at is not None:
        return _ground(tdb, at)
    earth = earth_motion(tdb)
    return _Stand(earth.position, earth.velocity, earth.from_sun, tdb_minus_tt(tdb))


def _ground(tdb: Epoch, at: Observatory) -> _Ground:
    """Turn the ground by precession and nutation (IAU 2006/2000B, right to 1 mas) and by the Earth's angle."""
    import erfa  # 10 ms

    earth = earth_motion(tdb)
    tt = tdb.plus_seconds(-tdb_minus_tt(tdb))
    ut = tdb.plus_seconds(-tdb_minus_utc(tdb))
    angle = erfa.era00(*two_part_julian_date(ut))
    to_intermediate = erfa.c2i00b(*two_part_julian_date(tt))
    pv = erfa.trxpv(to_intermediate, erfa.pvtob(at.longitude, at.latitude, at.height, 0.0, 0.0, 0.0, angle))
    offset = pv["p"] / SPEED_OF_LIGHT
    x, y, z = erfa.gd2gc(_WGS84, at.longitude, at.latitude, at.height) / 1e3  # km
    return _Ground(
        position=earth.position + offset,
        velocity=earth.velocity + pv["v"] / SPEED_OF_LIGHT,
        from_sun=earth.from_sun + offset,
        tdb_minus_tt=erfa.dtdb(*two_part_julian_date(tdb), ut.fraction, at.longitude, math.hypot(x, y), z),
        to_meridian=erfa.rz(angle + at.longitude, to_intermediate),
        latitude=at.latitude,
    )


def _direction(right_ascension: ArrayLike, declination: ArrayLike) -> FloatArray:
    """Return the unit vector to the source, ICRS axes; common shape of both with (3,) appended [1]."""
    alpha = real_array("right ascension", right_ascension)
    delta = real_array("declination", declination)
    _RIGHT_ASCENSION.check("right ascension", alpha, "rad")
    _DECLINATION.check("declination", delta, "rad")
    common_shape(right_ascension=alpha.shape, declination=delta.shape)
    return np.stack(np.broadcast_arrays(*equatorial_direction(alpha, delta)), axis=-1)


def _along(n: FloatArray, vector: FloatArray) -> FloatArray:
    projection: FloatArray = np.einsum("...i,...i->...", n, vector)
    return projection[()]


def _better_arrival(barycentric: Epoch, arrival: Epoch, here: _Stand, n: FloatArray) -> Epoch:
    late = barycentric.seconds_since(arrival) - _light_travel_time(here, n)
    return arrival.plus_seconds(late / (1.0 + _along(n, here.velocity)))


def _light_travel_time(here: _Stand, n: FloatArray) -> FloatArray:
    return _along(n, here.position) - _shapiro_delay(here.from_sun, n)


def _shapiro_delay(s: FloatArray, n: FloatArray) -> FloatArray:
    """Return the Sun's Shapiro delay [s], up to a constant; behind the Sun, that at its limb."""
    r = np.sqrt(_along(s, s))
    towards = _along(n, s)
    b = np.maximum(_impact_parameter(s, n), _SOLAR_RADIUS)
    # r + n . s cancels where the Sun lies before the source; it is b^2/(r - n . s) as well there.
    reach = np.where(towards < 0.0, b**2 / (r + np.abs(towards)), r + towards)
    return (-2.0 * T_SUN * np.log(reach / LIGHT_SECONDS_PER_AU))[()]


def _behind_sun(s: FloatArray, n: FloatArray) -> BoolArray:
    hidden = (_along(n, s) < 0.0) & (_impact_parameter(s, n) < _SOLAR_RADIUS)
    return np.asarray(hidden)[()]


def _impact_parameter(s: FloatArray, n: FloatArray) -> FloatArray:
    """Return how far from the Sun's centre the straight ray passes, or would [ls]."""
    across = np.cross(n, s)
    return np.sqrt(_along(across, across))


def _horizontal(here: _Ground, n: FloatArray) -> Horizontal:
    # Aberration to first order in v/c; the second is 1e-8 rad.
    seen = np.einsum("...ij,...j->...i", here.to_meridian, n + here.velocity)
    x, y, z = np.moveaxis(seen, -1, 0)
    sine, cosine = math.sin(here.latitude), math.cos(here.latitude)
    up = x * cosine + z * sine
    north = z * cosine - x * sine
    azimuth = np.mod(np.arctan2(y, north), _TURN)
    return Horizontal(
        elevation=np.arctan2(up, np.hypot(y, north)),
        # A negative angle below half a unit in the last place of 2 pi rounds to 2 pi.
        azimuth=np.where(azimuth < _TURN, azimuth, 0.0)[()],
    )
