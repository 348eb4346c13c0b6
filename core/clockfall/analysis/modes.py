"""The masses at which chi-squared is least, every separate minimum of it.

Starts are the masses at which two parameters take their measured values, and the minima on a coarse grid; from each of
them Levenberg and Marquardt's method descends in ln m.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations
from typing import Final

import numpy as np

from clockfall.analysis.likelihood import FAR, Likelihood
from clockfall.analysis.masses import HEAVIEST, LIGHTEST, search_masses
from clockfall.binary.ranges import FloatArray
from clockfall.errors import BadInput

_INCONSISTENT: Final = 1e4  # chi-squared of the best masses beyond which the parameters have nothing in common


class NoOverlap(BadInput):
    """No masses give the measured parameters.

    Attributes
    ----------
    names : tuple of str
        The parameters.
    chi_squared : float
        Of the best masses; infinite where no masses give every prediction a meaning.
    """

    def __init__(self, names: tuple[str, ...], chi_squared: float) -> None:
        self.names = names
        self.chi_squared = chi_squared
        super().__init__(
            f"no masses between {LIGHTEST:g} and {HEAVIEST:g} Msun give the measured {', '.join(names)} together "
            f"(chi-squared {chi_squared:.3g} at best); check the values and their units, or leave one out"
        )


def first_guesses(likelihood: Likelihood) -> FloatArray:
    """Return masses near which chi-squared may be least, (n, 2)."""
    return np.array([*_pair_solutions(likelihood), *_coarse_minima(likelihood)]).reshape(-1, 2)


def modes_near(likelihood: Likelihood, starts: FloatArray) -> list[FloatArray]:
    """Return masses where chi-squared is least, the best first; all that the peak does not make negligible.

    Parameters
    ----------
    likelihood : Likelihood
    starts : array, shape (n, 2) [Msun]
        From which to descend.

    Raises
    ------
    NoOverlap
        No start has a meaning, or no masses give the measured values together.
    """
    if not starts.size:
        raise NoOverlap(likelihood.names, np.inf)
    found = _polished(likelihood, starts)
    squared = likelihood.chi_squared(found)
    order = np.argsort(squared, kind="stable")
    best = float(squared[order[0]])
    limit = _INCONSISTENT if len(likelihood.names) > 2 else FAR
    if not best < limit:
        raise NoOverlap(likelihood.names, best)
    modes: list[FloatArray] = []
    for k in order[squared[order] < best + FAR]:
        if not any(np.allclose(found[k], known, rtol=1e-9) for known in modes):
            modes.append(found[k])
    return [_settled(likelihood, modes[0]), *modes[1:]]


def _pair_solutions(likelihood: Likelihood) -> Iterator[FloatArray]:
    """Yield the masses at which two parameters take their values; of many parameters, the pairs of the sharpest."""
    values = list(likelihood.measured.values())
    sharpness = [abs(v.value) / (v.plus + v.minus) for v in values]
    usable = [k for k in sorted(range(len(values)), key=lambda k: -sharpness[k]) if values[k].value != 0.0]
    for pair in list(combinations(usable[:4], 2))[:4]:
        chosen = list(pair)
        observed = np.array([values[k].value for k in chosen])

        def misfit(m_1: FloatArray, m_2: FloatArray, of: list[int] = chosen, by: FloatArray = observed) -> FloatArray:
            masses = np.stack(np.broadcast_arrays(m_1, m_2), axis=-1)
            flat = masses.reshape(-1, 2)
            inside = np.all((flat >= LIGHTEST) & (flat <= HEAVIEST), axis=-1)
            found = likelihood.theory(np.where(inside[:, None], flat, 1.0), 0)[:, 0, of] / by - 1.0
            found[~inside] = np.nan
            return np.asarray(found.reshape(*masses.shape[:-1], 2))

        yield from search_masses(misfit)


def _coarse_minima(likelihood: Likelihood) -> Iterator[FloatArray]:
    """Yield the least of chi-squared on a coarse grid, with uncertainties blurred to the grid's spacing."""
    axis = np.geomspace(LIGHTEST, HEAVIEST, 122)[1:-1]
    masses = np.stack(np.meshgrid(axis, axis, indexing="ij"), axis=-1)
    squared = likelihood.blurred(0.1).chi_squared(masses)
    around = np.pad(squared, 1, constant_values=np.inf)
    least = np.isfinite(squared)
    size = axis.size
    for i, j in ((0, 1), (1, 0), (1, 2), (2, 1), (0, 0), (2, 2), (0, 2), (2, 0)):
        least &= squared <= around[i : i + size, j : j + size]
    rows, columns = np.nonzero(least)
    for k in np.argsort(squared[rows, columns], kind="stable")[:8]:
        yield masses[rows[k], columns[k]]


def _polished(likelihood: Likelihood, masses: FloatArray) -> FloatArray:
    """Return where chi-squared is least nearby, by Levenberg and Marquardt's method in ln m; (n, 2)."""
    logs = np.log(masses)
    for share in (0.03, 0.0):
        logs = _least_squares(likelihood.blurred(share) if share else likelihood, logs)
    return np.exp(logs)


def _least_squares(likelihood: Likelihood, logs: FloatArray) -> FloatArray:
    damping = np.full(logs.shape[0], 1e-3)
    best = likelihood.chi_squared(np.exp(logs))
    for _ in range(40):
        masses = np.exp(logs)
        residual, slopes = _slopes(likelihood, masses, np.eye(2) * 1e-5 * masses[:, None, :])
        trial = logs + _damped_step(residual, slopes * masses[:, None, :], damping)
        squared = likelihood.chi_squared(np.exp(trial))
        better = squared < best
        if not better.any() and np.all(damping > 1e3):
            break
        gained = np.where(better, best, 0.0) - np.where(better, squared, 0.0)
        small = np.max(gained, initial=0.0) < 1e-9
        logs, best = np.where(better[:, None], trial, logs), np.where(better, squared, best)
        damping = np.where(better, 0.2 * damping, 10.0 * damping)
        if small and better.any():
            break
    return logs


def _damped_step(residual: FloatArray, slopes: FloatArray, damping: FloatArray) -> FloatArray:
    """Return a step of Levenberg and Marquardt's, at most 0.5 either way, none where slopes have no meaning; (n, 2)."""
    normal = np.swapaxes(slopes, -1, -2) @ slopes
    ridge = damping[:, None] * np.diagonal(normal, axis1=-2, axis2=-1) + 1e-300
    gradient = np.swapaxes(slopes, -1, -2) @ residual[..., None]
    usable = np.all(np.isfinite(normal), axis=(-1, -2)) & np.all(np.isfinite(gradient), axis=(-1, -2))
    normal = np.where(usable[:, None, None], normal, np.eye(2))
    gradient = np.where(usable[:, None, None], gradient, 0.0)
    step = -np.linalg.solve(normal + ridge[..., None] * np.eye(2), gradient)[..., 0]
    return np.clip(step, -0.5, 0.5)


def _slopes(likelihood: Likelihood, masses: FloatArray, steps: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return residuals (n, p), and their derivatives (n, p, 2) per length of two steps, steps (n, 2, 2)."""
    ahead = np.moveaxis(steps, 1, 0)
    r = likelihood.residuals(masses + np.concatenate([np.zeros((1, *masses.shape)), ahead, -ahead]))  # (5, n, p)
    lengths = np.linalg.norm(ahead, axis=-1)[..., None]
    return r[0], np.stack([*two_sided(r[0], r[1:3], r[3:5], lengths)], axis=-1)


def two_sided(here: FloatArray, ahead: FloatArray, behind: FloatArray, step: FloatArray) -> FloatArray:
    """Return a derivative from values a step ahead and a step behind, one-sided where only one has a meaning."""
    forward, backward = (ahead - here) / step, (here - behind) / step
    both = 0.5 * (forward + backward)
    return np.where(np.isfinite(both), both, np.where(np.isfinite(forward), forward, backward))


def principal_axes(likelihood: Likelihood, masses: FloatArray) -> FloatArray:
    """Return the principal axes of the Gaussian that fits at `masses`, the longer first, as columns [Msun]."""
    _, slopes = _slopes(likelihood, masses[None], np.eye(2)[None] * 1e-5 * masses[None, None, :])
    slopes = np.where(np.isfinite(slopes[0]), slopes[0], 0.0)
    _, sharpness, directions = np.linalg.svd(slopes, full_matrices=False)
    # what is not bounded at all is bounded by the masses themselves
    lengths = np.minimum(1.0 / np.maximum(sharpness, 1e-300), 0.5 * np.sum(masses))
    return np.asarray((directions * lengths[:, None])[::-1].T)


def _settled(likelihood: Likelihood, masses: FloatArray) -> FloatArray:
    """Return the least of chi-squared near `masses` where an edge of meaning hinders descent, by ever finer grids."""
    axes = principal_axes(likelihood, masses)
    offsets = np.stack(np.meshgrid(*2 * [np.linspace(-1.0, 1.0, 17)], indexing="ij"), axis=-1).reshape(-1, 2)
    reach = 1.0
    for _ in range(60):
        trials = masses + reach * offsets @ axes.T
        squared = likelihood.chi_squared(trials)
        k = int(np.argmin(squared))
        if not squared[k] < likelihood.chi_squared(masses[None])[0] - 1e-7:
            reach *= 0.3
            if reach < 1e-4:
                break
            continue
        masses = trials[k]
    return masses
