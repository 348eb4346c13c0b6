"""Quantities as text: a number, its uncertainty as papers print it, and a unit.

Reading is exact, on decimal digits. Printing rounds to the uncertainty as the GUM advises (JCGM 100:2008, 7.2.6): at
most two significant digits of the uncertainty, and the value to the same place.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, Context, Decimal, localcontext
from typing import Final

from clockfall.errors import BadInput

LONGEST: Final = 200
"""The most characters of a quantity's text."""

LARGEST_EXPONENT: Final = 400
"""The largest power of ten: beyond that of any double, and small enough to compute with."""

DOUBLE_DIGITS: Final = 17
"""Significant digits that tell any two doubles apart; more say nothing."""

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
    part = {name: found or "" for name, found in match.groupdict().items()}
    if slip := _slip(part):
        raise NotAQuantity(text, slip)
    power = _power_of(part["power"])
    value = _decimal(part["sign"] + part["number"], power + _power_of(part["own_power"]))
    plus, minus = _uncertainty(part, power)
    if any(math.isinf(float(number)) for number in (value, plus, minus)):
        raise NotAQuantity(text, "beyond the largest double, 1.8e308")
    return Quantity(value, plus, minus, part["unit"].strip())


def _slip(part: dict[str, str]) -> str:
    """Say what is wrong with text of the right shape; "" for nothing."""
    if bool(part["outer"]) != bool(part["closing"]):
        return "a bracket is missing"
    if part["own_power"] and (part["power"] or part["concise"] or part["concise_plus"]):
        return "write the power of ten after the uncertainty, as in 1.23(4)e-5"
    if re.match(r"x\s*10", part["unit"]):
        return "write a power of ten as e-5"
    sides = [part[name] for name in ("even", "plus", "minus", "minus_first", "plus_second") if part[name]]
    bracketed = "bracket the numbers before their power of ten, as in (1.2 +/- 0.3)e-5"
    if sides and part["power"] and not part["outer"]:
        return bracketed
    # 1.2 +0.3 -0.4e-5 would be read otherwise than it is meant; a central 0 needs no power of ten
    written = [bool(part["own_power"])] if float(part["number"]) else []
    written += ["e" in side.lower() for side in sides]
    if sides and any(written) and not all(written):
        return f"{bracketed}, or give every number its own"
    powers = re.findall(r"[eE]([+-]?\d+)", " ".join([part["own_power"], part["power"], *sides]))
    if any(len(power) > 5 or abs(int(power)) > LARGEST_EXPONENT for power in powers):
        return f"a power of ten beyond {LARGEST_EXPONENT}"
    return ""


def _power_of(text: str) -> int:
    """Return the power of ten that ``e-5`` or nothing stands for."""
    return int(text[1:] or 0)


def _decimal(number: str, power: int = 0) -> Decimal:
    """Return number x 10^power from its digits: arithmetic would round to the context's precision."""
    plain, _, own = number.lower().partition("e")
    return Decimal(f"{plain}e{power + int(own or 0)}")


def _uncertainty(part: dict[str, str], power: int) -> tuple[Decimal, Decimal]:
    """Return the two sides of the interval, times the common power of ten."""
    number = part["number"]
    if part["concise"]:
        both = _concise(part["concise"], number, power)
        return both, both
    if part["concise_plus"]:
        return _concise(part["concise_plus"], number, power), _concise(part["concise_minus"], number, power)
    if part["even"]:
        both = _decimal(part["even"], power)
        return both, both
    plus, minus = part["plus"] or part["plus_second"], part["minus"] or part["minus_first"]
    return _decimal(plus or "0", power), _decimal(minus or "0", power)


def _concise(digits: str, number: str, power: int) -> Decimal:
    """Return what digits in brackets mean: units of the number's last place, or themselves with a decimal point."""
    decimals = 0 if "." in digits else len(number.partition(".")[2])
    return _decimal(digits, power - decimals)


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
    if re.search(r"[\d.]\s+\(\s*[\d+]", text):
        return "no blank before the bracket of an uncertainty, as in 1.23(4)"
    if re.search("[\u00b5\u03bc]", text):  # the micro sign and the Greek letter
        return "write micro as u, as in us"
    if "\u00d7" in text:  # the sign of multiplication
        return "write a power of ten as e-5"
    if not text.isascii():
        return f"write it without {next(c for c in text if ord(c) > 127)!r}"
    return ""


def format_quantity(
    value: float, plus: float = 0.0, minus: float = 0.0, unit: str = "", *, digits: int = 10, plain: bool = False
) -> str:
    """Print a quantity, rounded to its uncertainty; `parse_quantity` reads it back.

    Parameters
    ----------
    value, plus, minus : float
        Finite, `plus` and `minus` not negative; the 68.3 % interval is [value - minus, value + plus].
    digits : int
        Significant digits of a value without uncertainty.
    plain : bool
        Without a power of ten, down to 1e-12; for columns whose heading has one.

    Returns
    -------
    str
        ``4.226585(40) deg/yr``; with a power of ten where the number is very small or large; as
        ``1.3220 +0.0060 -0.0040 Msun`` where the two sides, as printed, differ by more than a tenth.

    Raises
    ------
    NotAQuantity
        A number that is not finite, or a negative uncertainty.
    """
    if not all(math.isfinite(number) for number in (value, plus, minus)):
        raise NotAQuantity(f"{value} +{plus} -{minus}", "only finite numbers can be printed")
    if min(plus, minus) < 0.0:
        raise NotAQuantity(f"{value} +{plus} -{minus}", "an uncertainty is not negative")
    least = -12 if plain else -4
    with localcontext(Context(prec=3 * DOUBLE_DIGITS)):  # whatever precision the caller has set
        exact = max(plus, minus) == 0.0
        body = _exact(value, digits, least) if exact else _rounded(value, plus, minus, least)
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
    """Print a number to the place of the second digit of its uncertainty.

    All is decided by the numbers as printed, so that printing what was read back gives the same text.
    """
    number, upper, lower = (Decimal(repr(float(x))) for x in (value, plus, minus))
    place = _place(number, upper, lower)
    sides = _in_units(upper, place), _in_units(lower, place)
    lopsided = 10 * abs(sides[0] - sides[1]) > max(sides)
    if not lopsided:
        upper = (upper + lower) / 2
        place = _place(number, upper)
        sides = (_in_units(upper, place),) * 2
    units = int((number.scaleb(-place)).quantize(Decimal(1), ROUND_HALF_EVEN))
    power = _power(max(abs(units), *sides), place, least)
    shown, above, below = (f"{Decimal(n).scaleb(place - power):f}" for n in (units, *sides))
    tail = f"e{power}" if power else ""
    if not lopsided:
        return f"{shown}({sides[0]}){tail}"
    return f"({shown} +{above} -{below}){tail}" if power else f"{shown} +{above} -{below}"


def _place(number: Decimal, *sides: Decimal) -> int:
    """Return the power of ten of the last digit to print: the second digit of the smaller side, as it is rounded.

    But no further than the last digit of a double of the largest size among them.
    """
    second = min(Decimal(f"{side:.1e}").adjusted() for side in sides if side) - 1
    return max(second, max(x.adjusted() for x in (number, *sides) if x) - (DOUBLE_DIGITS - 1))


def _in_units(side: Decimal, place: int) -> int:
    """Return a side in units of the last place; what is not zero is not printed as zero."""
    units = int(side.scaleb(-place).quantize(Decimal(1), ROUND_HALF_EVEN))
    return max(units, 1) if side else 0


def _power(largest: int, place: int, least: int) -> int:
    """Return the power of ten to be split off: 0 where plain notation reads well and shows every digit."""
    leading = Decimal(largest).adjusted() + place
    return 0 if least <= leading <= 6 and place <= 0 else leading
