"""How long the time to merger takes, in units of a numpy sine and cosine (SC), and against quadrature."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from clockfall.binary.state import BinaryState
from clockfall_effects.quadrupole_decay import merger_fraction, merger_time

from .timing import median_ratio

pytestmark = pytest.mark.benchmark_ratio

LANES = 200_000
LARGEST_RATIO_TO_SC = 0.6
QUADRATURES = 200


def batch() -> BinaryState:
    """Return binaries of all eccentricities."""
    random = np.random.default_rng(1)
    m_1, m_2 = random.uniform(0.5, 3.0, (2, LANES))
    return BinaryState(
        mass_1=m_1,
        mass_2=m_2,
        orbital_period=random.uniform(1e3, 1e6, LANES),
        eccentricity=random.random(LANES) * 0.9999,
    )


def by_quadrature(e_0: float) -> float:
    """Return the time over the circular orbit's by scipy's quadrature of Peters 1964, eq. (5.14), as written there."""
    integral = quad(
        lambda e: e ** (29 / 19) * (1 + 121 / 304 * e**2) ** (1181 / 2299) / (1 - e**2) ** 1.5, 0.0, e_0, epsabs=0.0,
        epsrel=1e-12, limit=200,
    )[0]  # fmt: skip
    return float(
        48 / 19 * ((1 - e_0**2) * e_0 ** (-12 / 19) * (1 + 121 / 304 * e_0**2) ** (-870 / 2299)) ** 4 * integral
    )


def test_merger_time_costs_little() -> None:
    """At 2e5 lanes the time to merger from 1 - e^2 costs at most 0.6 SC; from masses and period it is printed."""
    state = batch()
    (s_2,) = state.known("one_minus_e_squared")
    x = np.random.default_rng(2).uniform(-np.pi, np.pi, LANES)
    found = merger_fraction(s_2)
    (e,) = state.known("eccentricity")
    for k in range(50):
        assert found[k] == pytest.approx(by_quadrature(float(e[k])), rel=1e-10)  # the quadrature's own promise, doubled
    kernel = median_ratio(lambda: merger_fraction(s_2), lambda: (np.sin(x), np.cos(x)), repeats=31)
    whole = median_ratio(lambda: merger_time(state), lambda: (np.sin(x), np.cos(x)), repeats=31)
    print(f"\ntime to merger: {kernel:.2f} SC from 1 - e^2, {whole:.2f} SC from masses, period and e")  # noqa: T201
    assert kernel <= LARGEST_RATIO_TO_SC


def test_merger_time_against_quadrature() -> None:
    """One binary's time to merger over the circular one costs at most a 4000th of scipy's quadrature of the same."""
    state = batch()
    (s_2,) = state.known("one_minus_e_squared")
    few = [float(e) for e in state.known("eccentricity")[0][:QUADRATURES]]
    ratio = median_ratio(lambda: [by_quadrature(e) for e in few], lambda: merger_fraction(s_2), repeats=11)
    per_binary = ratio * LANES / QUADRATURES
    print(f"\nquadrature over the closed form, for each binary: {per_binary:.0f}")  # noqa: T201
    assert per_binary >= 4000
