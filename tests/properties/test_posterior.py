"""The posterior of the masses: against brute force, against closed forms, and against known truths."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import CubicSpline
from scipy.special import ndtr, ndtri

from clockfall.analysis.cells import QUANTILES
from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.likelihood import Likelihood, likelihood_of, theory_of
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
ADVANCE, GAMMA, DECAY = "longitude_of_periastron_rate", "einstein_delay_amplitude", "orbital_period_rate"
RANGE, SHAPE = "shapiro_range", "shapiro_shape"
FEW = 256


def sample_of(system: System = PULSAR) -> Sample:
    """Return a system drawn."""
    return draw(system, HOST.cards, draws=FEW)


def posterior_of(*names: str, system: System = PULSAR) -> Posterior:
    """Return the posterior from some of a system's measured parameters."""
    measured = {name: system.measured[name] for name in names}
    return posterior(HOST, sample_of(system), Choices().with_system(system), measured, system.correlations)


def likelihood(*names: str, system: System = PULSAR, draws: int = 0) -> Likelihood:
    """Return the likelihood of some of a system's measured parameters, averaged over `draws` of the inputs."""
    theory = theory_of(HOST, sample_of(system), Choices().with_system(system), names)
    return replace(likelihood_of({name: system.measured[name] for name in names}, theory), draws=draws)


def brute_force(
    of: Likelihood, first: tuple[float, float], second: tuple[float, float], size: int, *, by_sum: bool = False
) -> FloatArray:
    """Return mean, deviation and quantiles of both masses, (7, 2), from a plain grid in (m_1 or M, m_2)."""
    a, b = (low + (np.arange(size) + 0.5) / size * (high - low) for low, high in (first, second))
    a, m_2 = np.meshgrid(a, b, indexing="ij")
    masses = np.stack([a - m_2 if by_sum else a, m_2], axis=-1)
    logs = of.log_density(masses.reshape(-1, 2)).reshape(size, size)
    weights = np.exp(logs - np.max(logs))
    weights /= np.sum(weights)
    mean = np.einsum("ij,ijk->k", weights, masses)
    deviation = np.sqrt(np.einsum("ij,ijk->k", weights, (masses - mean) ** 2))
    m_2_at = marginal_quantiles(np.sum(weights, axis=0), np.linspace(*second, size + 1))
    if by_sum:
        # the bins of m_1 are those of m_2 turned round, so that a ridge of one M fills them evenly
        edges = mean.sum() - np.linspace(*second, size + 1)[::-1]
        held, _ = np.histogram(masses[..., 0], bins=edges, weights=weights)
        m_1_at = marginal_quantiles(held, edges)
    else:
        m_1_at = marginal_quantiles(np.sum(weights, axis=1), np.linspace(*first, size + 1))
    return np.array([mean, deviation, *np.transpose([m_1_at, m_2_at])])


def marginal_quantiles(weights: FloatArray, edges: FloatArray) -> FloatArray:
    """Return the quantiles of a marginal distribution, from its sums at the edges of the cells."""
    return np.asarray(np.interp(QUANTILES, np.concatenate([[0.0], np.cumsum(weights)]), edges))


def summary(of: Posterior) -> FloatArray:
    """Return mean, deviation and quantiles of both masses, (7, 2)."""
    quantiles = np.transpose([of.quantile("mass_1", QUANTILES), of.quantile("mass_2", QUANTILES)])
    return np.array([of.mean, np.sqrt(np.diag(of.covariance)), *quantiles])


def assert_agree(found: Posterior, plain: FloatArray) -> None:
    """Fail unless mean, deviation and quantiles agree to 1 % of the deviation."""
    assert found.converged
    assert found.edge < 2e-8  # sides are moved out until 1e-8 at 129 places; a 130th may be a little higher
    assert np.max(np.abs(summary(found) - plain) / plain[1]) < 0.01


def test_a_ridge_a_hundred_times_longer_than_wide() -> None:
    """Advance and Einstein amplitude of B1913+16 agree with brute force to 1 % of the error bar.

    The plain grid is in (M, m_2), which lies along the ridge, and has about 1.5 times as many cells in each sigma.
    """
    found = posterior_of(ADVANCE, GAMMA)
    # the eccentricity moves the predicted advance by its uncertainty: by its covariance there, by draws in brute force
    assert found.nuisance_draws == 0
    plain = brute_force(likelihood(ADVANCE, GAMMA, draws=64), (2.82832, 2.8284), (1.3845, 1.3965), 200, by_sum=True)
    assert_agree(found, plain)


def mass_2_of_gamma(m_1: FloatArray) -> FloatArray:
    """Return the m_2 that gives B1913+16 its Einstein amplitude, for each m_1 [Msun]."""
    theory = theory_of(HOST, sample_of(), Choices().with_system(PULSAR), (GAMMA,))
    some, trials = np.geomspace(0.009, 41.0, 300), np.geomspace(0.1, 10.0, 3000)
    gamma = theory(np.stack(np.broadcast_arrays(some[:, None], trials), axis=-1).reshape(-1, 2), 0).reshape(300, 3000)
    solved = [np.interp(PULSAR.measured[GAMMA].value, row, trials) for row in gamma]
    return np.asarray(CubicSpline(some, solved)(m_1))


def test_a_wide_posterior_that_ends_at_the_prior() -> None:
    """Einstein amplitude and shape of B1913+16 (10 %, masses to 100 %) agree with brute force to 1 % of the error bar.

    The posterior is bent, skew, jumps along the medians of the unequal uncertainties, and ends at the least mass of the
    prior. The plain grid has columns of m_1, and in each of them 200 cells within 0.8 % of the m_2 that gamma gives.
    """
    found, of = posterior_of(GAMMA, SHAPE), likelihood(GAMMA, SHAPE)
    m_1 = 0.01 + (np.arange(2000) + 0.5) / 2000 * 40.0
    middle = mass_2_of_gamma(m_1)
    share = 0.008 * ((np.arange(200) + 0.5) / 100 - 1.0)
    masses = np.stack(np.broadcast_arrays(m_1[:, None], middle[:, None] * (1.0 + share)), axis=-1)
    weights = np.exp(of.log_density(masses.reshape(-1, 2)).reshape(2000, 200)) * middle[:, None]
    weights /= np.sum(weights)
    columns = np.sum(weights, axis=1)
    mean = np.einsum("ij,ijk->k", weights, masses)
    deviation = np.sqrt(np.einsum("ij,ijk->k", weights, (masses - mean) ** 2))
    at = marginal_quantiles(columns, np.linspace(0.01, 40.01, 2001))
    # m_2 grows with m_1 along the ridge, a thousand times faster than the ridge is wide
    assert_agree(found, np.array([mean, deviation, *np.transpose([at, np.interp(at, m_1, middle)])]))


def test_three_parameters() -> None:
    """Three parameters of B1913+16, one of them with an uncertain apparent part, agree with brute force to 1 %."""
    found = posterior_of(ADVANCE, GAMMA, DECAY)
    assert found.degrees_of_freedom == 1
    of = likelihood(ADVANCE, GAMMA, DECAY, draws=256)
    assert_agree(found, brute_force(of, (2.82833, 2.82839), (1.385, 1.396), 80, by_sum=True))


def test_the_edge_of_meaning() -> None:
    """With sin i = 0.99994 within 0.00004, the part of the posterior beyond sin i = 1 is left out, and only that.

    M is known to 1e-6, so that the ridge is cut straight across. Brute force is in (M, m_2) as before.
    """
    s = Uncertain(0.99994, 4e-5, 4e-5)
    system = replace(PULSAR, measured={**PULSAR.measured, SHAPE: s}, fields={**PULSAR.fields})
    found = posterior_of(ADVANCE, SHAPE, system=system)
    of = likelihood(ADVANCE, SHAPE, system=system, draws=256)
    m_2 = found.best_fit[1]
    plain = brute_force(of, (2.82832, 2.8284), (m_2 * (1 - 1e-4), m_2 * (1 + 3e-4)), 300, by_sum=True)
    assert_agree(found, plain)
    assert found.quantile("sin_inclination", 1.0) <= 1.0 + 0.1 * s.plus  # the last cells count whole
    # a normal distribution cut at 1.5 sigma
    expected = s.value + s.plus * ndtri(0.5 * ndtr(1.5))
    assert found.quantile("sin_inclination", 0.5) == pytest.approx(expected, abs=0.02 * s.plus)


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


@pytest.mark.slow
@pytest.mark.parametrize("names", [(ADVANCE, GAMMA), (GAMMA, RANGE, SHAPE)])
def test_the_intervals_hold_the_truth_as_often_as_they_say(names: tuple[str, ...]) -> None:
    """Of 500 sets of synthetic data, the 68.3 % interval of m_2 and the 68.3 % region hold the truth in 68 +/- 4 %.

    500 trials leave a standard deviation of 2.1 %; the seed is fixed. Uncertainties are of some per cent, where the
    flat prior is worth little.
    """
    truth, rng = np.array([1.438, 1.390]), np.random.default_rng(11)
    theory = theory_of(HOST, sample_of(), Choices().with_system(PULSAR), names)
    exact = theory(truth[None], 0)[0, 0]
    sigma = np.abs(exact) * np.array([{ADVANCE: 1e-5, GAMMA: 0.005, RANGE: 0.02, SHAPE: 0.01}[name] for name in names])
    within = np.zeros(2)
    for values in exact + sigma * rng.standard_normal((500, exact.size)):
        measured = {name: Uncertain(v, s, s) for name, v, s in zip(names, values.tolist(), sigma.tolist(), strict=True)}
        of = likelihood_of(measured, lambda masses, _: theory(masses, 0))
        found = integrate(of)
        low, high = found.interval("mass_2")
        scale = np.max(found.density) / np.exp(np.max(of.log_density(found.masses)))
        at_truth = scale * np.exp(of.log_density(truth[None])[0])
        within += [low < truth[1] < high, at_truth > found.credible_mass(0.6827)]
    assert within / 500 == pytest.approx([0.6827, 0.6827], abs=0.04)
