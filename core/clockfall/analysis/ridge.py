"""Coordinates that follow a ridge of the likelihood, so that a grid of few cells fills it, however thin and bent.

Each mode has a patch with coordinates (u, t): u runs along the direction in which the masses are known least, and at
each u the slice across is measured from where chi-squared is least, in units of its width there. So a ridge that is
a million times longer than wide, and bent, fills its patch all the same. What theory and data make of a patch's
cells is exact, whatever the coordinates; only the resolution is theirs.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from clockfall.analysis.likelihood import FAR, NEGLIGIBLE, Likelihood
from clockfall.analysis.modes import principal_axes, two_sided
from clockfall.binary.ranges import BoolArray, FloatArray

if TYPE_CHECKING:
    from scipy.interpolate import CubicSpline

_PATCHES: Final = 4
_NODES: Final = 128
_TRIMS: Final = 12  # each at least halves the length, and no ridge is 4000 times longer than what counts of it
_CLOSE: Final = 0.02  # of its width: how well the middle of a slice need be known, which is a coordinate only
_SLACK: Final = 1e-4  # of chi-squared, likewise
_SIDE: Final = 6.5  # sigmas; a normal distribution is negligible there, others are given more


@dataclass(frozen=True, slots=True, eq=False)
class Patch:
    """Coordinates (u, t) along and across one ridge: m = origin + axes (u, centre(u) + t width(u)).

    Attributes
    ----------
    origin : array, shape (2,) [Msun]
        The masses of the mode.
    axes : array, shape (2, 2) [Msun]
        Columns: one sigma along the ridge and one across it, at the mode.
    centre, log_width : splines of u
        Where the middle of the slice is, and how wide it is, in the unit of the second axis.
    along, across : (float, float)
        The range of u, and that of t.
    """

    origin: FloatArray
    axes: FloatArray
    centre: CubicSpline
    log_width: CubicSpline
    along: tuple[float, float]
    across: tuple[float, float]

    def masses(self, u: FloatArray, t: FloatArray) -> FloatArray:
        """Return (..., 2) [Msun]."""
        v = self.centre(u) + t * np.exp(self.log_width(u))
        return self.origin + np.stack(np.broadcast_arrays(u, v), axis=-1) @ self.axes.T

    def area(self, u: FloatArray) -> FloatArray:
        """Return the area of a unit of (u, t) [Msun^2]."""
        unit: float = abs(float(np.linalg.det(self.axes)))
        return unit * np.asarray(np.exp(self.log_width(u)))

    def middles(self, number: int) -> tuple[FloatArray, FloatArray]:
        """Return the middles of equal parts along, and of as many across; twice (number,)."""
        (first, last), (low, high) = self.along, self.across
        shares = np.arange(number) + 0.5
        return first + shares * (last - first) / number, low + shares * (high - low) / number

    def height_at(self, likelihood: Likelihood, t: float) -> float:
        """Return the largest ln density along the ridge at one t, of 129 places."""
        u, _ = self.middles(129)
        return float(np.max(likelihood.log_density(self.masses(u, np.full_like(u, t)))))

    def holds(self, masses: FloatArray) -> BoolArray:
        """Return whether masses lie in this patch; (..., 2) -> (...)."""
        u, v = np.moveaxis((masses - self.origin) @ np.linalg.inv(self.axes).T, -1, 0)
        inside = (u >= self.along[0]) & (u <= self.along[1])
        at = np.where(inside, u, self.along[0])
        t = (v - self.centre(at)) / np.exp(self.log_width(at))
        return np.asarray(inside & (t >= self.across[0]) & (t <= self.across[1]))


def patches_of(likelihood: Likelihood, modes: list[FloatArray]) -> list[Patch]:
    """Return a patch for each mode, shape (2,) [Msun], that no earlier one holds; four at most."""
    patches: list[Patch] = []
    for mode in modes:
        if len(patches) < _PATCHES and not any(bool(patch.holds(mode)) for patch in patches):
            patches.append(_widened(likelihood, _along_ridge(likelihood, mode)))
    return patches


def _along_ridge(likelihood: Likelihood, mode: FloatArray) -> Patch:
    """Return the patch of a mode, as long as the density is not negligible."""
    from scipy.interpolate import CubicSpline  # 0.2 s, needed here alone

    axes = principal_axes(likelihood, mode)
    ridge = _Ridge(likelihood, mode, axes)
    marks = [*reversed(list(ridge.walked(-0.5))), (0.0, 0.0, 1.0), *ridge.walked(0.5)]
    u, v, width = (np.array(column) for column in zip(*marks, strict=True))
    ends = float(u[0]), float(u[-1])
    for _ in range(_TRIMS):
        nodes = np.linspace(*ends, _NODES)
        guess = CubicSpline(u, v)(nodes) if u.size > 3 else np.interp(nodes, u, v)
        middle, across, squared = ridge.least(nodes, guess, np.interp(nodes, u, width))
        good = np.isfinite(squared)
        above = np.where(good, squared, np.inf) - np.min(squared[good])
        ends, wanted = _ends(nodes, above, FAR), _ends(nodes, above, -2.0 * np.log(NEGLIGIBLE))
        if wanted[1] - wanted[0] > 0.5 * (ends[1] - ends[0]):
            break
        ends = wanted  # a tail that is a little too low, and far longer than the rest, would take all the cells
    centre = CubicSpline(nodes, np.where(good, middle, guess))
    log_width = CubicSpline(nodes, np.log(np.interp(nodes, nodes[good], across[good])))
    return Patch(mode, axes, centre, log_width, ends, (-_SIDE, _SIDE))


def _ends(nodes: FloatArray, above: FloatArray, limit: float) -> tuple[float, float]:
    """Return the nodes next to those at which chi-squared is less than `limit` above its least."""
    near = np.flatnonzero(above < limit)
    return float(nodes[max(0, int(near[0]) - 1)]), float(nodes[min(nodes.size - 1, int(near[-1]) + 1)])


@dataclass(frozen=True, slots=True, eq=False)
class _Ridge:
    """The least of chi-squared across a direction, in sigmas (u, v) of the Gaussian that fits at a mode."""

    likelihood: Likelihood
    origin: FloatArray
    axes: FloatArray

    def at(self, u: FloatArray, v: FloatArray) -> FloatArray:
        """Return masses, (..., 2) [Msun]."""
        return self.origin + np.stack(np.broadcast_arrays(u, v), axis=-1) @ self.axes.T

    def walked(self, step: float) -> Iterator[tuple[float, float, float]]:
        """Yield (u, v, width) along the ridge until the density is negligible or has no meaning."""
        least = float(self.likelihood.chi_squared(self.origin[None])[0])
        u, v, width, slope, before = 0.0, 0.0, 1.0, 0.0, least
        for _ in range(200):
            found = self._stepped(u + step, v + slope * step, width)
            # close to the end a long ridge would be followed along the edge, far faster than a spline can
            if found is None or (abs(step) < 0.02 and abs(found[0] - v - slope * step) > 3.0 * width):
                step *= 0.5  # the end of the prior or of meaning lies between; the ridge ends there
                if abs(step) < 3e-4:
                    return
                continue
            slope, u = (found[0] - v) / step, u + step
            v, width, squared = found
            yield u, v, width
            if squared > least + FAR:
                return
            if abs(squared - before) < 4.0:
                step *= 1.3
            before = squared

    def _stepped(self, u: float, v: float, width: float) -> tuple[float, float, float] | None:
        middle, across, squared = self.least(np.array([u]), np.array([v]), np.array([width]))
        return (float(middle[0]), float(across[0]), float(squared[0])) if np.isfinite(squared[0]) else None

    def least(self, u: FloatArray, v: FloatArray, width: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return for each u the v where chi-squared is least, the width there, and chi-squared; infinite if nowhere."""
        squared = self.likelihood.chi_squared(self.at(u, v))
        v, squared = self._brought_in(u, v, width, squared)
        for _ in range(20):
            residual, slopes = self._slope(u, v, 1e-3 * width)
            normal, gradient = np.sum(slopes**2, axis=-1), np.sum(slopes * residual, axis=-1)
            usable = np.isfinite(normal) & np.isfinite(gradient) & (normal > 0.0)
            step = np.where(usable, -gradient / np.where(usable, normal, 1.0), 0.0)
            width = np.where(usable, np.clip(1.0 / np.sqrt(np.where(usable, normal, 1.0)), 1e-3, 1e3), width)
            before, (v, squared) = v, self._damped(u, v, np.clip(step, -30.0 * width, 30.0 * width), squared)
            if np.max(np.abs(v - before) / width, initial=0.0) < _CLOSE:
                break
        return v, width, squared

    def _brought_in(
        self, u: FloatArray, v: FloatArray, width: FloatArray, squared: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Return starts that have a meaning, the best of each slice where the first one has none."""
        lost = np.flatnonzero(~np.isfinite(squared))
        if lost.size:
            trials = v[lost, None] + width[lost, None] * np.linspace(-12.0, 12.0, 193)
            found = self.likelihood.chi_squared(self.at(u[lost, None], trials))
            best = np.argmin(found, axis=1)
            rows = np.arange(lost.size)
            v, squared = v.copy(), squared.copy()
            v[lost], squared[lost] = trials[rows, best], found[rows, best]
        return v, squared

    def _slope(self, u: FloatArray, v: FloatArray, step: FloatArray) -> tuple[FloatArray, FloatArray]:
        r = self.likelihood.residuals(self.at(u, v + np.stack([np.zeros_like(step), step, -step])))
        return r[0], two_sided(r[0], r[1], r[2], step[:, None])

    def _damped(
        self, u: FloatArray, v: FloatArray, step: FloatArray, squared: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Take the step, halved in each slice until chi-squared does not grow."""
        for _ in range(10):
            trial = self.likelihood.chi_squared(self.at(u, v + step))
            worse = ~(trial <= squared + _SLACK)
            if not worse.any():
                break
            step = np.where(worse, 0.5 * step, step)
        return np.where(worse, v, v + step), np.where(worse, squared, trial)


def _widened(likelihood: Likelihood, patch: Patch) -> Patch:
    """Return the patch, wide enough across that the density on its sides is negligible."""
    u, _ = patch.middles(129)
    t = np.linspace(*patch.across, 15)
    peak = np.max(likelihood.log_density(patch.masses(u[:, None], t).reshape(-1, 2)))
    sides = list(patch.across)
    for k in (0, 1):
        for _ in range(30):
            if patch.height_at(likelihood, sides[k]) < peak + np.log(NEGLIGIBLE):
                break
            sides[k] *= 1.3
    return replace(patch, across=(sides[0], sides[1]))
