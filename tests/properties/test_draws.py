"""Draws: quantiles as quoted, correlations as given, nothing dropped in silence."""

from __future__ import annotations

import numpy as np
import pytest

from clockfall.analysis.draws import draw
from clockfall.analysis.outcome import Drawn
from clockfall.analysis.system import Correlation, System, Uncertain
from clockfall.errors import BadInput, OutOfRange

# 8192 Sobol draws in a few dimensions miss a quantile by some 0.1 % of the spread; 1 % leaves room.
QUANTILE_ERROR = 0.01


def system(**changes: object) -> System:
    """Return a system with two masses, one of them lopsided."""
    fields = {"mass_1": Uncertain(1.4, 0.01, 0.01), "mass_2": Uncertain(1.3, 0.006, 0.003)}
    return System(**{"name": "test", "fields": fields, **changes})  # type: ignore[arg-type]  # plain test data


def test_quantiles_are_the_quoted_ones() -> None:
    """The 15.87 %, 50 % and 84.13 % quantiles of the draws are the quoted interval and value, both sides apart."""
    sample = draw(system(), ())
    for name, minus, plus in (("mass_1", 0.01, 0.01), ("mass_2", 0.003, 0.006)):
        values = sample.state.known(name)[0]
        low, middle, high = np.quantile(values[1:], [0.158655, 0.5, 0.841345])
        assert values[0] - low == pytest.approx(minus, rel=QUANTILE_ERROR, abs=0.0)
        assert high - values[0] == pytest.approx(plus, rel=QUANTILE_ERROR, abs=0.0)
        assert middle == pytest.approx(values[0], abs=QUANTILE_ERROR * minus)


def test_the_central_element_is_exact() -> None:
    """Element 0 holds every quantity as written, bit for bit."""
    sample = draw(system(measured={"orbital_period_rate": Uncertain(-2.4e-12, 1e-15, 1e-15)}), ())
    assert sample.state.known("mass_1", "mass_2")[0][0] == 1.4
    assert sample.measured["orbital_period_rate"][0] == -2.4e-12


@pytest.mark.parametrize("value", [0.0, 0.5, -0.97, 1.0, -1.0])
def test_correlations_are_as_given(value: float) -> None:
    """The correlation of two symmetric quantities is the given one, full correlation included."""
    fields = {"mass_1": Uncertain(1.4, 0.01, 0.01), "mass_2": Uncertain(1.3, 0.02, 0.02)}
    pair = (("fields", "mass_1"), ("fields", "mass_2"))
    sample = draw(system(fields=fields, correlations=(Correlation(*pair, value),)), ())
    found = np.corrcoef(*(sample.state.known(name)[0][1:] for name in ("mass_1", "mass_2")))[0, 1]
    assert found == pytest.approx(value, abs=5e-3)


def test_three_correlations_at_once() -> None:
    """A whole matrix of correlations is met, and an uncorrelated quantity stays so."""
    names = ("mass_1", "mass_2", "orbital_period", "eccentricity")
    values = {("mass_1", "mass_2"): 0.8, ("mass_1", "orbital_period"): 0.3, ("mass_2", "orbital_period"): 0.6}
    fields = {name: Uncertain(0.5, 0.01, 0.01) for name in names}
    correlations = tuple(Correlation(("fields", a), ("fields", b), v) for (a, b), v in values.items())
    sample = draw(system(fields=fields, correlations=correlations), ())
    matrix = np.corrcoef([sample.state.known(name)[0][1:] for name in names])
    for i, a in enumerate(names):
        for j, b in enumerate(names[:i]):
            assert matrix[i, j] == pytest.approx(values.get((b, a), 0.0), abs=0.01), (a, b)


def test_contradicting_correlations_are_refused() -> None:
    """Three quantities cannot all be opposed to each other."""
    names = ("mass_1", "mass_2", "orbital_period")
    pairs = [(a, b) for i, a in enumerate(names) for b in names[:i]]
    correlations = tuple(Correlation(("fields", a), ("fields", b), -0.9) for a, b in pairs)
    with pytest.raises(BadInput, match="contradict each other"):
        draw(system(fields={n: Uncertain(1.0, 0.1, 0.1) for n in names}, correlations=correlations), ())


def test_draws_outside_the_range_are_set_aside_and_counted() -> None:
    """A small eccentricity with a large error gives draws below zero: they are marked and counted, not bent."""
    sample = draw(system(fields={"eccentricity": Uncertain(3e-7, 1.5e-7, 1.5e-7)}), ())
    share = sample.set_aside["eccentricity"] / sample.draws
    assert share == pytest.approx(0.02275, rel=0.02, abs=0.0)  # the normal distribution beyond 2 sigma
    assert np.sum(~sample.possible) == sample.set_aside["eccentricity"]
    drawn = Drawn.from_batch(sample.state.known("eccentricity")[0], sample.possible)
    assert drawn.set_aside == sample.set_aside["eccentricity"]
    assert np.nanmin(drawn.draws) >= 0.0


def test_a_central_value_outside_its_range_is_refused() -> None:
    """What is impossible at its median is an error, not a sample."""
    with pytest.raises(OutOfRange, match="mass_1"):
        draw(system(fields={"mass_1": Uncertain(-1.0, 3.0, 3.0)}), ())


def test_nothing_uncertain_nothing_drawn() -> None:
    """An exact system is one binary, and its numbers have no uncertainty."""
    sample = draw(system(fields={"mass_1": Uncertain(1.4)}), ())
    assert sample.draws == 0
    assert Drawn.from_batch(sample.state.known("mass_1")[0]).uncertainty is None


@pytest.mark.parametrize("draws", [1, 2, 3, 1000, 1024])
def test_any_number_of_draws(draws: int) -> None:
    """Any number of draws may be asked for."""
    assert draw(system(), (), draws=draws).draws == draws


def test_a_wrong_number_of_draws_is_refused() -> None:
    """None, or more than memory holds, is refused."""
    for draws in (0, -1, 2**40):
        with pytest.raises(OutOfRange, match="draws"):
            draw(system(), (), draws=draws)
