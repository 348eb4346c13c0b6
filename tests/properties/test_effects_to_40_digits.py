"""Every rate and predicted parameter of the built-in effects against its formula at 40 digits."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from mpmath import mp, mpf

from clockfall.binary.constants import GM_SUN, SPEED_OF_LIGHT
from clockfall.binary.state import BinaryState
from clockfall.effects.host import Host
from clockfall.effects.loading import installed_candidates, load_host
from clockfall.testing.strategies import binaries

HOST: Host = load_host([c for c in installed_candidates() if c.distribution == "clockfall"], strict=True)
LEADING = ("einstein-delay", "periastron-advance", "quadrupole-decay", "shapiro-delay")
SYSTEMS = 300
ADVANCE, DECAY, ROUNDING = "longitude_of_periastron_rate", "orbital_period_rate", "eccentricity_rate"


def systems() -> BinaryState:
    """Return random binaries: masses 0.1 ... 100 Msun, e from 0 to 0.9999, periods 100 s ... 10^4 d, some x."""
    random = np.random.default_rng(1974)
    e = np.concatenate([[0.0, 1e-12, 0.9999], random.uniform(0.0, 0.9999, SYSTEMS // 2)])
    e = np.concatenate([e, 1.0 - 10.0 ** random.uniform(-4.0, 0.0, SYSTEMS - e.size)])
    m_1, m_2 = 10.0 ** random.uniform(-1.0, 2.0, (2, SYSTEMS))
    state = BinaryState(
        mass_1=m_1, mass_2=m_2, orbital_period=10.0 ** random.uniform(2.0, 8.9, SYSTEMS), eccentricity=e
    )
    a, M = state.known("relative_semi_major_axis", "total_mass")
    edge_on = state.replace(projected_semi_major_axis=a * m_2 / M).known("sin_inclination")[0]  # above 1 by 1PN
    return state.replace(projected_semi_major_axis=a * m_2 / M * random.uniform(0.05, 0.999, SYSTEMS) / edge_on)


def contributions(state: BinaryState, host: Host = HOST) -> dict[str, Any]:
    """Return every rate and parameter of leading order by name; each has one effect."""
    applied = host.apply(state, only=LEADING)
    found = (*applied.secular_rates(), *applied.predicted_parameters())
    return {contribution.name: contribution.values for contribution in found}


class Exact:
    """The published formulas for one binary, at 40 digits, from the exact doubles given to clockfall."""

    def __init__(self, m_1: float, m_2: float, P_b: float, e: float, x: float) -> None:
        self.m_1, self.m_2, self.P_b, self.e, self.x = (mpf(value) for value in (m_1, m_2, P_b, e, x))
        self.T = mpf(GM_SUN) / mpf(SPEED_OF_LIGHT) ** 3
        self.n = 2 * mp.pi / self.P_b
        self.M = self.m_1 + self.m_2
        self.s = self.x * self.n ** (mpf(2) / 3) * self.T ** (-mpf(1) / 3) * self.M ** (mpf(2) / 3) / self.m_2
        # Damour & Deruelle 1985: the mass function to 1PN
        self.s *= 1 + (3 - self.m_1 * self.m_2 / (3 * self.M**2)) * (self.T * self.M * self.n) ** (mpf(2) / 3)
        self.ratio = self.s / (1 + mp.sqrt(1 - self.s**2))

    def value(self, name: str) -> mpf:
        """Return one rate or parameter."""
        m_1, m_2, M, T, n, e = self.m_1, self.m_2, self.M, self.T, self.n, self.e
        scale = (T * n) ** (mpf(5) / 3) * m_1 * m_2 * M ** (-mpf(1) / 3)
        # Peters & Mathews 1963, eqs. (16-17); Peters 1964, eq. (5.7); Robertson 1938; Blandford & Teukolsky 1976;
        # Damour & Deruelle 1986; Freire & Wex 2010. Equation numbers from memory.
        formulas: dict[str, Callable[[], mpf]] = {
            DECAY: lambda: (
                -192 * mp.pi / 5 * scale * (1 + mpf(73) / 24 * e**2 + mpf(37) / 96 * e**4) / (1 - e**2) ** mpf("3.5")
            ),
            ROUNDING: lambda: -mpf(304) / 15 * scale * n * e * (1 + mpf(121) / 304 * e**2) / (1 - e**2) ** mpf("2.5"),
            ADVANCE: lambda: 3 * (T * M * n) ** (mpf(2) / 3) / (1 - e**2) * n,
            "einstein_delay_amplitude": lambda: (
                e * n ** (-mpf(1) / 3) * T ** (mpf(2) / 3) * M ** (-mpf(4) / 3) * m_2 * (m_1 + 2 * m_2)
            ),
            "shapiro_range": lambda: T * m_2,
            "shapiro_shape": lambda: self.s,
            "orthometric_ratio": lambda: self.ratio,
            "orthometric_amplitude": lambda: T * m_2 * self.ratio**3,
        }
        return formulas[name]()


def test_every_contribution_to_1e_12() -> None:
    """Every rate and parameter agrees with its formula at 40 digits to 1e-12, on 300 random systems."""
    state = systems()
    found = contributions(state)
    inputs = state.known("mass_1", "mass_2", "orbital_period", "eccentricity", "projected_semi_major_axis")
    with mp.workdps(40):
        exact = [Exact(*(float(value[k]) for value in inputs)) for k in range(SYSTEMS)]
        for name, values in found.items():
            for k in range(SYSTEMS):
                expected = exact[k].value(name)
                error = abs(mpf(float(values[k])) - expected)
                # sqrt(1 - s^2) near edge-on (s up to 0.999) multiplies the rounding of s by up to 500
                tolerance = mpf("1e-12") * abs(expected)
                assert error <= tolerance, (name, k, float(error / abs(expected)) if expected else float(error))
    assert set(found) >= {DECAY, ROUNDING, ADVANCE, "einstein_delay_amplitude", "shapiro_range", "orthometric_ratio"}


@given(binaries(largest_eccentricity=0.99), st.floats(0.1, 10.0))
def test_scaling_of_all_times(state: BinaryState, factor: float) -> None:
    """Masses and times scaled together: rates scale as their units say, since nothing but T_sun M/P_b has a scale."""
    m_1, m_2, P_b = state.known("mass_1", "mass_2", "orbital_period")
    scaled = state.replace(mass_1=m_1 * factor, mass_2=m_2 * factor, orbital_period=P_b * factor)
    one, other = contributions(state), contributions(scaled)
    for name, power in (
        (DECAY, 0),
        (ADVANCE, -1),
        (ROUNDING, -1),
        ("einstein_delay_amplitude", 1),
        ("shapiro_range", 1),
    ):
        # a handful of roundings of factors raised to powers up to 4
        assert other[name] == pytest.approx(one[name] * factor**power, rel=1e-13, abs=0), name


@given(binaries(largest_eccentricity=0.99), st.floats(1.0, 100.0))
def test_scaling_with_the_period(state: BinaryState, factor: float) -> None:
    """At fixed masses: decay as P_b^(-5/3), advance as P_b^(-5/3), e rate as P_b^(-8/3), gamma as P_b^(1/3)."""
    (P_b,) = state.known("orbital_period")
    one, other = contributions(state), contributions(state.replace(orbital_period=P_b * factor))
    for name, power in ((DECAY, -5 / 3), (ADVANCE, -5 / 3), (ROUNDING, -8 / 3), ("einstein_delay_amplitude", 1 / 3)):
        # likewise; an eccentricity at the smallest double leaves fewer digits in gamma
        assert other[name] == pytest.approx(one[name] * factor**power, rel=1e-13, abs=1e-300), name


@given(binaries())
def test_exchange_of_the_bodies(state: BinaryState) -> None:
    """Decay, rounding and first-order advance do not know which body is timed; the Einstein delay does."""
    m_1, m_2 = state.known("mass_1", "mass_2")
    one, other = contributions(state), contributions(state.replace(mass_1=m_2, mass_2=m_1))
    for name in (DECAY, ROUNDING, ADVANCE):
        assert other[name] == pytest.approx(one[name], rel=1e-15, abs=0), (
            name
        )  # the sum and product are exact in either order
    if abs(m_1 - m_2) > 0.01 * m_1 and one["einstein_delay_amplitude"] > 0:
        assert other["einstein_delay_amplitude"] != one["einstein_delay_amplitude"]


@given(binaries(largest_eccentricity=0.0))
def test_the_circular_limit(state: BinaryState) -> None:
    """At e = 0 the rounding and the Einstein delay vanish, and a small e changes the decay by (157/24) e^2 alone."""
    zero = contributions(state)
    assert zero[ROUNDING] == 0.0
    assert zero["einstein_delay_amplitude"] == 0.0
    small = contributions(state.replace(eccentricity=1e-4))
    # F(e) = 1 + (73/24 + 7/2) e^2 + O(e^4)
    assert small[DECAY] / zero[DECAY] - 1.0 == pytest.approx(157.0 / 24.0 * 1e-8, rel=1e-6, abs=0.0)


@given(binaries())
def test_scalar_in_scalar_out(state: BinaryState) -> None:
    """A single binary gives numbers without a dimension."""
    for name, values in contributions(state).items():
        assert np.shape(values) == (), name


@given(binaries(shape=(3,)))
def test_a_batch_equals_a_loop(state: BinaryState) -> None:
    """Each element of a batch is what the single binary gives, to the rounding of numpy's vector loops."""
    batch = contributions(state)
    for k in range(3):
        single = contributions(state.take(np.array(k)))
        for name, values in batch.items():
            assert values[k] == pytest.approx(single[name], rel=1e-15 * 8, abs=0), name


@given(binaries(largest_eccentricity=0.9), st.floats(0.01, 0.999))
def test_edge_on_and_beyond(state: BinaryState, excess: float) -> None:
    """Where sin i > 1 shape and orthometric pair have no meaning and are NaN; the range keeps its own."""
    a, m_2, M = state.known("relative_semi_major_axis", "mass_2", "total_mass")
    (sin_i,) = state.replace(projected_semi_major_axis=a * m_2 / M).known("sin_inclination")
    a = a / sin_i  # to the edge by the mass function to 1PN
    impossible = contributions(state.replace(projected_semi_major_axis=a * m_2 / M * (1.0 + excess)))
    for name in ("shapiro_shape", "orthometric_ratio", "orthometric_amplitude"):
        assert np.isnan(impossible[name]), name
    assert impossible["shapiro_range"] > 0.0


def test_cautions_speak_where_they_should() -> None:
    """A wide orbit gives no caution; a tight one says how good the numbers are; the last orbits are called rough."""
    wide = BinaryState(mass_1=1.0, mass_2=1.0, orbital_period=1e8, eccentricity=0.1)
    assert HOST.apply(wide).cautions() == ()
    tight = BinaryState(mass_1=1.4, mass_2=1.4, orbital_period=1e4, eccentricity=0.6)
    leading = HOST.apply(tight, only=LEADING)
    assert {effect for effect, _ in leading.cautions()} == {"periastron-advance", "quadrupole-decay"}
    assert HOST.apply(tight).cautions() == ()  # the next orders are there, so their absence is no caution
    last = BinaryState(mass_1=1.4, mass_2=1.4, orbital_period=0.01, eccentricity=0.0)
    assert any("rough guide" in caution.statement for _, caution in HOST.apply(last).cautions())
