"""The likelihood of the masses, given measured parameters and a theory that predicts them.

Predictions come through the seam, as when the bodies are weighed, so that a third party's theory is weighed by the
same code. The likelihood of a measured value is that from which it is drawn elsewhere: two half normal distributions
joined at the median. The prior is flat in (m_1, m_2) between 0.01 and 300 Msun.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cache
from typing import Final

import numpy as np

from clockfall.analysis.draws import Sample
from clockfall.analysis.masses import HEAVIEST, LIGHTEST
from clockfall.analysis.study import Choices, Prediction, predicted_at
from clockfall.analysis.system import Correlation, Uncertain
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Host
from clockfall.errors import BadInput

Theory = Callable[[FloatArray, int], FloatArray]
"""(masses, shape (n, 2) [Msun]; draws wanted) -> predictions, shape (n, 1 + draws, parameters), element 0 with every
input at its median, and no more draws than there are; NaN where a prediction has no meaning."""

NEGLIGIBLE: Final = 1e-8
"""Of the peak density: what lies below counts for nothing."""

FAR: Final = -2.0 * np.log(NEGLIGIBLE) + 10.0
"""Of chi-squared above its least: where the density is negligible. The 10 is for what a Gaussian guess leaves out."""

_MATTERS: Final = 0.01  # of a parameter's uncertainty: what an uncertain input must move to be averaged over
_NUISANCE_DRAWS: Final = 64
_MOST_NUISANCE_DRAWS: Final = 1024
_LANES: Final = 2**16  # predictions asked for at once


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

    def blurred(self, share: float) -> Likelihood:
        """Return the likelihood with uncertainties widened by a share of each value."""
        wide = {
            name: Uncertain(
                v.value, float(np.hypot(v.plus, share * v.value)), float(np.hypot(v.minus, share * v.value))
            )
            for name, v in self.measured.items()
        }
        return replace(self, measured=wide)

    def averaged_near(self, masses: FloatArray) -> Likelihood:
        """Return the likelihood averaged over its uncertain inputs, where they matter at masses of shape (2,)."""
        moved = self._moved(masses, _NUISANCE_DRAWS)
        if not moved.size or np.max(np.abs(moved)) <= _MATTERS:
            return self
        many = self._moved(masses, _MOST_NUISANCE_DRAWS)
        blur = np.atleast_2d(np.cov(many, rowvar=False, bias=True))
        if self._blurred_normally(many, np.diag(blur)):
            return replace(self, blur=blur)
        # the draws must lie densely on the scale of the measured uncertainties, or the average is a row of spikes
        spread = float(np.max(np.std(moved, axis=0)))
        draws = _NUISANCE_DRAWS * 2 ** int(np.ceil(np.log2(max(1.0, spread))))
        moved = self._moved(masses, min(draws, _MOST_NUISANCE_DRAWS))
        blur = np.atleast_2d(np.cov(moved, rowvar=False, bias=True))
        return replace(self, blur=blur, draws=moved.shape[0])

    def _blurred_normally(self, moved: FloatArray, variance: FloatArray) -> bool:
        """Whether measurement and inputs together are as normal as quantiles to 1 % of the error bar need.

        By the mean, skewness and excess kurtosis of their sum (the first terms of a Cornish-Fisher expansion, in which
        a kurtosis of 0.1 moves the one-sigma quantile by 0.008; that of 1024 normal draws is -0.05). Where a value has
        two sides of its own, its inputs must be small beside it.
        """
        total = 1.0 + variance
        mean = np.mean(moved, axis=0)
        away = moved - mean
        skewness = np.mean(away**3, axis=0) / total**1.5
        kurtosis = (np.mean(away**4, axis=0) - 3.0 * variance**2) / total**2
        two_sided = np.array([value.plus != value.minus for value in self.measured.values()])
        normal = (np.abs(mean) < 0.005 * np.sqrt(total)) & (np.abs(skewness) < 0.03) & (np.abs(kurtosis) < 0.1)
        return bool(np.all(normal & ~(two_sided & (variance > 0.02))))

    def _moved(self, masses: FloatArray, draws: int) -> FloatArray:
        """Return by how much draws of the inputs move the predictions, in uncertainties; (draws, parameters)."""
        predicted = self.theory(masses[None], draws)[0]
        sigma = np.array([0.5 * (value.plus + value.minus) for value in self.measured.values()])
        moved = (predicted[1:] - predicted[0]) / sigma
        return np.asarray(moved[np.all(np.isfinite(moved), axis=1)])

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
