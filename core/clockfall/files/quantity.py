"""Quantities as text: a number, its uncertainty as papers print it, and a unit.

Reading is exact, on decimal digits. Printing rounds to the uncertainty as the GUM advises (JCGM 100:2008, 7.2.6): at
most two significant digits of the uncertainty, and the value to the same place.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, Decimal
from typing import Final

from clockfall.errors import BadInput

LONGEST: Final = 200
"""The most characters of a quantity's text."""

LARGEST_EXPONENT: Final = 300
"""The largest power of ten, so that every number is a double."""

_NUMBER: Final = r"(?:\d+(?:\.\d*)?|\.\d+)"
_QUANTITY: Final = re.compile(
    rf"""
    (?P<outer>\()?\s*
    (?P<sign>[+-]?)\s?(?P<number>{_NUMBER})(?P<own_power>[eE][+-]?\d+)?
    (?:
        \(\s*(?P<concise>{_NUMBER})\s*\)
      | \(\s*\+\s*(?P<concise_plus>{_NUMBER})\s*,?\s*-\s*(?P<concise_minus>{_NUMBER})\s*\)
      | \s*\+/-\s*(?P<even>{_NUMBER}(?:[eE][+-]?\d+)?)
      | \s*\+\s*(?P<plus>{_NUMBER}(?:[eE][+-]?\d+)?)\s*,?\s*-\s*(?P<minus>{_NUMBER}(?:[eE][+-]?\d+)?)
      | \s*-\s*(?P<minus_first>{_NUMBER}(?:[eE][+-]?\d+)?)\s*,?\s*\+\s*(?P<plus_second>{_NUMBER}(?:[eE][+-]?\d+)?)
    )?
    \s*(?P<closing>\))?(?P<power>[eE][+-]?\d+)?
    (?:\s*(?P<unit>[A-Za-z%][^()]*|1/[A-Za-z][^()]*))?
    """,
    re.VERBOSE,
)


class NotAQuantity(BadInput):
    """Text that cannot be read as a quantity.

    Attributes
    ----------
    text, hint : str
        What was found, and what to do.
    """

    def __init__(self, text: str, hint: str = "") -> None:
        self.text = text
        self.hint = hint
        shown = text if len(text) <= 60 else f"{text[:57]}..."
        super().__init__(f"expected a quantity such as '1.234(5) d', found {shown!r}" + (f" ({hint})" if hint else ""))


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its 68.3 % interval [value - minus, value + plus] and its unit, exactly as written.

    Attributes
    ----------
    value, plus, minus : Decimal
        `plus` and `minus` are 0 where no uncertainty is given.
    unit : str
        "" where none is given.
    """

    value: Decimal
    plus: Decimal
    minus: Decimal
    unit: str


def parse_quantity(text: str) -> Quantity:
    """Read a quantity.

    Accepted are ``1.23``, ``1.2e-5``, ``0.2185(21) d``, ``-2.423(1)e-12``, ``5.21(1.30) s``, ``0.9999(+9-10)``,
    ``1.9 +/- 0.2 kpc``, ``1.9 ± 0.2 kpc``, ``1.322 +0.006 -0.004 Msun``, ``(2.5 +/- 0.1)e-3 s``.

    Raises
    ------
    NotAQuantity
        Anything else, with a hint where the slip is a known one.
    """
    if len(text) > LONGEST:
        raise NotAQuantity(text, f"more than {LONGEST} characters")
    plain = text.strip().replace("\u2212", "-").replace("±", "+/-")
    match = _QUANTITY.fullmatch(plain)
    if match is None or not plain.isascii():
        raise NotAQuantity(text, _hint(plain))
    part = match.groupdict()
    if bool(part["outer"]) != bool(part["closing"]):
        raise NotAQuantity(text, "a bracket is missing")
    if part["own_power"] and (part["power"] or part["concise"] or part["concise_plus"]):
        raise NotAQuantity(text, "write the power of ten after the uncertainty, as in 1.23(4)e-5")
    if part["power"] and not part["outer"] and (part["even"] or part["plus"] or part["minus_first"]):
        raise NotAQuantity(text, "bracket the numbers before their power of ten, as in (1.2 +/- 0.3)e-5")
    numbers = " ".join(text or "" for name, text in part.items() if name != "unit")
    if any(len(power) > 5 or abs(int(power)) > LARGEST_EXPONENT for power in re.findall(r"[eE]([+-]?\d+)", numbers)):
        raise NotAQuantity(text, f"a power of ten beyond {LARGEST_EXPONENT}")
    scale = Decimal(f"1{part['power'] or ''}")
    value = Decimal(f"{part['sign']}{part['number']}{part['own_power'] or ''}")
    plus, minus = _uncertainty(part)
    return Quantity(value * scale, plus * scale, minus * scale, (part["unit"] or "").strip())


def _uncertainty(part: dict[str, str | None]) -> tuple[Decimal, Decimal]:
    """Return the two sides of the interval, before any common power of ten."""
    if part["concise"]:
        both = _concise(part["concise"], part["number"] or "")
        return both, both
    if part["concise_plus"] and part["concise_minus"]:
        number = part["number"] or ""
        return _concise(part["concise_plus"], number), _concise(part["concise_minus"], number)
    if part["even"]:
        return Decimal(part["even"]), Decimal(part["even"])
    plus, minus = part["plus"] or part["plus_second"], part["minus"] or part["minus_first"]
    return Decimal(plus or 0), Decimal(minus or 0)


def _concise(digits: str, number: str) -> Decimal:
    """Return what digits in brackets mean: units of the number's last place, or themselves with a decimal point."""
    if "." in digits:
        return Decimal(digits)
    decimals = len(number.partition(".")[2])
    return Decimal(digits).scaleb(-decimals)


def _hint(text: str) -> str:
    if not text:
        return "the text is empty"
    if re.search(r"\d,\d", text):
        return "write a decimal point, not a comma"
    if text.count("(") != text.count(")"):
        return "a bracket is missing"
    if re.search(r"\b(nan|inf)", text, re.IGNORECASE):
        return "leave out what is not known"
    if re.match(r"[+-]?\d+:\d", text):
        return "sexagesimal angles are read for right_ascension and declination alone"
    if re.search(r"\+/-\s*-", text):
        return "an uncertainty is not negative"
    return ""


def format_quantity(
    value: float, plus: float = 0.0, minus: float = 0.0, unit: str = "", *, digits: int = 10, plain: bool = False
) -> str:
    """Print a quantity, rounded to its uncertainty; `parse_quantity` reads it back.

    Parameters
    ----------
    value, plus, minus : float
        Finite; the 68.3 % interval is [value - minus, value + plus].
    digits : int
        Significant digits of a value without uncertainty.
    plain : bool
        Without a power of ten, down to 1e-12; for columns whose heading has one.

    Returns
    -------
    str
        ``4.226585(40) deg/yr``; with a power of ten where the number is very small or large; as
        ``1.3220 +0.0060 -0.0040 Msun`` where the two sides differ by more than a tenth.
    """
    if not all(math.isfinite(number) for number in (value, plus, minus)):
        raise NotAQuantity(f"{value} +{plus} -{minus}", "only finite numbers can be printed")
    largest = max(plus, minus)
    least = -12 if plain else -4
    body = _exact(value, digits, least) if largest == 0.0 else _rounded(value, plus, minus, least)
    return f"{body} {unit}".strip()


def _exact(value: float, digits: int, least: int) -> str:
    """Print a number without uncertainty to some digits, in plain notation where that reads well."""
    if value == 0.0:
        return "0"
    decimal = Decimal(f"{value:.{digits - 1}e}")
    power = decimal.adjusted()
    if least <= power < digits:
        return f"{decimal.normalize():f}"
    return f"{decimal.scaleb(-power).normalize():f}e{power}"


def _rounded(value: float, plus: float, minus: float, least: int) -> str:
    place = _place(value, min(side for side in (plus, minus) if side > 0.0))
    rounded = [_in_units(side, place) for side in (plus, minus)]
    # decided on what would be printed, so that what is read back is printed alike
    lopsided = abs(rounded[0] - rounded[1]) > max(rounded) / 10
    sides = (plus, minus) if lopsided else (0.5 * (plus + minus),) * 2
    if not lopsided:
        place = _place(value, sides[0])
    power = _power(value, max(sides), place, least)
    number, upper, lower = (_in_units(x, place) for x in (value, *sides))
    decimals = power - place
    tail = f"e{power}" if power else ""
    shown = f"{number.scaleb(-decimals):f}"
    if not lopsided:
        return f"{shown}({max(int(upper), 1)}){tail}"
    sides_shown = f"+{upper.scaleb(-decimals):f} -{lower.scaleb(-decimals):f}"
    return f"({shown} {sides_shown}){tail}" if power else f"{shown} {sides_shown}"


def _place(value: float, uncertainty: float) -> int:
    """Return the power of ten of the last digit to print."""
    # an uncertainty below the last digit of a double says no more than that digit
    return max(_last_place(uncertainty), _last_place(value) - 15 if value else -400)


def _in_units(x: float, place: int) -> Decimal:
    """Return x in units of a power of ten, rounded to a whole number of them."""
    return (Decimal(repr(x)) / Decimal(1).scaleb(place)).quantize(Decimal(1), ROUND_HALF_EVEN)


def _last_place(uncertainty: float) -> int:
    """Return the power of ten of the second significant digit of an uncertainty, as it is after rounding."""
    return Decimal(f"{uncertainty:.1e}").adjusted() - 1


def _power(value: float, uncertainty: float, place: int, least: int) -> int:
    """Return the power of ten to be split off: 0 where plain notation reads well and shows every digit."""
    leading = Decimal(repr(max(abs(value), uncertainty))).adjusted()
    if least <= leading <= 6 and place <= 0:
        return 0
    return leading
