"""The posterior of both masses from two or more measured parameters.

The likelihood is integrated over cells that follow its ridge. No random walk is involved: the same data give the same
posterior to the last digit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

import numpy as np
import numpy.typing as npt

from clockfall.analysis.cells import Function, Grid, converged_grid, mass_1, mass_2
from clockfall.analysis.draws import DEFAULT_SEED, Sample
from clockfall.analysis.likelihood import Likelihood, likelihood_of, theory_of
from clockfall.analysis.modes import NoOverlap, first_guesses, modes_near
from clockfall.analysis.outcome import LOWER_QUANTILE
from clockfall.analysis.ridge import patches_of
from clockfall.analysis.study import Choices
from clockfall.analysis.system import Correlation, Uncertain
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Host
from clockfall.errors import BadInput, OutOfRange

__all__ = ["NoOverlap", "Posterior", "integrate", "likelihood_of", "posterior", "theory_of"]


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
    _grid: Grid
    _sine: Function | None

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
        return self._grid.quantiles(self._function(quantity), _shares(probabilities))

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
        return self._grid.at(cell, along, across)[rng.permutation(number)]

    def _function(self, quantity: str) -> Function:
        functions = dict(_FUNCTIONS)
        if self._sine is not None:
            functions["sin_inclination"] = self._sine
        if quantity not in functions:
            raise BadInput(f"the masses give no {quantity!r} (there are {', '.join(functions)})")
        return functions[quantity]


_FUNCTIONS: Final[Mapping[str, Function]] = MappingProxyType(
    {
        "mass_1": mass_1,
        "mass_2": mass_2,
        "total_mass": lambda masses: masses[:, 0] + masses[:, 1],
        "mass_ratio": lambda masses: masses[:, 0] / masses[:, 1],
    }
)


def _shares(values: npt.ArrayLike) -> FloatArray:
    shares = np.asarray(values, dtype=np.float64)
    if not np.all((shares >= 0.0) & (shares <= 1.0)):
        raise OutOfRange("probability", "0 <= probability <= 1", str(values))
    return shares


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


def integrate(likelihood: Likelihood, sine: Function | None = None) -> Posterior:
    """Return the posterior of a likelihood; `sine` gives sin i of masses, (n, 2) -> (n,), where the orbit is known.

    Raises
    ------
    NoOverlap
        No masses give the measured values together.
    """
    modes = modes_near(likelihood, first_guesses(likelihood))
    if (averaged := likelihood.averaged_near(modes[0])) is not likelihood:
        likelihood = averaged
        modes = modes_near(likelihood, np.array(modes))
    best = modes[0]
    grid, converged = converged_grid(likelihood, patches_of(likelihood, modes))
    pulls = likelihood.scores(best) / np.sqrt(1.0 + np.diag(likelihood.blur))
    return Posterior(
        names=likelihood.names,
        masses=grid.middles,
        weights=grid.weights,
        density=grid.density,
        best_fit=best,
        chi_squared=float(likelihood.chi_squared(best[None])[0]),
        pulls=MappingProxyType(dict(zip(likelihood.names, pulls.tolist(), strict=True))),
        mode_weights=tuple(float(np.sum(weights)) for weights in grid.by_patch()),
        nuisance_draws=likelihood.draws,
        converged=converged,
        edge=_edge(likelihood, grid),
        _grid=grid,
        _sine=sine,
    )


def _edge(likelihood: Likelihood, grid: Grid) -> float:
    """Return the largest density at the sides of the patches, over the peak."""
    highest = max(
        patch.height_at(likelihood, side) for patch in (cells.patch for cells in grid.cells) for side in patch.across
    )
    return float(np.exp(highest - grid.peak))
