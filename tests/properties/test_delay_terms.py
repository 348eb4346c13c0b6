"""The smaller delays, each against its physics worked out another way: vectors, exact geometry, rays of light."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from mpmath import mp, mpf
from scipy.integrate import quad
from scipy.optimize import brentq

from clockfall.binary.constants import T_SUN
from clockfall.binary.earth import earth_motion
from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import Orbit, SecularMotion
from clockfall.binary.state import BinaryState
from clockfall.effects.contributions import Settings
from clockfall.effects.host import Applied
from clockfall.effects.loading import load_host
from clockfall_effects import aberration_delay, annual_orbital_parallax
from clockfall_effects.shapiro_motion_and_bending import bending, delay, impact, motion

KPC = 1.0292712503e11  # ls, from 3.0856775814914e19 m over 299792458 m/s
PERIASTRON = Epoch(55000, 0.25)


def orbit_of(state: BinaryState, seconds: np.ndarray) -> Orbit:
    """Return the orbit at times since periastron; its elements do not change."""
    return SecularMotion(state, *(np.array(0.0) for _ in range(7))).at(seconds)


def place_and_velocity(
    a: float, e: float, P_b: float, omega: float, i: float, Omega: float, seconds: float
) -> tuple[np.ndarray, np.ndarray]:
    """Return place [ls] and velocity [c] on a Kepler orbit along east, north and away.

    Built from the convention alone: Omega is the position angle of the node where the body recedes, and position angles
    grow for i < 90 deg. East, north, away are right-handed.
    """
    M = 2.0 * math.pi * math.remainder(seconds / P_b, 1.0)
    E = brentq(lambda E: E - e * math.sin(E) - M, -4.0, 4.0, xtol=1e-15)
    nu = 2.0 * math.atan2(math.sqrt(1 + e) * math.sin(E / 2), math.sqrt(1 - e) * math.cos(E / 2))
    node = np.array([math.sin(Omega), math.cos(Omega), 0.0])
    ahead = np.array([math.cos(Omega) * math.cos(i), -math.sin(Omega) * math.cos(i), math.sin(i)])
    r = a * (1 - e**2) / (1 + e * math.cos(nu))
    speed = 2.0 * math.pi / P_b * a / math.sqrt(1 - e**2)
    theta = omega + nu
    place = r * (math.cos(theta) * node + math.sin(theta) * ahead)
    velocity = speed * (
        -(math.sin(theta) + e * math.sin(omega)) * node + (math.cos(theta) + e * math.cos(omega)) * ahead
    )
    return place, velocity


# ---- aberration


@pytest.mark.parametrize("i", [0.8, 2.1])
@pytest.mark.parametrize(("lam", "eta"), [(1.1, 0.6), (2.3, 3.9), (0.5, -1.2)])
def test_aberration_is_the_turn_of_the_beam_to_the_aberrated_direction(i: float, lam: float, eta: float) -> None:
    """The pulsar's phase when its beam points along the light that reaches us, exact in the velocity, with vectors."""
    P, P_b, e, omega, Omega, a_1 = 0.0227, 3.0e6, 0.6, 1.2, 0.7, 20.0  # velocities of 6e-5 c
    state = BinaryState(
        spin_period_1=P,
        orbital_period=P_b,
        eccentricity=e,
        longitude_of_periastron=omega,
        projected_semi_major_axis=a_1 * math.sin(i),
        inclination=i,
        periastron_epoch=PERIASTRON,
    )
    seconds = np.linspace(-0.5, 0.5, 41)[:-1] * P_b
    settings = Settings({"spin_axis_inclination": np.array(lam), "spin_axis_position_angle": np.array(eta)})
    predicted = aberration_delay.predicted_parameters(state, settings).values
    parameters = {name: np.asarray(value)[..., None] for name, value in predicted.items()}
    found = aberration_delay.delay(orbit_of(state, seconds), parameters).seconds

    spin = np.array([math.sin(lam) * math.sin(Omega + eta), math.sin(lam) * math.cos(Omega + eta), math.cos(lam)])
    to_us = np.array([0.0, 0.0, -1.0])
    first = np.cross(spin, to_us) / math.sin(lam)
    second = np.cross(spin, first)

    def azimuth(direction: np.ndarray) -> float:
        # growing with a right-handed turn about the spin axis; zero a quarter turn after the direction to us
        return math.atan2(direction @ second, direction @ first)

    expected = []
    for t in seconds:
        _, v = place_and_velocity(a_1, e, P_b, omega, i, Omega, t)
        gamma = 1.0 / math.sqrt(1.0 - v @ v)
        in_its_frame = to_us + ((gamma - 1.0) * (to_us @ v) / (v @ v) - gamma) * v
        expected.append(P / (2.0 * math.pi) * math.remainder(azimuth(in_its_frame) - azimuth(to_us), 2.0 * math.pi))
    # what is dropped is of relative order v/sin lambda
    np.testing.assert_allclose(found, expected, rtol=0.0, atol=1e-3 * np.max(np.abs(expected)))
    assert np.max(np.abs(expected)) > 1e-8


# ---- annual-orbital parallax


@pytest.mark.parametrize("i", [0.8, 2.1])
def test_annual_orbital_parallax_is_the_length_of_the_path(i: float) -> None:
    """|d K + r - R| at 50 digits, less what the orbit and the Earth do alone; R when the light arrives at the Earth."""
    alpha, delta, Omega, e, omega, P_b, x, d = 1.3, -0.8, 2.4, 0.3, 0.9, 5.0e6, 30.0, 0.16 * KPC
    state = BinaryState(
        orbital_period=P_b,
        eccentricity=e,
        longitude_of_periastron=omega,
        projected_semi_major_axis=x,
        inclination=i,
        ascending_node=Omega,
        right_ascension=alpha,
        declination=delta,
        distance=d,
        periastron_epoch=PERIASTRON,
    )
    seconds = np.linspace(0.0, 3.2e7, 60)
    found = annual_orbital_parallax.delay(orbit_of(state, seconds)).seconds
    K = np.array([math.cos(delta) * math.cos(alpha), math.cos(delta) * math.sin(alpha), math.sin(delta)])
    east = np.array([-math.sin(alpha), math.cos(alpha), 0.0])
    north = np.cross(K, east)
    expected = []
    with mp.workdps(50):
        for t in seconds:
            r = place_and_velocity(x / math.sin(i), e, P_b, omega, i, Omega, t)[0] @ np.array([east, north, K])
            late = 0.0
            for _ in range(5):
                R = earth_motion(PERIASTRON.plus_seconds(np.array(t + late))).position
                late = float(K @ r - K @ R)
            to_binary = [mpf(d) * mpf(float(c)) for c in K]
            # K of doubles is not quite of unit length: the same length is taken off
            both = mp.norm([c + mpf(float(u)) - mpf(float(w)) for c, u, w in zip(to_binary, r, R, strict=True)])
            earth = mp.norm([c - mpf(float(w)) for c, w in zip(to_binary, R, strict=True)])
            unit = [c / mp.norm(to_binary) for c in to_binary]
            expected.append(float(both - earth - sum(c * mpf(float(u)) for c, u in zip(unit, r, strict=True))))
    # dropped: (x/d) and the Earth's acceleration while light crosses half its orbit (1e-5 of R)
    np.testing.assert_allclose(found, expected, rtol=0.0, atol=3e-5 * np.max(np.abs(expected)))
    assert 1e-7 < np.max(np.abs(expected)) < 1e-5


def test_annual_orbital_parallax_has_the_published_signs() -> None:
    """Kopeikin (1995): dx = (x/d) cot i (X sin O - Y cos O), d omega = -(X cos O + Y sin O)/(d sin i).

    From memory. X, Y are the Earth's parts to the east and north. There O is counted from the east, and i is 180 deg
    less ours.
    """
    i, Omega, x, d, omega, e = 0.9, 2.2, 4.0, 0.2 * KPC, 0.4, 0.2
    X, Y = 310.0, -220.0
    O_there, i_there = math.pi / 2 - Omega, math.pi - i
    dx = x / d / math.tan(i_there) * (X * math.sin(O_there) - Y * math.cos(O_there))
    d_omega = -(X * math.cos(O_there) + Y * math.sin(O_there)) / (d * math.sin(i_there))
    E = np.linspace(0.0, 6.0, 13)
    along, across = np.cos(E) - e, math.sqrt(1 - e**2) * np.sin(E)
    sine = math.sin(omega) * along + math.cos(omega) * across
    cosine = math.cos(omega) * along - math.sin(omega) * across
    a_1 = x / math.sin(i)
    east, north = annual_orbital_parallax.on_the_sky(a_1 * cosine, a_1 * sine * math.cos(i), np.array(Omega))
    np.testing.assert_allclose(-(east * X + north * Y) / d, dx * sine + x * d_omega * cosine, rtol=1e-12, atol=1e-22)


def test_no_annual_orbital_parallax_where_the_earth_is_not_known() -> None:
    """Before 1900 it ends with an error that says so."""
    state = BinaryState(
        orbital_period=1e6, eccentricity=0.1, longitude_of_periastron=0.0, projected_semi_major_axis=1.0,
        inclination=1.0, ascending_node=1.0, right_ascension=1.0, declination=1.0, distance=KPC,
        periastron_epoch=PERIASTRON,
    )  # fmt: skip
    with pytest.raises(ValueError, match="1900 to 2100"):
        annual_orbital_parallax.delay(orbit_of(state, np.array([-4.0e9])))


# ---- motion of the companion


def by_the_retarded_field(rho: np.ndarray, v: np.ndarray, r: float, end: float) -> float:
    """Return the delay of light from rho, as seen from the body at the start, to `end` [ls] towards us.

    First order in the mass: the Lienard-Wiechert field of a body in uniform motion, along the straight ray.
    """
    gamma = 1.0 / math.sqrt(1.0 - v @ v)

    def field(tau: float) -> float:
        apart = rho + np.array([0.0, 0.0, -tau]) - v * tau  # from the body's place at that time, in uniform motion
        # the retarded distance less v times the retarded vector
        seen = math.sqrt((apart @ v) ** 2 + (1.0 - v @ v) * (apart @ apart))
        return 2.0 * r * gamma * (1.0 + v[2]) ** 2 / seen

    z = rho[2]
    points = [z - 1.0, z - 0.1, z, z + 0.1, z + 1.0, 10.0, 100.0, 1e4, end]
    stops = sorted({0.0, *(p for p in points if p > 0.0)})
    return sum(quad(field, low, high, epsabs=1e-22, epsrel=1e-13, limit=500)[0] for low, high in pairwise(stops))


@pytest.mark.parametrize(
    ("rho", "v"),
    [
        ((0.03, 0.0, 2.9), (1e-3, 0.0, 2e-5)),  # behind, nearly edge-on: the second order counts
        ((0.01, 0.035, 2.9), (-1e-3, 1e-4, 1e-4)),
        ((2.0, 0.5, 1.5), (-5e-4, 3e-4, 8e-4)),
        ((2.0, 0.5, -1.5), (5e-4, 3e-4, -8e-4)),
        ((0.05, 0.02, -2.9), (1e-3, 0.0, 1e-4)),  # in front
    ],
)
def test_motion_is_the_delay_in_the_retarded_field(rho: tuple[float, ...], v: tuple[float, ...]) -> None:
    """Light's delay through the field of a moving mass, by quadrature, less that of one at rest."""
    r, a, end = 6.15e-6, 2.9, 1e8
    place, speed = np.array(rho), np.array(v)
    moving = by_the_retarded_field(place, speed, r, end) - by_the_retarded_field(place, 0.0 * speed, r, end)
    # a constant times v_K, which is left out
    expected = moving - 2.0 * r * v[2] * math.log(2.0 * end / a)
    numbers = [np.array(n) for n in (math.hypot(*rho), rho[2], v[2], place @ speed, speed @ speed)]
    found = float(motion(np.array(r), np.array(a), *numbers))
    v_2 = speed @ speed
    # second order without a small denominator, times logarithms of up to 40
    assert found == pytest.approx(expected, rel=2e-3, abs=2.0 * r * v_2 * 40.0)


# ---- bending


def time_in_schwarzschild(m: mpf, r_0: mpf, r: mpf) -> tuple[mpf, mpf]:
    """Return time and angle from the nearest point r_0 to r of a ray, in Schwarzschild's coordinates."""
    b_2 = r_0**3 / (r_0 - 2 * m)

    def slope(w: mpf) -> mpf:
        # r = r_0 + w^2; the root of 1 - b^2 (1 - 2 m/r)/r^2, freed of its zero at w = 0
        R = r_0 + w * w
        cubic = R * R + R * r_0 + r_0 * r_0 - b_2
        return 2 * mp.sqrt(R**3 / cubic)

    last = mp.sqrt(r - r_0)
    ends = [mpf(0)]
    while ends[-1] < last:
        ends.append(min(mp.sqrt(r_0) if ends[-1] == 0 else 2 * ends[-1], last))
    time = mp.quad(lambda w: slope(w) / (1 - 2 * m / (r_0 + w * w)), ends)
    angle = mp.quad(lambda w: slope(w) * mp.sqrt(b_2) / (r_0 + w * w) ** 2, ends)
    return time, angle


@pytest.mark.parametrize("radii", [2.5, 4.0, 12.0])
def test_bending_is_the_time_of_an_exact_null_geodesic(radii: float) -> None:
    """Time of a ray in Schwarzschild's metric less straight line and Shapiro delay, at 30 digits.

    Places are in harmonic coordinates. What is left over is r^2/b times 15 pi/4 (Brumberg 1987, from memory).
    """
    with mp.workdps(30):
        m, z, far = mpf("6.15e-6"), mpf("2.93"), mpf("1e9")
        y = mpf(radii) * mp.sqrt(4 * m * z)
        r_s = mp.sqrt(z * z + y * y)
        turn = mp.pi - mp.asin(y / r_s)  # from the source round to the observer, on the axis

        def excess(r_0: mpf) -> mpf:
            return time_in_schwarzschild(m, r_0, r_s + m)[1] + time_in_schwarzschild(m, r_0, far + m)[1] - turn

        image = y * (1 + mp.sqrt(1 + 4 / mpf(radii) ** 2)) / 2
        r_0 = mp.findroot(excess, (image, image * mpf("1.001")), tol=1e-20)
        time = time_in_schwarzschild(m, r_0, r_s + m)[0] + time_in_schwarzschild(m, r_0, far + m)[0]
        D = mp.sqrt((far + z) ** 2 + y * y)
        shapiro = 2 * m * mp.log((r_s + far + D) / (r_s + far - D))
        left = float(time - D - shapiro)
        second_order = float(mpf(15) / 4 * mp.pi * m * m / image)
    found = float(bending(np.array(float(m)), np.array(float(y * y)), np.array(float(z))))
    # the straight line is measured from the true places; z against the slant r_s is y^2/z^2, 1e-3 or less
    assert left - second_order == pytest.approx(found, rel=3e-3, abs=0.05 * second_order)
    assert found < -1e-8


# ---- both, on the double pulsar


def double_pulsar() -> BinaryState:
    """Return the double pulsar, to the digits that matter (Kramer et al. 2021, from memory)."""
    return BinaryState(
        mass_1=1.338185,
        mass_2=1.248868,
        orbital_period=0.10225156 * 86400.0,
        eccentricity=0.0877770,
        longitude_of_periastron=math.radians(204.75),
        projected_semi_major_axis=1.4150322,
        periastron_epoch=PERIASTRON,
    )


def test_the_double_pulsar() -> None:
    """Both are microseconds at conjunction, as published, and bending is the same by -2 r ln(Lambda + 2 r/a).

    The published forms (Kramer et al. 2021, from memory) are of first order in what they add to Lambda.
    """
    state = double_pulsar()
    assert state.sin_inclination == pytest.approx(0.999936, abs=1e-5)
    orbit = orbit_of(state, np.linspace(0.0, float(state.orbital_period), 4001))  # type: ignore[arg-type]
    seconds = delay(orbit).seconds
    assert 5e-7 < np.max(np.abs(seconds)) < 5e-6
    away = np.argmax(np.abs(seconds))
    assert np.median(np.abs(seconds)) < 0.1 * abs(seconds[away])  # all is near conjunction
    r, a = T_SUN * float(state.mass_2), float(state.relative_semi_major_axis)  # type: ignore[arg-type]
    z, b_2 = np.array(a), np.array(a**2 * (1.0 - 0.9999**2))
    Lambda = 1.0 - 0.9999
    expected = -2.0 * r * math.log1p(2.0 * r / a / Lambda)
    assert float(bending(np.array(r), b_2, z)) == pytest.approx(expected, rel=0.05)


def test_the_velocity_is_that_of_body_2_on_its_orbit() -> None:
    """The delay of the whole effect is that of its parts at places and velocities of a Kepler orbit, by vectors."""
    state = double_pulsar().replace(eccentricity=0.4)
    P_b, a = float(state.orbital_period), float(state.relative_semi_major_axis)  # type: ignore[arg-type]
    omega, s = float(state.longitude_of_periastron), float(state.sin_inclination)  # type: ignore[arg-type]
    share = float(state.mass_1 / state.total_mass)  # type: ignore[operator,arg-type]
    r = np.array(T_SUN * float(state.mass_2))  # type: ignore[arg-type]
    seconds = np.linspace(0.01, 0.99, 50) * P_b
    expected = []
    for t in seconds:
        rho, velocity = place_and_velocity(a, 0.4, P_b, omega, math.asin(s), 0.3, t)
        v = -share * velocity
        numbers = [np.array(n) for n in (math.sqrt(rho @ rho), rho[2], v[2], rho @ v, v @ v)]
        expected.append(float(motion(r, np.array(a), *numbers) + bending(r, impact(*numbers), np.array(rho[2]))))
    found = delay(orbit_of(state, seconds)).seconds
    np.testing.assert_allclose(found, expected, rtol=1e-8, atol=1e-19)


def test_the_effects_work_through_the_host() -> None:
    """All three are applied to a binary that has what they need, and none where it is lacking."""
    whole = double_pulsar().replace(
        spin_period_1=0.0227, inclination=1.56, ascending_node=0.4, right_ascension=2.0, declination=-0.5, distance=KPC
    )
    mine = {"aberration-delay", "annual-orbital-parallax", "shapiro-motion-and-bending"}
    orbit = orbit_of(whole, np.linspace(0.0, 1e4, 7))
    given = {"aberration-delay": {"spin_axis_inclination": 1.0, "spin_axis_position_angle": 2.0}}
    applied: Applied = load_host(strict=True).apply(whole, given)
    found = {card.name: values.seconds for card, values in applied.delays(orbit, applied.delay_parameters(None))}
    assert mine <= set(found)
    assert all(np.all(found[name] != 0.0) for name in mine)
    bare = load_host(strict=True).apply(double_pulsar().replace(mass_2=None), {})
    assert not mine & {card.name for card, _ in bare.delays(orbit_of(double_pulsar(), np.zeros(1)), {})}
