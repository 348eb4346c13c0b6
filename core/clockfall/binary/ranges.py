"""The range in which a number has a meaning, and the check of arrays against it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from clockfall.errors import OutOfRange

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Range:
    """An interval of the real line; an end is open where `above` or `below` names it.

    Attributes
    ----------
    at_least, above : float
        Lower end, closed or open; -inf for none.
    at_most, below : float
        Upper end, closed or open; inf for none.
    """

    at_least: float = -math.inf
    above: float = -math.inf
    below: float = math.inf
    at_most: float = math.inf

    def holds(self, values: npt.ArrayLike) -> BoolArray:
        """Return where `values` are finite and inside the range; shape of `values` [bool]."""
        x = np.asarray(values, dtype=np.float64)
        inside = np.isfinite(x)
        with np.errstate(invalid="ignore"):  # comparisons with NaN are false, which is what is wanted
            inside &= (x >= self.at_least) & (x <= self.at_most)
            if self.above > -math.inf:
                inside &= x > self.above
            if self.below < math.inf:
                inside &= x < self.below
        return inside

    def holds_all(self, values: FloatArray) -> bool:
        """Whether all `values` are finite and inside: all lie in an interval if the least and the greatest do."""
        # a NaN is both the least and the greatest
        return not values.size or bool(self.holds([values.min(), values.max()]).all())

    def text(self, name: str = "x", unit: str = "") -> str:
        """Return the range in words, for instance ``0 <= eccentricity < 1``."""
        low = f"{self.above:g} < " if self.above > -math.inf else ""
        low = f"{self.at_least:g} <= " if self.at_least > -math.inf else low
        high = f" < {self.below:g}" if self.below < math.inf else ""
        high = f" <= {self.at_most:g}" if self.at_most < math.inf else high
        body = f"{low}{name}{high}" if low or high else "a finite number"
        return f"{body} [{unit}]" if unit else body

    def check(self, name: str, values: npt.ArrayLike, unit: str = "") -> None:
        """Raise OutOfRange naming the first element of `values` that is not inside the range."""
        x = np.asarray(values, dtype=np.float64)
        if not self.holds_all(x):
            first = tuple(int(i) for i in np.argwhere(~self.holds(x))[0])
            where = f" at index {first}" if first else ""
            raise OutOfRange(name, self.text(name, unit), f"{float(x[first])!r}{where}")


ANY = Range()
POSITIVE = Range(above=0.0)


def real_array(what: str, values: npt.ArrayLike) -> FloatArray:
    """Return `values` as float64; raises OutOfRange for what is no real number (bool, text, complex)."""
    array = np.asarray(values)
    if array.dtype.kind not in "fiu":
        raise OutOfRange(what, "real numbers", f"an array of type {array.dtype}")
    return array.astype(np.float64, copy=False)


def common_shape(**shapes: tuple[int, ...]) -> tuple[int, ...]:
    """Return the shape to which all broadcast; raises OutOfRange, naming them, where they do not."""
    try:
        return np.broadcast_shapes(*shapes.values())
    except ValueError:
        found = ", ".join(f"{name} {shape}" for name, shape in shapes.items())
        raise OutOfRange("arguments", "shapes that broadcast together", found) from None
