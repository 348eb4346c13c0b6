"""Uncertainty as a batch: an uncertain system is drawn into one state of shape (1 + draws,).

Element 0 is the central one, every quantity at its median; the rest are draws from a scrambled Sobol sequence, so that
every analysis runs on the batch unchanged and quantiles come out smoothly.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from clockfall.analysis.node_elements import periastron_elements
from clockfall.analysis.parallax import distances
from clockfall.analysis.sobol import DIMENSIONS, sobol
from clockfall.analysis.system import Correlation, System, Uncertain
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import ANY, BoolArray, FloatArray, Range
from clockfall.binary.state import FIELDS, BinaryState
from clockfall.effects.card import Card
from clockfall.errors import BadInput, OutOfRange

DEFAULT_DRAWS: Final = 8192
DEFAULT_SEED: Final = 20260
MOST_DRAWS: Final = 2**24

Path = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Sample:
    """A system drawn.

    Attributes
    ----------
    state : BinaryState, shape (1 + draws,)
        Element 0 is the central one.
    measured, apparent : mapping of name to array, shape (1 + draws,)
        As in `System`.
    settings : mapping of effect name to mapping of own parameter to array, shape (1 + draws,)
        As in `System`, with the defaults that have an uncertainty.
    choices : mapping of effect name to mapping of own choice to str
        As in `System`.
    possible : array, shape (1 + draws,) [bool]
        False for a draw in which a quantity fell outside its range, such as a negative eccentricity. The state holds
        the central value there, and whoever reports sets the draw aside.
    set_aside : mapping of str to int
        How many draws fell outside, by quantity.
    seed : int
        Of the scrambling.
    counts_nodes : bool
        Whether `orbital_period` is from node to node still; see `clockfall.analysis.node_elements`.
    """

    state: BinaryState
    measured: Mapping[str, FloatArray]
    apparent: Mapping[str, FloatArray]
    settings: Mapping[str, Mapping[str, FloatArray]]
    choices: Mapping[str, Mapping[str, str]]
    possible: BoolArray
    set_aside: Mapping[str, int]
    seed: int
    counts_nodes: bool = False

    @property
    def draws(self) -> int:
        """The number of draws besides the central element."""
        return self.possible.size - 1

    @property
    def own(self) -> Mapping[str, Mapping[str, Any]]:
        """Own parameters and choices together, as `Host.apply` takes them."""
        effects = {*self.settings, *self.choices}
        return {effect: {**self.settings.get(effect, {}), **self.choices.get(effect, {})} for effect in effects}

    def take(self, index: slice | npt.NDArray[np.intp]) -> Sample:
        """Return some elements."""

        def some(values: Mapping[str, FloatArray]) -> Mapping[str, FloatArray]:
            return MappingProxyType({name: array[index] for name, array in values.items()})

        return replace(
            self,
            state=self.state.take(index),
            measured=some(self.measured),
            apparent=some(self.apparent),
            settings=MappingProxyType({effect: some(own) for effect, own in self.settings.items()}),
            possible=self.possible[index],
        )

    def central(self) -> Sample:
        """Return the central element alone, shape (1,)."""
        return self.take(slice(0, 1))


def draw(system: System, cards: tuple[Card, ...], *, draws: int = DEFAULT_DRAWS, seed: int = DEFAULT_SEED) -> Sample:
    """Draw `system` into a batch.

    A quantity with the interval [value - minus, value + plus] is drawn from two half normal distributions joined at
    the median, so that its 15.9 %, 50 % and 84.1 % quantiles are the published ones. Correlations hold between the
    normal scores. Without any uncertainty the batch holds the central element alone.

    Raises
    ------
    BadInput
        Correlations that contradict each other.
    OutOfRange
        `draws` outside 1 ... 2^24, a central value outside its range, or more uncertain quantities than the Sobol
        sequence has dimensions.
    """
    if not 1 <= draws <= MOST_DRAWS:
        raise OutOfRange("draws", f"1 <= draws <= {MOST_DRAWS}", str(draws))
    system = _with_uncertain_defaults(system, cards)
    quantities = dict(system.quantities())
    uncertain = [path for path, quantity in quantities.items() if not quantity.exact]
    scores = _normal_scores(uncertain, system.correlations, draws, seed)
    size = 1 + (draws if uncertain else 0)
    possible = np.ones(size, dtype=np.bool_)
    set_aside: dict[str, int] = {}

    def values(path: Path) -> FloatArray:
        array = _drawn(quantities[path], scores.get(path), size)
        if _range(path, cards).holds_all(array):
            return array
        inside = _range(path, cards).holds(array)
        if not inside[0]:
            _range(path, cards).check(".".join(path[1:]), array[0])
        set_aside[".".join(path[1:])] = int(np.sum(~inside))
        possible[~inside] = False
        return np.where(inside, array, array[0])

    def far(parallax: Uncertain) -> FloatArray:
        found = distances(parallax, scores.get(("fields", "parallax")), system.distance_prior)
        found = np.resize(found, size)
        lost = np.isnan(found)
        if lost[0]:
            raise OutOfRange("parallax", "0 < parallax", f"{parallax.value} rad", "or give distance_prior = 'volume'")
        if lost.any():
            set_aside["parallax"] = int(np.sum(lost))
            possible[lost] = False
        return np.where(lost, found[0], found)

    fields: dict[str, FloatArray | Epoch] = {name: values(("fields", name)) for name in system.fields}
    if system.parallax is not None:
        fields["distance"] = far(system.parallax)
    if system.periastron_epoch is not None:
        fields["periastron_epoch"] = system.periastron_epoch.plus_seconds(values(("fields", "periastron_epoch")))
    if system.node_elements is not None:
        fields |= periastron_elements(
            values(("fields", "eccentricity_sine")),
            values(("fields", "eccentricity_cosine")),
            system.node_elements.epoch.plus_seconds(values(("fields", "ascending_node_epoch"))),
            fields["orbital_period"],
        )
    return Sample(
        state=BinaryState(**fields) if fields else BinaryState(),
        measured=MappingProxyType({name: values(("measured", name)) for name in system.measured}),
        apparent=MappingProxyType({name: values(("apparent", name)) for name in system.apparent}),
        settings=MappingProxyType(
            {
                effect: MappingProxyType({name: values(("settings", effect, name)) for name in own})
                for effect, own in system.settings.items()
            }
        ),
        choices=system.choices,
        possible=possible,
        set_aside=MappingProxyType(set_aside),
        seed=seed,
        counts_nodes=system.node_elements is not None,
    )


def _with_uncertain_defaults(system: System, cards: tuple[Card, ...]) -> System:
    """Add the defaults of own parameters that have an uncertainty, for effects whose state fields are all given."""
    settings = {effect: dict(own) for effect, own in system.settings.items()}
    for card in cards:
        given = {*system.fields, *(("distance",) if system.parallax is not None else ())}
        needs_met = all(name in given or name not in FIELDS for name in card.needs)
        if not needs_met or card.name in system.without:
            continue
        for own in card.parameters:
            if own.default is not None and own.default_uncertainty > 0.0:
                spread = own.default_uncertainty
                settings.setdefault(card.name, {}).setdefault(own.name, Uncertain(own.default, spread, spread))
    return replace(system, settings=settings)


def _range(path: Path, cards: tuple[Card, ...]) -> Range:
    """Return where the quantity at `path` has a meaning, in clockfall's unit."""
    if path[0] == "fields" and path[1] in FIELDS and path[1] != "periastron_epoch":
        return FIELDS[path[1]].within
    if path[0] == "settings":
        own = next((card.own(path[2]) for card in cards if card.name == path[1]), None)
        return own.within if own else ANY
    return ANY


def _drawn(quantity: Uncertain, scores: FloatArray | None, size: int) -> FloatArray:
    """Return the quantity at its median followed by its draws; shape (size,)."""
    array = np.full(size, quantity.value)
    if scores is not None and quantity.plus == quantity.minus:
        array[1:] += scores * quantity.plus
    elif scores is not None:
        array[1:] += scores * np.where(scores > 0.0, quantity.plus, quantity.minus)
    return array


def _normal_scores(
    uncertain: list[Path], correlations: tuple[Correlation, ...], draws: int, seed: int
) -> dict[Path, FloatArray]:
    """Return standard normal scores, correlated as asked; path -> shape (draws,)."""
    if not uncertain:
        return {}
    from scipy.special import ndtri  # 0.3 s, needed here alone

    if len(uncertain) > DIMENSIONS:
        raise OutOfRange("uncertain quantities of a system", f"at most {DIMENSIONS}", str(len(uncertain)))
    # A Sobol sequence is balanced in powers of two; any other number takes the head of the next one.
    power = max(0, (draws - 1).bit_length())
    uniform = sobol(len(uncertain), power, np.random.default_rng(seed))[:, :draws]
    scores = ndtri(uniform, out=uniform)  # (quantities, draws)
    factor = _correlation_factor(uncertain, correlations)
    if factor is not None:
        scores = factor @ scores
    return dict(zip(uncertain, scores, strict=True))


def _correlation_factor(uncertain: list[Path], correlations: tuple[Correlation, ...]) -> FloatArray | None:
    """Return L with L L^T the correlation matrix, or None where nothing is correlated."""
    matrix = np.eye(len(uncertain))
    for correlation in correlations:
        if correlation.first not in uncertain or correlation.second not in uncertain:
            continue  # an exact quantity correlates with nothing
        i, j = uncertain.index(correlation.first), uncertain.index(correlation.second)
        matrix[i, j] = matrix[j, i] = correlation.value
    if np.array_equal(matrix, np.eye(len(uncertain))):
        return None
    eigenvalues, vectors = np.linalg.eigh(matrix)
    # A full correlation (value 1) makes an eigenvalue 0, which rounding may put a little below.
    if eigenvalues[0] < -1e-12 * len(uncertain):
        raise BadInput("the correlations contradict each other: their matrix is not positive semi-definite")
    # Triangular rather than symmetric, so that an uncorrelated quantity keeps its own Sobol dimension.
    root: FloatArray = vectors * np.sqrt(np.maximum(eigenvalues, 0.0))
    upper = np.asarray(np.linalg.qr(root.T).R)
    lower: FloatArray = upper.T * np.where(np.diag(upper) < 0.0, -1.0, 1.0)
    return lower
