"""What the delays cost, in units of a sine and a cosine, and against a script that does the same."""

from __future__ import annotations

import math
import tracemalloc

import numpy as np
import pytest
import scipy.optimize

from clockfall.analysis.timing import delays
from clockfall.binary.constants import T_SUN
from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import SecularMotion
from clockfall.binary.state import BinaryState
from clockfall.effects.loading import load_host

from .timing import median_ratio

pytestmark = pytest.mark.benchmark_ratio

TIMES = 200_000
LARGEST_RATIO_TO_SC = 25.0
"""The aim is 6; what is reached is 15 to 20, most of it in carrying the orbit to the times and moving it twice."""

P_B, E, X, OMEGA, GAMMA, S = 8640.0, 0.9, 1.0, 1.9, 4e-3, 0.7
EFFECTS = ("roemer-delay", "einstein-delay", "shapiro-delay")


def binary() -> tuple[BinaryState, SecularMotion]:
    """Return an orbit that stands still but for its clock."""
    state = BinaryState(
        mass_1=1.44, mass_2=1.2, orbital_period=P_B, eccentricity=E, longitude_of_periastron=OMEGA,
        projected_semi_major_axis=X, periastron_epoch=Epoch(52144, 0.9),
    )  # fmt: skip
    return state, SecularMotion(state, *(np.array(0.0) for _ in range(7)))


PARAMETERS = {
    "einstein_delay_amplitude": np.array(GAMMA),
    "shapiro_range": np.array(T_SUN * 1.2),
    "shapiro_shape": np.array(S),
}


def times(number: int) -> Epoch:
    """Return arrivals over ten years, unsorted."""
    rng = np.random.default_rng(2)
    return Epoch(rng.integers(52144, 55796, number), rng.random(number))


def script(seconds: np.ndarray) -> np.ndarray:
    """Invert arrival to emission as one would write it down: by rounds, Kepler's equation solved by scipy in each."""
    n, r = 2 * math.pi / P_B, T_SUN * 1.2

    def total(T: np.ndarray) -> np.ndarray:
        M = n * T
        u = scipy.optimize.newton(lambda u: u - E * np.sin(u) - M, M, lambda u: 1 - E * np.cos(u), maxiter=200)
        along, across = np.cos(u) - E, math.sqrt(1 - E**2) * np.sin(u)
        behind = math.sin(OMEGA) * along + math.cos(OMEGA) * across
        return X * behind + GAMMA * np.sin(u) - 2 * r * np.log(1 - E * np.cos(u) - S * behind)

    T = seconds.copy()
    for _ in range(8):
        T = seconds - total(T)
    return seconds - T


def test_delays_in_sines_and_cosines() -> None:
    """Delays at 2e5 arrivals, inverted exactly, cost at most 25 SC (one numpy sine and cosine over as many numbers)."""
    state, motion = binary()
    applied, arrivals = load_host(strict=True).apply(state, only=EFFECTS), times(TIMES)
    angle = np.random.default_rng(1).uniform(-np.pi, np.pi, TIMES)
    ratio = median_ratio(
        lambda: delays(applied, motion, arrivals, instead=PARAMETERS),
        lambda: (np.sin(angle), np.cos(angle)),
        repeats=11,
    )
    print(f"delays: {ratio:.1f} SC")  # noqa: T201  the measurement is the point
    assert ratio <= LARGEST_RATIO_TO_SC


def test_against_a_script() -> None:
    """They are at least 3 times faster than a script with scipy's Newton; the aim is 10, and 4 to 6 are reached."""
    state, motion = binary()
    applied, arrivals = load_host(strict=True).apply(state, only=EFFECTS), times(20_000)
    seconds, low = motion.seconds(arrivals)
    mine = delays(applied, motion, arrivals, instead=PARAMETERS).total
    # the script counts its orbits in one double of seconds, and its rounds converge by n x/(1 - e) each
    assert np.max(np.abs(script(seconds + low) - mine)) < 1e-6
    ratio = median_ratio(
        lambda: script(seconds + low), lambda: delays(applied, motion, arrivals, instead=PARAMETERS), repeats=5
    )
    print(f"script over delays: {ratio:.1f}")  # noqa: T201
    assert ratio >= 3.0


@pytest.mark.slow
def test_ten_million_times_within_two_gibibytes() -> None:
    """Delays at 1e7 times run within 2 GiB at the peak, results included."""
    state, motion = binary()
    applied, arrivals = load_host(strict=True).apply(state, only=EFFECTS), times(10_000_000)
    tracemalloc.start()
    delays(applied, motion, arrivals, instead=PARAMETERS)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    print(f"peak {peak / 2**30:.2f} GiB")  # noqa: T201
    assert peak < 2**31
