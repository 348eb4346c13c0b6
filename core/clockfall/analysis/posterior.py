"""The posterior of both masses from two or more measured parameters, integrated on a grid that follows its ridge.

Predictions come through the seam, as when the bodies are weighed, so that a third party's theory is weighed by the
same code. The likelihood of a measured value is that from which it is drawn elsewhere: two half normal distributions
joined at the median. The prior is flat in (m_1, m_2) between 0.01 and 300 Msun. No random walk is involved: the same
data give the same posterior to the last digit.

Each mode has a patch with coordinates (u, t): u runs along the direction in which the masses are known least, and at
each u the slice across is measured from where chi-squared is least, in units of its width there. So a ridge that is
a million times longer than wide, and bent, fills its patch all the same. What theory and data make of a patch's
cells is exact, whatever the coordinates; only the resolution is theirs.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cache
from itertools import combinations
from types import MappingProxyType
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from clockfall.analysis.draws import DEFAULT_SEED, Sample
from clockfall.analysis.masses import HEAVIEST, LIGHTEST, search_masses
from clockfall.analysis.outcome import LOWER_QUANTILE
from clockfall.analysis.study import Choices, Prediction, predicted_at
from clockfall.analysis.system import Correlation, Uncertain
from clockfall.binary.ranges import BoolArray, FloatArray
from clockfall.effects.host import Host
from clockfall.errors import BadInput, OutOfRange

if TYPE_CHECKING:
    from scipy.interpolate import CubicSpline

Theory = Callable[[FloatArray, int], FloatArray]
"""(masses, shape (n, 2) [Msun]; draws wanted) -> predictions, shape (n, 1 + draws, parameters), element 0 with every
input at its median, and no more draws than there are; NaN where a prediction has no meaning."""

QUANTILES: Final = (0.025, LOWER_QUANTILE, 0.5, 1.0 - LOWER_QUANTILE, 0.975)
"""Those by which convergence is judged."""

NEGLIGIBLE: Final = 1e-8
"""Of the peak density: where a patch may end."""

_FAR: Final = -2.0 * np.log(NEGLIGIBLE) + 10.0  # chi-squared; the 10 is for what a Gaussian guess leaves out
_INCONSISTENT: Final = 1e4  # chi-squared of the best masses beyond which the parameters have nothing in common
_MATTERS: Final = 0.01  # of a parameter's uncertainty: what an uncertain input must move to be averaged over
_NUISANCE_DRAWS: Final = 64
_MOST_NUISANCE_DRAWS: Final = 1024
_PATCHES: Final = 4
_NODES: Final = 128
_CLOSE: Final = 0.02  # of its width: how well the middle of a slice need be known, which is a coordinate only
_SLACK: Final = 1e-4  # of chi-squared, likewise
_SIDE: Final = 6.5  # sigmas; a normal distribution is negligible there, others are given more
_LEVELS: Final = (48, 96, 192, 384, 768)
_STILL: Final = 0.002  # of the error bar
_LANES: Final = 2**16  # predictions asked for at once
_CUTS: Final = 4  # parts, each way, of a cell that a jump of the density crosses
_BINS: Final = 8192


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


@dataclass(frozen=True, slots=True, eq=False)
class Likelihood:
    """What was measured, and what a theory predicts of it.

    Attributes
    ----------
    measured : mapping of name to Uncertain
        In the order of the theory's last axis; two or more, none of them exact.
    theory : callable
        See `Theory`.
    correlation : array, shape (parameters, parameters)
        Of the normal scores of the measured values.
    blur : array, shape (parameters, parameters)
        Covariance of the predictions, in normal scores, that uncertain inputs cause; 0 where none matters. It enters
        chi-squared, and the density too where that is not averaged over draws.
    draws : int
        Over how many draws of the inputs the density is averaged; 0 where they are normal enough for their covariance
        to say all, or do not matter.
    """

    measured: Mapping[str, Uncertain]
    theory: Theory
    correlation: FloatArray
    blur: FloatArray
    draws: int = 0

    @property
    def names(self) -> tuple[str, ...]:
        """The parameters."""
        return tuple(self.measured)

    def scores(self, masses: FloatArray) -> FloatArray:
        """Return (predicted - measured)/sigma, each side its own; (..., 2) -> (..., parameters), central inputs."""
        flat = np.reshape(masses, (-1, 2))
        return np.reshape(self._scores(flat, 0)[:, 0], (*masses.shape[:-1], len(self.measured)))

    def residuals(self, masses: FloatArray) -> FloatArray:
        """Return the scores made independent, of unit variance; chi-squared is the sum of their squares."""
        return self.scores(masses) @ np.linalg.inv(np.linalg.cholesky(self.correlation + self.blur)).T

    def chi_squared(self, masses: FloatArray) -> FloatArray:
        """Return chi-squared, infinite where a prediction has no meaning; (..., 2) -> (...)."""
        squared: FloatArray = np.sum(self.residuals(masses) ** 2, axis=-1)
        return np.where(np.isnan(squared), np.inf, squared)

    def log_density(self, masses: FloatArray) -> FloatArray:
        """Return ln of likelihood times prior, up to a constant; -inf where it is 0; (n, 2) -> (n,)."""
        covariance = self.correlation if self.draws else self.correlation + self.blur
        factor = np.linalg.inv(np.linalg.cholesky(covariance)).T
        found = np.empty(masses.shape[0])
        step = max(1, _LANES // (1 + self.draws))
        for start in range(0, masses.shape[0], step):
            part = slice(start, start + step)
            found[part] = self._log_density(masses[part], factor)
        return found

    def _log_density(self, masses: FloatArray, factor: FloatArray) -> FloatArray:
        scores = self._scores(masses, self.draws)
        if self.draws:
            scores = scores[:, 1:]
        logs = -0.5 * np.sum((scores @ factor) ** 2, axis=-1)
        for k, value in enumerate(self.measured.values()):
            if value.plus != value.minus:
                logs -= np.log(np.where(scores[..., k] > 0.0, value.plus, value.minus) / (value.plus + value.minus))
        logs[np.isnan(logs)] = -np.inf
        peak = np.max(logs, axis=-1)
        safe = np.where(np.isfinite(peak), peak, 0.0)
        with np.errstate(divide="ignore"):  # the logarithm of a likelihood of 0
            return np.asarray(safe + np.log(np.mean(np.exp(logs - safe[:, None]), axis=-1)))

    def _scores(self, masses: FloatArray, draws: int) -> FloatArray:
        """Return the scores for each draw of the inputs, NaN outside the prior; (n, 1 + draws, parameters)."""
        inside = np.all((masses >= LIGHTEST) & (masses <= HEAVIEST), axis=-1)
        scores = self.theory(np.where(inside[:, None], masses, 1.0), draws)
        for k, value in enumerate(self.measured.values()):
            away = scores[..., k] - value.value
            scores[..., k] = away / np.where(away > 0.0, value.plus, value.minus)
        scores[~inside] = np.nan
        return scores


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

    def holds(self, masses: FloatArray) -> BoolArray:
        """Return whether masses lie in this patch; (..., 2) -> (...)."""
        u, v = np.moveaxis((masses - self.origin) @ np.linalg.inv(self.axes).T, -1, 0)
        inside = (u >= self.along[0]) & (u <= self.along[1])
        at = np.where(inside, u, self.along[0])
        t = (v - self.centre(at)) / np.exp(self.log_width(at))
        return np.asarray(inside & (t >= self.across[0]) & (t <= self.across[1]))


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
class Posterior:
    """The posterior of both masses.

    Attributes
    ----------
    names : tuple of str
        The measured parameters it is from.
    masses : array, shape (n, 2) [Msun]
        The middles of the grid's cells, mode by mode, along the ridge and in each slice across it.
    weights : array, shape (n,)
        The probability of each cell; their sum is 1.
    density : array, shape (n,) [1/Msun^2]
        At the middles.
    best_fit : array, shape (2,) [Msun]
        Where chi-squared is least.
    chi_squared : float
        There; each measured value with its uncertainty on the side of the prediction, and what uncertain inputs add.
    pulls : mapping of name to float
        (predicted - measured)/uncertainty there, the uncertainty that of chi-squared.
    mode_weights : tuple of float
        The probability of each separate mode, in the order of their chi-squared.
    nuisance_draws : int
        Over how many draws of uncertain inputs the likelihood is averaged; 0 where none of them matters, or where their
        covariance says all.
    converged : bool
        Whether the last doubling of the grid moved nothing by 0.2 % of an error bar.
    edge : float
        The largest density on the edge of a patch over the peak, where neither prior nor meaning ends there.
    """

    names: tuple[str, ...]
    masses: FloatArray
    weights: FloatArray
    density: FloatArray
    best_fit: FloatArray
    chi_squared: float
    pulls: Mapping[str, float]
    mode_weights: tuple[float, ...]
    nuisance_draws: int
    converged: bool
    edge: float
    _cells: tuple[Cells, ...]
    _sine: Callable[[FloatArray], FloatArray] | None

    @property
    def modes(self) -> int:
        """The number of separate modes."""
        return len(self.mode_weights)

    @property
    def degrees_of_freedom(self) -> int:
        """Parameters less the two masses."""
        return len(self.names) - 2

    @property
    def p_value(self) -> float:
        """The probability of a larger chi-squared; NaN for two parameters, which test nothing."""
        from scipy.special import gammaincc  # 0.3 s, needed here alone

        freedom = self.degrees_of_freedom
        return float(gammaincc(0.5 * freedom, 0.5 * self.chi_squared)) if freedom else np.nan

    @property
    def mean(self) -> FloatArray:
        """Means of both masses, shape (2,) [Msun]."""
        return self.weights @ self.masses

    @property
    def covariance(self) -> FloatArray:
        """Covariance of both masses, shape (2, 2) [Msun^2]."""
        away = self.masses - self.mean
        return (self.weights[:, None] * away).T @ away

    def quantile(self, quantity: str, probabilities: npt.ArrayLike) -> FloatArray:
        """Return quantiles of one quantity.

        Parameters
        ----------
        quantity : str
            "mass_1", "mass_2", "total_mass" [Msun], "mass_ratio" (m_1/m_2) or "sin_inclination".
        probabilities : array_like, shape any
            Between 0 and 1.

        Returns
        -------
        array, shape of `probabilities`
            Accurate to some 0.1 % of the error bar.

        Raises
        ------
        BadInput
            A quantity of another name, or sin_inclination without the orbit that gives it.
        OutOfRange
            A probability below 0 or above 1.
        """
        return _quantiles(self._cells, self.weights, self._function(quantity), _shares(probabilities))

    def interval(self, quantity: str) -> tuple[float, float]:
        """Return the 68.3 % interval of one quantity, as `quantile` does and with its errors."""
        low, high = self.quantile(quantity, (LOWER_QUANTILE, 1.0 - LOWER_QUANTILE))
        return float(low), float(high)

    def credible_mass(self, levels: npt.ArrayLike) -> FloatArray:
        """Return the density [1/Msun^2] on the contour that encloses each share of the probability.

        Raises
        ------
        OutOfRange
            A level below 0 or above 1.
        """
        order = np.argsort(-self.density, kind="stable")
        enclosed = np.cumsum(self.weights[order]) - 0.5 * self.weights[order]
        return np.asarray(np.interp(_shares(levels), enclosed, self.density[order]))

    def draws(self, number: int, seed: int = DEFAULT_SEED) -> FloatArray:
        """Return masses drawn from the posterior, one from each of `number` strata of equal probability.

        The strata follow the ridge; their order is shuffled, so that the draws may stand beside those of anything
        else. The same seed gives the same draws.

        Returns
        -------
        array, shape (number, 2) [Msun]

        Raises
        ------
        OutOfRange
            A number below 1.
        """
        if number < 1:
            raise OutOfRange("number", "1 <= number", str(number))
        rng = np.random.default_rng(seed)
        sums = np.cumsum(self.weights)
        at = (np.arange(number) + rng.random(number)) / number * sums[-1]
        cell = np.minimum(np.searchsorted(sums, at), sums.size - 1)
        # what is left of the probability says how far across the cell, so that slices are stratified inside cells too
        across = 1.0 - np.clip((sums[cell] - at) / self.weights[cell], 0.0, 1.0) - 0.5
        along = rng.random(number) - 0.5
        drawn, first = np.empty((number, 2)), 0
        for cells in self._cells:
            mine = (cell >= first) & (cell < first + cells.u.size)
            drawn[mine] = cells.where(cell[mine] - first).at(along[mine], across[mine])
            first += cells.u.size
        return drawn[rng.permutation(number)]

    def _function(self, quantity: str) -> Callable[[FloatArray], FloatArray]:
        functions = dict(_FUNCTIONS)
        if self._sine is not None:
            functions["sin_inclination"] = self._sine
        if quantity not in functions:
            raise BadInput(f"the masses give no {quantity!r} (there are {', '.join(functions)})")
        return functions[quantity]


_FUNCTIONS: Final[Mapping[str, Callable[[FloatArray], FloatArray]]] = MappingProxyType(
    {
        "mass_1": lambda masses: masses[:, 0],
        "mass_2": lambda masses: masses[:, 1],
        "total_mass": lambda masses: masses[:, 0] + masses[:, 1],
        "mass_ratio": lambda masses: masses[:, 0] / masses[:, 1],
    }
)


def _shares(values: npt.ArrayLike) -> FloatArray:
    shares = np.asarray(values, dtype=np.float64)
    if not np.all((shares >= 0.0) & (shares <= 1.0)):
        raise OutOfRange("probability", "0 <= probability <= 1", str(values))
    return shares


# ---------------------------------------------------------------------------------------------------------------------
# From a host and a drawn system


def posterior(
    host: Host,
    sample: Sample,
    choices: Choices,
    measured: Mapping[str, Uncertain],
    correlations: Sequence[Correlation] = (),
) -> Posterior:
    """Return the posterior of both masses from measured parameters.

    Parameters
    ----------
    host : Host
        Its effects predict.
    sample : Sample
        The drawn system. Masses in its state are not used. Its central element gives the inputs; where their
        uncertainty matters (moves a prediction by 1 % of a measured uncertainty), the likelihood is averaged over the
        first 64 draws, or over more where the inputs move it by more than a measured uncertainty.
    choices : Choices
        For `only` and `without`.
    measured : mapping of name to Uncertain
        The parameters to use, two or more, in clockfall's units.
    correlations : sequence of Correlation
        Those between two of `measured` are used; one between a measured value and an input is not.

    Raises
    ------
    NoOverlap
        No masses give the measured values together.
    BadInput
        Fewer than two parameters, one that is exact, one that no active effect predicts, or correlations that
        contradict each other.
    EffectError
        As `Host.apply` raises it.
    """
    likelihood = likelihood_of(measured, theory_of(host, sample, choices, tuple(measured)), correlations)
    central = sample.central().state
    has_sine = central.replace(mass_1=1.0, mass_2=1.0).sin_inclination is not None

    def sine(masses: FloatArray) -> FloatArray:
        return np.asarray(central.replace(mass_1=masses[:, 0], mass_2=masses[:, 1]).sin_inclination)

    return integrate(likelihood, sine if has_sine else None)


def theory_of(host: Host, sample: Sample, choices: Choices, names: tuple[str, ...]) -> Theory:
    """Return what the active effects predict of the named parameters, as they should be observed.

    Raises
    ------
    BadInput
        No active effect predicts one of them.
    """
    drawn = sample.take(np.concatenate([[0], 1 + np.flatnonzero(sample.possible[1:])[:_MOST_NUISANCE_DRAWS]]))

    @cache
    def some(draws: int) -> Sample:
        return drawn.take(np.arange(min(1 + draws, drawn.possible.size)))

    def predicted(masses: FloatArray, draws: int, only: tuple[str, ...] | None) -> Mapping[str, Prediction]:
        inputs = some(draws)
        state = inputs.state.replace(mass_1=masses[:, :1], mass_2=masses[:, 1:])
        return predicted_at(host, inputs, replace(choices, only=only), state)

    first = predicted(np.ones((1, 2)), 0, choices.only)
    if unknown := [name for name in names if name not in first]:
        raise BadInput(f"no active effect predicts {', '.join(unknown)}, so the masses cannot be had from it")
    # the others would be asked for millions of numbers that nobody uses
    contributors = tuple({part.card.name for name in names for part in first[name].contributions})

    def theory(masses: FloatArray, draws: int) -> FloatArray:
        found = predicted(masses, draws, contributors)
        return np.stack([found[name].total for name in names], axis=-1)

    return theory


def likelihood_of(
    measured: Mapping[str, Uncertain], theory: Theory, correlations: Sequence[Correlation] = ()
) -> Likelihood:
    """Return the likelihood of measured values under a theory, uncertain inputs at their medians.

    Raises
    ------
    BadInput
        Fewer than two parameters, one that is exact, or correlations that contradict each other.
    """
    names = tuple(measured)
    if len(names) < 2:
        raise BadInput(f"two or more measured parameters give the masses, found {', '.join(names) or 'none'}")
    for name, value in measured.items():
        if not (value.plus > 0.0 and value.minus > 0.0):
            raise BadInput(f"{name} needs an uncertainty on both sides, since an exact value has no posterior")
    matrix = np.eye(len(names))
    for correlation in correlations:
        ends = [path[1] for path in (correlation.first, correlation.second) if path[0] == "measured"]
        if len(ends) == 2 and all(end in names for end in ends):
            i, j = names.index(ends[0]), names.index(ends[1])
            matrix[i, j] = matrix[j, i] = correlation.value
    if np.linalg.eigvalsh(matrix)[0] < 1e-10:
        raise BadInput(f"the correlations of {', '.join(names)} are full or contradict each other")
    return Likelihood(measured, theory, matrix, np.zeros_like(matrix))


# ---------------------------------------------------------------------------------------------------------------------
# The integration


def integrate(likelihood: Likelihood, sine: Callable[[FloatArray], FloatArray] | None = None) -> Posterior:
    """Return the posterior of a likelihood; `sine` gives sin i of masses, (n, 2) -> (n,), where the orbit is known.

    Raises
    ------
    NoOverlap
        No masses give the measured values together.
    """
    modes = _modes(likelihood, _starts(likelihood))
    if (averaged := _with_inputs(likelihood, modes[0])) is not likelihood:
        likelihood = averaged
        modes = _modes(likelihood, np.array(modes))
    patches: list[Patch] = []
    for mode in modes:
        if len(patches) < _PATCHES and not any(bool(patch.holds(mode)) for patch in patches):
            patches.append(_grown(likelihood, _ridge_patch(likelihood, mode)))
    grid, converged = _converged_grid(likelihood, patches)
    return _posterior(likelihood, grid, modes[0], converged, sine)


def _with_inputs(likelihood: Likelihood, masses: FloatArray) -> Likelihood:
    """Return the likelihood averaged over its uncertain inputs, where they matter at these masses."""
    moved = _moved(likelihood, masses, _NUISANCE_DRAWS)
    if not moved.size or np.max(np.abs(moved)) <= _MATTERS:
        return likelihood
    many = _moved(likelihood, masses, _MOST_NUISANCE_DRAWS)
    blur = np.atleast_2d(np.cov(many, rowvar=False, bias=True))
    if _blurs_normally(likelihood, many, np.diag(blur)):
        return replace(likelihood, blur=blur)
    # the draws must lie densely on the scale of the measured uncertainties, or the average is a row of spikes
    spread = float(np.max(np.std(moved, axis=0)))
    draws = _NUISANCE_DRAWS * 2 ** int(np.ceil(np.log2(max(1.0, spread))))
    moved = _moved(likelihood, masses, min(draws, _MOST_NUISANCE_DRAWS))
    blur = np.atleast_2d(np.cov(moved, rowvar=False, bias=True))
    return replace(likelihood, blur=blur, draws=moved.shape[0])


def _blurs_normally(likelihood: Likelihood, moved: FloatArray, variance: FloatArray) -> bool:
    """Whether measurement and inputs together are as normal as quantiles to 1 % of the error bar need.

    By the mean, skewness and excess kurtosis of their sum (the first terms of a Cornish-Fisher expansion, in which a
    kurtosis of 0.1 moves the one-sigma quantile by 0.008; that of 1024 normal draws is -0.05). Where a
    value has two sides of its own, its inputs must be small beside it.
    """
    total = 1.0 + variance
    mean = np.mean(moved, axis=0)
    away = moved - mean
    skewness = np.mean(away**3, axis=0) / total**1.5
    kurtosis = (np.mean(away**4, axis=0) - 3.0 * variance**2) / total**2
    two_sided = np.array([value.plus != value.minus for value in likelihood.measured.values()])
    normal = (np.abs(mean) < 0.005 * np.sqrt(total)) & (np.abs(skewness) < 0.03) & (np.abs(kurtosis) < 0.1)
    return bool(np.all(normal & ~(two_sided & (variance > 0.02))))


def _moved(likelihood: Likelihood, masses: FloatArray, draws: int) -> FloatArray:
    """Return by how much draws of the inputs move the predictions, in uncertainties; (draws, parameters)."""
    predicted = likelihood.theory(masses[None], draws)[0]
    sigma = np.array([0.5 * (value.plus + value.minus) for value in likelihood.measured.values()])
    moved = (predicted[1:] - predicted[0]) / sigma
    return np.asarray(moved[np.all(np.isfinite(moved), axis=1)])


# --- where chi-squared is least


def _starts(likelihood: Likelihood) -> FloatArray:
    """Return masses near which chi-squared may be least, (n, 2)."""
    return np.array([*_pair_solutions(likelihood), *_coarse_minima(likelihood)]).reshape(-1, 2)


def _modes(likelihood: Likelihood, starts: FloatArray) -> list[FloatArray]:
    """Return masses where chi-squared is least, the best first; all that the peak does not make negligible."""
    if not starts.size:
        raise NoOverlap(likelihood.names, np.inf)
    found = _polished(likelihood, starts)
    squared = likelihood.chi_squared(found)
    order = np.argsort(squared, kind="stable")
    best = float(squared[order[0]])
    limit = _INCONSISTENT if len(likelihood.names) > 2 else _FAR
    if not best < limit:
        raise NoOverlap(likelihood.names, best)
    modes: list[FloatArray] = []
    for k in order[squared[order] < best + _FAR]:
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
    squared = _blurred(likelihood, 0.1).chi_squared(masses)
    around = np.pad(squared, 1, constant_values=np.inf)
    least = np.isfinite(squared)
    size = axis.size
    for i, j in ((0, 1), (1, 0), (1, 2), (2, 1), (0, 0), (2, 2), (0, 2), (2, 0)):
        least &= squared <= around[i : i + size, j : j + size]
    rows, columns = np.nonzero(least)
    for k in np.argsort(squared[rows, columns], kind="stable")[:8]:
        yield masses[rows[k], columns[k]]


def _blurred(likelihood: Likelihood, share: float) -> Likelihood:
    """Return the likelihood with uncertainties widened by a share of each value."""
    wide = {
        name: Uncertain(v.value, float(np.hypot(v.plus, share * v.value)), float(np.hypot(v.minus, share * v.value)))
        for name, v in likelihood.measured.items()
    }
    return replace(likelihood, measured=wide)


def _polished(likelihood: Likelihood, masses: FloatArray) -> FloatArray:
    """Return where chi-squared is least nearby, by Levenberg and Marquardt's method in ln m; (n, 2)."""
    logs = np.log(masses)
    for share in (0.03, 0.0):
        logs = _least_squares(_blurred(likelihood, share) if share else likelihood, logs)
    return np.exp(logs)


def _least_squares(likelihood: Likelihood, logs: FloatArray) -> FloatArray:
    damping = np.full(logs.shape[0], 1e-3)
    best = likelihood.chi_squared(np.exp(logs))
    for _ in range(40):
        masses = np.exp(logs)
        residual, slopes = _slopes(likelihood, masses, np.eye(2) * 1e-5 * masses[:, None, :])
        slopes = slopes * masses[:, None, :]
        normal = np.swapaxes(slopes, -1, -2) @ slopes
        ridge = damping[:, None] * np.diagonal(normal, axis1=-2, axis2=-1) + 1e-300
        gradient = np.swapaxes(slopes, -1, -2) @ residual[..., None]
        usable = np.all(np.isfinite(normal), axis=(-1, -2)) & np.all(np.isfinite(gradient), axis=(-1, -2))
        normal = np.where(usable[:, None, None], normal, np.eye(2))
        gradient = np.where(usable[:, None, None], gradient, 0.0)
        step = -np.linalg.solve(normal + ridge[..., None] * np.eye(2), gradient)[..., 0]
        trial = logs + np.clip(step, -0.5, 0.5)
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


def _slopes(likelihood: Likelihood, masses: FloatArray, steps: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return residuals (n, p), and their derivatives (n, p, 2) per length of two steps, steps (n, 2, 2).

    Two-sided where the residuals have a meaning on both sides, else one-sided.
    """
    ahead_first = np.moveaxis(steps, 1, 0)
    trials = masses + np.concatenate([np.zeros((1, *masses.shape)), ahead_first, -ahead_first])
    r = likelihood.residuals(trials)  # (5, n, p)
    columns = []
    for forward, backward in ((1, 3), (2, 4)):
        length = np.linalg.norm(steps[:, forward - 1], axis=-1)[:, None]
        ahead, behind = (r[forward] - r[0]) / length, (r[0] - r[backward]) / length
        both = 0.5 * (ahead + behind)
        columns.append(np.where(np.isfinite(both), both, np.where(np.isfinite(ahead), ahead, behind)))
    return r[0], np.stack(columns, axis=-1)


def _axes(likelihood: Likelihood, masses: FloatArray) -> FloatArray:
    """Return the principal axes of the Gaussian that fits at `masses`, the longer first, as columns [Msun]."""
    _, slopes = _slopes(likelihood, masses[None], np.eye(2)[None] * 1e-5 * masses[None, None, :])
    slopes = np.where(np.isfinite(slopes[0]), slopes[0], 0.0)
    _, sharpness, directions = np.linalg.svd(slopes, full_matrices=False)
    # what is not bounded at all is bounded by the masses themselves
    lengths = np.minimum(1.0 / np.maximum(sharpness, 1e-300), 0.5 * np.sum(masses))
    return np.asarray((directions * lengths[:, None])[::-1].T)


def _settled(likelihood: Likelihood, masses: FloatArray) -> FloatArray:
    """Return the least of chi-squared near `masses` where an edge of meaning hinders descent, by ever finer grids."""
    axes = _axes(likelihood, masses)
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


# --- the patch that follows a ridge


def _ridge_patch(likelihood: Likelihood, mode: FloatArray) -> Patch:
    """Return coordinates that follow the ridge through a mode, as far as the density is not negligible."""
    from scipy.interpolate import CubicSpline  # 0.2 s, needed here alone

    axes = _axes(likelihood, mode)
    ridge = _Ridge(likelihood, mode, axes)
    marks = [*reversed(list(ridge.walked(-0.5))), ridge.start(), *ridge.walked(0.5)]
    u, v, width = (np.array(column) for column in zip(*marks, strict=True))
    nodes = np.linspace(u[0], u[-1], _NODES)
    guess = CubicSpline(u, v)(nodes) if u.size > 3 else np.interp(nodes, u, v)
    middle, across, squared = ridge.least(nodes, guess, np.interp(nodes, u, width))
    good = np.isfinite(squared)
    middle = np.where(good, middle, guess)
    across = np.interp(nodes, nodes[good], across[good])
    peak = float(np.min(squared[good]))
    near = np.flatnonzero(good & (squared < peak + _FAR))
    first, last = max(0, int(near[0]) - 1), min(_NODES - 1, int(near[-1]) + 1)
    centre, log_width = CubicSpline(nodes, middle), CubicSpline(nodes, np.log(across))
    return Patch(mode, axes, centre, log_width, (float(nodes[first]), float(nodes[last])), (-_SIDE, _SIDE))


@dataclass(frozen=True, slots=True, eq=False)
class _Ridge:
    """The least of chi-squared across a direction, in sigmas (u, v) of the Gaussian that fits at a mode."""

    likelihood: Likelihood
    origin: FloatArray
    axes: FloatArray

    def start(self) -> tuple[float, float, float]:
        """Return (u, v, width) at the mode."""
        return 0.0, 0.0, 1.0

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
            if squared > least + _FAR:
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
        ahead, behind = (r[1] - r[0]) / step[:, None], (r[0] - r[2]) / step[:, None]
        both = 0.5 * (ahead + behind)
        return r[0], np.where(np.isfinite(both), both, np.where(np.isfinite(ahead), ahead, behind))

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


def _grown(likelihood: Likelihood, patch: Patch) -> Patch:
    """Return the patch, wide enough across that the density on its sides is negligible."""
    u = _middles(patch.along, 129)
    t = np.linspace(*patch.across, 15)
    peak = np.max(likelihood.log_density(patch.masses(u[:, None], t).reshape(-1, 2)))
    sides = list(patch.across)
    for k in (0, 1):
        for _ in range(30):
            edge = likelihood.log_density(patch.masses(u, np.full_like(u, sides[k])))
            if np.max(edge) < peak + np.log(NEGLIGIBLE):
                break
            sides[k] *= 1.3
    return replace(patch, across=(sides[0], sides[1]))


# --- the grid


def _middles(between: tuple[float, float], number: int) -> FloatArray:
    low, high = between
    return low + (np.arange(number) + 0.5) * (high - low) / number


def _converged_grid(likelihood: Likelihood, patches: list[Patch]) -> tuple[tuple[Cells, ...], bool]:
    """Double the grid until nothing moves by 0.2 % of an error bar; return the cells, and whether that was reached."""
    before = None
    for level in _LEVELS:
        cells = tuple(_meshed(likelihood, patches, k, level) for k in range(len(patches)))
        found = _summary(cells)
        if before is not None and np.max(np.abs(found[:-1] - before[:-1]) / found[-1]) < _STILL:
            return cells, True
        before = found
    return cells, False


def _summary(grid: tuple[Cells, ...]) -> FloatArray:
    """Return by what convergence is judged: shares, means, deviations and quantiles of each mode, (9, 2 modes).

    The last row is what to judge them by. Each mode stands for itself, since between two modes a quantile may jump.
    """
    weights, _ = _weighted(grid)
    columns = []
    for cells, mine in zip(grid, _split(grid, weights), strict=True):
        share = float(np.sum(mine))
        if share < _STILL:
            columns.append(np.concatenate([np.zeros((8, 2)), np.ones((1, 2))]))  # it moves nothing
            continue
        mine, masses = mine / share, cells.middles
        mean = mine @ masses
        deviation = np.sqrt(mine @ (masses - mean) ** 2)
        functions = (_FUNCTIONS["mass_1"], _FUNCTIONS["mass_2"])
        quantiles = [_quantiles((cells,), mine, function, np.array(QUANTILES)) for function in functions]
        columns.append(np.stack([share * deviation, mean, deviation, *np.transpose(quantiles), deviation]))
    return np.concatenate(columns, axis=1)


def _split(grid: tuple[Cells, ...], values: FloatArray) -> list[FloatArray]:
    """Return an array over all cells as one array for each patch."""
    return np.split(values, np.cumsum([cells.u.size for cells in grid])[:-1])


def _meshed(likelihood: Likelihood, patches: list[Patch], k: int, level: int) -> Cells:
    """Return the cells of patch k that count, those where the density jumps cut into smaller ones."""
    patch = patches[k]
    size = tuple((high - low) / level for low, high in (patch.along, patch.across))
    u, t = np.meshgrid(_middles(patch.along, level), _middles(patch.across, level), indexing="ij")
    cells = _valued(likelihood, patches[:k], patch, u.ravel(), t.ravel(), size)
    floor = np.max(cells.log_density) + np.log(NEGLIGIBLE) - 5.0
    cut = _jumps(likelihood, cells, level, floor)
    whole = _shaped(cells, level, cut).where(np.flatnonzero(~cut & (cells.log_density > floor)))
    if not cut.any():
        return whole
    shares = (np.arange(_CUTS) + 0.5) / _CUTS - 0.5
    parts = np.stack(np.meshgrid(shares, shares, indexing="ij"), axis=-1).reshape(-1, 2)
    fine_u = (cells.u[cut, None] + parts[:, 0] * size[0]).ravel()
    fine_t = (cells.t[cut, None] + parts[:, 1] * size[1]).ravel()
    fine = _valued(likelihood, patches[:k], patch, fine_u, fine_t, (size[0] / _CUTS, size[1] / _CUTS))
    return whole.joined(fine.where(np.flatnonzero(fine.log_density > floor)))


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


def _weighted(grid: tuple[Cells, ...]) -> tuple[FloatArray, FloatArray]:
    """Return the probability of each cell, and the density at its middle [1/Msun^2]."""
    logs = np.concatenate([cells.log_density for cells in grid])
    areas = np.concatenate([cells.areas for cells in grid])
    relative = np.exp(logs - np.max(logs))
    total = float(np.sum(relative * areas))
    return relative * areas / total, relative / total


def _quantiles(
    grid: tuple[Cells, ...],
    weights: FloatArray,
    function: Callable[[FloatArray], FloatArray],
    probabilities: FloatArray,
) -> FloatArray:
    """Return quantiles, shape of `probabilities`; each cell's probability is spread over it as the density runs."""
    shares = (np.arange(4) + 0.5) / 4 - 0.5
    known = []
    for cells, mine in zip(grid, _split(grid, weights), strict=True):
        if cells.u.size:
            parts = mine / 16.0 * np.stack([cells.inner(a, b) for a in shares for b in shares])
            known.append((*_spread(*_extents(cells, mine, function), parts.ravel()), float(np.sum(mine))))
    # each mode has values of its own, so that a narrow one far from another is not lost in wide bins
    values = np.sort(np.concatenate([edges for edges, _, _ in known]))
    cumulative = sum(share * np.interp(values, edges, shares_below) for edges, shares_below, share in known)
    return np.asarray(np.interp(probabilities, cumulative, values))


def _extents(
    cells: Cells, weights: FloatArray, function: Callable[[FloatArray], FloatArray]
) -> tuple[FloatArray, FloatArray]:
    """Return the least and largest value in each of 4 x 4 parts of each cell, along the way in which it varies more."""
    ends, middles = np.arange(5) / 4 - 0.5, (np.arange(4) + 0.5) / 4 - 0.5

    def values(share_u: float, share_t: float) -> FloatArray:
        return function(cells.at(share_u, share_t))

    along = np.abs(values(0.5, 0.0) - values(-0.5, 0.0)) @ weights
    across = np.abs(values(0.0, 0.5) - values(0.0, -0.5)) @ weights
    if along > across:
        found = np.stack([[values(end, middle) for middle in middles] for end in ends])  # (5, 4, n)
        first, second = found[:-1], found[1:]
    else:
        found = np.stack([[values(middle, end) for end in ends] for middle in middles])  # (4, 5, n)
        first, second = found[:, :-1], found[:, 1:]
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


def _posterior(
    likelihood: Likelihood,
    grid: tuple[Cells, ...],
    best: FloatArray,
    converged: bool,
    sine: Callable[[FloatArray], FloatArray] | None,
) -> Posterior:
    weights, density = _weighted(grid)
    by_patch = [float(np.sum(part)) for part in _split(grid, weights)]
    pulls = likelihood.scores(best) / np.sqrt(1.0 + np.diag(likelihood.blur))
    return Posterior(
        names=likelihood.names,
        masses=np.concatenate([cells.middles for cells in grid]),
        weights=weights,
        density=density,
        best_fit=best,
        chi_squared=float(likelihood.chi_squared(best[None])[0]),
        pulls=MappingProxyType(dict(zip(likelihood.names, pulls.tolist(), strict=True))),
        mode_weights=tuple(by_patch),
        nuisance_draws=likelihood.draws,
        converged=converged,
        edge=_edge(likelihood, grid),
        _cells=grid,
        _sine=sine,
    )


def _edge(likelihood: Likelihood, grid: tuple[Cells, ...]) -> float:
    """Return the largest density at the sides of the patches, over the peak."""
    peak = max(float(np.max(cells.log_density)) for cells in grid)
    highest = -np.inf
    for patch in (cells.patch for cells in grid):
        u = _middles(patch.along, 129)
        for side in patch.across:
            highest = max(highest, float(np.max(likelihood.log_density(patch.masses(u, np.full_like(u, side))))))
    return float(np.exp(highest - peak))
