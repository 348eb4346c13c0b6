"""A likelihood integrated over cells that fill its patches, doubled in number until nothing moves any more.

A cell that a jump of the density crosses, at an edge of meaning for instance, is cut into smaller ones; in any other
the density runs as its neighbours say, to second order.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import numpy.typing as npt

from clockfall.analysis.likelihood import NEGLIGIBLE, Likelihood
from clockfall.analysis.outcome import LOWER_QUANTILE
from clockfall.analysis.ridge import Patch
from clockfall.binary.ranges import BoolArray, FloatArray

Function = Callable[[FloatArray], FloatArray]
"""Of the masses, (n, 2) [Msun] -> (n,)."""

QUANTILES: Final = (0.025, LOWER_QUANTILE, 0.5, 1.0 - LOWER_QUANTILE, 0.975)
"""Those by which convergence is judged."""

_LEVELS: Final = (48, 96, 192, 384, 768)
_STILL: Final = 0.002  # of the error bar
_CUTS: Final = 4  # parts, each way, of a cell that a jump of the density crosses
_BINS: Final = 8192


def mass_1(masses: FloatArray) -> FloatArray:
    """Return m_1 [Msun] of masses (n, 2)."""
    return masses[:, 0]


def mass_2(masses: FloatArray) -> FloatArray:
    """Return m_2 [Msun] of masses (n, 2)."""
    return masses[:, 1]


@dataclass(frozen=True, slots=True, eq=False)
class Cells:
    """Cells of one patch, all that counts of it.

    Attributes
    ----------
    patch : Patch
    u, t : arrays, shape (n,)
        Their middles.
    width_u, width_t : arrays, shape (n,)
    log_density : array, shape (n,)
        Of likelihood times prior at the middle, up to a constant.
    excess, slope_u, slope_t : arrays, shape (n,)
        How the density runs inside a cell: its average over that at the middle, less 1, and its change from side to
        side over that at the middle; 0 where the density jumps.
    """

    patch: Patch
    u: FloatArray
    t: FloatArray
    width_u: FloatArray
    width_t: FloatArray
    log_density: FloatArray
    excess: FloatArray
    slope_u: FloatArray
    slope_t: FloatArray

    @property
    def middles(self) -> FloatArray:
        """Masses, shape (n, 2) [Msun]."""
        return self.patch.masses(self.u, self.t)

    @property
    def areas(self) -> FloatArray:
        """Areas, shape (n,) [Msun^2]."""
        return self.patch.area(self.u) * self.width_u * self.width_t

    def at(self, share_u: FloatArray | float, share_t: FloatArray | float) -> FloatArray:
        """Return masses inside the cells, the shares between -0.5 and 0.5; (n, 2) [Msun]."""
        return self.patch.masses(self.u + share_u * self.width_u, self.t + share_t * self.width_t)

    def where(self, chosen: npt.NDArray[np.intp] | BoolArray) -> Cells:
        """Return the chosen cells."""
        return Cells(self.patch, *(getattr(self, name)[chosen] for name in _ARRAYS))

    def joined(self, other: Cells) -> Cells:
        """Return these cells and others of the same patch, in the order along its ridge."""
        both = Cells(self.patch, *(np.concatenate([getattr(self, name), getattr(other, name)]) for name in _ARRAYS))
        return both.where(np.lexsort((both.t, both.u)))

    def inner(self, share_u: float, share_t: float) -> FloatArray:
        """Return the density there, averaged as over the cell, over that at the middle."""
        return (1.0 + self.excess) * (1.0 + share_u * self.slope_u + share_t * self.slope_t)


_ARRAYS: Final = ("u", "t", "width_u", "width_t", "log_density", "excess", "slope_u", "slope_t")


@dataclass(frozen=True, slots=True, eq=False)
class Grid:
    """The cells of every patch with their probability, patch by patch, along each ridge and in each slice across it.

    Attributes
    ----------
    cells : tuple of Cells
        One for each patch.
    weights : array, shape (n,)
        The probability of each cell; their sum is 1.
    density : array, shape (n,) [1/Msun^2]
        At the middles.
    """

    cells: tuple[Cells, ...]
    weights: FloatArray
    density: FloatArray

    @classmethod
    def of(cls, cells: tuple[Cells, ...]) -> Grid:
        """Return cells with their probability."""
        logs = np.concatenate([mine.log_density for mine in cells])
        areas = np.concatenate([mine.areas for mine in cells])
        relative = np.exp(logs - np.max(logs))
        total = float(np.sum(relative * areas))
        return cls(cells, relative * areas / total, relative / total)

    @property
    def middles(self) -> FloatArray:
        """Masses, shape (n, 2) [Msun]."""
        return np.concatenate([cells.middles for cells in self.cells])

    @property
    def peak(self) -> float:
        """The largest ln density of likelihood times prior at a middle, up to their constant."""
        return max(float(np.max(cells.log_density)) for cells in self.cells)

    def by_patch(self) -> list[FloatArray]:
        """Return the weights as one array for each patch."""
        return np.split(self.weights, np.cumsum([cells.u.size for cells in self.cells])[:-1])

    def at(self, cell: npt.NDArray[np.intp], share_u: FloatArray, share_t: FloatArray) -> FloatArray:
        """Return masses inside some cells, the shares between -0.5 and 0.5; (k,) each -> (k, 2) [Msun]."""
        masses, first = np.empty((cell.size, 2)), 0
        for cells in self.cells:
            mine = (cell >= first) & (cell < first + cells.u.size)
            masses[mine] = cells.where(cell[mine] - first).at(share_u[mine], share_t[mine])
            first += cells.u.size
        return masses

    def quantiles(self, function: Function, probabilities: FloatArray) -> FloatArray:
        """Return quantiles of a function of the masses, shape of `probabilities`, between 0 and 1.

        Each cell's probability is spread over it as the density runs.
        """
        known = [
            (*_cumulative(cells, mine, function), float(np.sum(mine)))
            for cells, mine in zip(self.cells, self.by_patch(), strict=True)
            if cells.u.size
        ]
        # each mode has values of its own, so that a narrow one far from another is not lost in wide bins
        values = np.sort(np.concatenate([edges for edges, _, _ in known]))
        cumulative = sum(share * np.interp(values, edges, below) for edges, below, share in known)
        return np.asarray(np.interp(probabilities, cumulative, values))


def converged_grid(likelihood: Likelihood, patches: list[Patch]) -> tuple[Grid, bool]:
    """Double the cells until nothing moves by 0.2 % of an error bar; return them, and whether that was reached."""
    before = None
    for level in _LEVELS:
        grid = Grid.of(tuple(_meshed(likelihood, patches[:k], patch, level) for k, patch in enumerate(patches)))
        found = _summary(grid)
        if before is not None and np.max(np.abs(found[:-1] - before[:-1]) / found[-1]) < _STILL:
            return grid, True
        before = found
    return grid, False


def _summary(grid: Grid) -> FloatArray:
    """Return by what convergence is judged: shares, means, deviations and quantiles of each mode, (9, 2 modes).

    The last row is what to judge them by. Each mode stands for itself, since between two modes a quantile may jump.
    """
    columns = []
    for cells, mine in zip(grid.cells, grid.by_patch(), strict=True):
        share = float(np.sum(mine))
        if share < _STILL:
            columns.append(np.concatenate([np.zeros((8, 2)), np.ones((1, 2))]))  # it moves nothing
            continue
        mine, masses = mine / share, cells.middles
        mean = mine @ masses
        deviation = np.sqrt(mine @ (masses - mean) ** 2)
        alone = Grid((cells,), mine, mine / cells.areas)
        quantiles = [alone.quantiles(function, np.array(QUANTILES)) for function in (mass_1, mass_2)]
        columns.append(np.stack([share * deviation, mean, deviation, *np.transpose(quantiles), deviation]))
    return np.concatenate(columns, axis=1)


def _meshed(likelihood: Likelihood, earlier: list[Patch], patch: Patch, level: int) -> Cells:
    """Return the cells of a patch that count, those where the density jumps cut into smaller ones."""
    size = tuple((high - low) / level for low, high in (patch.along, patch.across))
    u, t = np.meshgrid(*patch.middles(level), indexing="ij")
    cells = _valued(likelihood, earlier, patch, u.ravel(), t.ravel(), size)
    floor = np.max(cells.log_density) + np.log(NEGLIGIBLE) - 5.0
    cut = _jumps(likelihood, cells, level, floor)
    whole = _shaped(cells, level, cut).where(~cut & (cells.log_density > floor))
    if not cut.any():
        return whole
    fine = _valued(likelihood, earlier, patch, *_parts(cells.where(cut)), (size[0] / _CUTS, size[1] / _CUTS))
    return whole.joined(fine.where(fine.log_density > floor))


def _parts(cells: Cells) -> tuple[FloatArray, FloatArray]:
    """Return the middles (u, t) of the parts into which cells are cut."""
    shares = (np.arange(_CUTS) + 0.5) / _CUTS - 0.5
    share_u, share_t = (share.ravel() for share in np.meshgrid(shares, shares, indexing="ij"))
    u = cells.u[:, None] + share_u * cells.width_u[:, None]
    t = cells.t[:, None] + share_t * cells.width_t[:, None]
    return u.ravel(), t.ravel()


def _valued(
    likelihood: Likelihood,
    earlier: list[Patch],
    patch: Patch,
    u: FloatArray,
    t: FloatArray,
    size: tuple[float, ...],
) -> Cells:
    """Return cells with their density; what an earlier patch holds counts there."""
    masses = patch.masses(u, t)
    log_density = likelihood.log_density(masses)
    for other in earlier:
        log_density[other.holds(masses)] = -np.inf
    none = np.zeros_like(u)
    return Cells(patch, u, t, np.full_like(u, size[0]), np.full_like(t, size[1]), log_density, none, none, none)


def _jumps(likelihood: Likelihood, cells: Cells, level: int, floor: float) -> BoolArray:
    """Return the cells that an edge of meaning, or the median of an unequally uncertain value, may cross."""
    scores = likelihood.scores(cells.middles)
    sides = np.isfinite(cells.log_density).astype(np.int64)
    for k, value in enumerate(likelihood.measured.values()):
        if value.plus != value.minus:
            sides = 2 * sides + (scores[:, k] > 0.0)
    signature = np.pad(sides.reshape(level, level), 1, mode="edge")
    height = np.pad(cells.log_density.reshape(level, level), 1, constant_values=-np.inf)
    crossed = np.zeros((level, level), dtype=np.bool_)
    counts = np.zeros((level, level), dtype=np.bool_)
    for i in range(3):
        for j in range(3):
            crossed |= signature[i : i + level, j : j + level] != signature[1:-1, 1:-1]
            counts |= height[i : i + level, j : j + level] > floor
    return np.asarray((crossed & counts).ravel())


def _shaped(cells: Cells, level: int, cut: BoolArray) -> Cells:
    """Return the cells of a whole mesh with the run of the density inside each, from its neighbours."""
    logs = cells.log_density.reshape(level, level)
    around = np.pad(logs, 1, mode="edge")
    neighbours = (around[2:, 1:-1], around[:-2, 1:-1], around[1:-1, 2:], around[1:-1, :-2])
    smooth = np.isfinite(logs) & ~cut.reshape(level, level)
    for other in neighbours:
        smooth &= np.isfinite(other)
    here = np.where(smooth, logs, 0.0)
    u_up, u_down, t_up, t_down = (np.exp(np.minimum(np.where(smooth, other, 0.0) - here, 50.0)) for other in neighbours)
    # limited, so that the density stays positive in the corners; far out in the tails alone does that matter
    slopes = [np.clip(0.5 * (up - down), -1.2, 1.2) for up, down in ((u_up, u_down), (t_up, t_down))]
    excess = np.clip((u_up + u_down + t_up + t_down - 4.0) / 24.0, -0.2, 0.5)
    return replace(cells, excess=excess.ravel(), slope_u=slopes[0].ravel(), slope_t=slopes[1].ravel())


def _cumulative(cells: Cells, weights: FloatArray, function: Function) -> tuple[FloatArray, FloatArray]:
    """Return the cumulative distribution of a function over one patch: (values, shares below them)."""
    shares = (np.arange(4) + 0.5) / 4 - 0.5
    parts = weights / 16.0 * np.stack([cells.inner(a, b) for a in shares for b in shares])
    return _spread(*_extents(cells, weights, function), parts.ravel())


def _extents(cells: Cells, weights: FloatArray, function: Function) -> tuple[FloatArray, FloatArray]:
    """Return the least and largest value in each of 4 x 4 parts of each cell, along the way in which it varies more."""

    def values(share_u: float, share_t: float) -> FloatArray:
        return function(cells.at(share_u, share_t))

    along = np.abs(values(0.5, 0.0) - values(-0.5, 0.0)) @ weights
    across = np.abs(values(0.0, 0.5) - values(0.0, -0.5)) @ weights
    way = 0 if along > across else 1
    shares = [(np.arange(4) + 0.5) / 4 - 0.5] * 2
    shares[way] = np.arange(5) / 4 - 0.5
    found = np.stack([[values(a, b) for b in shares[1]] for a in shares[0]])  # (5, 4, n) or (4, 5, n)
    first, second = (np.take(found, np.arange(4) + k, axis=way) for k in (0, 1))
    return np.minimum(first, second).ravel(), np.maximum(first, second).ravel()


def _spread(low: FloatArray, high: FloatArray, weights: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the cumulative distribution of probability spread evenly between `low` and `high`: (values, shares)."""
    edges = np.linspace(np.min(low), np.max(high), _BINS + 1)
    step = edges[1] - edges[0]
    middle, half = 0.5 * (low + high), 0.5 * np.maximum(high - low, step)
    slope = np.zeros(_BINS + 4)
    for ends, sign in ((middle - half, 1.0), (middle + half, -1.0)):
        place = (ends - edges[0]) / step + 1.0
        whole = np.floor(place).astype(np.int64)
        change = sign * weights / (2.0 * half)
        # shared between two neighbours so that what follows them is exact
        slope += np.bincount(whole, change * (1.0 + whole - place), slope.size)
        slope += np.bincount(whole + 1, change * (place - whole), slope.size)
    cumulative = np.concatenate([[0.0], np.cumsum(np.cumsum(slope))])[1 : _BINS + 2]
    cumulative = np.maximum.accumulate(cumulative)
    return edges, cumulative / cumulative[-1]
