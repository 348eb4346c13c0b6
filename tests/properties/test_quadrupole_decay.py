"""Quadrupole decay: rates, time to merger and track against mpmath at 40 digits, published numbers and laws of scale.

The oracle is Peters's integral (Peters 1964, Phys. Rev. 136, B1224, eq. (5.14); equation numbers from memory here and
below), integrated anew. Nothing is compared with clockfall's own earlier output.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np
import pytest
import scipy.integrate
from hypothesis import given, settings
from hypothesis import strategies as st
from mpmath import mp, mpf
from numpy.polynomial import polynomial

from clockfall.binary.constants import GM_SUN, SECONDS_PER_YEAR, SOLAR_MASS, SPEED_OF_LIGHT, T_SUN
from clockfall.binary.state import BinaryState
from clockfall.effects import ClosedFormTrack
from clockfall.effects.host import Host
from clockfall.effects.loading import installed_candidates, load_host
from clockfall.testing.strategies import binaries
from clockfall_effects import quadrupole_decay
from clockfall_effects.quadrupole_decay import (
    R_CONSTANT,
    R_POLES,
    R_SLOPE,
    S_DENOMINATOR,
    S_NUMERATOR,
    closed_form_track,
    enhancement,
    merger_fraction,
    merger_time,
)

DIGITS = 40
with mp.workdps(DIGITS):
    K = mpf(121) / 304
TINY = float(np.finfo(float).tiny)

# One rounding is 1.1e-16. The longest product here has some thirty factors and terms, few of them raised to a power.
ROUNDINGS = 5e-15
ULP = float(np.finfo(float).eps)

examples = settings(max_examples=60, deadline=None)


@pytest.fixture(autouse=True)
def _as_the_host_calls() -> Iterator[None]:
    """Floating-point warnings are errors in a hook, and mpmath works with 40 digits."""
    with np.errstate(divide="raise", over="raise", invalid="raise"), mp.workdps(DIGITS):
        yield


# --- the oracle ------------------------------------------------------------------------------------------------------


def integral(e: mpf, one_minus_e: mpf) -> mpf:
    """Integrate e^(29/19) w^(1181/2299) (1 - e^2)^(-3/2) from 0 to e (Peters 1964, eq. (5.14)).

    In u = artanh e, which spreads the pole at e = 1 over a long way: (1 - e^2)^(-3/2) de = cosh u du.
    """

    def integrand(u: mpf) -> mpf:
        e = mp.tanh(u)
        return e ** (mpf(29) / 19) * (1 + K * e**2) ** (mpf(1181) / 2299) * mp.cosh(u)

    return mp.quad(integrand, [0, mp.log((1 + e) / one_minus_e) / 2])


def shape_by_integral(s: mpf) -> mpf:
    """Return S(s) = (48/19) (a/c_0)^(-4) integral/s^7, a/c_0 = e^(12/19) w^(870/2299)/s^2 (Peters 1964, eq. (5.11))."""
    if s == 0:
        return mpf(768) / 425  # known limit, (768/425) T_circular (1 - e^2)^(7/2) as e -> 1
    if s == 1:
        return mpf(1)  # T_circular
    e = mp.sqrt((1 - s) * (1 + s))
    a_over_c_0 = e ** (mpf(12) / 19) * (1 + K * e**2) ** (mpf(870) / 2299) / s**2
    return mpf(48) / 19 * integral(e, s**2 / (1 + e)) / a_over_c_0**4 / s**7


class Interpolant:
    """S(s) on [0, 1] from its values at Chebyshev's nodes, by the second barycentric formula.

    The nearest singularity, s = -1, lies on the ellipse of foci 0 and 1 with parameter 3 + sqrt(8), so that 44 nodes
    leave 5.83^-44 = 2e-34.
    """

    NODES = 44

    def __init__(self) -> None:
        angles = [mp.pi * (2 * k + 1) / (2 * self.NODES) for k in range(self.NODES)]
        self.at = [(1 + mp.cos(angle)) / 2 for angle in angles]
        self.weights = [(-1) ** k * mp.sin(angle) for k, angle in enumerate(angles)]
        self.values = [shape_by_integral(s) for s in self.at]

    def __call__(self, s: mpf) -> mpf:
        """Return S(s)."""
        if s in self.at:
            return self.values[self.at.index(s)]
        parts = [weight / (s - node) for weight, node in zip(self.weights, self.at, strict=True)]
        return mp.fdot(parts, self.values) / mp.fsum(parts)


@pytest.fixture(scope="module")
def shape() -> Interpolant:
    """Return S(s) to 30 digits."""
    with mp.workdps(DIGITS):
        return Interpolant()


class Exact:
    """One binary at 40 digits, from the very doubles of a state."""

    def __init__(self, state: BinaryState, k: int | tuple[()] = ()) -> None:
        names = ("mass_1", "mass_2", "orbital_period", "eccentricity", "one_minus_eccentricity")
        m_1, m_2, self.P_b, self.e, rest = (mpf(float(values[k])) for values in state.known(*names))
        if self.e >= 0.5:
            self.e = 1 - rest  # what counts near 1
        self.s_2 = (1 - self.e) * (1 + self.e)
        self.n = 2 * mp.pi / self.P_b
        T = mpf(GM_SUN) / mpf(SPEED_OF_LIGHT) ** 3
        self.scale = (T * self.n) ** (mpf(5) / 3) * m_1 * m_2 / mp.cbrt(m_1 + m_2)

    @property
    def period_rate(self) -> mpf:
        """Peters & Mathews 1963, Phys. Rev. 131, 435, eqs. (16-17), by Kepler's third law."""
        F = (1 + mpf(73) / 24 * self.e**2 + mpf(37) / 96 * self.e**4) / self.s_2 ** mpf("3.5")
        return -192 * mp.pi / 5 * self.scale * F

    @property
    def eccentricity_rate(self) -> mpf:
        """Peters 1964, eq. (5.7)."""
        return -mpf(304) / 15 * self.scale * self.n * self.e * (1 + K * self.e**2) / self.s_2 ** mpf("2.5")

    def merger_time(self, shape: Callable[[mpf], mpf]) -> mpf:
        """Peters 1964, eqs. (5.10, 5.14)."""
        s = mp.sqrt(self.s_2)
        return 5 / (256 * self.scale * self.n) * s**7 * shape(s)


def ln_time_left(shape: Callable[[mpf], mpf], ln_q: mpf) -> tuple[mpf, mpf]:
    """Return ln(a^4 s^7 S) + const and its slope in ln q, q = e^2/(1 - e^2), by Peters 1964, eqs. (5.11, 5.7)."""
    q = mp.exp(ln_q)
    w, S = 1 + K * q / (1 + q), shape(1 / mp.sqrt(1 + q))
    return (
        mpf(24) / 19 * ln_q - mpf(29) / 38 * mp.log1p(q) + mpf(3480) / 2299 * mp.log(w) + mp.log(S),
        mpf(24) / 19 / (w * S),
    )


def exact_track(shape: Callable[[mpf], mpf], exact: Exact, left: mpf) -> tuple[mpf, mpf]:
    """Return the period and the eccentricity when `left` is the time left in units of the time to merger."""
    if exact.e == 0:
        return exact.P_b * left ** (mpf(3) / 8), mpf(0)
    ln_q_0 = mp.log(exact.e**2 / exact.s_2)
    goal = ln_time_left(shape, ln_q_0)[0] + mp.log(left)
    ln_q = ln_q_0
    for _ in range(60):  # Newton on a concave function, which converges from anywhere
        ln_h, slope = ln_time_left(shape, ln_q)
        ln_q -= (ln_h - goal) / slope
        if abs(ln_h - goal) < mpf(10) ** -30:
            break
    else:
        raise AssertionError("the oracle did not converge")

    def a(ln_q: mpf) -> mpf:
        e_2 = mp.exp(ln_q) / (1 + mp.exp(ln_q))
        return e_2 ** (mpf(6) / 19) * (1 + mp.exp(ln_q)) * (1 + K * e_2) ** (mpf(870) / 2299)

    return exact.P_b * (a(ln_q) / a(ln_q_0)) ** mpf("1.5"), mp.sqrt(mp.exp(ln_q) / (1 + mp.exp(ln_q)))


def error(found: Any, exact: mpf) -> float:
    """Return the relative error of a double; where the exact value is 0, the absolute one."""
    apart = mpf(float(found)) - exact
    return float(abs(apart / exact if exact else apart))


def binary(e: Any = 0.0, P_b: Any = 1e4, m_1: Any = 1.4, m_2: Any = 1.3, **more: Any) -> BinaryState:
    """Return a state."""
    fields = {"mass_1": m_1, "mass_2": m_2, "orbital_period": P_b, **({} if more else {"eccentricity": e}), **more}
    return BinaryState(**fields)


def systems(number: int) -> BinaryState:
    """Return random binaries: masses 0.1 ... 100 Msun, periods 10 s ... 10^4 d with beta < 0.3, e in [0, 0.9999]."""
    rng = np.random.default_rng(1964)
    m_1, m_2 = 10.0 ** rng.uniform(-1.0, 2.0, (2, 2 * number))
    P_b = 10.0 ** rng.uniform(1.0, math.log10(86400e4), 2 * number)
    slow = np.flatnonzero(T_SUN * (m_1 + m_2) * 2.0 * np.pi / P_b < 0.3**3)[:number]
    assert slow.size == number
    half = number // 2
    e = np.concatenate(
        [[0.0, 1e-12, 0.9999], rng.uniform(0.0, 0.9999, half - 3), 1.0 - 10.0 ** rng.uniform(-4, 0, half)]
    )
    return binary(e, P_b[slow], m_1[slow], m_2[slow])


# --- the coefficients ------------------------------------------------------------------------------------------------


def test_the_oracle_interpolates_to_30_digits(shape: Interpolant) -> None:
    """The interpolant of S(s), made from Peters's integral, is Peters's integral between its nodes and at both ends."""
    for s in (mpf(0), mpf("1e-8"), mpf("0.013"), mpf("0.31"), mpf("0.77"), mpf("0.9993"), mpf(1)):
        assert abs(shape(s) / shape_by_integral(s) - 1) < mpf(10) ** -30, s


def test_the_committed_coefficients_follow_the_integral(shape: Interpolant) -> None:
    """The rational S(s), evaluated at 40 digits, is S to 2e-16 from e = 0 to 1 - e = 1e-15 and beyond."""
    # s = sqrt(1 - e^2) for 1 - e = 1e-16 ... 1, then an even walk, which sees the middle better
    near_one = [mp.sqrt(r * (2 - r)) for r in (mpf(10) ** (-mpf(k) / 10) for k in range(161))]
    for s in [mpf(0), *near_one, *(mpf(k) / 300 for k in range(301))]:
        found = exact_polynomial(S_NUMERATOR, s) / exact_polynomial(S_DENOMINATOR, s)
        # 1.2e-16 of the approximation, and the rounding of 17 coefficients
        assert abs(found / shape(s) - 1) < 2e-16, mp.nstr(s)


def exact_polynomial(coefficients: Sequence[float | mpf], x: mpf) -> mpf:
    """Return the polynomial, constant term first."""
    return mp.fsum(mpf(coefficient) * x**j for j, coefficient in enumerate(coefficients))


def remez(f: Callable[[mpf], mpf], above: int, below: int, grid: list[mpf]) -> tuple[list[mpf], mpf]:
    """Return the coefficients (both polynomials, constant terms first) and the largest relative error of a minimax fit.

    Remez's exchange on a grid: p(x) = f(x) (1 +- E) q(x) at above + below + 2 points where the error is largest, q
    starting with 1; the product E q is linearised and iterated.
    """
    points = above + below + 2
    values = [f(x) for x in grid]
    at = [round((len(grid) - 1) * k / (points - 1)) for k in range(points)]  # the grid is Chebyshev's, so this is too
    E = mpf(0)
    for _ in range(15):
        q = [mpf(1)] + [mpf(0)] * below
        for _ in range(8):
            rows, right = [], []
            for i, k in enumerate(at):
                x, y, sign = grid[k], values[k], (-1) ** i
                row = [x**j for j in range(above + 1)] + [-y * (1 + sign * E) * x**j for j in range(1, below + 1)]
                rows.append([*row, -y * sign * exact_polynomial(q, x)])
                right.append(y * (1 + sign * E))
            solved = mp.lu_solve(mp.matrix(rows), mp.matrix(right))
            p, q = list(solved[: above + 1]), [mpf(1), *solved[above + 1 : -1]]
            E += solved[points - 1]
        errors = [exact_polynomial(p, x) / exact_polynomial(q, x) / y - 1 for x, y in zip(grid, values, strict=True)]
        turns: list[int] = []  # the largest error of each run of one sign
        for k, value in enumerate(errors):
            if not turns or (value > 0) != (errors[turns[-1]] > 0):
                turns.append(k)
            elif abs(value) > abs(errors[turns[-1]]):
                turns[-1] = k
        assert len(turns) == points
        largest = max(abs(value) for value in errors)
        if turns == at or largest < abs(E) * mpf("1.001"):
            return p + q, largest
        at = turns
    raise AssertionError("the exchange did not settle")


def test_the_committed_coefficients_are_derived(shape: Interpolant) -> None:
    """The minimax fit of type (8, 7), derived anew, has the error that is claimed and agrees with what is committed."""
    grid = [(1 - mp.cos(mp.pi * k / 400)) / 2 for k in range(401)]
    derived, largest = remez(shape, 8, 7, grid)
    assert float(largest) == pytest.approx(1.18e-16, rel=0.01, abs=0.0)
    committed = [*S_NUMERATOR, *S_DENOMINATOR]
    # single coefficients are as soft as the problem is ill-conditioned; the grid moves them by 1e-4 of its spacing
    for one, other in zip(committed, derived, strict=True):
        assert one == pytest.approx(float(other), rel=1e-3, abs=0.0)


def test_the_factor_of_the_merger_time(shape: Interpolant) -> None:
    """In doubles s^7 S(s) is right to 1e-15 for the very double 1 - e^2, from e = 0 to 1 - e = 1e-15."""
    rng = np.random.default_rng(5)
    s_2 = np.concatenate([[1.0, 2e-15, np.nextafter(1.0, 0.0)], rng.random(300), 10.0 ** rng.uniform(-14.7, 0.0, 300)])
    for one, fraction in zip(s_2, merger_fraction(s_2), strict=True):
        s = mp.sqrt(mpf(float(one)))
        # the fit, s^7 as four products of one root, and Horner's rule, whose early roundings fade
        assert error(fraction, s**7 * shape(s)) < 1e-15, one


def test_the_limits_of_the_merger_time() -> None:
    """T/T_circular is 1 at e = 0, 1 - (157/43) e^2 near it, and (768/425) (1 - e^2)^(7/2) as e goes to 1.

    The first correction follows from eqs. (5.6, 5.7): with T = T_circular (1 + alpha e^2), dT/dt = -1 asks for
    alpha = -157/43. The last limit is Peters 1964, after eq. (5.14).
    """
    assert merger_fraction(np.array(1.0)) == pytest.approx(1.0, rel=1e-15, abs=0)
    e = 1e-3
    # the next term is of order e^4 = 1e-12
    assert merger_fraction(np.array((1 - e) * (1 + e))) == pytest.approx(1.0 - 157.0 / 43.0 * e**2, abs=1e-11)
    for s_2 in (1e-10, 1e-14):
        # approached as sqrt(1 - e^2), with a coefficient below 2
        assert merger_fraction(np.array(s_2)) == pytest.approx(
            768.0 / 425.0 * s_2**3.5, rel=2 * math.sqrt(s_2), abs=0.0
        )


# --- every number at 40 digits ---------------------------------------------------------------------------------------


def test_rates_at_40_digits() -> None:
    """Both rates agree with their formulas to 5e-15, far below the 1e-12 promised, on 300 random systems."""
    state = systems(300)
    rates = quadrupole_decay.secular_rates(state).of
    period_rate, eccentricity_rate = np.asarray(rates["orbital_period"]), np.asarray(rates["eccentricity"])
    for k in range(300):
        exact = Exact(state, k)
        assert error(period_rate[k], exact.period_rate) < ROUNDINGS, k
        assert error(eccentricity_rate[k], exact.eccentricity_rate) < ROUNDINGS, k


def test_merger_time_at_40_digits(shape: Interpolant) -> None:
    """The time to merger agrees with Peters's integral to 5e-15 on 300 random systems and on 150 with e near 1."""
    rest = 10.0 ** np.random.default_rng(6).uniform(-15.0, -4.0, 150)
    for state in (systems(300), binary(one_minus_eccentricity=rest)):
        T = merger_time(state)
        for k in range(len(T)):
            assert error(T[k], Exact(state, k).merger_time(shape)) < ROUNDINGS, k


def test_merger_time_by_quadrature_of_each_system() -> None:
    """The same without any interpolation: Peters's integral up to the very eccentricity of 23 systems."""
    state = systems(300)
    T = merger_time(state)
    for k in range(3, 300, 13):
        assert error(T[k], Exact(state, k).merger_time(shape_by_integral)) < ROUNDINGS, k


# --- published numbers -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("e", "published"),
    [(0.1, 1.06734775), (0.3, 1.77624328), (0.5, 4.884312), (0.7, 27.2659892), (0.9, 1243.11348)],
)
def test_enhancement(e: float, published: float) -> None:
    """F(e) is that of Peters & Mathews 1963, eq. (17) (equation number from memory), evaluated at 50 digits."""
    found = enhancement(np.array(e), np.array((1 - e) * (1 + e)))
    assert found == pytest.approx(
        published, rel=5e-9, abs=0.0
    )  # nine printed digits, 4.884312 being rounded at the seventh
    assert np.shape(found) == ()


def reduced_and_total(state: BinaryState) -> float:
    """Return mu M^(2/3) [Msun^(5/3)], the chirp mass to the power 5/3."""
    m_1, m_2, M = state.known("mass_1", "mass_2", "total_mass")
    return float(m_1 * m_2 / M ** (1.0 / 3.0))


@pytest.mark.parametrize(("m_1", "m_2"), [(1.4, 1.3), (0.5, 20.0)])
def test_published_merger_times_of_circular_orbits(m_1: float, m_2: float) -> None:
    """9.829e6 yr from a period of 1 h for mu M^(2/3) = 1 Msun^(5/3); 2.18 s from a wave of 100 Hz for M_c = 1.21 Msun.

    Maggiore 2008, Gravitational Waves 1, eqs. (4.28, 4.21), figures and numbers from memory. The first is printed for
    M = mu = 1 Msun, which no pair of bodies has (mu is at most M/4): those are units of the formula, in which masses
    stand as mu M^(2/3) alone. So the time of a possible pair is brought there by that factor.
    """
    hour = binary(0.0, 3600.0, m_1, m_2)
    # four printed digits, and the G and solar mass of 2008
    assert merger_time(hour) * reduced_and_total(hour) / SECONDS_PER_YEAR == pytest.approx(9.829e6, rel=5e-4, abs=0.0)
    wave = binary(0.0, 2.0 / 100.0, m_1, m_2)  # two waves each orbit
    # 2.18 s has three digits, and so has 1.21 Msun, to the power 5/3
    found = merger_time(wave) * reduced_and_total(wave) / 1.21 ** (5.0 / 3.0)
    assert found == pytest.approx(2.18, abs=0.005 + 2.18 * 5.0 / 3.0 * 0.005 / 1.21)


def test_power_radiated_by_jupiter() -> None:
    """Jupiter on a circular orbit radiates 5.2 kW (Weinberg 1972; Maggiore 2008).

    The energy is -G m_1 m_2/(2a), and goes as P_b^(-2/3). Jupiter: 1/1047.3486 of the Sun (IAU 2009 system), 4332.59 d.
    """
    state = binary(0.0, 4332.59 * 86400.0, 1.0, 1.0 / 1047.3486)
    m_1, m_2, a, P_b = state.known("mass_1", "mass_2", "relative_semi_major_axis", "orbital_period")
    energy = T_SUN * m_1 * m_2 / (2.0 * a) * SOLAR_MASS * SPEED_OF_LIGHT**2  # J; the masses as times, the light-second
    power = 2.0 / 3.0 * energy * -quadrupole_decay.secular_rates(state).of["orbital_period"] / P_b
    assert power / 1e3 == pytest.approx(5.2, abs=0.05)  # printed digits


# --- the rates integrated --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("e_0", [0.01, 0.3, 0.6171, 0.9, 0.99, 0.9999])
def test_merger_time_by_integrating_the_rates(e_0: float) -> None:
    """The rates, integrated until the orbit is circular and gone, take the time to merger, to 1e-10.

    The independent variable is ln e, in which nothing is singular: y = (ln P_b, t). From e = e_0 exp(-15) on the time
    left is that of a circular orbit, and a share exp(-15 48/19) = 4e-17 of the whole.
    """
    state = binary(e_0)

    def slope(ln_e: float, y: np.ndarray) -> list[float]:
        now = binary(math.exp(ln_e), math.exp(y[0]))
        rates = quadrupole_decay.secular_rates(now).of
        per_time = float(rates["eccentricity"] / now.known("eccentricity")[0])
        return [float(rates["orbital_period"]) / math.exp(y[0]) / per_time, 1.0 / per_time]

    start = [math.log(1e4), 0.0]
    T = float(merger_time(state))
    done = scipy.integrate.solve_ivp(
        slope, (math.log(e_0), math.log(e_0) - 15.0), start, "DOP853", rtol=1e-12, atol=[1e-12, 1e-12 * T]
    )
    assert done.y[1, -1] == pytest.approx(T, rel=1e-10, abs=0.0)  # a hundred steps of 1e-12


def test_circular_merger_time_by_separation_of_variables() -> None:
    """At e = 0 the rate goes as P_b^(-5/3), so that the time to merger is (3/8) P_b over its rate, exactly."""
    state = binary(np.zeros(4), 10.0 ** np.arange(2.0, 6.0))
    (P_b,) = state.known("orbital_period")
    expected = 3.0 / 8.0 * P_b / -np.asarray(quadrupole_decay.secular_rates(state).of["orbital_period"])
    np.testing.assert_allclose(merger_time(state), expected, rtol=ROUNDINGS)


# --- laws of scale and limits ----------------------------------------------------------------------------------------


def fitted_slope(x: np.ndarray, y: np.ndarray) -> float:
    """Return the slope of ln y over ln x."""
    return float(polynomial.polyfit(np.log(x), np.log(y), 1)[1])


@pytest.mark.parametrize("e", [0.0, 0.6, 0.999])
def test_fitted_slopes(e: float) -> None:
    """Rate as P_b^(-5/3), merger time as P_b^(8/3) at fixed masses; as masses^(-5/3) at fixed period."""
    P_b, masses = np.geomspace(1e3, 1e8, 20), np.geomspace(0.1, 10.0, 20)
    by_period, by_mass = binary(e, P_b), binary(e, 1e6, 1.4 * masses, 1.3 * masses)
    rates = quadrupole_decay.secular_rates(by_period).of
    # 20 logarithms up to 150, each with a rounding of 3e-14 at most, over five to eleven units of ln x
    assert fitted_slope(P_b, -np.asarray(rates["orbital_period"])) == pytest.approx(-5.0 / 3.0, abs=1e-14)
    assert fitted_slope(P_b, merger_time(by_period)) == pytest.approx(8.0 / 3.0, abs=1e-14)
    assert fitted_slope(masses, merger_time(by_mass)) == pytest.approx(-5.0 / 3.0, abs=1e-14)
    if e:
        assert fitted_slope(P_b, -np.asarray(rates["eccentricity"])) == pytest.approx(-8.0 / 3.0, abs=1e-14)


@examples
@given(binaries(), st.floats(0.1, 10.0))
def test_masses_and_times_scaled_together(state: BinaryState, factor: float) -> None:
    """Nothing but T_sun M/P_b has a scale: with masses and period, the merger time grows by the same factor."""
    m_1, m_2, P_b = state.known("mass_1", "mass_2", "orbital_period")
    scaled = state.replace(mass_1=m_1 * factor, mass_2=m_2 * factor, orbital_period=P_b * factor)
    assert merger_time(scaled) == pytest.approx(merger_time(state) * factor, rel=ROUNDINGS, abs=0)


@examples
@given(binaries())
def test_exchange_of_the_bodies(state: BinaryState) -> None:
    """It does not matter which body is timed, to the last bit: sum and product do not know their order."""
    m_1, m_2 = state.known("mass_1", "mass_2")
    other = state.replace(mass_1=m_2, mass_2=m_1)
    assert merger_time(other) == merger_time(state)
    one_rate, other_rate = (quadrupole_decay.secular_rates(s).of["orbital_period"] for s in (state, other))
    assert other_rate == one_rate


@examples
@given(binaries())
def test_the_orbit_decays(state: BinaryState) -> None:
    """The period shrinks, the eccentricity does not grow, and the time to merger is positive."""
    rates = quadrupole_decay.secular_rates(state).of
    assert rates["orbital_period"] < 0.0
    assert rates["eccentricity"] <= 0.0
    assert merger_time(state) > 0.0


@examples
@given(binaries(), st.floats(0.0, 1.0))
def test_eccentric_orbits_merge_sooner(state: BinaryState, share: float) -> None:
    """At the same masses and period the time to merger falls with e."""
    (e,) = state.known("eccentricity")
    rounder = state.replace(eccentricity=e * share)
    assert merger_time(rounder) >= merger_time(state) * (1.0 - ROUNDINGS)


def test_strictly_sooner() -> None:
    """On an even walk over e from 0 to 1 the time to merger falls at each step, and the decay grows."""
    state = binary(np.linspace(0.0, 1.0, 10_001)[:-1])
    assert (np.diff(merger_time(state)) < 0.0).all()
    assert (np.diff(np.asarray(quadrupole_decay.secular_rates(state).of["orbital_period"])) < 0.0).all()


@pytest.mark.parametrize("e", [5e-324, 1e-200, 1e-160, 1e-12])
def test_no_eccentricity_is_too_small(e: float) -> None:
    """As e goes to 0 everything goes to its value at e = 0, denormal numbers included, and e decays by its own law."""
    round_one, nearly = binary(0.0), binary(e)
    T = float(merger_time(round_one))
    assert merger_time(nearly) == T
    rates = quadrupole_decay.secular_rates(nearly).of
    assert rates["orbital_period"] == quadrupole_decay.secular_rates(round_one).of["orbital_period"]
    times = T * np.array([-3.0, 0.0, 0.5, 0.999])
    track, other = closed_form_track(round_one, times), closed_form_track(nearly, times)
    np.testing.assert_allclose(other.orbital_period, track.orbital_period, rtol=1e-15)
    # e goes as a^(19/12) (Peters 1964, eq. (5.11)), a as the fourth root of the time left; a denormal keeps no digits
    expected = e * (1.0 - times / T) ** (19.0 / 48.0)
    np.testing.assert_allclose(other.eccentricity, expected, rtol=1e-14, atol=5e-324)


@pytest.mark.parametrize("rest", [1e-8, 1e-16, 1e-30, 1e-80])
def test_no_eccentricity_is_too_large(rest: float) -> None:
    """As e goes to 1 everything is finite and goes as the power of 1 - e^2 that its limit has."""
    state = binary(one_minus_eccentricity=rest)
    rates = quadrupole_decay.secular_rates(state).of
    # F goes to (425/96) (2 (1 - e))^(-7/2); the relative corrections are of order sqrt(1 - e) at most
    F = rates["orbital_period"] / quadrupole_decay.secular_rates(binary(0.0)).of["orbital_period"]
    assert pytest.approx(425.0 / 96.0, rel=3e-8, abs=0.0) == F * (2.0 * rest) ** 3.5
    slack = ROUNDINGS + 2.0 * math.sqrt(2.0 * rest)
    assert merger_time(state) / merger_time(binary(0.0)) == pytest.approx(
        768.0 / 425.0 * (2 * rest) ** 3.5, rel=slack, abs=0.0
    )
    track = closed_form_track(state, float(merger_time(state)) * np.array([-1e6, 0.0, 0.5, 1.0 - 1e-9]))
    assert np.isfinite(track.orbital_period).all()
    assert ((track.eccentricity > 0.0) & (track.eccentricity < 1.0)).all()
    assert (np.diff(track.orbital_period) < 0.0).all()


def test_every_size_of_everything() -> None:
    """Extreme masses and periods, far beyond sense, give finite numbers and no floating-point fault."""
    state = binary(0.5, [1e-3, 1e20, 1e4, 1e15], [1e-9, 1e-9, 1e10, 1.0], [1e-9, 1e11, 1e-9, 1e-30])
    for rate in quadrupole_decay.secular_rates(state).of.values():
        assert (np.isfinite(rate) & (np.asarray(rate) < 0.0)).all()
    assert (np.isfinite(merger_time(state)) & (merger_time(state) > 0.0)).all()


# --- shapes ----------------------------------------------------------------------------------------------------------


@examples
@given(binaries())
def test_scalar_in_scalar_out(state: BinaryState) -> None:
    """A single binary gives numpy scalars of shape (), and a track of the shape of the times."""
    numbers = [*quadrupole_decay.secular_rates(state).of.values(), merger_time(state)]
    numbers.append(closed_form_track(state, np.empty(0)).merger_time)
    assert all(isinstance(number, np.float64) for number in numbers)
    assert closed_form_track(state, np.zeros(3)).eccentricity.shape == (3,)


@examples
@given(binaries(shape=(2, 3)))
def test_a_batch_equals_a_loop(state: BinaryState) -> None:
    """Each element of a batch is what the single binary gives, to a unit in the last place."""
    times = np.array([-1.0, 0.0, 0.3, 0.9]) * float(np.min(merger_time(state)))
    rates, track = quadrupole_decay.secular_rates(state).of, closed_form_track(state, times)
    assert track.orbital_period.shape == track.eccentricity.shape == (2, 3, 4)
    for k in np.ndindex(2, 3):
        single = BinaryState(**{name: values[k] for name, values in state.items()})  # type: ignore[index]  # no Epoch
        own = closed_form_track(single, times)
        assert merger_time(state)[k] == pytest.approx(merger_time(single), rel=ULP, abs=0)
        for name, values in quadrupole_decay.secular_rates(single).of.items():
            assert np.asarray(rates[name])[k] == pytest.approx(values, rel=ULP, abs=0)
        # numpy may take a logarithm by another loop, with another last bit, where an array is laid out otherwise
        assert track.orbital_period[k] == pytest.approx(own.orbital_period, rel=1e-14, abs=0)
        assert track.eccentricity[k] == pytest.approx(own.eccentricity, rel=1e-14, abs=0)


def test_a_batch_longer_than_a_block() -> None:
    """Where the work is cut into blocks cannot be seen: 40 000 binaries, and 40 000 times, are what a few are."""
    e = np.random.default_rng(7).random(40_000)
    state, some = binary(e), slice(None, None, 777)
    np.testing.assert_allclose(merger_time(state)[some], merger_time(binary(e[some])), rtol=ULP)
    times = np.array([0.1 * float(np.min(merger_time(state))), -1e10])
    batch, part = closed_form_track(state, times), closed_form_track(binary(e[some]), times)
    np.testing.assert_allclose(batch.orbital_period[some], part.orbital_period, rtol=1e-14)
    single = binary(0.6)
    times = np.linspace(-1.0, 0.99, 40_000) * float(merger_time(single))
    whole, part = closed_form_track(single, times), closed_form_track(single, times[some])
    np.testing.assert_allclose(whole.orbital_period[some], part.orbital_period, rtol=1e-14)


# --- the track -------------------------------------------------------------------------------------------------------


def track_cases() -> tuple[BinaryState, np.ndarray]:
    """Return binaries of every eccentricity, and for each a share of its time to merger, early, late or negative."""
    rng = np.random.default_rng(511)
    rest = np.concatenate(
        [
            [1.0, 1.0 - 1e-12, 1e-8],
            10.0 ** rng.uniform(-15.0, 0.0, 97),
            rng.random(100),
            1.0 - 10.0 ** rng.uniform(-12.0, -1.0, 100),
        ]
    )
    left = [10.0 ** rng.uniform(-12.0, 0.0, 100), rng.random(100), 10.0 ** rng.uniform(0.0, 12.0, 100)]
    return binary(one_minus_eccentricity=rest), 1.0 - rng.permutation(np.concatenate(left))


def test_track_at_40_digits(shape: Interpolant) -> None:
    """Period and e agree with Peters's (5.11) and (5.14) at 40 digits, for the time that is left.

    To 2e-14 of themselves forwards, to 1e-13 backwards to t = -1e12 T.
    """
    state, shares = track_cases()
    for k, share in enumerate(shares):
        one = state.take(np.array(k))
        exact = Exact(one)
        t = float(merger_time(one)) * share
        track = closed_form_track(one, np.array([t]))
        left = 1 - mpf(t) / exact.merger_time(shape)
        P_b, e = exact_track(shape, exact, left)
        # half a dozen roundings of logarithms, up to 30 forwards and 70 backwards, whose sum is found from ln H, with
        # a slope of 1/2 at the least. The time left, T - t, has the rounding of T, and e goes as its 19/48th power.
        tolerance = (2e-14 if left < 1 else 1e-13) + 0.4 * ROUNDINGS * float(abs(1 - left) / left)
        assert error(track.orbital_period[0], P_b) < tolerance, k
        assert error(track.eccentricity[0], e) < tolerance, k


def test_the_start_of_the_inversion(shape: Interpolant) -> None:
    """The start h R(h)^(29/19) of the one Halley step is right to 2e-5 in ln q, so that its cube cannot be seen."""
    for ln_q in np.linspace(-30.0, 70.0, 1001):
        ln_h = mpf(19) / 24 * ln_time_left(shape, mpf(ln_q))[0]
        h = float(mp.exp(ln_h))
        R = R_SLOPE * h + R_CONSTANT + sum(residue / (h + distance) for residue, distance in R_POLES)
        assert abs(float(ln_h - mpf(ln_q)) + 29.0 / 19.0 * math.log(R)) < 2e-5, ln_q


def differentiated(values: np.ndarray, step: float) -> float:
    """Return the derivative in the middle of nine equally spaced values, by central differences of order 8."""
    return float(values @ np.array([3, -32, 168, -672, 0, 672, -168, 32, -3])) / (840.0 * step)


@pytest.mark.parametrize("e_0", [0.0, 1e-6, 0.3, 0.6171, 0.95, 0.9999])
@pytest.mark.parametrize("share", [-2.0, 0.0, 0.5, 0.99])
def test_the_track_solves_the_equations(e_0: float, share: float) -> None:
    """The track, differentiated, is what the rates say of the orbit that it has there: both equations, to 1e-9."""
    state = binary(e_0)
    T = float(merger_time(state))
    step = 0.02 * T * (1.0 - share)  # of the time left, the one scale there is
    track = closed_form_track(state, T * share + step * np.arange(-4.0, 5.0))
    now = binary(track.eccentricity[4], track.orbital_period[4])
    rates = quadrupole_decay.secular_rates(now).of
    # the step to the power 8 times 50 for a power of the time left; and a rounding of 1e-14 over the step
    for name, values in (("orbital_period", track.orbital_period), ("eccentricity", track.eccentricity)):
        assert differentiated(values, step) == pytest.approx(float(rates[name]), rel=1e-9, abs=TINY), name


def orbits(track: ClosedFormTrack) -> tuple[Any, Any]:
    """Return what a new state is made of."""
    return track.orbital_period, track.eccentricity


@examples
@given(binaries(largest_eccentricity=0.9), st.floats(-5.0, 0.95), st.floats(-5.0, 0.95))
def test_two_steps_equal_one(state: BinaryState, first: float, second: float) -> None:
    """From t_1 on to t_2 is straight to t_2, forwards or backwards, and T shrinks by what has passed."""
    T = float(merger_time(state))
    t_1, t_2 = T * first, T * second
    (P_1, P_2), (e_1, e_2) = orbits(closed_form_track(state, np.array([t_1, t_2])))
    between = state.replace(orbital_period=P_1, eccentricity=e_1)
    (P,), (e,) = orbits(closed_form_track(between, np.array([t_2 - t_1])))
    # 1 - e is at least 0.01 on the way, and a rounding of e is 1e-16 of 1: T there goes as (1 - e)^(7/2)
    assert merger_time(between) == pytest.approx(T - t_1, rel=1e-12, abs=0.0)
    assert (
        pytest.approx(P_2, rel=1e-11, abs=0.0) == P
    )  # and a rounding of T is up to 20 times its share of the time left
    assert pytest.approx(e_2, rel=1e-11, abs=TINY) == e


@examples
@given(binaries())
def test_the_track_begins_where_the_state_is(state: BinaryState) -> None:
    """At t = 0 the track has the state's period and eccentricity, to rounding."""
    P_b, e = orbits(closed_form_track(state, np.zeros(1)))
    assert P_b[0] == pytest.approx(float(state.known("orbital_period")[0]), rel=2e-15, abs=0.0)
    assert e[0] == pytest.approx(float(state.known("eccentricity")[0]), rel=2e-15, abs=TINY)


@examples
@given(binaries(largest_eccentricity=1.0 - 1e-8))
def test_the_end_of_the_track(state: BinaryState) -> None:
    """Up to the last double before merger there is an orbit, ever smaller and rounder; from T on there is NaN."""
    T = float(merger_time(state))
    times = np.array([0.0, 0.9 * T, 0.999 * T, np.nextafter(T, 0.0), T, 1.1 * T, 1e3 * T])
    for values in orbits(closed_form_track(state, times)):
        assert np.isnan(values[4:]).all()
        assert np.isfinite(values[:4]).all()
        assert (np.diff(values[:4]) <= 0.0).all()


def test_no_times_at_all() -> None:
    """With no times the track is empty in its last axis, and the merger time is there all the same."""
    state = binary(np.array([0.1, 0.5]))
    track = closed_form_track(state, np.empty(0))
    assert track.orbital_period.shape == track.eccentricity.shape == (2, 0)
    np.testing.assert_array_equal(track.merger_time, merger_time(state))


# --- through the host ------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def host() -> Host:
    """Return a host that raises what goes wrong in a hook."""
    return load_host([c for c in installed_candidates() if c.name == "quadrupole-decay"], strict=True)


@examples
@given(state=binaries(shape=(2,), largest_eccentricity=1.0 - 1e-15))
def test_the_host_accepts_everything(host: Host, state: BinaryState) -> None:
    """For every valid state the hooks return what the host asks for, without a floating-point fault."""
    applied = host.apply(state)
    assert {contribution.name for contribution in applied.secular_rates()} == {
        "orbital_period_rate",
        "eccentricity_rate",
    }
    T = merger_time(state)
    offered = applied.closed_form_track(np.array([-1e3 * float(T.max()), 0.0, float(T.min()), 2.0 * float(T.max())]))
    assert offered is not None
    assert offered[0] == "quadrupole-decay"
    applied.cautions()


def next_order(e: np.ndarray, X_1: np.ndarray) -> np.ndarray:
    """Return X (1 - e^2)/beta^2, X the relative next order of the period's rate.

    Blanchet & Schaefer 1989, MNRAS 239, 845, with D = (m_1 - m_2)/M.
    """
    nu, D = X_1 * (1.0 - X_1), 2.0 * X_1 - 1.0
    even = [1273.0, 16495.0 / 2.0, 42231.0 / 8.0, 3947.0 / 16.0]
    by_nu, by_D = [924.0, 3381.0, 1659.0 / 4.0, -259.0 / 4.0], [0.0, 3297.0, 4221.0, 2331.0 / 8.0]
    total = sum((a - nu * b + D * c) * e ** (2 * k) for k, (a, b, c) in enumerate(zip(even, by_nu, by_D, strict=True)))
    return np.asarray(total) / (336.0 * (1.0 + 73.0 / 24.0 * e**2 + 37.0 / 96.0 * e**4))


def test_the_cautioned_size_is_that_of_the_next_order() -> None:
    """What the caution says is the size of the next order within a factor of 2, for any masses and eccentricity."""
    rest, X_1 = np.linspace(1.0, 1e-3, 101)[:, None], np.linspace(1e-3, 1.0 - 1e-3, 101)
    state = BinaryState(mass_1=3.0 * X_1, mass_2=3.0 * (1.0 - X_1), orbital_period=1e5, one_minus_eccentricity=rest)
    beta, e, s_2 = state.known("orbital_velocity", "eccentricity", "one_minus_e_squared")
    ratio = quadrupole_decay.next_order_size(state) / (next_order(e, X_1) * beta**2 / s_2)
    assert ratio.min() > 0.5
    assert ratio.max() < 2.0


def test_cautions(host: Host) -> None:
    """A wide orbit is passed in silence; a close one is told the size of the next order; the last orbits more."""

    def said(state: BinaryState) -> list[str]:
        return [caution.statement for _, caution in host.apply(state).cautions()]

    assert said(binary(0.1, 1e8)) == []
    # PSR B1913+16: the next order is 2.15e-5 (Blanchet & Schaefer 1989, from memory)
    assert said(binary(0.6171, 27906.98, 1.438, 1.390)) == [
        "leading order only: the decay is good to about 2e-05 of itself"
    ]
    order, rough = said(binary([0.0, 0.5], 0.01))
    assert "leading order only" in order
    assert rough == "at periastron the bodies come within 12 GM/c^2: the formula is a rough guide"
