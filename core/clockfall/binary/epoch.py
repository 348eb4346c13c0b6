"""Instants and counts of orbits, each as a whole number and a fraction.

A Modified Julian Date in one double resolves 0.6 microseconds, and the orbits of decades counted in one double lose
nine digits of the phase. Both are therefore kept as a pair: a whole number, int64, and a fraction in [0, 1), float64.
Instants are barycentric dynamical time (TDB); the days have 86400 s each.
"""

from __future__ import annotations

import decimal
from dataclasses import dataclass
from typing import Any, Self, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from clockfall.binary.constants import SECONDS_PER_DAY
from clockfall.binary.ranges import ANY, FloatArray, Range, common_shape, real_array
from clockfall.errors import OutOfRange

__all__ = ["Epoch", "OrbitCount", "orbits_elapsed"]

IntArray: TypeAlias = NDArray[np.int64]

# Whole numbers up to here, and the difference of any two of them, are exact as doubles.
_LARGEST_WHOLE = 2**52
_WHOLE = Range(at_least=-float(_LARGEST_WHOLE), at_most=float(_LARGEST_WHOLE))
_SECONDS = Range(at_least=-_LARGEST_WHOLE * SECONDS_PER_DAY, at_most=_LARGEST_WHOLE * SECONDS_PER_DAY)
# The upper end keeps the error-free product far from overflow.
_PERIOD = Range(above=0.0, at_most=1e20)

# Splits a double into two halves of 26 bits.
_SPLITTER = 2.0**27 + 1.0

# The last digit of a fraction stands at most 1074 places after the point, that of the smallest double, 2**-1074; days
# have 16 digits before it.
_DIGITS = 1100
_LARGEST_DECIMAL_PLACE = 2000


class _Pair:
    """What a whole number and a fraction have in common, whatever they count."""

    __slots__ = ()

    def _parts(self) -> tuple[IntArray, FloatArray]:
        raise NotImplementedError

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape of both parts."""
        return self._parts()[0].shape

    def broadcast_to(self, shape: tuple[int, ...]) -> Self:
        """Return the same values repeated to `shape`.

        Parameters
        ----------
        shape : tuple of int
            A shape to which this one can be broadcast.

        Returns
        -------
        same class, shape `shape`

        Raises
        ------
        OutOfRange
            The present shape cannot be broadcast to `shape`.
        """
        try:
            whole, fraction = (np.broadcast_to(part, shape) for part in self._parts())
        except ValueError:
            raise OutOfRange("shape", f"one that {self.shape} broadcasts to", f"{shape}") from None
        return type(self)(whole, fraction)  # type: ignore[call-arg]  # both subclasses are made from two parts

    def __eq__(self, other: object) -> bool:
        if type(other) is not type(self):
            return NotImplemented
        return all(np.array_equal(mine, its) for mine, its in zip(self._parts(), other._parts(), strict=True))

    def __hash__(self) -> int:
        whole, fraction = self._parts()
        return hash((whole.shape, whole.tobytes(), fraction.tobytes()))

    def __reduce__(self) -> tuple[Any, ...]:
        # The constructor makes the arrays read-only again, which unpickling the arrays themselves would not.
        return type(self), self._parts()


@dataclass(frozen=True, slots=True, init=False, eq=False, repr=False)
class Epoch(_Pair):
    """An instant, or an array of instants: Modified Julian Date, TDB.

    Two epochs are equal if they have the same shape and the same instants.

    Parameters
    ----------
    day : array_like of int, any shape [d]
        Whole days, at most 2**52 in magnitude.
    fraction : array_like, broadcasts with day [d], optional
        Fraction of the day. Any finite number; whole days in it are carried over to `day`.

    Attributes
    ----------
    day : ndarray of int64, common shape of the arguments [d]
        Whole days; a read-only copy.
    fraction : ndarray of float64, common shape of the arguments [d]
        Fraction in [0, 1); a read-only copy. Its resolution is 1e-16 d = 1e-11 s.

    Raises
    ------
    OutOfRange
        `day` of another type than int, a value not finite or too large, or shapes that do not broadcast together.
        A ValueError.
    """

    day: IntArray
    fraction: FloatArray

    def __init__(self, day: ArrayLike, fraction: ArrayLike = 0.0) -> None:
        whole, rest = _carried("day", day, fraction)
        object.__setattr__(self, "day", whole)
        object.__setattr__(self, "fraction", rest)

    def _parts(self) -> tuple[IntArray, FloatArray]:
        return self.day, self.fraction

    def __repr__(self) -> str:
        return f"Epoch(day={_listed(self.day)}, fraction={_listed(self.fraction)})"

    @classmethod
    def from_mjd(cls, mjd: ArrayLike) -> Self:
        """Make an epoch from Modified Julian Dates that are one number each.

        Parameters
        ----------
        mjd : array_like, any shape [d]
            Finite, at most 2**52 in magnitude. Near the present the steps of a double are 0.6 microseconds.

        Returns
        -------
        Epoch, shape of mjd

        Raises
        ------
        OutOfRange
            A value that is not finite or too large. A ValueError.
        """
        return cls(0, mjd)

    @classmethod
    def from_decimal(cls, mjd: decimal.Decimal) -> Self:
        """Make an epoch from a date with any number of digits.

        Parameters
        ----------
        mjd : decimal.Decimal, scalar [d]
            Finite, at most 2**52 in magnitude and 2000 decimal places.

        Returns
        -------
        Epoch, shape ()
            The day is exact, the fraction correctly rounded.

        Raises
        ------
        OutOfRange
            No Decimal, not finite, too large or too long. A ValueError.
        """
        if not isinstance(mjd, decimal.Decimal):
            raise OutOfRange("epoch", "a decimal.Decimal [d]", repr(mjd), "use Epoch.from_mjd for a float")
        if not mjd.is_finite() or mjd.copy_abs() > _LARGEST_WHOLE:
            raise OutOfRange("epoch", "a finite date of magnitude 2**52 at most [d]", str(mjd))
        if int(mjd.as_tuple().exponent) < -_LARGEST_DECIMAL_PLACE:
            raise OutOfRange("epoch", f"at most {_LARGEST_DECIMAL_PLACE} decimal places", f"{mjd:.3g}")
        numerator, denominator = mjd.as_integer_ratio()
        day, rest = divmod(numerator, denominator)
        return cls(day, rest / denominator)  # the quotient of two ints is correctly rounded

    def to_mjd(self) -> FloatArray:
        """Return the dates as one number each, which loses digits: near the present its steps are 0.6 microseconds.

        Returns
        -------
        ndarray, shape of the epoch [d]
            A numpy scalar if the shape is ().
        """
        return _summed(self)

    def to_decimal(self) -> decimal.Decimal:
        """Return the date of a single instant, exactly.

        Returns
        -------
        decimal.Decimal, scalar [d]
            Every digit of the pair, whatever the current decimal context.

        Raises
        ------
        OutOfRange
            The shape is not (). A ValueError.
        """
        if self.shape:
            raise OutOfRange("shape of the epoch", "()", f"{self.shape}", "take one element")
        exact = decimal.Context(prec=_DIGITS, traps=[decimal.Inexact])
        return exact.add(decimal.Decimal(int(self.day)), decimal.Decimal(float(self.fraction)))

    def plus_seconds(self, seconds: ArrayLike) -> Epoch:
        """Return the instants a while later.

        Parameters
        ----------
        seconds : array_like, broadcasts with the epoch [s]
            Finite, at most 2**52 days in magnitude; negative is earlier.

        Returns
        -------
        Epoch, common shape of epoch and seconds
            Right to 1e-11 s, the resolution of the fraction, however long the while.

        Raises
        ------
        OutOfRange
            A value that is not finite or too large, or shapes that do not broadcast together. A ValueError.
        """
        later = real_array("seconds", seconds)
        _SECONDS.check("seconds", later, "s")
        common_shape(epoch=self.shape, seconds=later.shape)
        # The remainder is exact, and so is the whole number of days that is left.
        rest = np.fmod(later, SECONDS_PER_DAY)
        days = ((later - rest) / SECONDS_PER_DAY).astype(np.int64)
        return Epoch(self.day + days, self.fraction + rest / SECONDS_PER_DAY)

    def seconds_since(self, other: Epoch) -> FloatArray:
        """Return the time from another epoch to this one.

        Parameters
        ----------
        other : Epoch, broadcasts with this one
            The earlier instants; where it is later the result is negative.

        Returns
        -------
        ndarray, common shape of both epochs [s]
            Right to 1 unit in its own last place. A numpy scalar if both have shape ().

        Raises
        ------
        OutOfRange
            Shapes that do not broadcast together. A ValueError.
        """
        days, low = _days_between(other, self)
        return (days * SECONDS_PER_DAY + low * SECONDS_PER_DAY)[()]


@dataclass(frozen=True, slots=True, init=False, eq=False, repr=False)
class OrbitCount(_Pair):
    """A number of orbits, or an array of numbers.

    Two counts are equal if they have the same shape and the same numbers.

    Parameters
    ----------
    whole : array_like of int, any shape [orbits]
        Whole orbits, at most 2**52 in magnitude.
    fraction : array_like, broadcasts with whole [orbits], optional
        Any finite number; whole orbits in it are carried over to `whole`.

    Attributes
    ----------
    whole : ndarray of int64, common shape of the arguments [orbits]
        Whole orbits, rounded down; a read-only copy.
    fraction : ndarray of float64, common shape of the arguments [orbits]
        Fraction in [0, 1); a read-only copy.

    Raises
    ------
    OutOfRange
        `whole` of another type than int, a value not finite or too large, or shapes that do not broadcast together.
        A ValueError.
    """

    whole: IntArray
    fraction: FloatArray

    def __init__(self, whole: ArrayLike, fraction: ArrayLike = 0.0) -> None:
        carried, rest = _carried("whole", whole, fraction)
        object.__setattr__(self, "whole", carried)
        object.__setattr__(self, "fraction", rest)

    def _parts(self) -> tuple[IntArray, FloatArray]:
        return self.whole, self.fraction

    def __repr__(self) -> str:
        return f"OrbitCount(whole={_listed(self.whole)}, fraction={_listed(self.fraction)})"

    def to_float(self) -> FloatArray:
        """Return each count as one number, which loses digits of the fraction where the count is large.

        Returns
        -------
        ndarray, shape of the count [orbits]
            A numpy scalar if the shape is ().
        """
        return _summed(self)


def orbits_elapsed(start: Epoch, end: Epoch, period: ArrayLike) -> OrbitCount:
    """Count the orbits of constant period between two epochs.

    Parameters
    ----------
    start, end : Epoch, broadcast with each other
        The instants. Where `end` is earlier the count is negative: whole is rounded down, fraction stays in [0, 1).
    period : array_like, broadcasts with the epochs [s]
        Orbital period, 0 < period <= 1e20 s, and long enough that at most 2**52 orbits elapse.

    Returns
    -------
    OrbitCount, common shape of the arguments [orbits]
        Right to 2e-16 orbits for the very doubles given, whatever the number of orbits.

    Raises
    ------
    OutOfRange
        A period outside its range, too many orbits, or shapes that do not broadcast together. A ValueError.

    Notes
    -----
    The elapsed time and the product of whole orbits and period are carried as unevaluated sums of two doubles:
    T. J. Dekker, Numer. Math. 18, 224 (1971).
    """
    P = real_array("period", period)
    _PERIOD.check("period", P, "s")
    common_shape(start=start.shape, end=end.shape, period=P.shape)
    days, days_low = _days_between(start, end)
    seconds, seconds_low = two_product(days, SECONDS_PER_DAY)
    seconds_low += days_low * SECONDS_PER_DAY
    with np.errstate(over="ignore"):
        whole = np.rint(seconds / P)
    _WHOLE.check("orbits elapsed", whole, "orbits")
    product, product_low = two_product(whole, P)
    # Both parts of the difference are exact or nearly so, as the product is the multiple of P nearest to the time.
    rest = (seconds - product) + (seconds_low - product_low)
    return OrbitCount(whole.astype(np.int64), rest / P)


def _carried(what: str, whole: ArrayLike, fraction: ArrayLike) -> tuple[IntArray, FloatArray]:
    """Check a pair, carry so that the fraction lies in [0, 1), and lock both parts."""
    wholes = np.asarray(whole)
    if wholes.dtype.kind not in "iu":
        raise OutOfRange(what, "integers", f"an array of type {wholes.dtype}", "put the rest into the fraction")
    _WHOLE.check(what, wholes)
    fractions = real_array("fraction", fraction)
    ANY.check("fraction", fractions)
    _WHOLE.check("fraction", fractions)
    common_shape(**{what: wholes.shape, "fraction": fractions.shape})
    carry = np.floor(fractions)
    rest = fractions - carry
    # A negative fraction below half a unit in the last place of 1 rounds to 1 here.
    full = rest >= 1.0
    total = wholes.astype(np.int64) + carry.astype(np.int64) + full
    _WHOLE.check(what, total)
    rest = np.broadcast_to(np.where(full, 0.0, rest), total.shape)
    return _locked(total, np.int64), _locked(rest, np.float64)


def _locked(values: Any, dtype: Any) -> Any:
    """Copy into an array that nobody can write to: a view of read-only memory cannot be made writeable again."""
    array = np.array(values, dtype=dtype)
    array.flags.writeable = False
    return array.view()


def _listed(part: IntArray | FloatArray) -> str:
    return np.array2string(part, separator=", ", threshold=6, edgeitems=2, floatmode="unique").replace("\n", "")


def _summed(pair: _Pair) -> FloatArray:
    whole, fraction = pair._parts()
    return (whole + fraction)[()]


def _days_between(start: Epoch, end: Epoch) -> tuple[FloatArray, FloatArray]:
    """Return the days from start to end as the sum of two doubles, right to 1e-32 of the first."""
    common_shape(start=start.shape, end=end.shape)
    whole = np.asarray(end.day - start.day, dtype=np.float64)
    fraction, fraction_low = two_sum(end.fraction, -start.fraction)
    days, days_low = two_sum(whole, fraction)
    return days, days_low + fraction_low


def two_sum(a: FloatArray, b: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return a + b, rounded, and its exact error.

    D. E. Knuth, The Art of Computer Programming, vol. 2, section 4.2.2.
    """
    total = a + b
    part = total - a
    return total, (a - (total - part)) + (b - part)


def two_product(a: FloatArray, b: FloatArray | float) -> tuple[FloatArray, FloatArray]:
    """Return a b, rounded, and its exact error: T. J. Dekker, Numer. Math. 18, 224 (1971)."""
    product = a * b
    a_high, a_low = halves(a)
    b_high, b_low = halves(b)
    return product, ((a_high * b_high - product) + a_high * b_low + a_low * b_high) + a_low * b_low


def halves(a: FloatArray | float) -> tuple[Any, Any]:
    """Return two numbers of 26 bits whose sum is exactly a: Dekker (1971), after G. W. Veltkamp."""
    scaled = _SPLITTER * a
    high = scaled - (scaled - a)
    return high, a - high
