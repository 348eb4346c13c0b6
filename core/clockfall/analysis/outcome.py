"""What every analysis returns: findings, each a number with its draws, and what is to be said beside them."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from types import MappingProxyType
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from clockfall.binary.ranges import BoolArray, FloatArray

LOWER_QUANTILE: Final = 0.5 * math.erfc(1.0 / math.sqrt(2.0))
"""The normal distribution below -1 sigma, 0.158655; with its mirror it encloses 68.27 %."""


@dataclass(frozen=True)
class Drawn:
    """A number and its draws.

    Attributes
    ----------
    central : float
        The number with every input at its median; NaN where it has no meaning there.
    draws : array, shape (draws,)
        NaN marks a draw that was set aside; empty where nothing was drawn.
    """

    central: float
    draws: FloatArray

    @classmethod
    def from_batch(cls, values: FloatArray, possible: BoolArray | None = None) -> Drawn:
        """Split an array of shape (1 + draws,) into centre and draws; draws that are not `possible` are set aside."""
        draws = np.array(values[1:], dtype=np.float64)
        if possible is not None and not possible.all():
            draws[~possible[1:]] = np.nan
        draws.flags.writeable = False
        return cls(float(values[0]), draws)

    @cached_property
    def interval(self) -> tuple[float, float] | None:
        """The 68.3 % interval, between the quantiles 15.87 % and 84.13 % of the draws; None without spread."""
        ordered = np.sort(self.draws)  # faster than a partial order, and NaN comes last
        if ordered.size and not np.isfinite(ordered[[0, -1]]).all():
            ordered = ordered[np.isfinite(ordered)]
        if ordered.size < 2 or ordered[0] == ordered[-1]:
            return None
        return _quantile(ordered, LOWER_QUANTILE), _quantile(ordered, 1.0 - LOWER_QUANTILE)

    @property
    def uncertainty(self) -> float | None:
        """Half the width of the 68.3 % interval."""
        return None if self.interval is None else 0.5 * (self.interval[1] - self.interval[0])

    @property
    def set_aside(self) -> int:
        """How many draws have no meaning."""
        return int(np.sum(~np.isfinite(self.draws)))


def _quantile(ordered: FloatArray, share: float) -> float:
    """Return a quantile of sorted numbers, by straight lines between them: numpy's own default."""
    below = int(share * (ordered.size - 1))
    rest = share * (ordered.size - 1) - below
    low, high = ordered[below], ordered[min(below + 1, ordered.size - 1)]
    return float(low + rest * (high - low))


@dataclass(frozen=True, slots=True)
class Finding:
    """One number that an analysis found.

    Attributes
    ----------
    quantity : str
        What it is about, for instance ``orbital_period_rate``.
    role : str
        Which number of it: ``contribution``, ``predicted``, ``observed``, ``ratio``, ...; "" for the quantity itself.
    drawn : Drawn
        In `unit`.
    unit, shown_in : str
        Inside clockfall, and for people.
    meaning : str
        One line.
    effect, nature, sources :
        For a contribution or a prediction: whose it is, and where the formula was published.
    """

    quantity: str
    role: str
    drawn: Drawn
    unit: str
    shown_in: str
    meaning: str
    effect: str = ""
    nature: str = ""
    sources: tuple[str, ...] = ()

    @property
    def whose(self) -> str:
        """Whose contribution it is, in words."""
        return "given in the file" if self.effect == "given" else self.effect

    @property
    def name(self) -> str:
        """A name of its own within an outcome, fit for a file."""
        if self.role == "contribution":
            return f"{self.quantity}_by_{self.effect.replace('-', '_')}"
        return f"{self.quantity}_{self.role}" if self.role else self.quantity


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a table that an analysis found, such as a delay at many times.

    Attributes
    ----------
    name : str
        Fit for a file.
    values : array, shape (rows,)
        float64 in `unit`, or int64.
    unit, shown_in : str
        Inside clockfall, and for people.
    meaning : str
        One line.
    effect, nature, sources :
        As of a `Finding`.
    """

    name: str
    values: npt.NDArray[Any]
    unit: str
    shown_in: str
    meaning: str
    effect: str = ""
    nature: str = ""
    sources: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class UsedEffect:
    """An effect that took part: who, from where, and with which own parameters (as text)."""

    name: str
    version: str
    distribution: str
    settings: str = ""


@dataclass(frozen=True, slots=True)
class Said:
    """A statement beside the numbers, and the effect it is about ("" where it is about none)."""

    effect: str
    text: str


@dataclass(frozen=True, slots=True)
class Outcome:
    """What an analysis found.

    Attributes
    ----------
    findings : tuple of Finding
        In the order in which people read them.
    facts : mapping of str to str
        What is not a number, such as where the masses are from.
    used, idle, failed, cautions : tuples
        The effects that took part; those that did not, and why; those that broke, and how; statements on validity.
    draws, seed : int
        Of the sample.
    columns : tuple of Column
        A table, all columns of one length; () for none.
    """

    findings: tuple[Finding, ...]
    facts: Mapping[str, str]
    used: tuple[UsedEffect, ...]
    idle: tuple[Said, ...]
    failed: tuple[Said, ...]
    cautions: tuple[Said, ...]
    draws: int
    seed: int
    columns: tuple[Column, ...] = ()
    _index: Mapping[tuple[str, str], Finding] = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        index = {(f.quantity, f.role): f for f in self.findings if f.role != "contribution"}
        object.__setattr__(self, "_index", MappingProxyType(index))

    def get(self, quantity: str, role: str = "") -> Finding | None:
        """Return a finding by quantity and role, or None."""
        return self._index.get((quantity, role))

    def __getitem__(self, key: tuple[str, str]) -> Finding:
        try:
            return self._index[key]
        except KeyError:
            known = ", ".join(f"{quantity}/{role}" for quantity, role in self._index)
            raise KeyError(f"no finding {key[0]}/{key[1]}; there are {known}") from None

    def column(self, name: str) -> Column:
        """Return a column of the table; KeyError where there is none of that name."""
        return next(column for column in self.columns if column.name == name)

    def contributions(self, quantity: str) -> tuple[Finding, ...]:
        """Return the effects' contributions to `quantity`."""
        return tuple(f for f in self.findings if f.quantity == quantity and f.role == "contribution")
