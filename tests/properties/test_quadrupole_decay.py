"""The decay by gravitational radiation: published values of F(e), time to merger, and the track in closed form."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from mpmath import mp, mpf
from scipy.integrate import solve_ivp

from clockfall.binary.constants import T_SUN
from clockfall.binary.state import BinaryState
from clockfall.testing.strategies import binaries
from clockfall_effects.quadrupole_decay import (
    closed_form_track,
    enhancement,
    merger_fraction,
    merger_time,
    secular_rates,
)

# Peters & Mathews 1963, Phys. Rev. 131, 435, eq. (17) (number from memory), computed at 50 digits by others
PETERS_MATHEWS = {0.1: 1.06734775, 0.3: 1.77624328, 0.5: 4.884312, 0.7: 27.2659892, 0.9: 1243.11348}


@pytest.mark.parametrize(("e", "value"), PETERS_MATHEWS.items())
def test_enhancement(e: float, value: float) -> None:
    """F(e) has the values of Peters & Mathews's formula, to all printed digits."""
    found = enhancement(np.float64(e), np.float64((1.0 - e) * (1.0 + e)))
    assert float(found) == pytest.approx(value, rel=5e-9)  # nine printed digits, seven for e = 0.5
    assert f"{float(found):.{len(str(value).partition('.')[2])}f}" == str(value)


def radiated(e: float) -> tuple[float, float]:
    """Return power and torque over the circular orbit's, averaged over the orbit by brute force.

    Derivatives of the quadrupole moment of a Kepler ellipse with G M = a = mu = 1: power (1/5) (d3 I_ij)^2 and torque
    (2/5) eps_zij d2 I_ik d3 I_jk (Peters 1964, section II, from memory).
    """
    E = np.linspace(0.0, 2.0 * np.pi, 4096, endpoint=False)
    r = 1.0 - e * np.cos(E)
    x, y = np.cos(E) - e, np.sqrt(1.0 - e**2) * np.sin(E)
    vx, vy = -np.sin(E) / r, np.sqrt(1.0 - e**2) * np.cos(E) / r
    X, V = np.stack([x, y]), np.stack([vx, vy])
    A = -X / r**3
    rdot = (x * vx + y * vy) / r
    J = -V / r**3 + 3.0 * X * rdot / r**4  # jerk

    def traceless(tensor: Any) -> Any:
        return tensor - np.einsum("kkt->t", tensor) / 3.0 * np.eye(2)[:, :, None]

    def product(u: Any, w: Any) -> Any:
        return np.einsum("it,jt->ijt", u, w)

    second = traceless(2 * product(V, V) + product(X, A) + product(A, X))
    third = traceless(3 * product(V, A) + 3 * product(A, V) + product(X, J) + product(J, X))
    third_zz = -np.einsum("kkt->t", 3 * product(V, A) + 3 * product(A, V) + product(X, J) + product(J, X)) / 3.0
    power = 0.2 * (np.einsum("ijt,ijt->t", third, third) + third_zz**2)
    torque = 0.4 * (np.einsum("kt,kt->t", second[0], third[1]) - np.einsum("kt,kt->t", second[1], third[0]))
    return float(np.mean(power * r)) / 6.4, float(np.mean(torque * r)) / 6.4


@pytest.mark.parametrize("e", [0.0, 0.3, 0.6, 0.9])
def test_both_rates_from_the_quadrupole_itself(e: float) -> None:
    """Both rates follow from power and torque, averaged from the moving quadrupole by brute force."""
    power, torque = radiated(e)
    state = BinaryState(mass_1=1.4, mass_2=1.3, orbital_period=2e4, eccentricity=e)
    n, nu = (float(v) for v in state.known("mean_motion", "symmetric_mass_ratio"))
    beta = float(state.known("orbital_velocity")[0])
    # with E = -mu M/(2a), L^2 = mu^2 M a (1-e^2): d ln a = -dE/E ..., both in units of (32/5) nu beta^5 n
    ln_a_rate = -2.0 * 32.0 / 5.0 * nu * beta**5 * n * power
    ln_L_rate = -32.0 / 5.0 * nu * beta**5 * n * torque / np.sqrt(1.0 - e**2)
    rates = secular_rates(state).of
    assert float(rates["orbital_period"]) == pytest.approx(1.5 * 2e4 * ln_a_rate, rel=1e-11)  # 4096 points, e up to 0.9
    expected = 0.0 if e == 0.0 else (ln_a_rate / 2.0 - ln_L_rate) * (1.0 - e**2) / e
    assert float(rates["eccentricity"]) == pytest.approx(expected, rel=1e-9, abs=1e-30)  # a difference of near equals


def exact_shape_factor(s: mpf) -> mpf:
    """Return S(s) from Peters's integral, Peters 1964, eq. (5.14) (number from memory), at the working precision.

    With u = sqrt(1-e^2) from 1 to s the integrand is e^(10/19) (1+121/304 e^2)^(1181/2299) u^-2; u = 1/v takes the pole
    out, and 1 - u = w^19 the root at e = 0.
    """

    def body(u: mpf) -> mpf:
        e_2 = (1 - u) * (1 + u)
        return e_2 ** (mpf(5) / 19) * (1 + mpf(121) / 304 * e_2) ** (mpf(1181) / 2299)

    split = max(s, mpf("0.3"))
    near = mp.quad(lambda w: body(1 - w**19) * (1 - w**19) ** -2 * 19 * w**18, [0, (1 - split) ** (mpf(1) / 19)])
    far = mp.quad(lambda v: body(1 / v), mp.linspace(1 / split, 1 / s, 6)) if s < split else mpf(0)
    e_2 = (1 - s) * (1 + s)
    return mpf(48) / 19 * s * e_2 ** (-mpf(24) / 19) * (1 + mpf(121) / 304 * e_2) ** (-mpf(3480) / 2299) * (near + far)


def test_merger_fraction_against_the_integral() -> None:
    """The time over the circular one is the integral to 3e-15 over the whole range, e = 1e-3 to 1 - e = 5e-5."""
    with mp.workdps(40):
        for s in [0.01, 0.03, *np.linspace(0.05, 0.999, 24), 1 - 1e-6]:
            s_2 = mpf(float(s) ** 2)
            expected = mp.sqrt(s_2) ** 7 * exact_shape_factor(mp.sqrt(s_2))
            # the fit is good to 1.2e-16; two polynomials, a quotient and a seventh power add some roundings
            assert abs(mpf(float(merger_fraction(np.float64(s_2)))) / expected - 1) < 3e-15, s


def test_merger_fraction_at_both_ends() -> None:
    """It is 1 for a circle, and (768/425) s^7 for a parabola (Peters 1964), approached from 1 - e = 1e-15 on."""
    assert float(merger_fraction(np.float64(1.0))) == pytest.approx(1.0, abs=4e-15)
    # S(s) = 768/425 - 2.63 s + ...: within 1e-7 of the end at s = 4e-8
    assert float(merger_fraction(np.float64(2e-15))) == pytest.approx(768.0 / 425.0 * 2e-15**3.5, rel=2e-7)


def test_merger_time_of_random_systems() -> None:
    """The time to merger is Peters's integral to 1e-11 (in fact to some 1e-14) for 200 random binaries, e to 0.9999."""
    random = np.random.default_rng(64)
    m_1, m_2 = 10.0 ** random.uniform(-1.0, 2.0, (2, 200))
    e = np.concatenate([[1e-9, 0.9999], random.uniform(0.0, 0.9999, 198)])
    state = BinaryState(mass_1=m_1, mass_2=m_2, orbital_period=10.0 ** random.uniform(2.0, 8.9, 200), eccentricity=e)
    times = merger_time(state)
    (P_b,) = state.known("orbital_period")
    with mp.workdps(30):
        for k in range(200):
            a, b, P, x = (mpf(float(v[k])) for v in (m_1, m_2, P_b, e))
            n, s = 2 * mp.pi / P, mp.sqrt((1 - x) * (1 + x))
            scale = (mpf(T_SUN) * n) ** (mpf(5) / 3) * a * b * (a + b) ** (-mpf(1) / 3)
            expected = 5 / (256 * scale * n) * s**7 * exact_shape_factor(s)
            assert abs(mpf(float(times[k])) / expected - 1) < mpf("1e-13"), k


@given(binaries(largest_eccentricity=0.99), st.floats(0.1, 10.0))
def test_merger_time_scales(state: BinaryState, factor: float) -> None:
    """With masses fixed T goes as P_b^(8/3); with masses and period scaled together, as they do."""
    m_1, m_2, P_b = state.known("mass_1", "mass_2", "orbital_period")
    T = float(merger_time(state))
    longer = merger_time(state.replace(orbital_period=P_b * factor))
    assert float(longer) == pytest.approx(T * factor ** (8 / 3), rel=1e-13)  # roundings of powers
    larger = merger_time(state.replace(mass_1=m_1 * factor, mass_2=m_2 * factor, orbital_period=P_b * factor))
    assert float(larger) == pytest.approx(T * factor, rel=1e-13)


@given(binaries(largest_eccentricity=0.999), st.floats(1e-6, 0.5))
def test_merger_comes_sooner_on_a_longer_ellipse(state: BinaryState, share: float) -> None:
    """At a fixed period the time to merger falls as the eccentricity grows."""
    e, rest = state.known("eccentricity", "one_minus_eccentricity")
    longer = state.replace(one_minus_eccentricity=rest * (1.0 - share))
    assert merger_time(longer) < merger_time(state) * (1.0 + 1e-14)
    assert 0.0 <= float(e) < 1.0


def test_an_extreme_ellipse_keeps_its_digits() -> None:
    """Given 1 - e = 1e-18, which no double e can say, the time is (768/425) T_circ (2e-18)^(7/2) (Peters 1964)."""
    state = BinaryState(mass_1=1.0, mass_2=1.0, orbital_period=1e8, one_minus_eccentricity=1e-18)
    circle = float(merger_time(state.replace(eccentricity=0.0)))
    # the next term in sqrt(1 - e^2) is 1.5e-9 of it
    assert float(merger_time(state)) == pytest.approx(768.0 / 425.0 * circle * 2e-18**3.5, rel=1e-8)


@pytest.mark.parametrize("e_0", [0.0, 1e-12, 0.1, 0.6171, 0.95, 0.9999])
def test_the_track_solves_the_equations(e_0: float) -> None:
    """The closed form is what scipy's integrator finds from the rates, nearly to the end."""
    state = BinaryState(mass_1=1.4, mass_2=1.3, orbital_period=3e4, eccentricity=e_0)
    T = float(merger_time(state))
    shares = np.array([0.0, 0.1, 0.5, 0.9, 0.99])
    track = closed_form_track(state, T * shares)

    def rates(ln_time: float, y: Any) -> list[float]:
        del ln_time
        now = BinaryState(mass_1=1.4, mass_2=1.3, orbital_period=np.exp(y[0]), eccentricity=max(np.exp(y[1]), 0.0))
        of = secular_rates(now).of
        e_rate = float(of["eccentricity"]) / np.exp(y[1])
        return [T * float(of["orbital_period"]) / np.exp(y[0]), T * e_rate]

    start = [np.log(3e4), np.log(max(e_0, 1e-300))]
    found = solve_ivp(rates, (0.0, 0.99), start, method="DOP853", rtol=1e-11, atol=1e-11, t_eval=shares)
    # the integrator's own error, which grows towards merger and with the stiffness of a long ellipse
    tolerance = 1e-7 if e_0 > 0.99 else 2e-8
    assert np.allclose(track.orbital_period, np.exp(found.y[0]), rtol=tolerance, atol=0)
    assert np.allclose(track.eccentricity, np.exp(found.y[1]), rtol=tolerance, atol=1e-200)


@given(binaries(shape=(2,), largest_eccentricity=0.99999), st.floats(0.0, 0.9), st.floats(0.0, 0.9))
def test_two_steps_are_one(state: BinaryState, first: float, second: float) -> None:
    """Going on from a point of the track is going on along the track; the merger time counts down."""
    T = merger_time(state)
    t_1 = first * float(T.min())
    t_2 = t_1 + second * (float(T.min()) - t_1)
    whole = closed_form_track(state, np.array([t_1, t_2]))
    middle = state.replace(orbital_period=whole.orbital_period[:, 0], eccentricity=whole.eccentricity[:, 0])
    rest = closed_form_track(middle, np.array([t_2 - t_1]))
    # e near 1 enters through 1 - e, which e alone says to 1e-16/(1 - e); near merger time left has lost digits to t
    e = np.asarray(whole.eccentricity[:, 0])
    tolerance = 1e-11 + 1e-15 / (1.0 - e) + 1e-15 / (1.0 - second) / (1.0 - first)
    assert np.all(np.abs(rest.merger_time - (T - t_1)) <= tolerance * np.asarray(T))
    assert np.all(np.abs(rest.orbital_period[:, 0] / whole.orbital_period[:, 1] - 1.0) <= 10 * tolerance)
    assert np.allclose(rest.eccentricity[:, 0], whole.eccentricity[:, 1], rtol=1e-9, atol=1e-12)


@given(binaries(largest_eccentricity=0.999))
def test_the_track_begins_at_the_state_and_ends_at_merger(state: BinaryState) -> None:
    """At time 0 the track is the state; after merger it is NaN; without times it has none."""
    P_b, e = state.known("orbital_period", "eccentricity")
    T = float(merger_time(state))
    track = closed_form_track(state, np.array([0.0, T * 1.001]))
    assert track.orbital_period[0] == pytest.approx(float(P_b), rel=1e-14)
    assert track.eccentricity[0] == pytest.approx(float(e), rel=2e-14, abs=1e-300)  # through ln q and back
    assert np.isnan(track.orbital_period[1])
    assert np.isnan(track.eccentricity[1])
    assert closed_form_track(state, np.empty(0)).orbital_period.shape == (0,)


def test_the_track_runs_backwards() -> None:
    """Backwards in time and forwards again returns to the start."""
    state = BinaryState(mass_1=1.4, mass_2=1.3, orbital_period=3e4, eccentricity=0.6)
    T = float(merger_time(state))
    past = closed_form_track(state, np.array([-3.0 * T]))
    assert past.eccentricity[0] > 0.6
    then = BinaryState(mass_1=1.4, mass_2=1.3, orbital_period=past.orbital_period[0], eccentricity=past.eccentricity[0])
    back = closed_form_track(then, np.array([3.0 * T]))
    assert back.orbital_period[0] == pytest.approx(3e4, rel=1e-12)
    assert back.eccentricity[0] == pytest.approx(0.6, rel=1e-12)
