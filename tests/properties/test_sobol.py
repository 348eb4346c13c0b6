"""The Sobol sequence against scipy's, and the balance that makes it one."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import qmc

from clockfall.analysis.sobol import BITS, DIMENSIONS, sobol
from clockfall.errors import OutOfRange


def test_the_plain_sequence_is_that_of_scipy() -> None:
    """In every dimension the first 1024 points are those of scipy.stats.qmc, which takes Gray-code order."""
    mine = sobol(DIMENSIONS, 10, None) - 0.5 ** (BITS + 1)  # from the middle of a cell to its lower edge
    index = np.arange(1024)
    scipys = qmc.Sobol(DIMENSIONS, scramble=False).random_base2(10)
    assert np.array_equal(mine.T[index ^ (index >> 1)], scipys)


@settings(max_examples=20)
@given(st.integers(0, 2**32 - 1))
def test_scrambling_keeps_the_balance(seed: int) -> None:
    """Of 2^10 points each of 2^10 equal intervals holds one, in every dimension, whatever the seed."""
    points = sobol(DIMENSIONS, 10, np.random.default_rng(seed))
    for row in points:
        assert np.array_equal(np.sort(np.floor(row * 1024)), np.arange(1024))
    assert np.all((points > 0.0) & (points < 1.0))


@pytest.mark.parametrize("seed", range(5))
def test_the_first_two_dimensions_are_a_net(seed: int) -> None:
    """The first two dimensions are a (0, 10, 2) net: each of the 2^10 boxes of equal area, of any shape, holds one."""
    x, y = sobol(2, 10, np.random.default_rng(seed))
    for k in range(11):
        boxes = np.floor(x * 2**k) * 2 ** (10 - k) + np.floor(y * 2 ** (10 - k))
        assert np.unique(boxes).size == 1024, k


def test_an_integral_converges_faster_than_by_chance() -> None:
    """The mean of exp(sum x/sqrt(d)) in ten dimensions is right to 1e-5 with 2^14 points; chance leaves 3e-3."""
    exact = (np.sqrt(10) * (np.exp(1 / np.sqrt(10)) - 1)) ** 10
    errors = []
    for seed in range(8):
        points = sobol(10, 14, np.random.default_rng(seed))
        errors.append(np.mean(np.exp(np.sum(points, axis=0) / np.sqrt(10))) / exact - 1)
    assert np.sqrt(np.mean(np.square(errors))) < 3e-5


def test_scrambling_is_unbiased_and_seeded() -> None:
    """One and the same point is spread evenly over seeds; one seed gives one sequence."""
    first = np.array([sobol(3, 2, np.random.default_rng(seed))[:, 1] for seed in range(2000)])
    # the mean of 2000 uniform numbers scatters by 0.0065
    assert np.max(np.abs(np.mean(first, axis=0) - 0.5)) < 0.03
    assert np.array_equal(*(sobol(3, 5, np.random.default_rng(7)) for _ in range(2)))


@pytest.mark.parametrize(("dimensions", "power"), [(0, 3), (DIMENSIONS + 1, 3), (2, 31), (2, -1)])
def test_what_is_too_large_is_refused(dimensions: int, power: int) -> None:
    """Dimensions and points beyond the tables are refused."""
    with pytest.raises(OutOfRange):
        sobol(dimensions, power, None)
