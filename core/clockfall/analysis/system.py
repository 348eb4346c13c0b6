"""A system: what a user knows about one binary, with its uncertainties."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Final, Literal

from clockfall.binary.epoch import Epoch

_NOTHING: Final[Mapping[str, Uncertain]] = MappingProxyType({})


@dataclass(frozen=True, slots=True)
class Uncertain:
    """A value with a 68.3 % interval [value - minus, value + plus], in clockfall's unit.

    Attributes
    ----------
    value : float
        The median.
    plus, minus : float
        Both >= 0; both 0 for an exact value.
    """

    value: float
    plus: float = 0.0
    minus: float = 0.0

    @property
    def exact(self) -> bool:
        """Whether no uncertainty is given."""
        return self.plus == 0.0 and self.minus == 0.0


@dataclass(frozen=True, slots=True)
class Correlation:
    """The correlation of two quantities, each named by its path, as `System.quantities` gives it."""

    first: tuple[str, ...]
    second: tuple[str, ...]
    value: float


@dataclass(frozen=True, slots=True)
class NodeElements:
    """Laplace-Lagrange elements of a near-circular orbit, whose periastron is hard to place.

    Attributes
    ----------
    sine, cosine : Uncertain
        e sin omega and e cos omega.
    epoch : Epoch, shape ()
        A passage of the ascending node, where the mean longitude M + omega is 0 (MJD, TDB).
    epoch_uncertainty : Uncertain
        Its value is 0 [s].
    """

    sine: Uncertain
    cosine: Uncertain
    epoch: Epoch
    epoch_uncertainty: Uncertain = Uncertain(0.0)


@dataclass(frozen=True, slots=True)
class System:
    """All that is known of one binary.

    Attributes
    ----------
    name : str
        As the user calls it.
    fields : mapping of state field to Uncertain
        In clockfall's units. `periastron_epoch` is apart.
    periastron_epoch : Epoch or None, shape ()
        A passage of periastron (MJD, TDB).
    periastron_epoch_uncertainty : Uncertain
        Its value is 0 [s].
    node_elements : NodeElements or None
        In the place of eccentricity, longitude and epoch of periastron; `orbital_period` then counts node passages.
    parallax : Uncertain or None
        [rad]; then `fields` has no distance.
    distance_prior : "none" or "volume"
        How a parallax becomes a distance; see `clockfall.analysis.parallax`.
    measured : mapping of ``<field>_rate`` or parameter name to Uncertain
        What timing measured; rates per second, parameters in the unit of the effect's card.
    apparent : mapping of ``<field>_rate`` to Uncertain
        Apparent parts of measured rates, taken from elsewhere; they stand in for the apparent effects.
    settings : mapping of effect name to mapping of own parameter to Uncertain
        In the unit of the effect's card.
    choices : mapping of effect name to mapping of own choice to str
        The words chosen.
    only, without : effects to use alone, or to leave out
    correlations : tuple of Correlation
        Of the drawn quantities.
    """

    name: str
    fields: Mapping[str, Uncertain]
    periastron_epoch: Epoch | None = None
    periastron_epoch_uncertainty: Uncertain = Uncertain(0.0)
    node_elements: NodeElements | None = None
    parallax: Uncertain | None = None
    distance_prior: Literal["none", "volume"] = "none"
    measured: Mapping[str, Uncertain] = field(default_factory=lambda: _NOTHING)
    apparent: Mapping[str, Uncertain] = field(default_factory=lambda: _NOTHING)
    settings: Mapping[str, Mapping[str, Uncertain]] = field(default_factory=lambda: MappingProxyType({}))
    choices: Mapping[str, Mapping[str, str]] = field(default_factory=lambda: MappingProxyType({}))
    only: tuple[str, ...] | None = None
    without: tuple[str, ...] = ()
    correlations: tuple[Correlation, ...] = ()

    def quantities(self) -> Iterator[tuple[tuple[str, ...], Uncertain]]:
        """Yield (path, quantity) of all that has a value, in a fixed order.

        Paths are ``("fields", name)``, with ``periastron_epoch`` and ``parallax`` among the names,
        ``("measured", name)``, ``("apparent", name)`` and ``("settings", effect, name)``.
        """
        for name, value in sorted(self.fields.items()):
            yield ("fields", name), value
        if self.periastron_epoch is not None:
            yield ("fields", "periastron_epoch"), self.periastron_epoch_uncertainty
        if self.node_elements is not None:
            yield ("fields", "eccentricity_sine"), self.node_elements.sine
            yield ("fields", "eccentricity_cosine"), self.node_elements.cosine
            yield ("fields", "ascending_node_epoch"), self.node_elements.epoch_uncertainty
        if self.parallax is not None:
            yield ("fields", "parallax"), self.parallax
        for name, value in sorted(self.measured.items()):
            yield ("measured", name), value
        for name, value in sorted(self.apparent.items()):
            yield ("apparent", name), value
        for effect, own in sorted(self.settings.items()):
            for name, value in sorted(own.items()):
                yield ("settings", effect, name), value
