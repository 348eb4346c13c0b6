"""The scalar-tensor theory against exact solutions, numerically radiated fields, ppN forms and published numbers."""

from __future__ import annotations

import math
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from mpmath import mp, mpf

from clockfall.analysis.budget import decay
from clockfall.analysis.inverse import limit_of
from clockfall.analysis.outcome import Outcome
from clockfall.analysis.study import Choices
from clockfall.analysis.system import System, Uncertain
from clockfall.analysis.weigh import weigh
from clockfall.binary.constants import SECONDS_PER_YEAR, T_SUN
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Rate, Rates, hook
from clockfall.effects.host import Host
from clockfall.effects.loading import Candidate, installed_candidates, load_host
from clockfall.errors import BadInput, OutOfRange
from clockfall.files.system_file import read_system
from clockfall.testing.strategies import binaries

OURS = [c for c in installed_candidates() if c.distribution == "clockfall"]
HOST: Host = load_host(OURS, strict=True)
THEORY = "mono-scalar-tensor"
REPLACED = ("dipole-radiation", "einstein-delay", "periastron-advance", "quadrupole-decay", "shapiro-delay")
PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"
ADVANCE, DECAY, ROUNDING = "longitude_of_periastron_rate", "orbital_period_rate", "eccentricity_rate"
FEW = Choices(draws=256)
NO_CHARGE = {"charge_1": 0.0, "charge_2": 0.0}
STRONG = {
    "charge_1": 0.4,
    "charge_2": -0.25,
    "charge_slope_1": -5.0,
    "charge_slope_2": 3.0,
    "inertia_response_1": 0.7,
    "matter_charge": 0.1,
}


def given_by(state: BinaryState, own: dict[str, float], effects: tuple[str, ...] = (THEORY,)) -> dict[str, Any]:
    """Return every rate and parameter by name, as these effects give it."""
    applied = HOST.apply(state, {THEORY: own} if THEORY in effects else {}, only=effects)
    found = {c.name: c.values for c in (*applied.secular_rates(), *applied.predicted_parameters())}
    assert not applied.failures
    return found


def with_inclined_orbit(state: BinaryState) -> BinaryState:
    """Return the state with the x of sin i = 1/8 in general relativity, at most 0.6 with any charges."""
    a, m_2, M = state.known("relative_semi_major_axis", "mass_2", "total_mass")
    return state.replace(projected_semi_major_axis=0.125 * a * m_2 / M)


# --- without charges -------------------------------------------------------------------------------------------------


@given(binaries(shape=(3,)))
def test_without_charges_it_is_general_relativity(state: BinaryState) -> None:
    """Every rate and parameter is that of the four effects of leading order, each checked at 40 digits elsewhere."""
    state = with_inclined_orbit(state)
    found = given_by(state, NO_CHARGE)
    expected = given_by(state, {}, tuple(name for name in REPLACED if name != "dipole-radiation"))
    assert found.keys() == expected.keys()
    for name, values in expected.items():
        # a few tens of roundings
        assert np.allclose(found[name], values, rtol=1e-13, atol=0.0), name


@pytest.mark.parametrize("weak", [1e-4, 1e-6])
def test_weak_charges_come_in_by_their_products(weak: float) -> None:
    """All is analytic in the charges and even in their common sign: small ones change nothing at first order."""
    state = with_inclined_orbit(
        BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=2e4, eccentricity=0.5, longitude_of_periastron=1.0)
    )
    plain = given_by(state, NO_CHARGE)
    one, other = (
        given_by(state, {"charge_1": sign * 2.0 * weak, "charge_2": -sign * weak, "inertia_response_1": sign * weak})
        for sign in (1.0, -1.0)
    )
    for name, values in plain.items():
        assert one[name] == pytest.approx(float(other[name]), rel=1e-14, abs=0.0), name
        # the dipole is larger than the rest by v_o^-2, some 5e5 here
        assert one[name] == pytest.approx(float(values), rel=1e8 * weak**2, abs=0.0), name


CHARGE = st.floats(-0.99, 0.99)
SLOPE = st.floats(-100.0, 100.0)
OWN = st.fixed_dictionaries(
    {
        "charge_1": CHARGE,
        "charge_2": CHARGE,
        "charge_slope_1": SLOPE,
        "charge_slope_2": SLOPE,
        "inertia_response_1": SLOPE,
        "matter_charge": CHARGE,
    }
)


@given(binaries(), OWN)
def test_symmetries(state: BinaryState, own: dict[str, float]) -> None:
    """The sign of the field is a convention, times scale with masses, and the orbit does not know which body is timed.

    Every number is finite for any charges that the ranges allow.
    """
    state = with_inclined_orbit(state)
    found = given_by(state, own)
    odd = ("charge_1", "charge_2", "inertia_response_1", "matter_charge")
    turned = given_by(state, {**own, **{name: -own[name] for name in odd}})
    assert all(turned[name] == values for name, values in found.items())

    m_1, m_2, P_b, x = state.known("mass_1", "mass_2", "orbital_period", "projected_semi_major_axis")
    twice = {
        "mass_1": 2.0 * m_1,
        "mass_2": 2.0 * m_2,
        "orbital_period": 2.0 * P_b,
        "projected_semi_major_axis": 2.0 * x,
    }
    larger = given_by(state.replace(**twice), own)
    power = {ADVANCE: -1, ROUNDING: -1, "einstein_delay_amplitude": 1, "shapiro_range": 1, "orthometric_amplitude": 1}
    for name, values in found.items():
        # cube roots of products, some ten roundings
        assert float(larger[name]) == pytest.approx(float(values) * 2.0 ** power.get(name, 0), rel=1e-13, abs=0.0), name

    swapped = {**own, **{f"charge_{A}": own[f"charge_{3 - A}"] for A in (1, 2)}}
    swapped.update({f"charge_slope_{A}": own[f"charge_slope_{3 - A}"] for A in (1, 2)})
    other = given_by(state.replace(mass_1=m_2, mass_2=m_1), swapped)
    for name in (DECAY, ROUNDING):
        assert float(other[name]) == pytest.approx(float(found[name]), rel=1e-11, abs=0.0), name
    # slopes and charges may cancel in the advance, and in the monopole a little
    size = float(given_by(state, NO_CHARGE)[ADVANCE]) * 1e4
    assert float(other[ADVANCE]) == pytest.approx(float(found[ADVANCE]), rel=0.0, abs=1e-13 * size)


# --- the advance -----------------------------------------------------------------------------------------------------


def bracket(X_1: float, own: dict[str, float]) -> float:
    """Return k (1-e^2)/(3 v_o^2) as the effect has it."""
    state = BinaryState(mass_1=2.0 * X_1, mass_2=2.0 - 2.0 * X_1, orbital_period=1e4, eccentricity=0.6)
    n = 2.0 * math.pi / 1e4
    G_12 = (1.0 + own["charge_1"] * own["charge_2"]) / (1.0 + own.get("matter_charge", 0.0) ** 2)
    v_2 = (G_12 * T_SUN * 2.0 * n) ** (2.0 / 3.0)
    return float(given_by(state, own)[ADVANCE] / n / (3.0 * v_2 / (1.0 - 0.36)))


THIRDS = [Fraction(a, 3) for a in (-2, 0, 1, 2)]


@pytest.mark.parametrize("a_1", THIRDS)
@pytest.mark.parametrize("a_2", THIRDS)
def test_advance_from_the_two_body_parameters(a_1: Fraction, a_2: Fraction) -> None:
    """The advance is (2 + 2 gamma - beta)/3 of general relativity's, in exact fractions.

    gamma_AB = 1 - 2 a_A a_B/(1 + a_A a_B), beta^A_BC = 1 + b_A a_B a_C/(2 (1 + a_A a_B)(1 + a_A a_C)), and the pair has
    beta = X_2 beta^1_22 + X_1 beta^2_11 (Damour & Esposito-Farese 1992; from memory).
    """
    X_1, b_1, b_2 = Fraction(3, 10), Fraction(-7, 2), Fraction(4)
    g = 1 + a_1 * a_2
    gamma = 1 - 2 * a_1 * a_2 / g
    beta_1, beta_2 = 1 + b_1 * a_2**2 / (2 * g**2), 1 + b_2 * a_1**2 / (2 * g**2)
    expected = (2 + 2 * gamma - (1 - X_1) * beta_1 - X_1 * beta_2) / 3
    own = {
        "charge_1": float(a_1),
        "charge_2": float(a_2),
        "charge_slope_1": float(b_1),
        "charge_slope_2": float(b_2),
    }
    assert bracket(0.3, own) == pytest.approx(float(expected), rel=1e-13, abs=0.0)


def first_order_lagrangian(e: complex, X_1: float, own: dict[str, float]) -> complex:
    """Return the mean over a Kepler orbit of the 1PN part of the Lagrangian of two charged bodies.

    Damour & Taylor 1992, Phys. Rev. D 45, 1840 (from memory), in units G_12 = M = a = c = 1. `e` may be complex.
    """
    X_2 = 1.0 - X_1
    a_1, a_2, b_1, b_2 = (own[name] for name in ("charge_1", "charge_2", "charge_slope_1", "charge_slope_2"))
    g = 1.0 + a_1 * a_2
    gamma_less_1 = -2.0 * a_1 * a_2 / g
    beta_1_less_1, beta_2_less_1 = b_1 * a_2**2 / (2.0 * g**2), b_2 * a_1**2 / (2.0 * g**2)
    E = np.linspace(0.0, 2.0 * np.pi, 400, endpoint=False)
    r, root = 1.0 - e * np.cos(E), np.sqrt(1.0 - e * e)
    away = np.stack([np.cos(E) - e, root * np.sin(E)]) / r
    velocity = np.stack([-np.sin(E), root * np.cos(E)]) / r
    v_1, v_2 = X_2 * velocity, -X_1 * velocity
    v_11, v_22, v_12 = (np.sum(a * b, axis=0) for a, b in ((v_1, v_1), (v_2, v_2), (v_1, v_2)))
    n_1, n_2 = np.sum(away * v_1, axis=0), np.sum(away * v_2, axis=0)
    between = 1.5 * (v_11 + v_22) - 3.5 * v_12 - 0.5 * n_1 * n_2 + gamma_less_1 * np.sum(velocity**2, axis=0)
    three = X_2 * (1.0 + 2.0 * beta_1_less_1) + X_1 * (1.0 + 2.0 * beta_2_less_1)
    L = (X_1 * v_11**2 + X_2 * v_22**2) / 8.0 + X_1 * X_2 / r * between - 0.5 * X_1 * X_2 / r**2 * three
    return complex(np.mean(L * r))


@pytest.mark.parametrize("e", [0.1, 0.6, 0.8])
@pytest.mark.parametrize("X_1", [0.05, 0.3, 0.8])
def test_advance_from_the_lagrangian_of_two_bodies(X_1: float, e: float) -> None:
    """Delaunay: omega rate = d<H_1>/dG at the same a, with H_1 = -L_1 averaged along both bodies' Kepler orbits."""
    step = 1e-30  # differentiation along the imaginary axis loses nothing
    slope = -first_order_lagrangian(e + step * 1j, X_1, STRONG).imag / step
    G_by_e = -X_1 * (1.0 - X_1) * e / math.sqrt(1.0 - e**2)
    # the mean over E converges as ((1 - sqrt(1-e^2))/e)^400
    assert bracket(X_1, STRONG) * 3.0 / (1.0 - e**2) == pytest.approx(slope / G_by_e, rel=1e-10, abs=0.0)


class HeavyBody:
    """The exact field of one charged body (Just 1959; Coquereaux & Esposito-Farese 1990; from memory), G_* m = 1.

    ds^2 = -N dt^2 + (dr^2 + (r^2 - a r) dOmega^2)/N with N = (1 - a/r)^(b/a), phi = (d/a) ln(1 - a/r). The field
    equations ask for (r^2 - a r) phi' = const, which holds, and R_rr = a^2/(2 (r^2 - a r)^2) = (b^2/2 + 2 d^2)/(r^2 -
    a r)^2 of the metric in the bracket: a^2 = b^2 + 4 d^2. Far away N is 1 - b/r and phi is -d/r: b = 2, d = alpha.
    """

    def __init__(self, charge: mpf) -> None:
        self.d = charge
        self.a = mp.sqrt(4 + 4 * charge**2)

    def N(self, r: mpf) -> mpf:
        """Return -g_tt."""
        return (1 - self.a / r) ** (2 / self.a)

    def surface(self, r: mpf) -> mpf:
        """Return r^2 - a r."""
        return r**2 - self.a * r

    def phi(self, r: mpf) -> mpf:
        """Return the scalar field."""
        return self.d / self.a * mp.log(1 - self.a / r)


def exact_advance(heavy: HeavyBody, charge: mpf, slope: mpf, near: mpf, far: mpf) -> tuple[mpf, mpf]:
    """Return (radians of advance per radian of mean anomaly, n) of a light body whose mass is m exp(a phi + b phi^2/2).

    It moves as one of constant mass does in the metric times m^2(phi)/m^2.
    """

    def C(r: mpf) -> mpf:
        return mp.exp(2 * charge * heavy.phi(r) + slope * heavy.phi(r) ** 2)

    # the radial equation is E^2 = J^2 N^2/(r^2 - a r) + C N at both ends
    J_2 = (C(near) * heavy.N(near) - C(far) * heavy.N(far)) / (
        heavy.N(far) ** 2 / heavy.surface(far) - heavy.N(near) ** 2 / heavy.surface(near)
    )
    E_2 = J_2 * heavy.N(near) ** 2 / heavy.surface(near) + C(near) * heavy.N(near)

    def along(chi: mpf) -> tuple[mpf, mpf]:
        r = (near + far) / 2 - (far - near) / 2 * mp.cos(chi)
        N, surface = heavy.N(r), heavy.surface(r)
        radial = (far - near) / 2 * mp.sin(chi) / mp.sqrt(E_2 - J_2 * N**2 / surface - C(r) * N)
        return mp.sqrt(J_2) * N / surface * radial, mp.sqrt(E_2) / N * radial

    # smooth and periodic in chi, so that midpoints converge as ((1 - sqrt(1-e^2))/e)^160
    steps = [along(mp.pi * (j + mpf(1) / 2) / 80) for j in range(80)]
    angle, time = (mp.fsum(part) / 80 for part in zip(*steps, strict=True))  # means over half an orbit
    return angle - 1, 1 / time


@pytest.mark.parametrize("e", ["0.2", "0.7"])
@pytest.mark.parametrize(("a_light", "b_light", "a_heavy"), [(0.4, -5.0, -0.25), (0.5, 3.0, 0.6), (0.0, 4.0, 0.5)])
@pytest.mark.parametrize("timed", ["light", "heavy"])
def test_advance_in_the_exact_field(e: str, a_light: float, b_light: float, a_heavy: float, timed: str) -> None:
    """Round one heavy body the exact advance differs from the effect's by the next order alone: as p^-2."""
    own = {"charge_1": a_light, "charge_2": a_heavy, "charge_slope_1": b_light, "charge_slope_2": 7.0}
    if timed == "heavy":
        own = {"charge_1": a_heavy, "charge_2": a_light, "charge_slope_1": 7.0, "charge_slope_2": b_light}
    found = bracket(1e-13 if timed == "light" else 1.0 - 1e-13, own)
    with mp.workdps(40):
        heavy, ratios = HeavyBody(mpf(a_heavy)), []
        for p in (mpf(10) ** 6, mpf(10) ** 7):
            k, n = exact_advance(heavy, mpf(a_light), mpf(b_light), p / (1 + mpf(e)), p / (1 - mpf(e)))
            v_2 = ((1 + mpf(a_light) * mpf(a_heavy)) * n) ** (mpf(2) / 3)
            ratios.append(k * (1 - mpf(e) ** 2) / (3 * v_2))
    # what is left of order 1/p goes as p does; 1e-6 times some 30
    assert float(ratios[0]) == pytest.approx(found, rel=1e-4, abs=0.0)
    assert float(ratios[1] + (ratios[1] - ratios[0]) / 9) == pytest.approx(found, rel=1e-9, abs=0.0)


@pytest.mark.parametrize("omega", [6.0, 500.0])
def test_brans_dicke(omega: float) -> None:
    """With one charge for all, alpha^2 = 1/(2 omega + 3), it is the theory of Brans & Dicke 1961, Phys. Rev. 124, 925.

    Mercury's perihelion then turns by (4 + 3 omega)/(6 + 3 omega) of 42.98 arcsec in a century (Nobili & Will 1986),
    and light is delayed by (1 + gamma)/2 with gamma = (1 + omega)/(2 + omega) (all from memory).
    """
    charge = 1.0 / math.sqrt(2.0 * omega + 3.0)
    fields = read_system(PUBLISHED / "sun-mercury.toml", HOST.cards).system.fields
    names = ("mass_1", "mass_2", "orbital_period", "eccentricity")
    state = BinaryState(**{name: fields[name].value for name in names})
    found = given_by(state, {"charge_1": charge, "charge_2": charge, "matter_charge": charge})
    arcsec_per_century = float(found[ADVANCE]) * 100.0 * SECONDS_PER_YEAR * 648000.0 / math.pi
    assert arcsec_per_century == pytest.approx(42.98 * (4 + 3 * omega) / (6 + 3 * omega), abs=0.005)  # printed digits
    gamma = (1.0 + omega) / (2.0 + omega)
    expected = T_SUN * fields["mass_2"].value * (1.0 + gamma) / 2.0
    assert float(found["shapiro_range"]) == pytest.approx(expected, rel=1e-14, abs=0.0)


# --- the waves -------------------------------------------------------------------------------------------------------


class Orbit:
    """Two charged bodies on a Kepler orbit, c = 1, G = 1, masses in seconds; and the field they radiate, numerically.

    The scalar field far away is -(G_*/R) [A + n.dB/dt + n.(d^2 C/dt^2).n/2], where A is the sum of the charges m_A
    alpha_A(phi), each in the other's field and slowed by its motion and the other's potential, B = sum m alpha x and
    C = sum m alpha x x. Its energy flux is (d phi/dt)^2/(4 pi G_*), its flux of angular momentum -(d phi/dt)(d phi/d
    azimuth)/(4 pi G_*). It is summed over the sphere and the orbit as it stands: no multipole is taken out, no
    polynomial in e is used, derivatives are Fourier's in E. The metric's waves are taken by their mass quadrupole.
    """

    def __init__(self, state: BinaryState, own: dict[str, float]) -> None:
        self.m = [T_SUN * float(v) for v in state.known("mass_1", "mass_2")]
        n, e = (float(v) for v in state.known("mean_motion", "eccentricity"))
        self.alpha = [own.get(f"charge_{A}", 0.0) for A in (1, 2)]
        self.slope = [own.get(f"charge_slope_{A}", 0.0) for A in (1, 2)]
        self.G = 1.0 / (1.0 + own.get("matter_charge", 0.0) ** 2)
        self.GM = self.G * (1.0 + self.alpha[0] * self.alpha[1]) * sum(self.m)
        self.n, self.e, self.a = n, e, (self.GM / n**2) ** (1.0 / 3.0)
        E = np.linspace(0.0, 2.0 * np.pi, 160, endpoint=False)
        self.r = self.a * (1.0 - e * np.cos(E))
        relative = self.a * np.stack([np.cos(E) - e, math.sqrt(1.0 - e**2) * np.sin(E), 0.0 * E], axis=1)
        share = self.m[1] / sum(self.m)
        self.x = [share * relative, -(1.0 - share) * relative]  # each (times, 3)

    def rate(self, values: FloatArray) -> FloatArray:
        """Return d/dt of a function of time, shape (times, ...)."""
        waves = np.fft.fftfreq(len(values), 1.0 / len(values))
        waves[len(values) // 2] = 0.0
        column = (-1, *[1] * (values.ndim - 1))
        by_E = np.fft.ifft(np.fft.fft(values, axis=0) * (1j * waves).reshape(column), axis=0).real
        found: FloatArray = by_E * (self.n * self.a / self.r).reshape(column)
        return found

    def mean(self, values: FloatArray) -> float:
        """Return the mean over time, shape (times, ...), of what is summed over all other axes."""
        return float(np.mean(np.sum(values.reshape(len(values), -1), axis=1) * self.r / self.a))

    def charge(self) -> FloatArray:
        """Return A: with d(m alpha)/d phi = m (alpha^2 + beta), in the field -G_* m_B alpha_B/r; shape (times,)."""
        total = np.zeros(len(self.r))
        for own, other in ((0, 1), (1, 0)):
            U = self.G * self.m[other] / self.r
            slowed = 1.0 - 0.5 * np.sum(self.rate(self.x[own]) ** 2, axis=1) - U
            in_field = (self.alpha[own] ** 2 + self.slope[own]) * (-U * self.alpha[other])
            total += self.m[own] * (self.alpha[own] * slowed + in_field)
        return total

    def moments(self, weights: list[float]) -> tuple[FloatArray, FloatArray]:
        """Return sum w m x and sum w m x x; shapes (times, 3), (times, 3, 3)."""
        first = sum(
            (w * m * x for w, m, x in zip(weights, self.m, self.x, strict=True)), start=np.zeros_like(self.x[0])
        )
        second = np.zeros((len(self.r), 3, 3))
        for w, m, x in zip(weights, self.m, self.x, strict=True):
            second += w * m * x[:, :, None] * x[:, None, :]
        return first, second

    def scalar_losses(self) -> tuple[float, float]:
        """Return the mean power and the mean torque that the scalar field carries away."""
        B, C = self.moments(self.alpha)
        cosine, weight = np.polynomial.legendre.leggauss(6)
        azimuth = np.linspace(0.0, 2.0 * np.pi, 12, endpoint=False)
        sine = np.sqrt(1.0 - cosine**2)[:, None]
        up = np.broadcast_to(cosine[:, None], (6, 12))
        n = np.stack([sine * np.cos(azimuth), sine * np.sin(azimuth), up], axis=-1)  # (6, 12, 3)
        turned = np.stack([-n[..., 1], n[..., 0], np.zeros((6, 12))], axis=-1)  # d n/d azimuth
        B_rate, C_rate_2 = self.rate(B), self.rate(self.rate(C))
        field_rate = (
            self.rate(self.charge())[:, None, None]
            + np.einsum("tj,abj->tab", self.rate(B_rate), n)
            + 0.5 * np.einsum("tjk,abj,abk->tab", self.rate(C_rate_2), n, n)
        )
        field_turned = np.einsum("tj,abj->tab", B_rate, turned) + np.einsum("tjk,abj,abk->tab", C_rate_2, n, turned)
        area = weight[:, None] * 2.0 * np.pi / 12
        scale = self.G / (4.0 * np.pi)
        return scale * self.mean(field_rate**2 * area), -scale * self.mean(field_rate * field_turned * area)

    def metric_losses(self) -> tuple[float, float]:
        """Return the mean power and torque of the metric's waves: (G_*/5) Q'''^2 and (2 G_*/5) eps Q'' Q'''."""
        _, Q = self.moments([1.0, 1.0])
        Q = Q - np.trace(Q, axis1=1, axis2=2)[:, None, None] * np.eye(3) / 3.0
        second = self.rate(self.rate(Q))
        third = self.rate(second)
        turning = np.einsum("tja,tka->tjk", second, third)
        torque = self.mean(turning[:, 0, 1] - turning[:, 1, 0])
        return self.G / 5.0 * self.mean(third**2), 2.0 * self.G / 5.0 * torque

    def rates(self) -> tuple[float, float]:
        """Return the rates of P_b [1] and e [1/s], by Kepler's energy and angular momentum."""
        power, torque = (s + t for s, t in zip(self.scalar_losses(), self.metric_losses(), strict=True))
        mu, s_2 = self.m[0] * self.m[1] / sum(self.m), 1.0 - self.e**2
        a_rate = -power / (self.GM * mu / (2.0 * self.a))  # over a
        L_rate = -torque / (mu * math.sqrt(self.GM * self.a * s_2))  # over L
        e_rate = s_2 / self.e * (0.5 * a_rate - L_rate) if self.e else 0.0
        return 1.5 * a_rate * 2.0 * math.pi / self.n, e_rate


CHARGES = {
    "none": {"charge_1": 0.0, "charge_2": 0.0},
    "one": {"charge_1": 0.3, "charge_2": 0.0},
    "equal": {"charge_1": 0.3, "charge_2": 0.3, "charge_slope_1": 2.0},
    "slopes": {"charge_1": -0.2, "charge_2": -0.2, "charge_slope_1": 40.0, "charge_slope_2": -10.0},
    "strong": STRONG,
}


@pytest.mark.parametrize("e", [0.0, 0.1, 0.5, 0.8])
@pytest.mark.parametrize("masses", [(1.4, 1.4), (0.3, 2.1), (2.1, 0.3)])
@pytest.mark.parametrize("kind", CHARGES)
def test_waves_by_summing_the_radiated_field(kind: str, masses: tuple[float, float], e: float) -> None:
    """Both rates are what energy and angular momentum flow out with the field of the two bodies, summed numerically.

    So the polynomials in e, the charges and slopes in each part, and the rates of e are checked, none from memory.
    """
    state = BinaryState(mass_1=masses[0], mass_2=masses[1], orbital_period=20.0, eccentricity=e)
    found = given_by(state, CHARGES[kind])
    period_rate, e_rate = Orbit(state, CHARGES[kind]).rates()
    # three Fourier derivatives of 160 points lose up to 80^3 roundings; found: 3e-13
    assert float(found[DECAY]) == pytest.approx(period_rate, rel=1e-11, abs=0.0)
    scale = abs(period_rate) / 20.0
    assert float(found[ROUNDING]) == pytest.approx(e_rate, rel=1e-11, abs=1e-11 * scale)


def test_the_dipole_is_that_of_dipole_radiation() -> None:
    """For weak charges on a wide orbit what is added to the quadrupole decay is the effect dipole-radiation's."""
    state = BinaryState(mass_1=1.46, mass_2=0.18, orbital_period=3e6, eccentricity=0.3)
    own = {"charge_1": 3e-3, "charge_2": -1e-3}
    added = float(given_by(state, own)[DECAY] - given_by(state, NO_CHARGE)[DECAY])
    alone = HOST.apply(state, {"dipole-radiation": own}, only=["dipole-radiation"])
    (dipole,) = (float(c.values) for c in alone.secular_rates())
    v_2 = float(state.known("orbital_velocity")[0]) ** 2
    # the charges' products, 3e-6, and the other waves, v_o^2 of the dipole
    assert added == pytest.approx(dipole, rel=3e-6 + 30.0 * v_2, abs=0.0)
    assert v_2 < 1e-6


# --- the clock and the light -----------------------------------------------------------------------------------------


def test_einstein_amplitude_from_the_pulses_counted() -> None:
    """The phase of a spinning body swings by gamma: its clock is slowed, its moment of inertia changed along the orbit.

    With J conserved it spins at J/I(phi) of its own time; ln I falls by k_1 for each unit of the field.
    """
    state = BinaryState(mass_1=1.5, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    orbit = Orbit(state, STRONG)
    U = orbit.G * orbit.m[1] / orbit.r
    pace = -0.5 * np.sum(orbit.rate(orbit.x[0]) ** 2, axis=1) - U  # of the clock
    pace += STRONG["inertia_response_1"] * (-U * STRONG["charge_2"])  # of the spin
    by_E = (pace - orbit.mean(pace)) * orbit.r / orbit.a / orbit.n  # d(phase)/dE, a multiple of cos E
    E = np.linspace(0.0, 2.0 * np.pi, len(by_E), endpoint=False)
    amplitude = -2.0 * np.mean(by_E * np.cos(E))
    found = float(given_by(state, STRONG)["einstein_delay_amplitude"])
    assert found == pytest.approx(float(amplitude), rel=1e-11, abs=0.0)
    # and there is nothing else in it
    assert np.max(np.abs(by_E + amplitude * np.cos(E))) < 1e-11 * found


def test_an_ordinary_clock_shows_the_equivalence_principle() -> None:
    """Where body 1 is a light one (alpha_1 = k_1 = alpha_0) its clock is slowed by the pull it feels: X_2 (1 + X_2)."""
    state = BinaryState(mass_1=1.5, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    own = {"charge_1": 0.3, "inertia_response_1": 0.3, "matter_charge": 0.3, "charge_2": 0.2}
    n, X_2 = 2.0 * math.pi / 3e4, 1.1 / 2.6
    v_2 = (T_SUN * 1.06 / 1.09 * 2.6 * n) ** (2.0 / 3.0)
    found = float(given_by(state, own)["einstein_delay_amplitude"])
    assert found == pytest.approx(0.4 / n * v_2 * X_2 * (1.0 + X_2), rel=1e-13, abs=0.0)


def test_shapiro_range_in_the_exact_field() -> None:
    """A ray in the exact field of a charged body is late by 2 r ln for each leg, with r = G_* m whatever the charge.

    The field's part in rulers and clocks is a factor of the whole metric, which null rays do not feel. So the range is
    (1 + gamma_02)/2 G_02 m_2 with gamma_02 = 1 - 2 a_0 a_2/(1 + a_0 a_2) and G_02 = G_* (1 + a_0 a_2), as it must be.
    """
    with mp.workdps(40):
        heavy = HeavyBody(mpf("0.6"))
        far = mpf(10) ** 16

        def leg(near: mpf) -> mpf:
            """Return the time from the point nearest to the body out to `far`, less that of a straight line."""
            shape = heavy.surface(near) / heavy.N(near) ** 2

            def excess(y: mpf) -> mpf:
                r = near * mp.cosh(y)
                N, straight = heavy.N(r), mp.cosh(y)
                bent = mp.sinh(y) / (N * mp.sqrt(1 - shape * N**2 / heavy.surface(r)))
                return near * (bent - straight)

            return mp.quad(excess, mp.linspace(0, mp.acosh(far / near), 12), method="gauss-legendre")

        # of relative order G_* m/near besides
        near = mpf(10) ** 8
        measured = (leg(near) - leg(2 * near)) / (2 * mp.log(2))
    assert float(measured) == pytest.approx(1.0, rel=1e-6, abs=0.0)

    state = BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    a_0, a_2 = STRONG["matter_charge"], STRONG["charge_2"]
    G_02 = (1.0 + a_0 * a_2) / (1.0 + a_0**2)
    gamma_02 = 1.0 - 2.0 * a_0 * a_2 / (1.0 + a_0 * a_2)
    found = float(given_by(state, STRONG)["shapiro_range"])
    assert found == pytest.approx((1.0 + gamma_02) / 2.0 * G_02 * T_SUN * 1.1, rel=1e-14, abs=0.0)


@given(st.floats(0.05, 0.999))
def test_shape_and_orthometric_pair(s: float) -> None:
    """An orbit of the theory's own size, inclined, gives back sin i; the pair holds its published relations.

    s = 2 ratio/(1 + ratio^2), amplitude = r ratio^3 (Freire & Wex 2010).
    """
    state = BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    orbit = Orbit(state, STRONG)
    a_R = orbit.a / (
        1.0 + (3.0 - 1.4 * 1.1 / 2.5**2 / 3.0) * (orbit.GM * orbit.n) ** (2 / 3)
    )  # general relativity's 1PN
    a_1 = a_R * 1.1 / 2.5
    found = {k: float(v) for k, v in given_by(state.replace(projected_semi_major_axis=a_1 * s), STRONG).items()}
    assert found["shapiro_shape"] == pytest.approx(s, rel=1e-13, abs=0.0)
    ratio = found["orthometric_ratio"]
    assert 2.0 * ratio / (1.0 + ratio**2) == pytest.approx(s, rel=1e-12, abs=0.0)
    assert found["orthometric_amplitude"] == pytest.approx(found["shapiro_range"] * ratio**3, rel=1e-12, abs=0.0)


def test_what_the_inclination_gives() -> None:
    """Without x the inclination gives the shape; without either only the shape and its pair are missing."""
    state = BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    assert "shapiro_shape" not in given_by(state, STRONG)
    assert "shapiro_range" in given_by(state, STRONG)
    inclined = given_by(state.replace(inclination=2.0), STRONG)
    assert float(inclined["shapiro_shape"]) == pytest.approx(math.sin(2.0), rel=1e-15, abs=0.0)
    impossible = given_by(state.replace(projected_semi_major_axis=1e3), STRONG)
    assert np.isnan(impossible["shapiro_shape"])


# --- in the house ----------------------------------------------------------------------------------------------------


def pulsar(name: str, own: dict[str, float]) -> System:
    """Return a published system with charges."""
    system = read_system(PUBLISHED / f"{name}.toml", HOST.cards).system
    return replace(system, settings={**system.settings, THEORY: {k: Uncertain(v) for k, v in own.items()}})


def central(outcome: Outcome, quantity: str, role: str = "") -> float:
    """Return a finding's central value."""
    return outcome[quantity, role].drawn.central


def test_published_prediction_without_charges() -> None:
    """PSR B1913+16 weighed and its decay predicted by the theory without charges: -2.40263(5)e-12, 1.438(1), 1.390(1).

    Weisberg & Huang 2016, ApJ 829, 55 (transcription; masses seen).
    """
    outcome = decay(HOST, pulsar("psr-b1913+16", NO_CHARGE), FEW)
    assert central(outcome, DECAY, "predicted_intrinsic") == pytest.approx(-2.40263e-12, abs=0.00005e-12)
    assert central(outcome, "mass_1") == pytest.approx(1.438, abs=0.001)
    assert central(outcome, "mass_2") == pytest.approx(1.390, abs=0.001)
    (part,) = (f for f in outcome.contributions(DECAY) if f.nature == "intrinsic")
    assert part.effect == THEORY


def test_it_weighs_and_the_replaced_step_back() -> None:
    """With charges it is the theory that weighs: its masses give back the advance and gamma by formulas at 30 digits.

    The five effects that it replaces are idle and say why.
    """
    system = pulsar("psr-b1913+16", STRONG)
    system = replace(
        system, settings={**system.settings, "dipole-radiation": {k: Uncertain(v) for k, v in NO_CHARGE.items()}}
    )
    outcome = weigh(HOST, system, FEW)
    assert THEORY in {effect.name for effect in outcome.used}
    idle = {said.effect: said.text for said in outcome.idle if said.effect in REPLACED}
    assert idle == dict.fromkeys(REPLACED, f"replaced by {THEORY}")
    with mp.workdps(30):
        m_1, m_2 = (mpf(central(outcome, name)) for name in ("mass_1", "mass_2"))
        P_b, e = (mpf(system.fields[name].value) for name in ("orbital_period", "eccentricity"))
        a_1, a_2, b_1, b_2, k_1, a_0 = (mpf(value) for value in STRONG.values())
        n, M, g = 2 * mp.pi / P_b, m_1 + m_2, 1 + a_1 * a_2
        v_2 = (mpf(T_SUN) * g / (1 + a_0**2) * M * n) ** (mpf(2) / 3)
        shape = (1 - a_1 * a_2 / 3) / g - (m_1 / M * b_2 * a_1**2 + m_2 / M * b_1 * a_2**2) / (6 * g**2)
        advance = n * 3 * v_2 / (1 - e**2) * shape
        gamma = e / n * m_2 / M / g * v_2 * (1 + m_2 / M * g + a_2 * k_1)
    assert float(advance) == pytest.approx(system.measured[ADVANCE].value, rel=1e-10, abs=0.0)
    assert float(gamma) == pytest.approx(system.measured["einstein_delay_amplitude"].value, rel=1e-10, abs=0.0)
    general = weigh(HOST, pulsar("psr-b1913+16", NO_CHARGE), FEW)
    assert abs(central(outcome, "mass_1") / central(general, "mass_1") - 1.0) > 0.05


def test_the_limit_on_a_charge_is_that_of_the_dipole() -> None:
    """PSR J1738+0333 allows the charge that dipole-radiation allows: there the dipole is nearly all."""
    system = read_system(PUBLISHED / "psr-j1738+0333.toml", HOST.cards).system
    limits = [limit_of(HOST, system, FEW, f"{name}.charge_1")[0][0] for name in (THEORY, "dipole-radiation")]
    assert limits[0].drawn.central == pytest.approx(limits[1].drawn.central, rel=1e-3, abs=0.0)  # v_o^2 and charge^2


def test_no_charge_no_theory() -> None:
    """Without charges in the file the effect is idle and says what it needs; general relativity stays."""
    state = BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    applied = HOST.apply(state)
    reasons = {idle.effect: idle.reason for idle in applied.idle}
    assert reasons[THEORY] == f"needs charge_1, charge_2 in [effects.{THEORY}]"
    assert "quadrupole-decay" in {effect.name for effect in applied.active}
    with pytest.raises(OutOfRange, match="-1 < "):
        HOST.apply(state, {THEORY: {"charge_1": 1.5, "charge_2": 0.0}})


def test_two_theories_are_refused() -> None:
    """A second effect that replaces the same one is refused, naming both."""

    def describe() -> Card:
        return Card(
            name="rival-theory",
            summary="invented for this test",
            formula="none",
            sources=("invented for this test",),
            order="none",
            valid="everywhere",
            needs=("mass_1",),
            gives=(Rate("orbital_period"),),
            replaces=("quadrupole-decay",),
        )

    def secular_rates(state: BinaryState) -> Rates:
        return Rates({"orbital_period": np.ones(state.shape)})

    plugin = SimpleNamespace(describe=hook(describe), secular_rates=hook(secular_rates))
    host = load_host([*OURS, Candidate("rival-theory", "someone-elses", "0.1", lambda: plugin)], strict=True)
    state = BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=3e4, eccentricity=0.4)
    with pytest.raises(BadInput, match="'mono-scalar-tensor' and 'rival-theory' both replace 'quadrupole-decay'"):
        host.apply(state, {THEORY: STRONG})


def test_cautions() -> None:
    """Without charges it says what the replaced effects say; with them, what is dropped and what stays as it was."""
    state = BinaryState(mass_1=1.4, mass_2=1.1, orbital_period=3e4, eccentricity=0.4, projected_semi_major_axis=1.0)

    def said(own: dict[str, float]) -> str:
        return "\n".join(c.statement for _, c in HOST.apply(state, {THEORY: own}, only=[THEORY]).cautions())

    assert "first order only" in said(NO_CHARGE)
    assert "leading order only" in said(NO_CHARGE)
    for part in ("dipole radiation's next order", "stay general relativity's", "Newton's constant"):
        assert part not in said(NO_CHARGE)
        assert part in said(STRONG)
    assert "dipole" not in said({"charge_1": 0.2, "charge_2": 0.2})
    assert "Newton's constant" not in said({"charge_1": 0.2, "charge_2": 0.2, "matter_charge": 0.2})
