"""Units, converted here and nowhere else, by astropy.

Inside clockfall a quantity has one of few units, named by short strings: "s", "rad", "ls" (light-second), "Msun"
(nominal solar mass), products and quotients of them, and "" for a pure number. c = 1, so a length may be given as a
time and the other way round.
"""

from __future__ import annotations

import difflib
import math
import re
from functools import cache
from typing import Any, Final

from clockfall.binary.constants import (
    ASTRONOMICAL_UNIT,
    PARSEC,
    SECONDS_PER_DAY,
    SECONDS_PER_YEAR,
    SOLAR_MASS,
    SOLAR_RADIUS,
    SPEED_OF_LIGHT,
)
from clockfall.errors import BadInput

COMMON: Final = (
    *("s", "ms", "us", "ns", "min", "h", "d", "yr", "kyr", "Myr", "Gyr", "Hz"),
    *("rad", "deg", "arcmin", "arcsec", "mas", "uas", "deg/yr", "mas/yr", "arcsec/yr"),
    *("m", "km", "au", "ls", "Rsun", "pc", "kpc", "Mpc", "Msun", "kg", "g cm2", "kg m2", "s/s"),
)
"""Names that a hint may offer."""

_SPELT_OUT: Final = {
    **{"days": "d", "hours": "h", "minutes": "min", "seconds": "s", "secs": "s", "sec": "s"},
    **{"years": "yr", "yrs": "yr", "degree": "deg", "degrees": "deg", "radians": "rad", "arcseconds": "arcsec"},
    **{"light-seconds": "ls", "lightseconds": "ls", "solarmass": "Msun", "solarmasses": "Msun"},
}
"""How people write units that astropy knows by their symbols alone."""

_CF: Final = {
    "": "1",
    "s/s": "1",
    "ls": f"{SPEED_OF_LIGHT!r} m",
    "Msun": f"{SOLAR_MASS!r} kg",
    "Msun ls2": f"{SOLAR_MASS * SPEED_OF_LIGHT**2!r} kg m2",
    **{unit: unit for unit in ("s", "rad", "1")},
}


class UnitFault(BadInput):
    """A unit is missing, unknown, or of the wrong kind.

    Attributes
    ----------
    expected, found, hint : str
        What unit was wanted, what stood there, and what to do.
    """

    def __init__(self, expected: str, found: str, hint: str = "") -> None:
        self.expected = expected
        self.found = found
        self.hint = hint
        super().__init__(f"expected {expected}, found {found}" + (f" ({hint})" if hint else ""))


@cache
def factor(unit_from: str, unit_to: str) -> float:
    """Return the number by which a value in `unit_from` is multiplied to be in `unit_to`.

    Raises
    ------
    UnitFault
        `unit_from` is missing where one is needed, unknown, or of another kind than `unit_to`.
    """
    if unit_from == unit_to:
        return 1.0
    target = _parse(unit_to)
    if not unit_from:
        if _is_pure(target):
            return 1.0
        raise UnitFault(f"a quantity with a unit, such as {_example(unit_to)}", "a number without a unit")
    source = _parse(unit_from)
    if _is_pure(target) and not _is_pure(source):
        raise UnitFault("a number without a unit", f"the unit {unit_from!r}")
    light = _light_seconds_and_seconds()
    for candidate in (source, *(source * light**power for power in (1, -1, 2, -2))):
        if candidate.is_equivalent(target):
            return float(candidate.to(target))
    hint = f"for instance {', '.join(_of_the_kind(unit_to))}" if _of_the_kind(unit_to) else ""
    raise UnitFault(f"a unit that converts to {unit_to!r}", f"the unit {unit_from!r}", hint)


@cache
def _of_the_kind(unit: str) -> tuple[str, ...]:
    """Return the common units that are of the same kind as `unit`, without the detour over c = 1."""
    target = _parse(unit)
    return tuple(name for name in COMMON if not _is_pure(target) and _parse(name).is_equivalent(target))


def cf_units(unit: str) -> str:
    """Return `unit` as the CF conventions write it, for a result file.

    A unit that is none is returned as it stands, so that no result is lost for it.
    """
    if unit in _CF:
        return _CF[unit]
    numerator, _, denominator = unit.partition("/")
    if numerator in _CF and denominator == "s":
        return f"{_CF[numerator]} s-1"
    try:
        base = _parse(unit).decompose()
    except UnitFault:
        return unit
    powers = [f"{name}{power if power != 1 else ''}" for name, power in zip(base.bases, base.powers, strict=True)]
    return " ".join([*([] if base.scale == 1.0 and powers else [f"{base.scale!r}"]), *powers])


def _example(unit: str) -> str:
    shown = {"s": "'0.3 d'", "rad": "'112.4 deg'", "Msun": "'1.4 Msun'", "ls": "'2.3 s'", "rad/s": "'4.2 deg/yr'"}
    return shown.get(unit, f"'1.0 {unit}'")


@cache
def _names() -> dict[str, Any]:
    """Return clockfall's own units by name; they take the place of astropy's of the same name."""
    from astropy import units as u  # half a second, so not before a unit is met

    def unit(name: str, size: float, of: Any) -> Any:
        return u.def_unit(name, size * of)

    return {
        "d": unit("d", SECONDS_PER_DAY, u.s),
        "yr": unit("yr", SECONDS_PER_YEAR, u.s),
        "kyr": unit("kyr", 1e3 * SECONDS_PER_YEAR, u.s),
        "Myr": unit("Myr", 1e6 * SECONDS_PER_YEAR, u.s),
        "Gyr": unit("Gyr", 1e9 * SECONDS_PER_YEAR, u.s),
        "deg": unit("deg", math.pi / 180.0, u.rad),
        "arcmin": unit("arcmin", math.pi / 10800.0, u.rad),
        "arcsec": unit("arcsec", math.pi / 648000.0, u.rad),
        "mas": unit("mas", math.pi / 648e6, u.rad),
        "uas": unit("uas", math.pi / 648e9, u.rad),
        "ls": unit("ls", SPEED_OF_LIGHT, u.m),
        "au": unit("au", ASTRONOMICAL_UNIT, u.m),
        "pc": unit("pc", PARSEC, u.m),
        "kpc": unit("kpc", 1e3 * PARSEC, u.m),
        "Mpc": unit("Mpc", 1e6 * PARSEC, u.m),
        "Rsun": unit("Rsun", SOLAR_RADIUS, u.m),
        "Msun": unit("Msun", SOLAR_MASS, u.kg),
    }


@cache
def _light_seconds_and_seconds() -> Any:
    """Return the unit ls/s, which is 1 where c = 1."""
    from astropy import units as u  # as above

    return _names()["ls"] / u.s


def _is_pure(unit: Any) -> bool:
    from astropy import units as u  # as above

    return bool(unit.is_equivalent(u.dimensionless_unscaled))


@cache
def _parse(text: str) -> Any:
    """Read a unit: factors separated by blanks, "*" or ".", each with an optional power, over at most one "/".

    Raises
    ------
    UnitFault
        Not of that form, or with a name that is no unit.
    """
    from astropy import units as u  # as above

    if not text or text == "1":
        return u.dimensionless_unscaled
    numerator, slash, denominator = text.partition("/")
    if slash and (not denominator.strip() or "/" in denominator):
        raise UnitFault("a unit such as 'deg/yr'", f"the unit {text!r}")
    unit = _product(numerator, text)
    return unit / _product(denominator, text) if slash else unit


def _product(text: str, whole: str) -> Any:
    from astropy import units as u  # as above

    product = u.dimensionless_unscaled
    for word in text.replace("**", "^").replace("*", " ").replace(".", " ").replace("^", "").split():
        name = word.rstrip("-0123456789")
        power = word[len(name) :] or "1"
        if word == "1":
            continue
        try:
            product = product * _named(name) ** int(power)
        except (ValueError, TypeError, OverflowError) as error:
            near = _SPELT_OUT.get(name.lower()) or " or ".join(difflib.get_close_matches(name, COMMON, n=3))
            hint = f"did you mean {near}?" if near else "for instance d, deg/yr, kpc, Msun"
            raise UnitFault("a known unit", f"the unit {whole!r}", hint) from error
    return product


def _named(name: str) -> Any:
    """Return the unit of that name; raises ValueError where there is none."""
    from astropy import units as u  # as above

    if not re.fullmatch(r"[A-Za-z_%]+", name):  # astropy would read numbers and whole expressions too
        raise ValueError("not a name")
    return _names().get(name) or u.Unit(name)
