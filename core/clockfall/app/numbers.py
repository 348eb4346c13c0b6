"""Findings as people and as programs read them. Units are converted here, on the way out, by clockfall.files.units."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import Any, Final

from clockfall.analysis.outcome import Finding
from clockfall.files.quantity import format_quantity
from clockfall.files.units import factor

TIME_UNITS: Final = ("Gyr", "Myr", "kyr", "yr", "d", "h", "min", "s")
"""Units in which people read a long time, the longest first."""

EXACT_DIGITS: Final = 7
"""Digits shown of a number without uncertainty; --json has them all."""


def finite(number: float) -> float | None:
    """Return the number, or None where it has no meaning; JSON has no NaN."""
    return number if math.isfinite(number) else None


def as_json(finding: Finding, unit: str = "") -> dict[str, Any]:
    """Return a number as programs read it: value, uncertainty, 68.3 % interval and unit, at full precision."""
    unit = unit or finding.shown_in
    scale = factor(finding.unit, unit)
    interval = finding.drawn.interval
    uncertainty = finding.drawn.uncertainty
    return {
        "value": finite(finding.drawn.central * scale),
        "uncertainty": None if uncertainty is None else uncertainty * scale,
        "interval": None if interval is None else [interval[0] * scale, interval[1] * scale],
        "unit": unit,
    }


def as_text(finding: Finding, unit: str = "", power: int = 0, *, with_unit: bool = True) -> str:
    """Return a number as people read it, rounded to its uncertainty.

    Parameters
    ----------
    unit : str
        The unit to show it in; default `finding.shown_in`.
    power : int
        The number is divided by 10^power, which a heading then has to say.
    """
    unit = unit or finding.shown_in
    if not math.isfinite(finding.drawn.central):
        return "no meaning"
    scale = factor(finding.unit, unit) / 10.0**power
    value = finding.drawn.central * scale
    low, high = finding.drawn.interval or (finding.drawn.central, finding.drawn.central)
    plus, minus = max(high * scale - value, 0.0), max(value - low * scale, 0.0)
    shown = unit if with_unit else ""
    return format_quantity(value, plus, minus, shown, digits=EXACT_DIGITS, plain=power != 0)


def time_unit(finding: Finding) -> str:
    """Return the unit in which a time reads well."""
    for unit in TIME_UNITS:
        if abs(finding.drawn.central) * factor(finding.unit, unit) >= 1.0:
            return unit
    return "s"


def common_power(findings: Iterable[Finding]) -> int:
    """Return the power of ten of the largest number, for a column's heading; 0 where plain numbers read well."""
    sizes = [abs(f.drawn.central) * factor(f.unit, f.shown_in) for f in findings]
    largest = max((size for size in sizes if math.isfinite(size)), default=0.0)
    if largest == 0.0:
        return 0
    power = math.floor(math.log10(largest))
    return 0 if -3 <= power <= 5 else power


def aligned(texts: Sequence[str]) -> list[str]:
    """Pad numbers on the left so that their decimal points stand one below the other."""

    def before_point(text: str) -> int:
        number = text.split("(")[0].split(" ")[0]
        return number.index(".") if "." in number else len(number)

    widest = max((before_point(text) for text in texts), default=0)
    return [" " * (widest - before_point(text)) + text for text in texts]


def effect_label(finding: Finding) -> str:
    """Return whose contribution a finding is, in words for a table."""
    return "given in the file" if finding.effect == "given" else finding.effect


def unit_heading(unit: str, power: int = 0) -> str:
    """Return what stands in brackets at the head of a column, for instance ``[1e-12 s/s]``."""
    scale = f"1e{power}" if power else ""
    body = " ".join(part for part in (scale, unit) if part)
    return f"[{body}]" if body else ""
