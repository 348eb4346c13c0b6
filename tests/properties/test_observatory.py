"""Where the Earth and an observatory are, what clocks there show, and when a signal arrives."""

from __future__ import annotations

import math
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import minimize_scalar

from clockfall.analysis.observatory import (
    EARTH_ROTATION,
    LEFT_OUT,
    Observatory,
    as_seen,
    horizontal,
    light_travel_time,
)
from clockfall.analysis.utc import FUTURE_UTC, leap_seconds_known, tdb_minus_tt, tdb_minus_utc, utc_text
from clockfall.binary.earth import EARTH_ACCURACY, earth_motion
from clockfall.binary.epoch import Epoch
from clockfall.errors import OutOfRange

AU = 499.004783836  # s; IAU 2012 Resolution B2 and the SI
T_SUN = 4.925490947e-6  # s; IAU 2015 Resolution B3
SOLAR_RADIUS = 695_700 / 299_792.458  # ls; IAU 2015 Resolution B3
OBLIQUITY = math.radians(23.43928)  # of the ecliptic at J2000: IAU 2006, 84381.406 arcsec
DEGREE = math.pi / 180.0
MICROSECOND = 1e-6
COUNT = 200

PLACES = [  # invented; both hemispheres, a pole, the date line, high and below sea level
    Observatory(0.0, 0.0, 0.0),
    Observatory(-1.2, -0.5, 5000.0),
    Observatory(math.pi, 0.9, -300.0),
    Observatory(2.5, math.pi / 2, 2800.0),
]


@pytest.fixture(autouse=True)
def _no_network() -> Iterator[None]:
    """Let astropy use the table of the Earth's rotation that it came with, 1962 to 2026."""
    from astropy.utils import iers

    with iers.conf.set_temp("auto_download", False), iers.earth_orientation_table.set(iers.IERS_B.open()):
        yield


def some_instants(first: float = 41400.0, last: float = 61300.0) -> Epoch:
    """Draw instants, from 1972 to September 2026, for which astropy brings measured UT1."""
    return Epoch.from_mjd(np.random.default_rng(20260101).uniform(first, last, COUNT))


def some_directions() -> tuple[np.ndarray, np.ndarray]:
    """Draw directions, evenly on the sphere."""
    rng = np.random.default_rng(7)
    return rng.uniform(0.0, 2.0 * math.pi, COUNT), np.arcsin(rng.uniform(-1.0, 1.0, COUNT))


def astropy_time(epoch: Epoch, location: object = None):  # astropy has no types
    """Return the same instants as astropy has them, without loss."""
    from astropy.time import Time

    return Time(epoch.day + 2400000.5, epoch.fraction, format="jd", scale="tdb", location=location)


def earth_location(at: Observatory | None):
    """Return the place as astropy has it; the centre of the Earth for None."""
    from astropy import units as u
    from astropy.coordinates import EarthLocation

    if at is None:
        return EarthLocation.from_geocentric(0.0, 0.0, 0.0, unit=u.m)
    return EarthLocation.from_geodetic(at.longitude * u.rad, at.latitude * u.rad, at.height * u.m, ellipsoid="WGS84")


def unit(right_ascension: float, declination: float) -> np.ndarray:
    """Return the unit vector to a direction."""
    return np.array(
        [
            math.cos(declination) * math.cos(right_ascension),
            math.cos(declination) * math.sin(right_ascension),
            math.sin(declination),
        ]
    )


def angles(n: np.ndarray) -> tuple[float, float]:
    """Return right ascension and declination of a vector."""
    return math.atan2(n[1], n[0]), math.atan2(n[2], math.hypot(n[0], n[1]))


# The Earth


@pytest.mark.parametrize(
    ("mjd", "minute", "distance"),
    [  # perihelia in UTC, from almanacs (USNO, "Earth's seasons"), from memory
        (58853, 7 * 60 + 48, 0.983244),  # 2020 January 5
        (59948, 16 * 60 + 17, 0.983296),  # 2023 January 4
        (60679, 13 * 60 + 28, 0.983327),  # 2025 January 4
    ],
)
def test_perihelion_falls_on_the_published_minute(mjd: int, minute: int, distance: float) -> None:
    """The least distance from the Sun is at the almanac's minute, which the Moon shifts by a day and more."""

    def r(days: float) -> float:
        return float(np.linalg.norm(earth_motion(Epoch(mjd, days)).from_sun)) / AU

    found = minimize_scalar(r, bounds=(-2.0, 3.0), method="bounded", options={"xatol": 1e-7})
    # The almanac rounds to a minute. The stated error of velocity, 1.4 mm/s rms, over the curvature of the distance,
    # 1e-4 m/s^2, is 14 s; the flat minimum is found to some 10 s in doubles.
    assert (found.x * 1440.0 - 69.184 / 60.0) == pytest.approx(minute, abs=1.5)
    assert found.fun == pytest.approx(distance, abs=1e-6)  # as printed


def test_the_distance_from_the_sun_stays_between_its_known_ends() -> None:
    """0.983 to 1.017 au: a (1 -+ e) with e = 0.0167, in every year from 1900 to 2100."""
    r = np.linalg.norm(earth_motion(Epoch(np.arange(15020, 88069, 3))).from_sun, axis=-1) / AU
    assert 0.9831 < r.min() < 0.9834
    assert 1.0166 < r.max() < 1.0169


def test_the_earth_is_where_astropy_has_it() -> None:
    """Place and velocity equal astropy's built-in ephemeris, the same theory, in its own units."""
    from astropy import units as u
    from astropy.coordinates import get_body_barycentric, get_body_barycentric_posvel

    tdb = some_instants(15100.0, 88000.0)
    place, velocity = get_body_barycentric_posvel("earth", astropy_time(tdb), ephemeris="builtin")
    sun = get_body_barycentric("sun", astropy_time(tdb), ephemeris="builtin")
    ours = earth_motion(tdb)
    second = 299792458.0 * u.m
    # doubles: 1e-15 of 500 s, of 1e-4 c
    assert ours.position == pytest.approx(place.xyz.to_value(second).T, rel=0.0, abs=1e-12)
    assert ours.velocity == pytest.approx((velocity.xyz.to_value(u.m / u.s) / 299792458.0).T, rel=0.0, abs=1e-18)
    assert ours.from_sun == pytest.approx((place - sun).xyz.to_value(second).T, rel=0.0, abs=1e-12)


def test_the_velocity_is_that_of_the_place() -> None:
    """The velocity is the slope of the place over an hour."""
    tdb = some_instants(15100.0, 88000.0)
    later, sooner = (earth_motion(tdb.plus_seconds(h)).position for h in (1800.0, -1800.0))
    # The stated error of the velocity is 5 mm/s at most, 1.7e-11 c; central differences leave h^2/6 of the third
    # derivative, 1800^2/6 x 1e-4 c x ((2e-7)^2 + 0.012/30000 x (2.66e-6)^2), 4e-12 c, from the Sun and the Moon.
    assert earth_motion(tdb).velocity == pytest.approx((later - sooner) / 3600.0, rel=0.0, abs=2.5e-11)


@pytest.mark.parametrize("latitude", [0.0, 0.5, -1.2])
def test_the_yearly_delay_is_the_light_time_of_an_au_times_the_cosine_of_the_ecliptic_latitude(latitude: float) -> None:
    """Half of what the delay spans in a year is 499.005 s cos(ecliptic latitude)."""
    towards = np.array([math.cos(latitude), 0.0, math.sin(latitude)])  # ecliptic longitude 0
    turn = np.array(
        [[1, 0, 0], [0, math.cos(OBLIQUITY), -math.sin(OBLIQUITY)], [0, math.sin(OBLIQUITY), math.cos(OBLIQUITY)]]
    )
    alpha, delta = angles(turn @ towards)
    delay = light_travel_time(Epoch(59000 + np.arange(366)), alpha, delta, at=None)
    # The Sun moves by up to 13 m/s, 1.4 s of light in a year (mostly Jupiter's pull); the ellipse is narrower than a
    # circle by e^2/2, 0.07 s.
    assert np.ptp(delay) / 2.0 == pytest.approx(499.005 * math.cos(latitude), abs=1.5)


def test_the_stated_accuracy_is_that_of_the_source() -> None:
    """4.6 km and 13.4 km (ERFA, documentation of epv00) are 15 us and 45 us of light."""
    assert f"{4.6e3 / 299792458.0 * 1e6:.0f} us rms" in EARTH_ACCURACY
    assert f"{13.4e3 / 299792458.0 * 1e6:.0f} us at worst" in EARTH_ACCURACY


@pytest.mark.parametrize("mjd", [15019.0, 88070.0])
def test_no_place_outside_two_centuries(mjd: float) -> None:
    """Outside 1900-2100 nothing is extrapolated; the first offender is named."""
    with pytest.raises(OutOfRange, match=r"15019\.5 <= MJD <= 88069\.5.*at index \(1,\).*1900 to 2100") as caught:
        earth_motion(Epoch.from_mjd([50000.0, mjd]))
    assert caught.value.what == "epoch"
    assert str(mjd) in caught.value.found


# Clocks


def test_the_difference_in_2020() -> None:
    """TDB - UTC is 37 + 32.184 s to the 1.7 ms by which TDB swings."""
    difference = tdb_minus_utc(Epoch(np.arange(58849, 59215)))
    assert difference == pytest.approx(69.184, abs=0.002)
    assert np.ptp(difference) > 0.003  # twice 1.66 ms, the yearly swing: Fairhead & Bretagnon 1990


def test_the_clocks_agree_with_astropy() -> None:
    """TDB - TT equals astropy's at the centre of the Earth."""
    tdb = some_instants()
    there = astropy_time(tdb, earth_location(None))
    theirs = (there.tdb.jd1 - there.tt.jd1 + (there.tdb.jd2 - there.tt.jd2)) * 86400.0
    assert tdb_minus_tt(tdb) == pytest.approx(theirs, abs=1e-10)  # half a unit in the last place of jd2 twice, 1e-11 s


def test_the_leap_seconds_are_the_published_ones() -> None:
    """All 27 fall where the table of IERS that comes with astropy has them, and ERFA's.

    Fails once IERS has announced another one: then `utc.py` needs it.
    """
    import astropy_iers_data
    import erfa

    lines = Path(astropy_iers_data.IERS_LEAP_SECOND_FILE).read_text().splitlines()
    rows = [line.split() for line in lines if line.strip() and not line.startswith("#")]
    starts = np.array([int(float(row[0])) for row in rows])
    offsets = np.array([int(row[-1]) for row in rows])
    assert offsets[0] == 10
    erfas = erfa.leap_seconds.get()
    assert offsets.tolist() == erfas["tai_utc"][erfas["year"] >= 1972].tolist()
    # Half a second after each step and half a second before the leap second that precedes it
    after = Epoch(starts).plus_seconds(offsets + 32.184 + 0.5)
    assert tdb_minus_utc(after) - 32.184 == pytest.approx(offsets, abs=0.002)
    before = Epoch(starts[1:]).plus_seconds(offsets[:-1] + 32.184 - 0.5)
    assert tdb_minus_utc(before) - 32.184 == pytest.approx(offsets[:-1], abs=0.002)
    leap = Epoch(starts[1:]).plus_seconds(offsets[:-1] + 32.184 + 0.5)
    # the yearly swing of TDB is below 2 ms
    assert all(text[10:].startswith(("T23:59:60.49", "T23:59:60.50")) for text in utc_text(leap, digits=3))


def test_the_last_second_of_2016() -> None:
    """2016-12-31T23:59:60 was (IERS Bulletin C 52), and a second later 2017 began."""
    zero = Epoch(57754).plus_seconds(36 + 32.184)  # TDB at the start of the leap second, but for the yearly swing
    zero = zero.plus_seconds(tdb_minus_tt(zero))
    seconds = np.array([-1.0, 0.0, 0.25, 0.999, 1.0])
    assert utc_text(zero.plus_seconds(seconds), digits=3).tolist() == [
        "2016-12-31T23:59:59.000Z",
        "2016-12-31T23:59:60.000Z",
        "2016-12-31T23:59:60.250Z",
        "2016-12-31T23:59:60.999Z",
        "2017-01-01T00:00:00.000Z",
    ]
    # rounding comes first: into the leap second, and out of it
    assert utc_text(zero.plus_seconds([-0.4, 0.4, 0.6]), digits=0).tolist() == [
        "2016-12-31T23:59:60Z",
        "2016-12-31T23:59:60Z",
        "2017-01-01T00:00:00Z",
    ]


@pytest.mark.parametrize("at", [None, *PLACES])
@pytest.mark.parametrize("digits", [0, 3, 6, 9])
def test_the_text_is_what_astropy_reads_back(at: Observatory | None, digits: int) -> None:
    """Read by astropy as UTC at the same place, the text gives the TDB of arrival within its last digit's half."""
    from astropy.time import Time

    seen = as_seen(some_instants(), *some_directions(), at=at, digits=digits)
    location = earth_location(at)
    read = Time([text.removesuffix("Z") for text in seen.utc], format="isot", scale="utc", location=location).tdb
    off = (read - astropy_time(seen.tdb, location)).sec
    # Half a digit, and what doubles make of half a day, 1e-11 s, in a few steps; that astropy knows UT1 changes the
    # 2 us by which TDB depends on the place by 1e-10 s.
    assert np.abs(off).max() <= 0.5 * 10.0**-digits + 1.5e-10


def test_the_text_without_a_place_is_for_the_centre_of_the_earth() -> None:
    """A barycentric instant is shown as the UTC of the same TDB; shapes are kept."""
    tdb = Epoch([[60000, 60001]], 0.5)
    text = utc_text(tdb)
    assert text.shape == (1, 2)
    assert [t[:19] for t in text[0]] == ["2023-02-25T11:58:50", "2023-02-26T11:58:50"]
    assert str(utc_text(Epoch(60000, 0.5), digits=0)) == "2023-02-25T11:58:51Z"
    assert isinstance(utc_text(Epoch(60000, 0.5)), str)


def test_future_leap_seconds_are_not_claimed() -> None:
    """What is known ends where the table of IERS ends that was current, and the statement names that day."""
    known = leap_seconds_known(Epoch([50000, 61583, 61584, 70000]))
    assert known.tolist() == [True, True, False, False]
    assert "2027-06-28" in FUTURE_UTC  # IERS Bulletin C 72, July 2026
    assert utc_text(Epoch(70000), digits=0) == "2050-07-12T23:58:51Z"  # MJD 70000 is 2050-07-13; 69 s before


def test_no_utc_before_its_whole_seconds() -> None:
    """UTC begins in 1972; the geocentre's light-travel time reaches back to 1900."""
    with pytest.raises(OutOfRange, match=r"1972-01-01.*whole seconds from TAI"):
        utc_text(Epoch(41316, 0.9))
    assert utc_text(Epoch(41317, 43.0 / 86400.0), digits=0) == "1972-01-01T00:00:01Z"
    assert math.isfinite(light_travel_time(Epoch(16000), 1.0, 0.5, at=None))
    with pytest.raises(OutOfRange, match="1972-01-01"):
        light_travel_time(Epoch(16000), 1.0, 0.5, at=PLACES[0])
    with pytest.raises(OutOfRange, match="0, 3, 6 or 9"):
        utc_text(Epoch(60000), digits=4)  # type: ignore[arg-type]


# Arrivals


def delay_by_astropy(tdb: Epoch, location: object, n: np.ndarray) -> np.ndarray:
    """Return n . r + 2 T_sun ln((r/au) (1 + cos theta)) from astropy's places of Earth, Sun and observatory."""
    from astropy import units as u
    from astropy.coordinates import get_body_barycentric

    t = astropy_time(tdb)
    here = get_body_barycentric("earth", t, ephemeris="builtin") + location.get_gcrs_posvel(t)[0]  # type: ignore[attr-defined]
    s = (here - get_body_barycentric("sun", t, ephemeris="builtin")).xyz.to_value(u.au).T
    r = np.linalg.norm(s, axis=-1)
    roemer = (n * here.xyz.to_value(u.au).T).sum(axis=-1) * AU
    return roemer + 2.0 * T_SUN * np.log(r * (1.0 + (n * s).sum(axis=-1) / r))


@pytest.mark.parametrize("at", [None, *PLACES])
def test_the_delay_agrees_with_places_by_astropy(at: Observatory | None) -> None:
    """The Roemer delay and the Sun's Shapiro delay follow from astropy's places of Earth, Sun and observatory."""
    tdb = some_instants()
    alpha, delta = some_directions()
    n = np.array([unit(a, d) for a, d in zip(alpha, delta, strict=True)])
    # On the ground astropy knows UT1: 0.9 s of the equator's 465 m/s is 1.4 us; the pole wanders by 15 m, 0.05 us. At
    # the Earth's centre the 12 digits of AU above make 5e-10 s.
    tolerance = 1e-9 if at is None else 1.45 * MICROSECOND
    expected = delay_by_astropy(tdb, earth_location(at), n)
    assert light_travel_time(tdb, alpha, delta, at=at) == pytest.approx(expected, rel=0.0, abs=tolerance)


def test_the_delay_agrees_more_closely_where_ut1_is_utc() -> None:
    """On days of 2017 to 2026 on which UT1 and UTC differ by less than 20 ms, the place is right to 0.1 us."""
    from astropy import units as u
    from astropy.utils import iers

    mjd = np.arange(58000.0, 61200.0)
    mjd = mjd[np.abs(iers.IERS_B.open().ut1_utc(mjd + 2400000.5, 0.3).to_value(u.s)) < 0.02]
    assert mjd.size > 100
    tdb = Epoch.from_mjd(mjd + 0.3)
    at = Observatory(1.0, 0.6, 1000.0)
    # 20 ms of 465 m/s is 9 m, and the pole wanders by 15 m: 0.08 us of light
    assert light_travel_time(tdb, 4.0, 0.1, at=at) == pytest.approx(
        delay_by_astropy(tdb, earth_location(at), unit(4.0, 0.1)), rel=0.0, abs=0.08 * MICROSECOND
    )


@pytest.mark.parametrize("at", [None, *PLACES])
def test_the_delay_agrees_with_the_light_travel_time_of_astropy(at: Observatory | None) -> None:
    """The Roemer delay is astropy's own, which leaves out the Shapiro delay, here -7 to 113 us, so added to it."""
    from astropy import units as u
    from astropy.coordinates import SkyCoord

    tdb = some_instants()
    alpha, delta = some_directions()
    location = earth_location(at)
    roemer = astropy_time(tdb, location).light_travel_time(
        SkyCoord(alpha * u.rad, delta * u.rad), kind="barycentric", ephemeris="builtin", location=location
    )
    n = np.array([unit(a, d) for a, d in zip(alpha, delta, strict=True)])
    s = earth_motion(tdb).from_sun / AU
    r = np.linalg.norm(s, axis=-1)
    shapiro = -2.0 * T_SUN * np.log(r * (1.0 + (n * s).sum(axis=-1) / r))
    # On the ground UT1 as above, and astropy turns the observatory's place by the aberration, up to 20.5" of 21.3 ms,
    # 2.1 us, on its way from geocentric to barycentric axes. At the centre doubles, and 1 + cos(theta) cancels.
    tolerance = 1e-11 if at is None else (1.45 + 2.15) * MICROSECOND
    expected = roemer.to_value(u.s) - shapiro
    assert light_travel_time(tdb, alpha, delta, at=at) == pytest.approx(expected, rel=0.0, abs=tolerance)


@pytest.mark.parametrize("separation", [0.3, 1.0, 30.0, 90.0, 150.0])
def test_the_shapiro_delay_is_the_integral_along_the_ray(separation: float) -> None:
    """The delay between two angles from the Sun is that of 2 T_sun/r summed along the straight rays."""
    tdb = Epoch(60100)
    earth = earth_motion(tdb)
    s = earth.from_sun
    r = float(np.linalg.norm(s))
    across = np.cross(s, [0.0, 0.0, 1.0])
    across /= np.linalg.norm(across)

    def direction(degrees: float) -> np.ndarray:
        return -s / r * math.cos(degrees * DEGREE) + across * math.sin(degrees * DEGREE)

    def ours(degrees: float) -> float:
        n = direction(degrees)
        alpha, delta = angles(n)
        return float(unit(alpha, delta) @ earth.position - light_travel_time(tdb, alpha, delta, at=None))

    def summed(degrees: float) -> float:
        foot = r * math.cos(degrees * DEGREE)  # where the ray is nearest to the Sun
        b = r * math.sin(degrees * DEGREE)
        # with l - foot = b sinh w the integrand is 2 T_sun; to 1e7 au, where the rest depends on the angle no more
        start, end = math.asinh(-foot / b), math.asinh((1e7 * AU - foot) / b)
        return quad(lambda w: 2.0 * T_SUN * b * math.cosh(w) / math.hypot(b, b * math.sinh(w)), start, end)[0]

    # 500 s in doubles is 1e-13 s; the source's end of the ray 2 T_sun x 1e-7
    assert ours(separation) - ours(89.0) == pytest.approx(summed(separation) - summed(89.0), rel=0.0, abs=3e-12)


def test_the_shapiro_delay_ends_at_the_limb() -> None:
    """It spans 120 us from the far side to the limb; behind the disc the limb's value stands, and a flag."""
    tdb = Epoch(60100)
    earth = earth_motion(tdb)
    s = earth.from_sun
    r = float(np.linalg.norm(s))
    across = np.cross(s, [0.0, 0.0, 1.0])
    across /= np.linalg.norm(across)
    limb = math.asin(SOLAR_RADIUS / r)
    turned = np.array([0.0, 0.5 * limb, 0.999 * limb, 1.001 * limb, math.pi])
    n = -s / r * np.cos(turned)[:, None] + across * np.sin(turned)[:, None]
    alpha, delta = np.array([angles(x) for x in n]).T
    delay = n @ earth.position - light_travel_time(tdb, alpha, delta, at=None)
    assert delay[:3] == pytest.approx(delay[3], rel=0.0, abs=2.0 * T_SUN * 2.0 * 0.0011)  # the limb's, to 0.1 %
    # ln(4 r^2/R^2) 2 T_sun: 119.5 us
    assert delay[3] - delay[4] == pytest.approx(4.0 * T_SUN * math.log(2.0 * r / SOLAR_RADIUS), rel=3e-4, abs=0.0)
    passage = tdb.plus_seconds(light_travel_time(tdb, alpha, delta, at=None))
    seen = as_seen(passage, alpha, delta, at=None)
    assert seen.behind_sun.tolist() == [True, True, True, False, False]
    assert np.abs(seen.tdb.seconds_since(tdb)).max() < 1e-9


@pytest.mark.parametrize("at", [None, *PLACES])
def test_the_arrival_solves_its_equation(at: Observatory | None) -> None:
    """The passage at the barycentre is the arrival plus its light-travel time, to 1e-9 s; also near the Sun's limb."""
    passage = some_instants()
    alpha, delta = some_directions()
    # Half of them towards the Sun, within a degree: where the Shapiro delay changes fastest
    earth = earth_motion(passage)
    sunward = np.array([angles(-s) for s in earth.from_sun])
    alpha[::2], delta[::2] = (sunward + np.random.default_rng(1).uniform(-0.01, 0.01, sunward.shape))[::2].T
    seen = as_seen(passage, alpha, delta, at=at)
    back = seen.tdb.plus_seconds(light_travel_time(seen.tdb, alpha, delta, at=at))
    assert np.abs(back.seconds_since(passage)).max() < 1e-9
    assert np.array_equal(seen.light_travel_time, passage.seconds_since(seen.tdb))
    assert 0 < seen.behind_sun.sum() < COUNT // 2


def test_instants_and_directions_broadcast() -> None:
    """Each element of a grid is what it is alone; the shape () gives numbers."""
    at = PLACES[1]
    passage = Epoch([60000, 60100, 60200], [0.1, 0.5, 0.9])
    alpha = np.array([[0.3], [5.0]])
    grid = as_seen(passage, alpha, -0.4, at=at)
    assert grid.tdb.shape == grid.utc.shape == grid.light_travel_time.shape == (2, 3)
    assert grid.horizontal is not None
    assert grid.horizontal.elevation.shape == grid.horizontal.azimuth.shape == (2, 3)
    one = as_seen(Epoch(60100, 0.5), 5.0, -0.4, at=at)
    assert one.tdb == Epoch(grid.tdb.day[1, 1], grid.tdb.fraction[1, 1])
    assert isinstance(one.utc, str)
    assert one.utc == grid.utc[1, 1]
    assert one.horizontal is not None
    assert float(one.horizontal.elevation) == grid.horizontal.elevation[1, 1]
    assert isinstance(one.light_travel_time, float)
    assert as_seen(passage, 0.3, -0.4, at=None).horizontal is None
    assert as_seen(Epoch(np.zeros(0, dtype=int)), 0.3, -0.4, at=at).utc.shape == (0,)


# The sky of an observatory


@pytest.mark.parametrize("at", PLACES)
def test_the_sky_agrees_with_astropy(at: Observatory) -> None:
    """Directions in the sky are astropy's (without air) to what UT1 may differ from UTC."""
    from astropy import units as u
    from astropy.coordinates import AltAz, SkyCoord

    tdb = some_instants()
    alpha, delta = some_directions()
    location = earth_location(at)
    frame = AltAz(obstime=astropy_time(tdb, location), location=location)
    theirs = SkyCoord(alpha * u.rad, delta * u.rad, frame="icrs").transform_to(frame)
    ours = horizontal(tdb, alpha, delta, at=at)
    frame_ours = SkyCoord(ours.azimuth * u.rad, ours.elevation * u.rad, frame=frame)
    # 0.9 s of 15 arcsec/s is 13.5"; the pole wanders by 0.6", light is bent by the Sun by less than 1" but close to it
    assert theirs.separation(frame_ours).arcsec.max() < 14.5
    assert ((ours.azimuth >= 0.0) & (ours.azimuth < 2.0 * math.pi)).all()


def test_the_celestial_pole_stands_as_high_as_the_latitude() -> None:
    """At the pole of the sky (of 2000) the elevation is the latitude, due north, at all hours."""
    at = Observatory(0.4, 0.8)
    seen = horizontal(Epoch(51544, np.linspace(0.0, 1.0, 25)), 0.0, math.pi / 2, at=at)
    # aberration 20.5" and nutation 17"
    assert seen.elevation == pytest.approx(0.8, abs=40.0 / 3600.0 * DEGREE)
    assert np.cos(seen.azimuth).min() > 0.9999999


def test_the_sun_of_noon() -> None:
    """At the March equinox of 2023 (20 March, 21:24 UTC) the Sun is at the zenith where the equator has noon."""
    tdb = Epoch(60023).plus_seconds(21 * 3600 + 24 * 60 + 69.184)
    alpha, delta = angles(-earth_motion(tdb).from_sun)
    # The equation of time is -7 min 25 s then (almanac, from memory to 10 s): noon at 12:07:25 mean time, longitude
    # 15 deg/h x (12:07:25 - 21:24)
    at = Observatory(15.0 * (12.0 + 7.0 / 60.0 + 25.0 / 3600.0 - 21.4) * DEGREE, 0.0)
    assert horizontal(tdb, alpha, delta, at=at).elevation == pytest.approx(math.pi / 2, abs=0.05 * DEGREE)


def test_the_statements_hold_their_numbers() -> None:
    """0.9 s of the Earth's turn is 0.0038 deg and 1.4 us; the curvature of a wavefront at 1 kpc is au^2/(2 kpc c)."""
    assert 0.9 * 360.0 / 86164.1 < 0.004
    assert "0.004 deg" in EARTH_ROTATION
    assert f"{0.9 * 2.0 * math.pi / 86164.1 * 6378137.0 / 299.792458:.1f} us" in EARTH_ROTATION
    assert f"{AU * math.pi / 648e6 / 2.0 * 1e6:.1f} us for a source at 1 kpc" in LEFT_OUT


@pytest.mark.parametrize(
    ("arguments", "named"),
    [((7.0, 0.0, 0.0), "longitude"), ((0.0, 1.6, 0.0), "latitude"), ((0.0, 0.0, math.nan), "height")],
)
def test_no_place_off_the_earth(arguments: tuple[float, float, float], named: str) -> None:
    """A place outside its ranges is refused by name."""
    with pytest.raises(OutOfRange, match=named) as caught:
        Observatory(*arguments)
    assert caught.value.what == named


def test_no_direction_off_the_sky() -> None:
    """A direction in degrees, the usual slip, is refused; so are shapes that do not fit."""
    with pytest.raises(OutOfRange, match=r"declination.*rad.*45"):
        as_seen(Epoch(60000), 1.0, 45.0, at=None)
    with pytest.raises(OutOfRange, match=r"right ascension.*rad.*200"):
        light_travel_time(Epoch(60000), 200.0, 0.4, at=None)
    with pytest.raises(OutOfRange, match="shapes that broadcast"):
        as_seen(Epoch([60000, 60001]), np.zeros(3), 0.4, at=None)


def test_importing_is_cheap() -> None:
    """Neither erfa nor astropy is loaded before it is needed."""
    program = (
        "import sys, clockfall.analysis.observatory; print(sorted({'erfa', 'astropy', 'scipy'} & set(sys.modules)))"
    )
    run = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert run.stdout.strip() == "[]"
