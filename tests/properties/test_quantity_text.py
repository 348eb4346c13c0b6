"""Quantities as text: read exactly, printed by the GUM rule, and read back."""

from __future__ import annotations

import math
from decimal import Context, Decimal, localcontext
from typing import Any

import pytest
from astropy import units as u
from hypothesis import example, given, settings
from hypothesis import strategies as st

from clockfall.binary.constants import GM_SUN, NEWTONIAN_CONSTANT
from clockfall.binary.state import FIELDS
from clockfall.files.quantity import NotAQuantity, format_quantity, parse_quantity
from clockfall.files.units import COMMON, UnitFault, cf_units, factor


def close(expected: float, rel: float) -> Any:
    """Return what equals `expected` to `rel`, however small it is: pytest's own absolute tolerance is 1e-12."""
    return pytest.approx(expected, rel=rel, abs=0.0)


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
    "0 +/- 1e-14": ("0", "1e-14", "1e-14", ""),
    "1e-320": ("1e-320", "0", "0", ""),
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
        ("1e401", "power of ten"),
        ("(1.2 +/- 0.3)e-401", "power of ten"),
        ("1e309", "largest double"),
        ("1.0(" + "9" * 150 + ")e200", "largest double"),
        # read to the letter, each of these would have an uncertainty that is not meant
        ("-2.77 +0.15 -0.19e-14", "bracket the numbers"),
        ("-2.77e-14 +0.15 -0.19", "bracket the numbers"),
        ("1.9 +/- 0.2e-3", "bracket the numbers"),
        ("2.4e-12 +/- 0.1", "bracket the numbers"),
        ("1.5 x 10^-5", "as e-5"),
        ("1.5 \u00d7 10^-5", "as e-5"),
        ("1.23 (4) s", "no blank"),
        ("2.4 \u00b5s", "micro as u"),
        ("3 \u2013 4", "without"),
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
        ((-0.001, 0.1, 0.1), "0.00(10)"),
        # the two sides are told apart where, as printed, they differ by more than a tenth of the larger
        ((1.0, 0.29, 0.26), "1.00 +0.29 -0.26"),
        ((1.0, 0.30, 0.27), "1.00(28)"),
        # rounding may bring a power of ten: never 10.00(26)e3
        ((9996.0, 260.0, 260.0), "1.000(26)e4"),
        ((5e-324, 0.0, 0.0), "4.940656458e-324"),
    ],
)
def test_printing_by_the_gum_rule(numbers: tuple[float, float, float], text: str) -> None:
    """Two significant digits of the uncertainty, the value to the same place (JCGM 100:2008, 7.2.6)."""
    assert format_quantity(*numbers) == text


@given(
    st.integers(-(10**40), 10**40),
    st.integers(0, 30),
    st.integers(-300, 200),
    st.tuples(st.integers(0, 10**6), st.integers(0, 10**6)),
)
def test_any_number_is_read_exactly(number: int, decimals: int, power: int, sides: tuple[int, int]) -> None:
    """Every written form of the same number and interval is read to the last of forty digits, for any context."""
    text = f"{Decimal(number).scaleb(-decimals, Context(prec=50)):f}"
    above, below = (f"{Decimal(side).scaleb(-decimals, Context(prec=50)):f}" for side in sides)
    value, plus, minus = (Decimal(f"{n}e{power - decimals}") for n in (number, *sides))
    with localcontext(Context(prec=3)):
        for written in (
            f"{text}(+{sides[0]}-{sides[1]})e{power}",
            f"({text} +{above} -{below})e{power} ",
            f"({text} -{below} +{above})e{power}",
        ):
            found = parse_quantity(written)
            assert (found.value, found.plus, found.minus) == (value, plus, minus)
        even = [parse_quantity(f"{text}({sides[0]})e{power}"), parse_quantity(f"({text} +/- {above})e{power} s")]
        assert all((found.value, found.plus, found.minus) == (value, plus, plus) for found in even)


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
    # merged sides, which may differ by a tenth of the larger and half a digit, move by half of that, and are rounded
    for printed, given_side in ((found.plus, upper), (found.minus, lower)):
        assert abs(float(printed) - given_side) <= 0.1 * max(upper, lower) + last_digit * 1.0001
    assert found.unit == "s"


anything = st.floats(-1e300, 1e300)
any_side = st.floats(0.0, 1e300)


@settings(max_examples=500)
@given(anything, any_side, any_side)
@example(9.996e-09, 1.2e-09, 1.1e-09)
@example(2771294.0, 997665847.0, 249416461.0)
@example(1.0, 0.1, 0.0899)
@example(1.0, 1e300, 1e-300)
@example(0.0, 1e300, 1e-300)
@example(1.0, 1e-3, 1e-20)
@example(5e-324, 5e-324, 5e-324)
def test_printing_again_changes_nothing(value: float, plus: float, minus: float) -> None:
    """What was printed, read, and printed again is the same text, whatever the sizes of the three numbers."""
    text = format_quantity(value, plus, minus)
    assert len(text) < 80
    found = parse_quantity(text)
    assert format_quantity(float(found.value), float(found.plus), float(found.minus)) == text


@given(st.integers(-2000, 2000), st.integers(1, 200), st.integers(1, 200), st.integers(-8, 8))
def test_short_numbers_print_again_alike(value: int, plus: int, minus: int, power: int) -> None:
    """Likewise for numbers of few digits, in which rounding up to a power of ten and equal sides are frequent."""
    text = format_quantity(value * 10.0**power, plus * 10.0**power, minus * 10.0**power)
    found = parse_quantity(text)
    assert format_quantity(float(found.value), float(found.plus), float(found.minus)) == text


def test_printing_does_not_depend_on_the_callers_precision() -> None:
    """A program that computes with three decimal digits prints the same."""
    with localcontext(Context(prec=3)):
        assert format_quantity(4.226585, 4e-6, 4e-6, "deg/yr") == "4.2265850(40) deg/yr"


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


def test_what_is_no_interval_is_not_printed() -> None:
    """NaN and infinity have no text, nor has a negative uncertainty."""
    for numbers in ((math.nan, 0.0, 0.0), (1.0, math.inf, 0.0)):
        with pytest.raises(NotAQuantity, match="finite"):
            format_quantity(*numbers)
    for numbers in ((1.0, -0.1, 0.1), (1.0, -0.1, -0.1)):
        with pytest.raises(NotAQuantity, match="not negative"):
            format_quantity(*numbers)


def test_units_convert_exactly() -> None:
    """Units by definition: day, Julian year, degree, parsec (IAU 2015 B2), nominal solar mass (IAU 2015 B3)."""
    assert factor("d", "s") == 86400.0
    assert factor("yr", "s") == 31557600.0
    assert factor("deg", "rad") == math.pi / 180.0
    assert factor("deg/yr", "rad/s") == close(math.pi / 180.0 / 31557600.0, 4e-16)
    assert factor("kpc", "ls") == close(1e3 * 648000 / math.pi * 149597870700 / 299792458, 4e-16)
    assert factor("Msun", "kg") == GM_SUN / NEWTONIAN_CONSTANT
    assert factor("g cm2", "Msun ls2") == close(1e-7 / (GM_SUN / NEWTONIAN_CONSTANT * 299792458.0**2), 1e-15)
    assert factor("ms", "s") == close(1e-3, 4e-16)


DAY, YEAR, DEGREE = 86400.0, 31557600.0, math.pi / 180.0
SIZES = {
    **{
        "ms": (1e-3, "s"),
        "us": (1e-6, "s"),
        "ns": (1e-9, "s"),
        "min": (60.0, "s"),
        "h": (3600.0, "s"),
        "d": (DAY, "s"),
    },
    **{"yr": (YEAR, "s"), "kyr": (1e3 * YEAR, "s"), "Myr": (1e6 * YEAR, "s"), "Gyr": (1e9 * YEAR, "s")},
    **{"Hz": (1.0, "1/s"), "1/yr": (1.0 / YEAR, "1/s"), "rad": (1.0, "rad"), "deg": (DEGREE, "rad")},
    **{"arcmin": (DEGREE / 60, "rad"), "arcsec": (DEGREE / 3600, "rad"), "mas": (DEGREE / 3.6e6, "rad")},
    **{"uas": (DEGREE / 3.6e9, "rad"), "deg/yr": (DEGREE / YEAR, "rad/s"), "mas/yr": (DEGREE / 3.6e6 / YEAR, "rad/s")},
    **{"arcsec/yr": (DEGREE / 3600 / YEAR, "rad/s"), "m": (1.0, "m"), "km": (1e3, "m"), "ls": (299792458.0, "m")},
    **{"au": (149597870700.0, "m"), "Rsun": (6.957e8, "m"), "pc": (3.0856775814913673e16, "m")},
    **{"kpc": (3.0856775814913673e19, "m"), "Mpc": (3.0856775814913673e22, "m"), "kg": (1.0, "kg")},
    **{"Msun": (GM_SUN / NEWTONIAN_CONSTANT, "kg"), "g cm2": (1e-7, "kg m2"), "kg m2": (1.0, "kg m2")},
    **{"s": (1.0, "s"), "s/s": (1.0, "")},
}


@pytest.mark.parametrize("unit", COMMON)
def test_every_common_unit_has_its_size(unit: str) -> None:
    """Every unit that a hint may offer is as large as its definition says, to a few roundings."""
    size, base = SIZES[unit]
    assert factor(unit, base) == close(size, 1e-15)


def test_a_length_may_be_a_time() -> None:
    """With c = 1, a projected axis may be given in seconds, light-seconds or kilometres, and a range likewise."""
    assert factor("s", "ls") == 1.0
    assert factor("km", "ls") == close(1e3 / 299792458.0, 4e-16)
    assert factor("km", "s") == close(1e3 / 299792458.0, 4e-16)


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
        ("kg", "s", "for instance s, ms, us, ns, min, h, d, yr"),
        ("days", "s", "did you mean d"),
        ("d 2", "s", "a known unit"),
        ("d 10^3", "s", "a known unit"),
        ("3600s", "s", "a known unit"),
    ],
)
def test_wrong_units_are_told(found: str, wanted: str, message: str) -> None:
    """A missing, wrong or unknown unit is told with what was wanted."""
    with pytest.raises(UnitFault, match=message):
        factor(found, wanted)


def test_cf_units() -> None:
    """What a result file calls the units is readable by the CF conventions' library of units."""
    assert cf_units("") == "1"
    assert cf_units("rad/s") == "rad s-1"
    assert cf_units("ls") == "299792458.0 m"
    assert cf_units("s/s") == "1"
    assert cf_units("kpc") == f"{648000 / math.pi * 149597870700 * 1e3!r} m"
    assert cf_units("rad/s2") == "rad s-2"
    assert cf_units("no unit of ours") == "no unit of ours"


IN_SI = {
    **{"": (1.0, ""), "s/s": (1.0, ""), "s": (1.0, "s"), "1/s": (1.0, "1/s"), "d": (86400.0, "s")},
    **{"rad": (1.0, "rad"), "rad/s": (1.0, "rad/s"), "ls": (299792458.0, "m"), "ls/s": (299792458.0, "m/s")},
    **{"Msun": (GM_SUN / NEWTONIAN_CONSTANT, "kg"), "Msun/s": (GM_SUN / NEWTONIAN_CONSTANT, "kg/s")},
    **{"Msun ls2": (GM_SUN / NEWTONIAN_CONSTANT * 299792458.0**2, "kg m2"), "km/s": (1000.0, "m/s")},
}


@pytest.mark.parametrize("unit", IN_SI)
def test_cf_units_mean_the_same(unit: str) -> None:
    """Read by another reader of units, a CF unit is as large as ours."""
    size, base = IN_SI[unit]
    # each side is rounded once or twice
    assert u.Unit(cf_units(unit)).to(u.Unit(base)) == close(size, 5e-16)


def test_every_field_has_a_cf_unit() -> None:
    """The table above holds the unit of every field, so that none is written unread."""
    assert {description.unit for description in FIELDS.values()} <= set(IN_SI)


def test_powers_may_be_written_in_three_ways() -> None:
    """A power is a number behind the name, or behind ^ or **."""
    assert factor("g cm^2", "Msun ls2") == factor("g cm**2", "Msun ls2") == factor("g cm2", "Msun ls2")


@settings(max_examples=60, deadline=None)  # astropy takes milliseconds to refuse a name
@given(
    st.one_of(
        st.text(max_size=8),
        st.lists(
            st.sampled_from([*COMMON, " ", "/", "*", ".", "^", "2", "-1", "mag", "dex", "deg_C", "%", "x"]), max_size=5
        ).map("".join),
    ),
    st.sampled_from(["s", "", "Msun ls2", "rad/s"]),
)
def test_any_unit_is_known_or_refused(found: str, wanted: str) -> None:
    """Any text at all as a unit is a positive factor or UnitFault."""
    try:
        scale = factor(found, wanted)
    except UnitFault:
        return
    assert 0.0 < scale < math.inf
