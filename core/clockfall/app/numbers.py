"""Findings as people and as programs read them. Units are converted here, on the way out, by clockfall.files.units."""

from __future__ import annotations

import math
from typing import Any, Final

from clockfall.analysis.outcome import Finding
from clockfall.files.shown import Shown
from clockfall.files.units import factor

TIME_UNITS: Final = ("Gyr", "Myr", "kyr", "yr", "d", "h", "min", "s")
"""Units in which people read a long time, the longest first."""


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
    return Shown.finding(finding, unit).text(unit if with_unit else "", power)


def time_unit(finding: Finding) -> str:
    """Return the unit in which a time reads well."""
    for unit in TIME_UNITS:
        if abs(finding.drawn.central) * factor(finding.unit, unit) >= 1.0:
            return unit
    return "s"


def unit_heading(unit: str, power: int = 0) -> str:
    """Return what stands in brackets at the head of a column, for instance ``[1e-12 s/s]``."""
    scale = f"1e{power}" if power else ""
    body = " ".join(part for part in (scale, unit) if part)
    return f"[{body}]" if body else ""
