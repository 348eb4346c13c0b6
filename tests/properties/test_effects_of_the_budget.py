"""The effects beyond leading order and the apparent ones, each against an independent second way to the same number."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from astropy import units as u
from astropy.coordinates import SkyCoord
from hypothesis import assume, given
from hypothesis import strategies as st
from mpmath import ellipk, mp, mpf, pi, sqrt
from scipy.integrate import solve_ivp

from clockfall.binary.constants import PARSEC, SECONDS_PER_YEAR, SOLAR_MASS, SPEED_OF_LIGHT, T_SUN
from clockfall.binary.sky import galactic_direction
from clockfall.binary.state import BinaryState
from clockfall.effects.contributions import Settings
from clockfall.effects.host import Host
from clockfall.effects.loading import installed_candidates, load_host
from clockfall.testing.strategies import binaries
from clockfall_effects.galactic_acceleration import acceleration, bulge_disc_halo
from clockfall_effects.periastron_advance_second_order import second_order_factor
from clockfall_effects.radiation_next_order import PLAIN, TIMES_D, TIMES_NU

HOST: Host = load_host([c for c in installed_candidates() if c.distribution == "clockfall"], strict=True)
KPC = 1e3 * PARSEC / SPEED_OF_LIGHT
DEG_PER_YEAR = math.pi / 180.0 / SECONDS_PER_YEAR
ONE_E45 = 1e38 / (SOLAR_MASS * SPEED_OF_LIGHT**2)  # 1e45 g cm^2 in Msun ls^2
DOUBLE_PULSAR = BinaryState(  # Kramer et al. 2021, PRX 11, 041050; transcription; spin from memory
    mass_1=1.338185,
    mass_2=1.248868,
    orbital_period=0.1022515592973 * 86400,
    eccentricity=0.087777023,
    projected_semi_major_axis=1.415028603,
    spin_period_1=0.02269937899,
    spin_period_rate_1=1.75993e-18,
    moment_of_inertia_1=ONE_E45,
)


def rate(state: BinaryState, effect: str, of: str, own: dict[str, Any] | None = None) -> float:
    """Return one effect's contribution to the rate of a field, for a single binary."""
    applied = HOST.apply(state, {effect: own or {}}, only=[effect])
    (found,) = (c.values for c in applied.secular_rates() if c.name == f"{of}_rate")
    assert not applied.failures
    return float(found)


def predicted(state: BinaryState, effect: str, name: str) -> float:
    """Return one predicted parameter of a single binary."""
    (found,) = (c.values for c in HOST.apply(state, only=[effect]).predicted_parameters() if c.name == name)
    return float(found)


def e_T_over_e_t(X_1: Fraction, X_2: Fraction) -> Fraction:
    """Return d in e_T = e_t (1 + d beta^2): e_T = e_t (1 + delta) + e_theta - e_r (Damour & Deruelle 1986)."""
    delta = X_2 * (X_1 + 2 * X_2)
    e_theta_less_e_r = X_1**2 / 2
    return delta + e_theta_less_e_r


MASSES_AND_E = [
    (Fraction(a, 10), Fraction(10 - a, 10), Fraction(b, 10)) for a in (0, 1, 3, 5, 8, 10) for b in (0, 1, 5, 9)
]


@pytest.mark.parametrize(("X_1", "X_2", "e"), MASSES_AND_E)
def test_second_order_advance_in_a_second_form(X_1: Fraction, X_2: Fraction, e: Fraction) -> None:
    """f_O is the 2PN advance of Memmesheimer, Gopakumar & Schaefer 2004 in e_t, turned to e_T, as exact fractions.

    k = 3 beta^2/(1-e_t^2) + [78 - 28 nu + (51 - 26 nu) e_t^2] beta^4/(4 (1-e_t^2)^2) (from memory).
    """
    nu, s_2 = X_1 * X_2, 1 - e**2
    second = (78 - 28 * nu + (51 - 26 * nu) * e**2) / (4 * s_2**2)
    from_first = -2 * e_T_over_e_t(X_1, X_2) * e**2 * 3 / s_2**2  # d/de of 3/(1-e^2), times -d e
    expected = (second + from_first) * s_2 / 3
    found = second_order_factor(*(np.float64(float(x)) for x in (X_1, X_2, s_2)))
    assert float(found) == pytest.approx(float(expected), rel=1e-14, abs=0.0)  # a few roundings


@pytest.mark.parametrize("e", ["0.1", "0.5", "0.8"])
def test_second_order_advance_of_the_exact_schwarzschild_orbit(e: str) -> None:
    """In the test-mass limit first and second order leave a residual that falls as p^-3 against the exact advance.

    Exact: Cutler, Kennefick & Poisson 1994, Phys. Rev. D 50, 3816. Energy and angular momentum of the same orbit give
    n = eps^(3/2) (1 - 15 eps/8) and e_t^2 = 1 - j + (eps/4)(-8 + 17 j), eps = -2 (E-1), j = eps L^2 (from memory). The
    timed body is the light one, X_2 = 1.
    """
    residuals = []
    with mp.workdps(50):
        for p in (mpf(10) ** 4, mpf(10) ** 5):
            x = mpf(e)
            exact = 4 * sqrt(p / (p - 6 + 2 * x)) * ellipk(4 * x / (p - 6 + 2 * x)) / (2 * pi) - 1
            E = sqrt(((p - 2) ** 2 - 4 * x**2) / (p * (p - 3 - x**2)))
            eps = -2 * (E - 1)
            j = eps * p**2 / (p - 3 - x**2)
            beta_2 = eps * (1 - 15 * eps / 8) ** (mpf(2) / 3)
            e_T = sqrt(1 - j + eps / 4 * (-8 + 17 * j)) * (1 + 2 * beta_2)
            s_2 = 1 - e_T**2
            f_O = mpf(27) / 4 / s_2 - mpf(1) / 4
            residuals.append(exact - 3 * beta_2 / s_2 * (1 + f_O * beta_2))
            assert abs(residuals[-1]) < 200 * beta_2**3 / (1 - x**2) ** 3  # of third order
    assert float(residuals[0] / residuals[1]) == pytest.approx(1e3, rel=0.01, abs=0.0)
    found = second_order_factor(np.float64(0), np.float64(1), np.float64(0.75))
    assert float(found) == pytest.approx(27 / 4 / 0.75 - 0.25, rel=1e-15, abs=0.0)


@pytest.mark.parametrize(("X_1", "X_2", "e"), MASSES_AND_E)
def test_next_order_decay_in_a_second_form(X_1: Fraction, X_2: Fraction, e: Fraction) -> None:
    """The bracket of Blanchet & Schaefer 1989 in e_T is the 1PN decay in e_t, turned to e_T, as exact fractions.

    n rate = (nu n^2/280) beta^7 (1-e^2)^(-9/2) {20368 - 14784 nu + (219880 - 159600 nu) e^2 + (197022 - 141708 nu) e^4
    + (11717 - 8288 nu) e^6} beyond leading order: Damour, Gopakumar & Iyer 2004, Phys. Rev. D 70, 064028 (from memory).
    """
    nu, e_2 = X_1 * X_2, e**2
    second = [(20368, -14784), (219880, -159600), (197022, -141708), (11717, -8288)]
    direct = sum(((a + b * nu) * e_2**k for k, (a, b) in enumerate(second)), start=Fraction(0)) / 280
    f = 1 + Fraction(73, 24) * e_2 + Fraction(37, 96) * e_2**2
    slope = (Fraction(73, 12) * e_2 + Fraction(37, 24) * e_2**2) * (1 - e_2) + 7 * e_2 * f  # e d/de of f (1-e^2)^(-7/2)
    turned = direct - e_T_over_e_t(X_1, X_2) * Fraction(96, 5) * slope
    tables = zip(PLAIN, TIMES_NU, TIMES_D, strict=True)
    bracket = sum(
        ((Fraction(a) - nu * Fraction(b) + (X_1 - X_2) * Fraction(c)) * e_2**k for k, (a, b, c) in enumerate(tables)),
        start=Fraction(0),
    )
    assert bracket * Fraction(96, 5) / 336 == turned


def test_next_order_decay_is_that_share_of_the_quadrupole() -> None:
    """The effect is X times the quadrupole decay, and -1.75e-17 for the double pulsar (Kramer et al. 2021) to 1 %."""
    share = rate(DOUBLE_PULSAR, "radiation-next-order", "orbital_period") / rate(
        DOUBLE_PULSAR, "quadrupole-decay", "orbital_period"
    )
    beta, nu = (float(v) for v in DOUBLE_PULSAR.known("orbital_velocity", "symmetric_mass_ratio"))
    # at this small e the bracket is 1273 - 924 nu within 7 %
    assert share == pytest.approx(beta**2 * (1273 - 924 * nu) / 336, rel=0.07, abs=0.0)
    assert rate(DOUBLE_PULSAR, "radiation-next-order", "orbital_period") == pytest.approx(-1.75e-17, rel=0.01, abs=0.0)


def test_published_advances_of_the_double_pulsar() -> None:
    """2PN 0.000439 and spin-orbit -0.000377 deg/yr for each 1e45 g cm^2 (Kramer et al. 2021; transcription)."""
    second = rate(DOUBLE_PULSAR, "periastron-advance-second-order", "longitude_of_periastron") / DEG_PER_YEAR
    spin = rate(DOUBLE_PULSAR, "spin-orbit-advance", "longitude_of_periastron") / DEG_PER_YEAR
    assert second == pytest.approx(0.000439, abs=5e-7)  # printed digits
    assert spin == pytest.approx(-0.000377, abs=5e-7)


def test_lense_thirring_in_the_test_mass_limit() -> None:
    """A light body round a heavy one in its equator: -4 n^2 (S/M)/(1-e^2)^(3/2) (Lense & Thirring 1918)."""
    state = DOUBLE_PULSAR.replace(mass_1=1.4, mass_2=1e-9, eccentricity=0.6, moment_of_inertia_1=ONE_E45)
    n, spin = (float(v) for v in state.known("mean_motion", "spin_period_1"))
    S = ONE_E45 * 2 * math.pi / spin  # Msun ls^2/s
    expected = -4.0 * n**2 * S / 1.4 / (1 - 0.36) ** 1.5
    assert rate(state, "spin-orbit-advance", "longitude_of_periastron") == pytest.approx(expected, rel=1e-8, abs=0.0)


def test_a_tilted_spin() -> None:
    """Turned over, an aligned spin changes sign; at right angles only the term cos i cos lambda is left."""
    aligned = rate(DOUBLE_PULSAR, "spin-orbit-advance", "longitude_of_periastron")
    over = rate(DOUBLE_PULSAR, "spin-orbit-advance", "longitude_of_periastron", {"spin_to_orbit": 180.0})
    assert over == pytest.approx(-aligned, rel=1e-12, abs=0.0)
    state = DOUBLE_PULSAR.replace(projected_semi_major_axis=1.0)
    (s,) = (float(v) for v in state.known("sin_inclination"))
    cos_i = math.sqrt(1 - s**2)
    across = rate(state, "spin-orbit-advance", "longitude_of_periastron", {"spin_to_orbit": 90.0, "spin_azimuth": 0.0})
    # towards us in the orbital plane: cos lambda = sin i
    expected = rate(state, "spin-orbit-advance", "longitude_of_periastron") * cos_i * s / (2 * s**2)
    assert across == pytest.approx(expected, rel=1e-12, abs=0.0)


def test_geodetic_precession_as_published() -> None:
    """Pulsar B precesses by 5.0734(7) deg/yr in theory (Breton et al. 2008, Science 321, 104; memory)."""
    found = predicted(DOUBLE_PULSAR, "geodetic-precession", "geodetic_precession_rate_2") / DEG_PER_YEAR
    assert found == pytest.approx(5.0734, abs=7e-4)


@given(binaries(largest_eccentricity=0.9))
def test_deformations_differ_by_what_the_eccentricities_need(state: BinaryState) -> None:
    """delta_theta - delta_r = beta^2 X_1^2/2, which the second forms of advance and decay above need."""
    m_1, M, beta = (float(v) for v in state.known("mass_1", "total_mass", "orbital_velocity"))
    angular = predicted(state, "orbit-deformation", "angular_deformation")
    radial = predicted(state, "orbit-deformation", "radial_deformation")
    assert angular - radial == pytest.approx(beta**2 * (m_1 / M) ** 2 / 2, rel=1e-9, abs=1e-20)  # a difference


def test_mass_loss_from_first_principles() -> None:
    """Losing the mass of the lost rotational energy while a M stays the same widens the orbit at the predicted rate.

    2.27e-17 for each 1e45 g cm^2 in the double pulsar (computed from the published formula by others).
    """
    found = rate(DOUBLE_PULSAR, "spin-down-mass-loss", "orbital_period")
    assert found == pytest.approx(2.27e-17, abs=5e-20)
    with mp.workdps(50):
        M, P_b = (mpf(float(v)) for v in DOUBLE_PULSAR.known("total_mass", "orbital_period"))
        P, P_rate, I = mpf(0.02269937899), mpf(1.75993e-18), mpf(ONE_E45)
        step = mpf(10) ** 6

        def energy(t: mpf) -> mpf:  # Msun c^2
            return I * (2 * pi / (P + P_rate * t)) ** 2 / 2

        def period(t: mpf) -> mpf:  # a M = const, P_b^2 ~ a^3/M
            return P_b * ((M / (M + energy(t) - energy(0))) ** 4) ** mpf("0.5")

        slope = (period(step) - period(-step)) / (2 * step)
    assert found == pytest.approx(float(slope), rel=1e-9, abs=0.0)


def test_transverse_motion_from_first_principles() -> None:
    """A body in uniform motion: the second derivative of its distance is mu^2 d, whatever its radial speed."""
    mu, d = 2.0e-15, 3.0e10
    state = DOUBLE_PULSAR.replace(proper_motion_ra=0.6 * mu, proper_motion_dec=0.8 * mu, distance=d)
    with mp.workdps(60):
        step = mpf(10) ** 9

        def distance(t: mpf) -> mpf:
            return sqrt((mpf(d) + mpf("1e-4") * t) ** 2 + (mpf(mu) * mpf(d) * t) ** 2)

        bend = (distance(step) - 2 * distance(mpf(0)) + distance(-step)) / step**2
    (P_b,) = (float(v) for v in state.known("orbital_period"))
    assert rate(state, "transverse-motion", "orbital_period") == pytest.approx(P_b * float(bend), rel=1e-6, abs=0.0)
    assert rate(state, "transverse-motion", "spin_period_1") == pytest.approx(
        0.02269937899 * float(bend), rel=1e-6, abs=0.0
    )


@given(st.floats(0.0, 360.0), st.floats(-89.0, 89.0))
def test_galactic_directions_against_astropy(ra: float, dec: float) -> None:
    """Directions in Galactic axes agree with astropy's to its own digits."""
    found = galactic_direction(np.float64(math.radians(ra)), np.float64(math.radians(dec)))
    theirs = SkyCoord(ra * u.deg, dec * u.deg, frame="icrs").galactic.cartesian.xyz.value
    # astropy's axes and the Hipparcos rotation differ by some 20 mas, 1e-7
    assert np.allclose(found, theirs, atol=2e-7)


def sky(l: float, b: float) -> tuple[float, float]:
    """Return right ascension and declination [rad] of a Galactic direction [deg]."""
    there = SkyCoord(l * u.deg, b * u.deg, frame="galactic").icrs
    return float(there.ra.radian), float(there.dec.radian)


def settings_of(model: str) -> Settings:
    """Return settings of the Galactic effect."""
    return Settings({"sun_distance": np.float64(8.275), "sun_speed": np.float64(240.5)}, {"model": model})


@pytest.mark.parametrize(("l", "b", "d"), [(49.9, 2.1, 4.1), (245.2, -4.5, 0.735), (120.0, 30.0, 1.0), (0.5, 1.0, 5.0)])
def test_flat_rotation_by_vectors(l: float, b: float, d: float) -> None:
    """The published formula is the difference of two centripetal accelerations along the line of sight, plus K_z."""
    ra, dec = sky(l, b)
    state = BinaryState(right_ascension=ra, declination=dec, distance=d * KPC)
    found = float(acceleration(state, settings_of("flat"))) * SPEED_OF_LIGHT  # m/s^2
    n = np.array(
        [math.cos(math.radians(b)) * math.cos(math.radians(l)), math.cos(math.radians(b)) * math.sin(math.radians(l))]
    )
    R_0, Theta = 8.275e3 * PARSEC, 240.5e3
    centre = np.array([R_0, 0.0])  # from the Sun
    binary = n * d * 1e3 * PARSEC
    ours = Theta**2 / R_0 * centre / R_0
    its = Theta**2 * (centre - binary) / np.sum((centre - binary) ** 2)
    z = abs(d * math.sin(math.radians(b)))
    K_z = (2.27 * z + 3.68 * (1 - math.exp(-4.31 * z))) * 1e-11
    expected = float((its - ours) @ n) - K_z * abs(math.sin(math.radians(b)))
    assert found == pytest.approx(expected, rel=1e-5, abs=1e-17)  # the 20 mas between the two frames


def test_the_potential_turns_the_sun_as_published() -> None:
    """Irrgang et al. 2013, model I: 242.0 km/s at 8.40 kpc (memory), and forces that come from one potential."""
    x = np.float64(8.40)
    pull = -float(bulge_disc_halo(x, np.float64(0), np.float64(0))[0])  # kpc/s^2
    speed = math.sqrt(pull * 8.40) * 1e3 * PARSEC / 1e3
    assert speed == pytest.approx(242.0, abs=0.5)
    # the curl vanishes: dg_x/dz = dg_z/dx
    h = 1e-5
    x, z = np.float64(5.0), np.float64(0.7)
    slope_xz = (bulge_disc_halo(x, np.float64(0), z + h)[0] - bulge_disc_halo(x, np.float64(0), z - h)[0]) / (2 * h)
    slope_zx = (bulge_disc_halo(x + h, np.float64(0), z)[2] - bulge_disc_halo(x - h, np.float64(0), z)[2]) / (2 * h)
    assert slope_xz == pytest.approx(slope_zx, rel=1e-8, abs=0.0)


def test_the_two_galaxies_agree_roughly() -> None:
    """Both models pull pulsars in the Sun's neighbourhood alike to a quarter, as models of one Galaxy must."""
    for l, b, d in ((49.9, 2.1, 4.1), (245.2, -4.5, 0.735), (120.0, 30.0, 1.0)):
        ra, dec = sky(l, b)
        state = BinaryState(right_ascension=ra, declination=dec, distance=d * KPC)
        flat, smooth = (float(acceleration(state, settings_of(m))) for m in ("flat", "bulge-disc-halo"))
        assert smooth == pytest.approx(flat, rel=0.35, abs=0.0), (l, b)


@given(st.floats(5.0, 175.0), st.floats(0.0, 360.0), st.floats(0.0, 360.0), st.floats(-1.0, 1.0), st.floats(-1.0, 1.0))
def test_drift_by_turning_the_line_of_sight(i: float, node: float, omega: float, mu_a: float, mu_d: float) -> None:
    """Both drifts are those of a fixed orbit seen along a turning line of sight, by brute force.

    East, north and away from us make a right-handed triad at the binary. The ascending node is where body 1 recedes.
    """
    i, node, omega = (math.radians(angle) for angle in (i, node, omega))
    east, north, away = np.eye(3)
    to_node = math.sin(node) * east + math.cos(node) * north
    L = -math.cos(i) * away + math.sin(i) * np.cross(to_node, away)  # body 1 crosses the node going away
    to_periastron = math.cos(omega) * to_node + math.sin(omega) * np.cross(L, to_node)
    mu = np.array([mu_a, mu_d]) * 1e-14

    def seen(t: float) -> tuple[float, float]:
        """Return sin i and omega as seen at a time."""
        K = away + (mu[0] * east + mu[1] * north) * t
        K /= np.linalg.norm(K)
        n = np.cross(K, L)
        sin_i = float(np.linalg.norm(n))
        n /= sin_i
        assert float(np.cross(L, n) @ K) > 0.0
        return sin_i, math.atan2(float(to_periastron @ np.cross(L, n)), float(to_periastron @ n))

    assume(np.linalg.norm(mu) > 1e-20)
    step = 1e-5 / float(np.linalg.norm(mu))  # turns the line of sight by 1e-5 rad
    before, after = seen(-step), seen(step)
    x = 2.0
    state = BinaryState(
        proper_motion_ra=mu[0], proper_motion_dec=mu[1], ascending_node=node, inclination=i, projected_semi_major_axis=x
    )
    sin_i = math.sin(i)
    scale = float(np.linalg.norm(mu)) / sin_i**3 + 1e-30
    x_rate = x / sin_i * (after[0] - before[0]) / (2 * step)
    turn = (after[1] - before[1] + math.pi) % (2 * math.pi) - math.pi
    # central differences over 1e-5 rad: rounding 1e-16/1e-5 of the rate, and the third derivative's 1e-10
    assert abs(rate(state, "proper-motion-drift", "projected_semi_major_axis") - x_rate) < 1e-8 * x * scale
    assert abs(rate(state, "proper-motion-drift", "longitude_of_periastron") - turn / (2 * step)) < 1e-8 * scale


def test_dipole_decay_from_the_radiated_power() -> None:
    """The decay by dipole waves is the averaged power (1/3) (mu (alpha_1-alpha_2))^2 <a^2> over the orbital energy."""
    e = 0.6
    state = DOUBLE_PULSAR.replace(eccentricity=e)
    m_1, m_2, M, n, P_b = (
        float(v) for v in state.known("mass_1", "mass_2", "total_mass", "mean_motion", "orbital_period")
    )
    E = np.linspace(0.0, 2 * np.pi, 2000, endpoint=False)
    r = 1 - e * np.cos(E)  # of a
    mean = np.mean(r / r**4)  # of (GM/a^2)^2, over the mean anomaly
    mu, a = T_SUN * m_1 * m_2 / M, (T_SUN * M / n**2) ** (1 / 3)
    power = (mu * 0.003) ** 2 / 3 * (T_SUN * M / a**2) ** 2 * mean
    expected = -1.5 * P_b * power / (T_SUN * M * mu / (2 * a))
    found = rate(state, "dipole-radiation", "orbital_period", {"charge_1": 0.004, "charge_2": 0.001})
    assert found == pytest.approx(expected, rel=1e-12, abs=0.0)


@pytest.mark.parametrize("spinning", [False, True])
def test_flattened_companion_by_integrating_the_orbit(spinning: bool) -> None:
    """The ellipse turns as under the radial pulls of tide and rotational bulge, integrated by scipy.

    Tide raised on body 2: GM/r^2 [1 + 6 k (m_1/m_2) (R/r)^5]; aligned rotation: [1 + k Omega^2 R^3/(G m_2) (R/r)^2].
    """
    own = {"companion_radius": 0.06, "apsidal_constant": 0.01, "companion_spin_rate": 0.05 if spinning else 0.0}
    e = 0.3
    state = BinaryState(mass_1=1.4, mass_2=1.0, orbital_period=4000.0, eccentricity=e)
    a, n = (float(v) for v in state.known("relative_semi_major_axis", "mean_motion"))
    R = 0.06 * 6.957e8 / SPEED_OF_LIGHT / a
    k = own["apsidal_constant"]
    bulge = k * own["companion_spin_rate"] ** 2 * (R * a) ** 3 / (T_SUN * 1.0)

    def motion(t: float, y: Any) -> list[float]:
        del t
        r = math.hypot(y[0], y[1])
        pull = -(1.0 + 6.0 * k * 1.4 * (R / r) ** 5 + bulge * (R / r) ** 2) / r**3
        return [y[2], y[3], pull * y[0], pull * y[1]]

    def outward(t: float, y: Any) -> float:
        del t
        return float(y[0] * y[2] + y[1] * y[3])

    outward.direction = 1.0  # type: ignore[attr-defined]  # as solve_ivp reads it
    start = [1 - e, 0.0, 0.0, math.sqrt((1 + e) / (1 - e))]
    orbits = 20
    found = solve_ivp(
        motion, (0.0, 2 * math.pi * (orbits + 0.5)), start, "DOP853", rtol=1e-12, atol=1e-13, events=outward
    )
    end = found.y_events[0][orbits - 1 if abs(found.t_events[0][0]) > 1 else orbits]
    measured = math.atan2(end[1], end[0]) / orbits / (2 * math.pi)
    predicted_turn = rate(state, "tidal-and-rotational-quadrupole", "longitude_of_periastron", own) / n
    # first order in the flattening: the second order is the advance itself times a few, and the apse's own drift of n
    assert measured == pytest.approx(predicted_turn, rel=max(50 * predicted_turn, 1e-4), abs=0.0)


def test_a_tilted_companion() -> None:
    """At theta = 90 deg the rotational term is -1/2 of the aligned one (Lai, Bildsten & Kaspi 1995; Wex 1998)."""
    own = {"companion_radius": 1.0, "apsidal_constant": 0.01, "companion_spin_rate": 1e-5}
    state = BinaryState(mass_1=1.4, mass_2=5.0, orbital_period=5e6, eccentricity=0.3)
    name, of = "tidal-and-rotational-quadrupole", "longitude_of_periastron"
    tide = rate(state, name, of, {**own, "companion_spin_rate": 0.0})
    aligned, across = rate(state, name, of, own), rate(state, name, of, {**own, "companion_spin_to_orbit": 90.0})
    assert across - tide == pytest.approx(-0.5 * (aligned - tide), rel=1e-9, abs=0.0)
