"""What a hook may return. Each is data: frozen, and fit to be pickled."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np

from clockfall.binary.ranges import FloatArray


class Settings(Mapping[str, FloatArray]):
    """An effect's own parameters by name, each in its declared unit and of the state's batch shape, read-only.

    Parameters
    ----------
    values : mapping of str to array
        The own parameters.
    choices : mapping of str to str
        The words chosen.
    """

    __slots__ = ("_choices", "_values")

    def __init__(self, values: Mapping[str, FloatArray], choices: Mapping[str, str] | None = None) -> None:
        self._values = MappingProxyType(dict(values))
        self._choices = MappingProxyType(dict(choices or {}))

    def __getitem__(self, name: str) -> FloatArray:
        return self._values[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._values)

    def __len__(self) -> int:
        return len(self._values)

    def __reduce__(self) -> tuple[Any, ...]:
        return type(self), (dict(self._values), dict(self._choices))

    def choice(self, name: str) -> str:
        """Return the word chosen for an own choice; KeyError where the card has none of that name."""
        return self._choices[name]

    @property
    def choices(self) -> Mapping[str, str]:
        """All words chosen, by name."""
        return self._choices


Values = Mapping[str, FloatArray | np.float64]


@dataclass(frozen=True, slots=True)
class Rates:
    """Orbit-averaged contributions to d(field)/dt.

    Attributes
    ----------
    of : mapping of str to array, shape batch [the field's unit per second]
        By field name, for instance ``Rates({"orbital_period": P_b_rate})``.
    """

    of: Values


@dataclass(frozen=True, slots=True)
class Predicted:
    """Predicted parameters.

    Attributes
    ----------
    values : mapping of str to array, shape batch [the unit declared on the card]
        By parameter name.
    """

    values: Values


@dataclass(frozen=True, slots=True)
class Delay:
    """What an effect adds to the time from emission to arrival.

    Attributes
    ----------
    seconds : array, shape batch + (times,) [s]
        At each emission time.
    rate : array, shape batch + (times,), or None [1]
        Its derivative by emission time, all or most of it. It makes the inversion from arrival to emission converge
        faster and is never needed; leave it out where the delay changes by less than 1e-6 s in a second.
    """

    seconds: FloatArray
    rate: FloatArray | None = None


@dataclass(frozen=True, slots=True)
class Caution:
    """A statement that a number is used outside, or near the edge of, its range of validity.

    Attributes
    ----------
    statement : str
        One sentence, with the size of the matter.
    unless : tuple of str
        Effects that take the reason away: with one of them active the caution is not given.
    """

    statement: str
    unless: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class ClosedFormTrack:
    """The exact evolution under one effect alone.

    Attributes
    ----------
    orbital_period, eccentricity : array, shape batch + (times,) [s], [1]
        At each time; NaN after merger.
    merger_time : array, shape batch [s]
        From the state's instant to merger.
    """

    orbital_period: FloatArray
    eccentricity: FloatArray
    merger_time: FloatArray | np.float64
