"""The posterior of the masses against a plain sum over a grid that knows nothing of ridges, modes or patches.

The plain grid has cells at most a quarter as wide as those of the adapting grid where that is hard, across the ridge;
widths are compared in sigmas of the residuals, so that it does not matter along which coordinates they are. Its
coordinates are straight, or follow one curve that is had from the theory alone.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import CubicSpline
from scipy.special import ndtr, ndtri

from clockfall.analysis.cells import QUANTILES
from clockfall.analysis.draws import Sample, draw
from clockfall.analysis.likelihood import Likelihood, likelihood_of, theory_of
from clockfall.analysis.posterior import Posterior, integrate, posterior
from clockfall.analysis.study import Choices, predicted_at
from clockfall.analysis.system import System, Uncertain
from clockfall.binary.ranges import FloatArray
from clockfall.effects.loading import load_host
from clockfall.files.system_file import read_system

HOST = load_host(strict=True)
CONTRIBUTORS = ("periastron-advance", "einstein-delay", "quadrupole-decay")
PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"
PULSAR = read_system(PUBLISHED / "psr-b1913+16.toml", HOST.cards).system
DOUBLE_PULSAR = read_system(PUBLISHED / "psr-j0737-3039a.toml", HOST.cards).system
ADVANCE, GAMMA, DECAY = "longitude_of_periastron_rate", "einstein_delay_amplitude", "orbital_period_rate"
SHAPE = "shapiro_shape"
QUANTITIES = ("mass_1", "mass_2", "total_mass", "mass_ratio")
FINER = 4
"""How many cells of the plain grid stand, across the ridge, in one of the adapting grid."""

Place = Callable[[FloatArray, FloatArray], FloatArray]
"""(a, b), which broadcast -> masses, (..., 2) [Msun]."""


@dataclass(frozen=True)
class Axis:
    """A coordinate cut into equal cells."""

    low: float
    high: float
    size: int

    @property
    def edges(self) -> FloatArray:
        """Shape (size + 1,)."""
        return np.linspace(self.low, self.high, self.size + 1)

    @property
    def middles(self) -> FloatArray:
        """Shape (size,)."""
        return self.low + (np.arange(self.size) + 0.5) / self.size * (self.high - self.low)


@dataclass(frozen=True)
class Plain:
    """A plain grid in (a, b), a along the ridge.

    Attributes
    ----------
    along, across : Axis
    place : callable
        See `Place`.
    weights : array, shape (along.size, across.size)
        Probabilities.
    """

    along: Axis
    across: Axis
    place: Place
    weights: FloatArray

    def quantiles(self, quantity: str) -> FloatArray:
        """Return the quantiles: every row of cells is a distribution of its own, linear inside each cell."""
        by_row = self.place(self.along.middles[:, None], self.across.edges)
        by_column = self.place(self.along.edges[:, None], self.across.middles)
        lines = (
            growing(value_of(quantity, by_row), self.weights),
            growing(value_of(quantity, by_column).T, self.weights.T),
        )
        edges, weights = max(lines, key=lambda pair: float(np.sum(pair[1] * np.abs(np.diff(pair[0])))))
        values = np.linspace(np.min(edges), np.max(edges), 20001)
        below = np.concatenate([np.zeros((weights.shape[0], 1)), np.cumsum(weights, axis=1)], axis=1)
        share = np.zeros(values.size)
        for where, cumulative in zip(edges, below, strict=True):
            if cumulative[-1] > 1e-12:
                share += np.interp(values, where, cumulative)
        return np.asarray(np.interp(QUANTILES, share, values))

    def mean_and_deviation(self) -> FloatArray:
        """Return both of both masses, (2, 2) [Msun]."""
        masses = self.place(self.along.middles[:, None], self.across.middles)
        mean = np.einsum("ij,ijk->k", self.weights, masses)
        return np.array([mean, np.sqrt(np.einsum("ij,ijk->k", self.weights, (masses - mean) ** 2))])


def value_of(quantity: str, masses: FloatArray) -> FloatArray:
    """Return a quantity of masses, (..., 2) -> (...)."""
    m_1, m_2 = masses[..., 0], masses[..., 1]
    return {"mass_1": m_1, "mass_2": m_2, "total_mass": m_1 + m_2, "mass_ratio": m_1 / m_2}[quantity]


def growing(edges: FloatArray, weights: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return lines of cells, (lines, cells + 1) and (lines, cells), turned round if the values at their edges fall."""
    return (edges, weights) if edges[0, -1] > edges[0, 0] else (edges[:, ::-1], weights[:, ::-1])


def plain_grid(
    of: Likelihood, along: Axis, across: Axis, place: Place, area: Callable[[FloatArray], FloatArray] = np.ones_like
) -> Plain:
    """Return the plain grid of a likelihood; `area` is that of a unit of (a, b), up to a constant, and depends on a."""
    logs = np.empty((along.size, across.size))
    rows = max(1, 2**18 // across.size)
    for start in range(0, along.size, rows):
        a = along.middles[start : start + rows, None]
        masses = place(a, across.middles)
        logs[start : start + rows] = of.log_density(masses.reshape(-1, 2)).reshape(-1, across.size)
    weights = np.exp(logs - np.max(logs)) * area(along.middles)[:, None]
    return Plain(along, across, place, weights / np.sum(weights))


def by_sum(m_2: FloatArray, total: FloatArray) -> FloatArray:
    """Place masses by m_2 and M, which straightens the ridge of an advance."""
    return np.stack(np.broadcast_arrays(total - m_2, m_2), axis=-1)


def as_they_are(m_1: FloatArray, m_2: FloatArray) -> FloatArray:
    """Place masses by themselves."""
    return np.stack(np.broadcast_arrays(m_1, m_2), axis=-1)


def around(found: Posterior, quantity: str, size: int) -> Axis:
    """Return an axis over 5.7 half intervals either way of the median; a normal distribution is 1e-7 there."""
    low, middle, high = found.quantile(quantity, QUANTILES[1:4])
    return Axis(middle - 5.7 * (middle - low), middle + 5.7 * (high - middle), size)


def times_finer(found: Posterior, of: Likelihood, plain: Plain, *, parts: bool = False) -> float:
    """Return how many cells of the plain grid stand in one of the adapting grid, across the ridge, at the least.

    Both are measured in sigmas: those of the adapting grid are, those of the plain one by how much the residuals change
    across a cell, all along the ridge. With `parts`, the cells that the adapting grid cuts into smaller ones, where the
    density jumps, count as these; else as what they were.
    """
    widths = np.concatenate([cells.width_t for cells in found._grid.cells])
    a = plain.along.middles
    b = plain.across.middles[np.argmax(plain.weights, axis=1)]
    half = 0.5 * (plain.across.high - plain.across.low) / plain.across.size
    steps = np.linalg.norm(of.residuals(plain.place(a, b + half)) - of.residuals(plain.place(a, b - half)), axis=-1)
    matters = np.sum(plain.weights, axis=1) > 0.01 * np.max(np.sum(plain.weights, axis=1))
    return float((np.min if parts else np.max)(widths) / np.nanmax(steps[matters]))


def assert_agree(found: Posterior, plain: Plain) -> None:
    """Fail unless mean, deviation and quantiles agree to 1 % of the deviation, and of the half interval."""
    assert found.converged
    assert found.edge < 2e-8  # sides are moved out until 1e-8 at 129 places; a 130th may be a little higher
    expected = plain.mean_and_deviation()
    moments = np.array([found.mean, np.sqrt(np.diag(found.covariance))])
    assert np.max(np.abs(moments - expected) / expected[1]) < 0.01
    for quantity in QUANTITIES:
        quantiles = plain.quantiles(quantity)
        bar = 0.5 * (quantiles[3] - quantiles[1])
        assert np.max(np.abs(found.quantile(quantity, QUANTILES) - quantiles)) < 0.01 * bar, quantity


def setting(system: System, *names: str) -> tuple[Posterior, Likelihood]:
    """Return the posterior from some of a system's measured parameters, and the likelihood that it integrates."""
    sample: Sample = draw(system, HOST.cards, draws=256)
    choices = Choices().with_system(system)
    measured = {name: system.measured[name] for name in names}
    found = posterior(HOST, sample, choices, measured, system.correlations)
    of = likelihood_of(measured, theory_of(HOST, sample, choices, names), system.correlations)
    of = of.averaged_near(found.best_fit)
    assert of.draws == found.nuisance_draws
    return found, of


@pytest.mark.parametrize(
    ("system", "names", "size"),
    [
        pytest.param(PULSAR, (ADVANCE, GAMMA), 400, id="B1913+16 by advance and gamma"),
        pytest.param(DOUBLE_PULSAR, (ADVANCE, SHAPE), 360, id="double pulsar by advance and shape"),
        pytest.param(PULSAR, (ADVANCE, GAMMA, DECAY), 400, id="B1913+16 by three", marks=pytest.mark.slow),
    ],
)
def test_a_thin_ridge(system: System, names: tuple[str, ...], size: int) -> None:
    """Mean, deviation and quantiles of thin ridges of one total mass agree with brute force to 1 % of the error bar.

    Uncertain inputs take part by their covariance: the eccentricity moves the predicted advance by its uncertainty.
    The shape of the double pulsar is unequally uncertain, so that the density jumps along a line across the ridge.
    """
    found, of = setting(system, *names)
    assert np.any(of.blur > 0.0)
    plain = plain_grid(of, around(found, "mass_2", size), around(found, "total_mass", size), by_sum)
    assert times_finer(found, of, plain) > FINER
    assert_agree(found, plain)


@pytest.mark.parametrize("names", [(ADVANCE, GAMMA), (ADVANCE, GAMMA, DECAY)])
def test_the_covariance_of_the_inputs_says_what_their_draws_say(names: tuple[str, ...]) -> None:
    """Where uncertain inputs enter by their covariance, the likelihood is the average over their draws to 3 %.

    Of the peak, at masses over two error bars; 65536 draws, four of the decay's uncertainties wide, leave 1 %.
    """
    found, of = setting(PULSAR, *names)
    assert of.draws == 0
    masses = found.best_fit + np.linspace(-2.0, 2.0, 9)[:, None] * np.linalg.cholesky(found.covariance).sum(axis=1)
    masses = np.concatenate([masses, found.draws(12, seed=4)])
    sample = draw(PULSAR, HOST.cards, draws=65536, seed=9)
    choices = replace(Choices().with_system(PULSAR), only=CONTRIBUTORS)
    averages = []
    for m_1, m_2 in masses:
        state = sample.state.replace(mass_1=m_1, mass_2=m_2)
        predicted = predicted_at(HOST, sample, choices, state)
        chi_2 = np.zeros(sample.draws)
        for name in names:
            value = PULSAR.measured[name]
            chi_2 += ((predicted[name].total[1:] - value.value) / value.plus) ** 2
        averages.append(float(np.mean(np.exp(-0.5 * chi_2))))
    stood_for = np.exp(of.log_density(masses))
    assert stood_for / np.max(stood_for) == pytest.approx(np.array(averages) / max(averages), abs=0.03)


@pytest.mark.slow
def test_a_line_of_jumps() -> None:
    """The double pulsar's cells that are cut where the density jumps, against cells a quarter of these again."""
    found, of = setting(DOUBLE_PULSAR, ADVANCE, SHAPE)
    plain = plain_grid(of, around(found, "mass_2", 400), around(found, "total_mass", 1400), by_sum)
    assert times_finer(found, of, plain, parts=True) > FINER
    assert_agree(found, plain)


def chirp_mass_and_ratio(masses: FloatArray, draws: int) -> FloatArray:
    """Predict (m_1 m_2)^(3/5) (m_1 + m_2)^(-1/5) and m_1/m_2."""
    del draws  # there is nothing to draw
    m_1, m_2 = masses[:, 0], masses[:, 1]
    return np.stack([(m_1 * m_2) ** 0.6 * (m_1 + m_2) ** -0.2, m_1 / m_2], axis=-1)[:, None, :]


def test_a_bent_ridge() -> None:
    """A chirp mass to 2 % and a mass ratio of 4 within 0.6 agree with a grid in (m_1, m_2) itself, nothing sheared.

    At ratios near 0, which are 6.7 sigma away, the ridge goes on to 300 Msun and is forty times longer than what counts
    of it; that must not take the cells.
    """
    of = likelihood_of({"chirp": Uncertain(1.2, 0.024, 0.024), "ratio": Uncertain(4.0, 0.6, 0.6)}, chirp_mass_and_ratio)
    found = integrate(of)
    plain = plain_grid(of, Axis(1.1, 5.5, 2200), Axis(0.3, 1.7, 2200), as_they_are)
    assert times_finer(found, of, plain) > FINER
    assert_agree(found, plain)


def mass_2_of_gamma() -> CubicSpline:
    """Return the m_2 that gives B1913+16 its Einstein amplitude, as a function of m_1 [Msun]."""
    theory = theory_of(HOST, draw(PULSAR, HOST.cards, draws=1), Choices().with_system(PULSAR), (GAMMA,))
    some, trials = np.geomspace(0.009, 41.0, 300), np.geomspace(0.1, 10.0, 3000)
    gamma = theory(np.stack(np.broadcast_arrays(some[:, None], trials), axis=-1).reshape(-1, 2), 0).reshape(300, 3000)
    return CubicSpline(some, [np.interp(PULSAR.measured[GAMMA].value, row, trials) for row in gamma])


@pytest.mark.parametrize(
    ("across", "parts"),
    [
        pytest.param(1400, False, id="cells"),
        pytest.param(5600, True, id="parts of cells", marks=pytest.mark.slow),
    ],
)
def test_a_wide_posterior_that_ends_at_the_prior(across: int, parts: bool) -> None:
    """Einstein amplitude and shape of B1913+16 (10 %, masses to 100 %) agree with brute force to 1 % of the error bar.

    The posterior is bent, skew, jumps along the medians of the unequal uncertainties, and ends at the least mass of the
    prior. The plain grid has columns of m_1, and in each of them cells within 6 sigma of the m_2 that gamma gives.
    """
    found, of = setting(PULSAR, GAMMA, SHAPE)
    middle = mass_2_of_gamma()

    def place(m_1: FloatArray, share: FloatArray) -> FloatArray:
        return np.stack(np.broadcast_arrays(m_1, middle(m_1) * (1.0 + share)), axis=-1)

    plain = plain_grid(of, Axis(0.01, 40.01, 2000), Axis(-0.0055, 0.0055, across), place, middle)
    assert times_finer(found, of, plain, parts=parts) > FINER
    assert_agree(found, plain)


def test_the_edge_of_meaning() -> None:
    """With sin i = 0.99994 within 0.00004, the part of the posterior beyond sin i = 1 is left out, and only that.

    M is known to 1e-6, so that the ridge is cut straight across.
    """
    s = Uncertain(0.99994, 4e-5, 4e-5)
    found, of = setting(replace(PULSAR, measured={**PULSAR.measured, SHAPE: s}), ADVANCE, SHAPE)
    m_2 = found.best_fit[1]
    plain = plain_grid(of, Axis(m_2 * (1 - 1e-4), m_2 * (1 + 3e-4), 300), around(found, "total_mass", 300), by_sum)
    assert_agree(found, plain)
    assert found.quantile("sin_inclination", 1.0) <= 1.0 + 0.1 * s.plus  # the last cells count whole
    # a normal distribution cut at 1.5 sigma
    expected = s.value + s.plus * ndtri(0.5 * ndtr(1.5))
    assert found.quantile("sin_inclination", 0.5) == pytest.approx(expected, abs=0.02 * s.plus)
