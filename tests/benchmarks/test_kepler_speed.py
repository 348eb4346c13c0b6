"""How long Kepler's equation takes, in units of things that anyone can time on the same machine at the same moment.

One SC is the time of one numpy sine and one numpy cosine over the mean anomalies themselves. All numbers of lanes are
equal, all repeats are interleaved, and what is asserted is the median of the ratios, so that the machine's other work
hits both sides alike.
"""

from __future__ import annotations

import warnings

import numpy as np
import pytest
import scipy.optimize

from clockfall.binary.kepler import eccentric_anomaly

from .timing import median_ratio

pytestmark = pytest.mark.benchmark_ratio

LANES = 200_000
LARGEST_RATIO_TO_SC = 1.7


def cases() -> dict[str, tuple[np.ndarray, np.ndarray | float]]:
    """Mean anomalies and eccentricities: one turn and many, one eccentricity and one for each lane."""
    rng = np.random.default_rng(1)
    one_turn, many_turns = rng.uniform(-np.pi, np.pi, LANES), rng.uniform(-1e5, 1e5, LANES)
    each = rng.uniform(0.0, 0.95, LANES)
    return {
        "one turn, one e": (one_turn, 0.6),
        "one turn, each its e": (one_turn, each),
        "many turns, one e": (many_turns, 0.6),
        "many turns, each its e": (many_turns, each),
        "one turn, every e": (one_turn, rng.random(LANES)),
        "one turn, e near 1": (one_turn, 1.0 - 10.0 ** rng.uniform(-15.0, -3.0, LANES)),
    }


def assert_solved(E: np.ndarray, M: np.ndarray, e: np.ndarray | float) -> None:
    """Check the answer that was timed: the residual is a rounding of its largest term."""
    residual = np.abs(E - e * np.sin(E) - M)
    assert np.isfinite(residual).all()
    # half an ulp each of the sine, the product, both differences, and 2 ulp of E with a slope of at most 2
    assert (residual <= 6 * np.spacing(np.abs(E) + 1.0)).all()


@pytest.mark.parametrize("case", list(cases()))
def test_kepler_costs_less_than_two_sines_and_two_cosines(case: str) -> None:
    """At 2e5 lanes, range reduction and checks included, E costs at most 1.7 SC, and is right."""
    M, e = cases()[case]
    assert_solved(eccentric_anomaly(M, e), M, e)
    ratio = median_ratio(lambda: eccentric_anomaly(M, e), lambda: (np.sin(M), np.cos(M)), repeats=41)
    print(f"{case}: {ratio:.2f} SC")  # noqa: T201  the measurement is the point
    assert ratio <= LARGEST_RATIO_TO_SC


def newton(M: np.ndarray, e: np.ndarray, start: np.ndarray) -> np.ndarray:
    """Solve by scipy's vectorised Newton iteration, as one would write it down."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="some failed to converge", category=RuntimeWarning)
        found: np.ndarray = scipy.optimize.newton(
            lambda E: E - e * np.sin(E) - M, start, fprime=lambda E: 1.0 - e * np.cos(E)
        )
    return found


@pytest.mark.parametrize(
    ("case", "converges", "least_gain"),
    [
        ("one turn, each its e", True, 4.0),
        ("one turn, e near 1", True, 8.0),
        ("one turn, every e", False, 25.0),
    ],
)
def test_kepler_is_faster_than_newton(case: str, converges: bool, least_gain: float) -> None:
    """At 2e5 lanes E costs a small part of scipy's Newton iteration with derivative, and agrees where that converges.

    From a start made for this equation Newton's method takes 7 steps for e below 0.95 and 14 for e near 1. From
    E = M it fails on some lanes of e in [0, 1), and all lanes then go through all its 50 steps.
    """
    M, e = cases()[case]
    e = np.broadcast_to(e, M.shape)
    # J. M. A. Danby and T. M. Burkardt, Celest. Mech. 31, 95 (1983)
    start = M + 0.85 * e * np.sign(M) if converges else M
    E = eccentric_anomaly(M, e)
    assert_solved(E, M, e)
    if converges:
        # the plain residual that Newton's method uses is off by 5e-16, and its slope goes down to E**2 / 2 = 1e-3
        # for the smallest of 2e5 anomalies, 3e-5
        np.testing.assert_allclose(newton(M, e, start), E, rtol=0.0, atol=1e-12)
    gain = 1.0 / median_ratio(lambda: eccentric_anomaly(M, e), lambda: newton(M, e, start), repeats=7)
    print(f"{case}: {gain:.1f} times as fast as Newton")  # noqa: T201  the measurement is the point
    assert gain >= least_gain
