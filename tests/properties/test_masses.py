"""The Newton solver of the masses, on predictions whose answer is known in closed form."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from clockfall.analysis.masses import Misfit, newton_masses, search_masses
from clockfall.binary.ranges import FloatArray

masses = st.floats(0.1, 50.0)


def sum_and_product_like(m_1: float, m_2: float) -> Misfit:
    """Misfit of M and of m_2 (M + m_2), the shape of the advance and of the Einstein amplitude."""

    def misfit(t_1: FloatArray, t_2: FloatArray) -> FloatArray:
        first = (t_1 + t_2) / (m_1 + m_2) - 1.0
        second = t_2 * (t_1 + 2.0 * t_2) / (m_2 * (m_1 + 2.0 * m_2)) - 1.0
        return np.stack([first, second], axis=-1)

    return misfit


@given(masses, masses)
def test_the_masses_are_found_whatever_they_are(m_1: float, m_2: float) -> None:
    """The search finds the one solution to 1e-9, wherever it lies between 0.1 and 50 Msun."""
    solutions = search_masses(sum_and_product_like(m_1, m_2))
    assert len(solutions) == 1
    # the misfit is solved to 1e-11; a mass ratio of 500 can worsen that by as much for the lighter body
    assert solutions[0] == pytest.approx([m_1, m_2], rel=1e-8, abs=0.0)


def test_two_solutions_are_both_found() -> None:
    """Sum and product of the masses do not tell which is which: both answers are given, the larger m_1 first."""

    def misfit(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        return np.stack([(m_1 + m_2) / 3.0 - 1.0, m_1 * m_2 / 2.0 - 1.0], axis=-1)

    solutions = search_masses(misfit)
    assert np.allclose(solutions, [[2.0, 1.0], [1.0, 2.0]], rtol=1e-9)


def test_no_solution_is_said_so() -> None:
    """Where no masses fit, the search returns nothing instead of the nearest thing."""

    def misfit(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        return np.stack([(m_1 + m_2) / 3.0 - 1.0, m_1 * m_2 / 200.0 - 1.0], axis=-1)

    assert search_masses(misfit) == []


def test_an_edge_of_meaning_does_not_stop_newton() -> None:
    """With a prediction that has no meaning beyond an edge right beside the solution, the solution is reached."""

    def misfit(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        s = 0.9999 * (m_1 + m_2) ** (2 / 3) / 3.0 ** (2 / 3) / m_2
        return np.stack([(m_1 + m_2) / 3.0 - 1.0, np.where(s <= 1.0, s, np.nan) / 0.9999 - 1.0], axis=-1)

    solutions = search_masses(misfit)
    assert np.allclose(solutions, [[2.0, 1.0]], rtol=1e-9)


def test_many_binaries_at_once() -> None:
    """Each binary of a batch gets its own solution; one without is marked, and hinders nobody."""
    truth = np.random.default_rng(5).uniform(0.5, 3.0, (1000, 2))
    M, q = truth.sum(axis=1), truth[:, 1] * (truth[:, 0] + 2 * truth[:, 1])
    q[17] = 1e9  # M is too small for it, whatever m_2

    def misfit(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
        return np.stack([(m_1 + m_2) / M - 1.0, m_2 * (m_1 + 2 * m_2) / q - 1.0], axis=-1)

    found, solved = newton_masses(misfit, np.full((1000, 2), 1.4))
    assert np.flatnonzero(~solved).tolist() == [17]
    assert np.isnan(found[17]).all()
    assert np.allclose(np.delete(found, 17, 0), np.delete(truth, 17, 0), rtol=1e-9)
