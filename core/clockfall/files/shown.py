"""Numbers as people read them, in tables and in pictures."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from clockfall.analysis.outcome import Drawn, Finding
from clockfall.files.quantity import format_quantity
from clockfall.files.units import factor

EXACT_DIGITS: Final = 7
"""Digits shown of a number without uncertainty; --json has them all."""


@dataclass(frozen=True, slots=True)
class Shown:
    """A number in the unit in which it is shown.

    Attributes
    ----------
    value : float
        The central one; NaN where it has no meaning.
    plus, minus : float
        The 68.3 % interval is [value - minus, value + plus]; 0 without uncertainty.
    """

    value: float
    plus: float
    minus: float

    @classmethod
    def of(cls, drawn: Drawn, scale: float = 1.0) -> Shown:
        """Return a drawn number times a positive `scale`."""
        value = drawn.central * scale
        low, high = drawn.interval or (drawn.central, drawn.central)
        return cls(value, max(high * scale - value, 0.0), max(value - low * scale, 0.0))

    @classmethod
    def finding(cls, finding: Finding, unit: str = "") -> Shown:
        """Return a finding in a unit; by default in that in which people read it."""
        return cls.of(finding.drawn, factor(finding.unit, unit or finding.shown_in))

    @property
    def uncertainty(self) -> float:
        """Half the width of the interval."""
        return 0.5 * (self.plus + self.minus)

    def text(self, unit: str = "", power: int = 0) -> str:
        """Return it rounded to its uncertainty, divided by 10^power, which a heading then has to say."""
        if not math.isfinite(self.value):
            return "no meaning"
        value, plus, minus = (number / 10.0**power for number in (self.value, self.plus, self.minus))
        return format_quantity(value, plus, minus, unit, digits=EXACT_DIGITS, plain=power != 0)


def common_power(numbers: Iterable[Shown]) -> int:
    """Return the power of ten of the largest number, for a heading; 0 where plain numbers read well."""
    largest = max((abs(n.value) for n in numbers if math.isfinite(n.value)), default=0.0)
    power = math.floor(math.log10(largest)) if largest else 0
    return 0 if -3 <= power <= 5 else power


def aligned(texts: Sequence[str]) -> list[str]:
    """Pad numbers on both sides so that decimal points stand one below the other in type of even width."""

    def before_point(text: str) -> int:
        number = text.split("(")[0].split(" ")[0]
        return number.index(".") if "." in number else len(number)

    widest = max(map(before_point, texts), default=0)
    shifted = [" " * (widest - before_point(text)) + text for text in texts]
    longest = max(map(len, shifted), default=0)
    return [text.ljust(longest) for text in shifted]
