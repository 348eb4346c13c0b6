"""The two masses at which two predicted parameters take given values, for many binaries at once.

Newton's method in (ln m_1, ln m_2) with finite differences, on whatever the active effects predict, so that a
third party's theory is weighed by the same code.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np

from clockfall.binary.ranges import BoolArray, FloatArray

Misfit = Callable[[FloatArray, FloatArray], FloatArray]
"""(m_1, m_2), shape trials + (binaries,) [Msun] -> predicted/observed - 1, shape trials + (binaries, 2); NaN where a
prediction has no meaning."""

LIGHTEST: Final = 0.01
HEAVIEST: Final = 300.0
"""The masses between which solutions are sought [Msun]."""

_GRID: Final = 121
_STEP: Final = 1e-6  # of ln m: the square root of rounding, within a factor of a hundred either way
_ITERATIONS: Final = 40
_HALVINGS: Final = 12
_STILL: Final = 1e-14  # of ln m: rounding leaves some 1e-15 times the misfit's worst condition
_SOLVED: Final = 1e-11  # relative misfit; rounding leaves some 1e-15


def mass_grid() -> tuple[FloatArray, FloatArray]:
    """Return trial masses (m_1, m_2) [Msun], both of shape (121, 121): the grid on which solutions are sought."""
    axis = np.geomspace(LIGHTEST, HEAVIEST, _GRID)
    m_1, m_2 = np.meshgrid(axis, axis, indexing="ij")
    return m_1, m_2


def search_masses(misfit: Misfit, on_grid: FloatArray | None = None) -> list[FloatArray]:
    """Return every solution for one binary, the one with the largest m_1 first.

    Newton's method is started from each cell of a logarithmic grid from 0.01 to 300 Msun in which both misfits change
    sign, or come to the edge of their meaning.

    Parameters
    ----------
    misfit : callable
        For a single binary, shape (1,).
    on_grid : array, shape (121, 121, 2), optional
        The misfit on `mass_grid()`, where it is known already.

    Returns
    -------
    list of arrays, shape (2,) [Msun]
        Empty where no masses fit.
    """
    if on_grid is None:
        m_1, m_2 = mass_grid()
        on_grid = misfit(m_1[..., None], m_2[..., None])[..., 0, :]
    starts = _cells_with_sign_changes(on_grid)
    if not starts.size:
        return []
    found, solved = newton_masses(misfit, starts)
    solutions: list[FloatArray] = []
    for masses in found[solved]:
        if not any(np.allclose(masses, known, rtol=1e-6) for known in solutions):
            solutions.append(masses)
    return sorted(solutions, key=lambda pair: -float(pair[0]))


def newton_masses(misfit: Misfit, start: FloatArray) -> tuple[FloatArray, BoolArray]:
    """Solve from starts near the solutions.

    Parameters
    ----------
    misfit : callable
        For binaries of shape (n,), or for one, shape (1,), which is then solved from n starts.
    start : array, shape (n, 2) [Msun]
        First guesses.

    Returns
    -------
    masses : array, shape (n, 2) [Msun]
        NaN where no solution was reached.
    solved : array, shape (n,) [bool]
        Where the misfit is below 1e-11.
    """
    logs = np.log(start)
    done: BoolArray = np.zeros(logs.shape[0], dtype=np.bool_)
    for _ in range(_ITERATIONS):
        value, jacobian = _value_and_jacobian(misfit, logs)
        before = logs
        step = np.where(done[:, None], 0.0, _newton_step(value, jacobian))
        logs = _damped(misfit, logs, step, _norm(value))
        # a binary is done when rounding alone moves it, or when no step would better its misfit: it would not next time
        done |= np.max(np.abs(logs - before), axis=1) < _STILL
        if done.all():
            break
    solved = _norm(misfit(np.exp(logs[:, 0]), np.exp(logs[:, 1]))) < _SOLVED
    return np.where(solved[:, None], np.exp(logs), np.nan), solved


def _norm(value: FloatArray) -> FloatArray:
    """Return the larger of the two misfits, infinite where one has no meaning; (..., 2) -> (...)."""
    largest: FloatArray = np.max(np.abs(value), axis=-1)
    return np.where(np.isfinite(largest), largest, np.inf)


def _value_and_jacobian(misfit: Misfit, logs: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return misfit (n, 2) and its derivatives (n, 2, 2) by ln m_1 and ln m_2, one-sided to where it has a meaning."""
    columns = []
    shifts = _STEP * np.array([[0, 0], [1, 0], [0, 1], [-1, 0], [0, -1]], dtype=np.float64)
    trials = logs + shifts[:, None, :]  # (5, n, 2)
    values = misfit(np.exp(trials[..., 0]), np.exp(trials[..., 1]))  # (5, n, 2)
    for forward, backward in ((1, 3), (2, 4)):
        ahead = (values[forward] - values[0]) / _STEP
        behind = (values[0] - values[backward]) / _STEP
        columns.append(np.where(np.isfinite(ahead), ahead, behind))
    return values[0], np.stack(columns, axis=-1)


def _newton_step(value: FloatArray, jacobian: FloatArray) -> FloatArray:
    """Solve the 2 x 2 systems by Cramer's rule; no step where there is none; at most 1 in ln m."""
    (a, b), (c, d) = (jacobian[:, 0, 0], jacobian[:, 0, 1]), (jacobian[:, 1, 0], jacobian[:, 1, 1])
    determinant = a * d - b * c
    usable = np.isfinite(determinant) & (determinant != 0.0)
    safe = np.where(usable, determinant, 1.0)
    f, g = np.where(usable, value.T, 0.0)
    step = -np.stack([(d * f - b * g) / safe, (a * g - c * f) / safe], axis=-1)
    return np.clip(np.where(usable[:, None], step, 0.0), -1.0, 1.0)


def _damped(misfit: Misfit, logs: FloatArray, step: FloatArray, before: FloatArray) -> FloatArray:
    """Take the step, halved for each binary until its misfit does not grow."""
    share = np.ones(logs.shape[0])
    for _ in range(_HALVINGS):
        trial = logs + share[:, None] * step
        worse = np.asarray(_norm(misfit(np.exp(trial[:, 0]), np.exp(trial[:, 1]))) > np.maximum(before, _SOLVED))
        if not worse.any():
            break
        share[worse] *= 0.5
    return np.where(worse[:, None], logs, trial)


def _cells_with_sign_changes(value: FloatArray) -> FloatArray:
    """Return the middles of the grid's cells that may hold a solution; (grid, grid, 2) -> (cells, 2) [Msun]."""
    axis = np.geomspace(LIGHTEST, HEAVIEST, _GRID)
    corners = np.stack([value[:-1, :-1], value[1:, :-1], value[:-1, 1:], value[1:, 1:]])
    meaning: BoolArray = np.isfinite(corners)
    low = np.min(np.where(meaning, corners, np.inf), axis=0)
    high = np.max(np.where(meaning, corners, -np.inf), axis=0)
    at_the_edge: BoolArray = np.asarray(meaning.any(axis=0) & ~meaning.all(axis=0))
    may_hold = (((low <= 0.0) & (high >= 0.0)) | at_the_edge).all(axis=-1)
    middle = np.sqrt(axis[:-1] * axis[1:])
    i, j = np.nonzero(may_hold)
    # beyond an edge Newton has no value to start from: start at the corner of the cell that has one
    starts = np.stack([middle[i], middle[j]], axis=-1)
    for k, (di, dj) in enumerate(((0, 0), (1, 0), (0, 1), (1, 1))):
        usable = np.any(at_the_edge[i, j], axis=-1) & np.all(meaning[k][i, j], axis=-1)
        starts[usable] = np.stack([axis[i + di], axis[j + dj]], axis=-1)[usable]
    return starts
