"""The posterior of the masses against closed forms, and what it refuses."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from scipy.special import ndtr

from clockfall.analysis.cells import QUANTILES
from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.likelihood import likelihood_of, theory_of
from clockfall.analysis.modes import NoOverlap
from clockfall.analysis.posterior import Posterior, integrate, posterior
from clockfall.analysis.study import Choices
from clockfall.analysis.system import Correlation, System, Uncertain
from clockfall.binary.ranges import FloatArray
from clockfall.effects.loading import load_host
from clockfall.errors import BadInput
from clockfall.files.system_file import read_system

HOST = load_host(strict=True)
PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"
PULSAR = read_system(PUBLISHED / "psr-b1913+16.toml", HOST.cards).system
ADVANCE, GAMMA = "longitude_of_periastron_rate", "einstein_delay_amplitude"


def sample_of(system: System = PULSAR) -> Sample:
    """Return a system drawn."""
    return draw(system, HOST.cards, draws=256)


def posterior_of(*names: str, system: System = PULSAR) -> Posterior:
    """Return the posterior from some of a system's measured parameters."""
    measured = {name: system.measured[name] for name in names}
    return posterior(HOST, sample_of(system), Choices().with_system(system), measured, system.correlations)


def linear(matrix: FloatArray) -> Callable[[FloatArray, int], FloatArray]:
    """Return a theory that is linear in the masses, without uncertain inputs."""

    def theory(masses: FloatArray, draws: int) -> FloatArray:
        del draws  # there is nothing to draw
        return (masses @ matrix.T)[:, None, :]

    return theory


def test_a_linear_theory_gives_the_normal_distribution() -> None:
    """Mean, covariance, chi-squared and contours are those of generalised least squares, to 1e-6 of the error bar.

    Quantiles are to 0.1 %, which is what the spreading of cells over their width leaves.
    """
    matrix = np.array([[1.0, 1.0], [1.0, 1.001], [0.3, -0.2]])
    values, sigma, rho = np.array([3.0, 3.0011, 0.21]), np.array([1e-4, 1e-4, 0.01]), 0.4
    names = ("a", "b", "c")
    measured = {name: Uncertain(v, s, s) for name, v, s in zip(names, values, sigma, strict=True)}
    found = integrate(likelihood_of(measured, linear(matrix), [Correlation(("measured", "a"), ("measured", "b"), rho)]))
    noise = np.diag(sigma**2)
    noise[0, 1] = noise[1, 0] = rho * sigma[0] * sigma[1]
    covariance = np.linalg.inv(matrix.T @ np.linalg.solve(noise, matrix))
    mean = covariance @ matrix.T @ np.linalg.solve(noise, values)
    away = values - matrix @ mean
    bar = np.sqrt(np.diag(covariance))
    assert np.max(np.abs(found.mean - mean) / bar) < 1e-6
    assert np.max(np.abs(found.best_fit - mean) / bar) < 1e-4
    assert found.covariance == pytest.approx(covariance, rel=1e-6, abs=0.0)
    assert found.chi_squared == pytest.approx(away @ np.linalg.solve(noise, away), abs=1e-6)
    for k, name in enumerate(("mass_1", "mass_2")):
        expected = mean[k] + bar[k] * np.array([-1.959964, -1.0, 0.0, 1.0, 1.959964])
        assert np.max(np.abs(found.quantile(name, QUANTILES) - expected)) < 1e-3 * bar[k]
    peak = 1.0 / (2.0 * np.pi * np.sqrt(np.linalg.det(covariance)))
    levels = np.array([0.683, 0.954])
    assert found.credible_mass(levels) == pytest.approx(peak * (1.0 - levels), rel=0.01, abs=0.0)


def test_draws_are_the_posterior() -> None:
    """Draws have the mean and covariance of the posterior, lie on its ridge, and repeat with their seed.

    Strata leave some 1/n of the error bar, not 1/sqrt(n); 1 % of it is asked for with 4096 draws.
    """
    found = posterior_of(ADVANCE, GAMMA)
    drawn = found.draws(4096, seed=3)
    assert np.array_equal(drawn, found.draws(4096, seed=3))
    assert not np.array_equal(drawn, found.draws(4096, seed=4))
    bar = np.sqrt(np.diag(found.covariance))
    assert np.max(np.abs(drawn.mean(axis=0) - found.mean) / bar) < 0.01
    assert drawn.std(axis=0) == pytest.approx(bar, rel=0.01, abs=0.0)
    low, high = found.interval("total_mass")
    assert np.mean((drawn.sum(axis=1) > low) & (drawn.sum(axis=1) < high)) == pytest.approx(0.6827, abs=0.02)
    assert abs(np.corrcoef(drawn[:-1, 0], drawn[1:, 0])[0, 1]) < 0.06  # shuffled: 4 times 1/sqrt(4096)


def sum_and_product(masses: FloatArray, draws: int) -> FloatArray:
    """Predict M and m_1 m_2, which do not tell which body is which."""
    del draws
    return np.stack([masses.sum(axis=1), masses.prod(axis=1)], axis=-1)[:, None, :]


@pytest.mark.parametrize(("spread", "modes"), [(0.01, 2), (0.15, 1)])
def test_exchange_of_the_bodies(spread: float, modes: int) -> None:
    """A theory that does not tell the bodies apart gives both modes equally, separate or grown together."""
    measured = {"sum": Uncertain(3.0, 1e-3, 1e-3), "product": Uncertain(2.0, spread, spread)}
    found = integrate(likelihood_of(measured, sum_and_product))
    assert found.modes == modes
    assert found.mean == pytest.approx([1.5, 1.5], abs=1e-4)  # by symmetry, on a grid that is not symmetric
    share = float(np.sum(found.weights[found.masses[:, 0] > found.masses[:, 1]]))
    assert share == pytest.approx(0.5, abs=0.01)  # cells that straddle m_1 = m_2 count whole


def test_inconsistent_data_are_told() -> None:
    """A parameter 5 sigma off gives the p-value of 5 sigma, 5.7e-7, to 2 %, and pulls that say which."""
    values = {"sum": (3.0, 1e-3), "product": (2.0, 1e-3), "again": (2.05, 0.01)}
    shifted = {name: Uncertain(value, sigma, sigma) for name, (value, sigma) in values.items()}

    def theory(masses: FloatArray, draws: int) -> FloatArray:
        both = sum_and_product(masses, draws)
        return np.concatenate([both, both[..., 1:]], axis=-1)

    found = integrate(likelihood_of(shifted, theory))
    chi_squared = 0.05**2 / (0.01**2 + 0.001**2)  # the two measurements of one number
    assert found.chi_squared == pytest.approx(chi_squared, rel=1e-4, abs=0.0)
    assert found.p_value == pytest.approx(2.0 * ndtr(-np.sqrt(chi_squared)), rel=0.01, abs=0.0)
    assert min(found.pulls, key=found.pulls.__getitem__) == "again"


def test_no_overlap_names_the_parameters() -> None:
    """Two parameters that no masses give together are refused by name; so are one alone, and an exact one."""
    apart = {"sum": Uncertain(3.0, 1e-3, 1e-3), "product": Uncertain(200.0, 1.0, 1.0)}
    with pytest.raises(NoOverlap, match="sum, product") as caught:
        integrate(likelihood_of(apart, sum_and_product))
    assert caught.value.names == ("sum", "product")
    with pytest.raises(BadInput, match=r"two or more.*sum"):
        likelihood_of({"sum": Uncertain(3.0, 1e-3, 1e-3)}, sum_and_product)
    with pytest.raises(BadInput, match="product needs an uncertainty"):
        likelihood_of({"sum": Uncertain(3.0, 1e-3, 1e-3), "product": Uncertain(2.0)}, sum_and_product)
    with pytest.raises(BadInput, match="no active effect predicts colour"):
        theory_of(HOST, sample_of(), Choices(), (ADVANCE, "colour"))


def test_quantiles_refuse_what_they_cannot_give() -> None:
    """A quantity that the masses do not give, and a probability beyond 1, are refused."""
    measured = {"sum": Uncertain(3.0, 0.01, 0.01), "product": Uncertain(2.0, 0.01, 0.01)}
    found = integrate(likelihood_of(measured, sum_and_product))
    with pytest.raises(BadInput, match="sin_inclination"):
        found.quantile("sin_inclination", 0.5)
    with pytest.raises(BadInput, match="probability"):
        found.quantile("mass_1", 1.5)
    with pytest.raises(BadInput, match="number"):
        found.draws(0)
