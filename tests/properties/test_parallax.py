"""Distances from a parallax: plain reciprocals, or with equal numbers in equal volumes."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import ndtri

from clockfall.analysis.draws import draw
from clockfall.analysis.parallax import FARTHEST, distances
from clockfall.analysis.system import System, Uncertain
from clockfall.binary.constants import LIGHT_SECONDS_PER_AU
from clockfall.effects.loading import load_host
from clockfall.files.faults import BadFile
from clockfall.files.system_file import parse_system

MAS = math.pi / 648e6
KPC = LIGHT_SECONDS_PER_AU / MAS
SCORES = ndtri((np.arange(20000) + 0.5) / 20000)
DELLER = Uncertain(0.24 * MAS, 0.06 * MAS, 0.08 * MAS)  # Deller et al. 2018, ApJ 862, 139; seen


def test_a_plain_parallax_is_its_reciprocal() -> None:
    """1 mas is 1 kpc by definition; the quantiles of 0.24(+6-8) mas are the reciprocals of the parallax's."""
    assert distances(Uncertain(MAS), None, "none").tolist() == [pytest.approx(KPC, rel=1e-15, abs=0.0)]
    d = distances(DELLER, SCORES, "none")
    assert d[0] == pytest.approx(KPC / 0.24, rel=1e-12, abs=0.0)
    low, high = np.nanquantile(d[1:], [0.158655, 0.841345])
    # the few draws at or below zero (3 sigma) shift the quantiles by a tenth of a per cent or so
    assert low == pytest.approx(KPC / 0.30, rel=3e-3, abs=0.0)
    assert high == pytest.approx(KPC / 0.16, rel=1e-2, abs=0.0)
    assert np.isnan(d).sum() == pytest.approx(20000 * 0.00135, abs=3)  # the normal distribution beyond 3 sigma


def test_the_volume_prior_by_weighting() -> None:
    """With the volume prior the quantiles are those of d^2 times the likelihood, summed by brute force."""
    d = np.linspace(1e-3, FARTHEST / KPC, 2_000_001)[1:]
    off = 1.0 / d - 0.24
    sigma = np.where(off > 0, 0.06, 0.08)
    mass = np.cumsum(np.exp(-0.5 * (off / sigma) ** 2) / sigma * d**2)
    expected = np.interp([0.158655, 0.5, 0.841345], mass / mass[-1], d)
    found = distances(DELLER, SCORES, "volume") / KPC
    assert np.quantile(found[1:], [0.158655, 0.5, 0.841345]) == pytest.approx(expected, rel=2e-3, abs=0.0)  # both grids
    assert found[0] == pytest.approx(expected[1], rel=1e-3, abs=0.0)
    assert found.max() <= FARTHEST / KPC


def test_the_volume_prior_fades_with_precision() -> None:
    """For a precise parallax the prior moves the distance up by 4 (sigma/parallax)^2 (Lutz & Kelker 1973; memory)."""
    parallax = Uncertain(MAS, 0.01 * MAS, 0.01 * MAS)
    found = distances(parallax, SCORES, "volume") / KPC
    # p(parallax) goes as parallax^-4 times the normal: its peak lies 4 sigma^2/parallax lower
    assert found[0] - 1.0 == pytest.approx(4e-4, rel=0.1, abs=0.0)


def test_draws_of_a_parallax() -> None:
    """In a sample the distance is there, and draws without one are set aside and counted."""
    sample = draw(System("x", {}, parallax=DELLER), ())
    (d,) = sample.state.known("distance")
    assert d[0] == pytest.approx(KPC / 0.24, rel=1e-12, abs=0.0)
    assert sample.set_aside["parallax"] == np.sum(~sample.possible)
    assert np.all(d > 0)


def test_an_exact_parallax_needs_no_draws() -> None:
    """Without an uncertainty there is one distance."""
    assert draw(System("x", {}, parallax=Uncertain(MAS)), ()).state.known("distance")[0].shape == (1,)


BASE = '[system]\nname = "x"\n[sky]\n'


def test_reading_a_parallax() -> None:
    """A parallax is read from [sky] with its two sides; the prior is a word."""
    cards = load_host().cards
    system = parse_system(f'{BASE}parallax = "0.24 +0.06 -0.08 mas"\ndistance_prior = "volume"\n', cards).system
    assert system.parallax is not None
    assert system.parallax.minus == pytest.approx(0.08 * MAS, rel=1e-12, abs=0.0)
    assert system.distance_prior == "volume"


@pytest.mark.parametrize(
    ("lines", "found"),
    [
        ('parallax = "1 mas"\ndistance = "1 kpc"\n', "both"),
        ('parallax = "1 mas"\ndistance_prior = "flat"\n', "'flat'"),
        ('distance_prior = "volume"\n', "no parallax"),
        ('parallax = "1 kpc"\n', "'kpc'"),
    ],
)
def test_wrong_parallaxes_are_faults(lines: str, found: str) -> None:
    """Distance and parallax together, an unknown prior, a prior without parallax, a wrong unit: each is a fault."""
    with pytest.raises(BadFile) as caught:
        parse_system(BASE + lines, load_host().cards)
    (fault,) = caught.value.faults
    assert found in fault.found
    assert fault.line is not None


def test_a_negative_parallax_needs_the_prior() -> None:
    """A parallax measured below zero has no plain distance, and is told so; the volume prior makes one of it."""
    negative = Uncertain(-0.1 * MAS, 0.2 * MAS, 0.2 * MAS)
    with pytest.raises(ValueError, match="distance_prior"):
        draw(System("x", {}, parallax=negative), ())
    sample = draw(System("x", {}, parallax=negative, distance_prior="volume"), ())
    assert sample.state.known("distance")[0][0] > 0.0
