"""Quantities as text: read exactly, printed by the GUM rule, and read back."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from clockfall.binary.constants import GM_SUN, NEWTONIAN_CONSTANT
from clockfall.files.quantity import NotAQuantity, format_quantity, parse_quantity
from clockfall.files.units import COMMON, UnitFault, cf_units, factor

READ = {
    "1.23": ("1.23", "0", "0", ""),
    "-3": ("-3", "0", "0", ""),
    "1.2e-5 s": ("1.2e-5", "0", "0", "s"),
    "0.218540913377(21) d": ("0.218540913377", "2.1e-11", "2.1e-11", "d"),
    "-2.423(1)e-12": ("-2.423e-12", "1e-15", "1e-15", ""),
    "1.3(2)e45 g cm2": ("1.3e45", "2e44", "2e44", "g cm2"),
    "12(3)": ("12", "3", "3", ""),
    "5.21(1.30) s": ("5.21", "1.30", "1.30", "s"),
    "0.999936(+9-10)": ("0.999936", "9e-6", "1.0e-5", ""),
    "0.999936(+9 -10)": ("0.999936", "9e-6", "1.0e-5", ""),
    "-27.7(+1.5-1.9)e-15": ("-27.7e-15", "1.5e-15", "1.9e-15", ""),
    "1.9 +/- 0.2 kpc": ("1.9", "0.2", "0.2", "kpc"),
    "1.9 ± 0.2 kpc": ("1.9", "0.2", "0.2", "kpc"),
    "2.5e-3 +/- 1e-4 s": ("2.5e-3", "1e-4", "1e-4", "s"),
    "(2.5 +/- 0.1)e-3 s": ("2.5e-3", "1e-4", "1e-4", "s"),
    "1.322 +0.006 -0.004 Msun": ("1.322", "0.006", "0.004", "Msun"),
    "1.322 -0.004 +0.006 Msun": ("1.322", "0.006", "0.004", "Msun"),
    "(-2.77 +0.15 -0.19)e-14": ("-2.77e-14", "1.5e-15", "1.9e-15", ""),
    "\u22123.10(8) mas/yr": ("-3.10", "0.08", "0.08", "mas/yr"),
    "  4.2 deg/yr ": ("4.2", "0", "0", "deg/yr"),
    "1.4Msun": ("1.4", "0", "0", "Msun"),
    ".5 s": ("0.5", "0", "0", "s"),
}


@pytest.mark.parametrize("text", READ)
def test_reading_is_exact(text: str) -> None:
    """Each form that papers print is read exactly, digit for digit."""
    value, plus, minus, unit = READ[text]
    found = parse_quantity(text)
    assert (found.value, found.plus, found.minus) == (Decimal(value), Decimal(plus), Decimal(minus))
    assert found.unit == unit


@pytest.mark.parametrize(
    ("text", "hint"),
    [
        ("", "empty"),
        ("nan", "not known"),
        ("-inf d", "not known"),
        ("1,5 d", "decimal point"),
        ("1.2(3", "bracket is missing"),
        ("(1.2 +/- 3", "bracket is missing"),
        ("1e301", "power of ten"),
        ("1.2(3)e-99999999", "power of ten"),
        ("1.2e-5(3)", "after the uncertainty"),
        ("1.2 +/- 0.1e-3e-5", ""),
        ("1.2 +/- -3", "not negative"),
        ("08:41:12", "sexagesimal"),
        ("one", ""),
        ("--3", ""),
        ("1.2 3.4", ""),
        ("1" * 201, "200 characters"),
        ("١٢", ""),
    ],
)
def test_anything_else_is_refused_with_a_hint(text: str, hint: str) -> None:
    """What is no quantity is refused, with a hint where the slip is a known one."""
    with pytest.raises(NotAQuantity) as caught:
        parse_quantity(text)
    assert hint in caught.value.hint


@pytest.mark.parametrize(
    ("numbers", "text"),
    [
        # JCGM 100:2008, 7.2.2: the mass 100.02147 g with u = 0.35 mg is printed 100.02147(35) g
        ((100.02147, 0.00035, 0.00035), "100.02147(35)"),
        ((4.226585, 4e-6, 4e-6), "4.2265850(40)"),
        ((-2.402630e-12, 5.6e-17, 5.6e-17), "-2.402630(56)e-12"),
        ((1.322, 0.006, 0.004), "1.3220 +0.0060 -0.0040"),
        ((-2.77e-14, 1.5e-15, 1.9e-15), "(-2.77 +0.15 -0.19)e-14"),
        ((0.5, 0.0996, 0.0996), "0.50(10)"),
        ((0.3, 1.2, 1.2), "0.3(12)"),
        ((0.0, 0.1, 0.1), "0.00(10)"),
        ((123456.0, 2300.0, 2300.0), "1.235(23)e5"),
        ((1.0, 0.0, 0.0), "1"),
        ((0.0, 0.0, 0.0), "0"),
        ((86400.0, 0.0, 0.0), "86400"),
        ((3.25e-20, 0.0, 0.0), "3.25e-20"),
        ((9.9999, 0.0996, 0.0996), "10.00(10)"),
    ],
)
def test_printing_by_the_gum_rule(numbers: tuple[float, float, float], text: str) -> None:
    """Two significant digits of the uncertainty, the value to the same place (JCGM 100:2008, 7.2.6)."""
    assert format_quantity(*numbers) == text


sizes = st.floats(1e-250, 1e250)
shares = st.floats(1e-12, 1e3)


@given(sizes, st.sampled_from([1.0, -1.0]), shares, shares)
def test_what_is_printed_is_read_back(size: float, sign: float, plus: float, minus: float) -> None:
    """Printing and reading back changes the value by no more than half a printed digit, and the interval likewise."""
    value, upper, lower = sign * size, plus * size, minus * size
    found = parse_quantity(format_quantity(value, upper, lower, "s"))
    # two digits of the smaller side: half a unit of the second digit is at most 5 % of it; 10 % where sides are merged
    last_digit = 0.05 * min(upper, lower) + 4e-16 * size
    assert abs(float(found.value) - value) <= last_digit * 1.0001
    for printed, given_side in ((found.plus, upper), (found.minus, lower)):
        assert abs(float(printed) - given_side) <= 0.05 * max(upper, lower) + last_digit * 1.0001
    assert found.unit == "s"


@given(sizes, shares, shares)
def test_printing_again_changes_nothing(size: float, plus: float, minus: float) -> None:
    """What was printed, read, and printed again is the same text."""
    text = format_quantity(size, plus * size, minus * size)
    found = parse_quantity(text)
    again = format_quantity(float(found.value), float(found.plus), float(found.minus))
    assert parse_quantity(again) == found


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=1e-290, max_value=1e290))
def test_an_exact_number_keeps_its_digits(value: float) -> None:
    """Without uncertainty a number is printed to the digits asked for."""
    assert float(parse_quantity(format_quantity(value, digits=17)).value) == value


@given(st.text(max_size=60))
def test_any_text_is_read_or_refused(text: str) -> None:
    """Any text at all is a quantity or NotAQuantity."""
    try:
        found = parse_quantity(text)
    except NotAQuantity:
        return
    assert math.isfinite(float(found.value))


@given(st.text(alphabet="0123456789.()+-eE/ dMs±", max_size=60))
def test_near_quantities_are_read_or_refused(text: str) -> None:
    """Text made of a quantity's own characters is a quantity or NotAQuantity."""
    try:
        found = parse_quantity(text)
    except NotAQuantity:
        return
    assert found.plus >= 0
    assert found.minus >= 0


def test_what_is_not_finite_is_not_printed() -> None:
    """NaN and infinity have no text."""
    for numbers in ((math.nan, 0.0, 0.0), (1.0, math.inf, 0.0)):
        with pytest.raises(NotAQuantity, match="finite"):
            format_quantity(*numbers)


def test_units_convert_exactly() -> None:
    """Units by definition: day, Julian year, degree, parsec (IAU 2015 B2), nominal solar mass (IAU 2015 B3)."""
    assert factor("d", "s") == 86400.0
    assert factor("yr", "s") == 31557600.0
    assert factor("deg", "rad") == math.pi / 180.0
    assert factor("deg/yr", "rad/s") == pytest.approx(math.pi / 180.0 / 31557600.0, rel=4e-16)
    assert factor("kpc", "ls") == pytest.approx(1e3 * 648000 / math.pi * 149597870700 / 299792458, rel=4e-16)
    assert factor("Msun", "kg") == GM_SUN / NEWTONIAN_CONSTANT
    assert factor("g cm2", "Msun ls2") == pytest.approx(
        1e-7 / (GM_SUN / NEWTONIAN_CONSTANT * 299792458.0**2), rel=1e-15
    )
    assert factor("ms", "s") == pytest.approx(1e-3, rel=4e-16)


def test_a_length_may_be_a_time() -> None:
    """With c = 1, a projected axis may be given in seconds, light-seconds or kilometres, and a range likewise."""
    assert factor("s", "ls") == 1.0
    assert factor("km", "ls") == pytest.approx(1e3 / 299792458.0, rel=4e-16)
    assert factor("km", "s") == pytest.approx(1e3 / 299792458.0, rel=4e-16)


@pytest.mark.parametrize(
    ("found", "wanted", "message"),
    [
        ("", "s", "a quantity with a unit"),
        ("kg", "s", "converts to 's'"),
        ("s", "", "without a unit"),
        ("Mson", "Msun", "did you mean Msun"),
        ("deg/", "rad/s", "deg/yr"),
        ("deg/yr/yr", "rad/s", "deg/yr"),
        ("s99999999999", "s", "converts to 's'"),
    ],
)
def test_wrong_units_are_told(found: str, wanted: str, message: str) -> None:
    """A missing, wrong or unknown unit is told with what was wanted."""
    with pytest.raises(UnitFault, match=message):
        factor(found, wanted)


def test_common_units_are_known() -> None:
    """Every unit that a hint may offer is read."""
    for unit in COMMON:
        assert factor(unit, unit) == 1.0
        assert factor(f"{unit}", unit) > 0.0


def test_cf_units() -> None:
    """What a result file calls the units is readable by the CF conventions' library of units."""
    assert cf_units("") == "1"
    assert cf_units("rad/s") == "rad s-1"
    assert cf_units("ls") == "299792458.0 m"
    assert cf_units("s/s") == "1"
