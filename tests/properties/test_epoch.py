"""Epochs and orbit counts: what is exact, what is rounded and how little, shapes, errors."""

from __future__ import annotations

import copy
import decimal
import pickle
from decimal import Decimal
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from clockfall.binary.constants import SECONDS_PER_DAY
from clockfall.binary.epoch import Epoch, OrbitCount, orbits_elapsed
from clockfall.errors import ClockfallError, OutOfRange

EPS = float(np.finfo(np.float64).eps)
HALF_ULP = EPS / 4.0  # of a number in [0.5, 1): the most that rounding a fraction costs

days = st.integers(-(10**6), 10**6)
fractions = st.floats(0.0, 1.0, exclude_max=True)
any_fractions = st.floats(-1e5, 1e5)
seconds = st.floats(-1e11, 1e11)
epochs = st.builds(Epoch, days, fractions)
examples = settings(max_examples=80, deadline=None)


def exact(pair: Epoch | OrbitCount) -> Fraction:
    """Return the value of a single pair as a fraction of integers."""
    whole = pair.day if isinstance(pair, Epoch) else pair.whole
    return Fraction(int(whole)) + Fraction(float(pair.fraction))


@examples
@given(day=days, fraction=any_fractions)
@pytest.mark.parametrize("kind", [Epoch, OrbitCount])
def test_a_fraction_is_carried_into_the_whole(kind: Any, day: int, fraction: float) -> None:
    """The fraction lies in [0, 1), and the pair is what was given, up to the rounding of a negative fraction."""
    pair = kind(day, fraction)
    assert 0.0 <= pair.fraction < 1.0
    assert not np.signbit(pair.fraction)
    error = abs(exact(pair) - day - Fraction(fraction))
    assert error <= (HALF_ULP if fraction < 0.0 else 0)  # only 1 - |fraction| has to be rounded


@pytest.mark.parametrize(
    ("fraction", "day", "rest"),
    [(-0.0, 0, 0.0), (1.0, 1, 0.0), (-1.0, -1, 0.0), (-1e-20, 0, 0.0), (-(2.0**-54), 0, 0.0), (2.75, 2, 0.75),
     (-0.25, -1, 0.75), (np.nextafter(1.0, 0.0), 0, np.nextafter(1.0, 0.0)), (5e-324, 0, 5e-324)],
)  # fmt: skip
def test_the_edges_of_a_day(fraction: float, day: int, rest: float) -> None:
    """A fraction that rounds to 1 becomes the next day; -0.0 is 0.0; the last double before 1 stays."""
    epoch = Epoch(0, fraction)
    assert (int(epoch.day), float(epoch.fraction)) == (day, rest)
    assert not np.signbit(epoch.fraction)


def test_both_parts_share_one_shape_and_are_locked() -> None:
    """Day and fraction broadcast; they are copies that nobody can write to or unlock."""
    day, fraction = np.array([[50000], [50001]]), np.array([0.25, 0.5, 1.5])
    epoch = Epoch(day, fraction)
    day[:] = 0
    fraction[:] = 0.0
    assert epoch.shape == epoch.day.shape == epoch.fraction.shape == (2, 3)
    assert epoch.day.dtype == np.int64
    assert epoch.fraction.dtype == np.float64
    np.testing.assert_array_equal(epoch.day, [[50000, 50000, 50001], [50001, 50001, 50002]])
    np.testing.assert_array_equal(epoch.fraction, [[0.25, 0.5, 0.5]] * 2)
    for part in (epoch.day, epoch.fraction):
        with pytest.raises(ValueError, match="read-only"):
            part[0, 0] = 1
        with pytest.raises(ValueError, match="WRITEABLE"):
            part.flags.writeable = True
    with pytest.raises(AttributeError):
        epoch.day = day  # type: ignore[misc]  # the fault under test


def test_an_epoch_can_be_repeated() -> None:
    """broadcast_to repeats the values to a larger shape, and names a shape that does not fit."""
    epoch = Epoch([50000, 50001], 0.5)
    assert epoch.broadcast_to((3, 2)) == Epoch([[50000, 50001]] * 3, 0.5)
    assert OrbitCount(3, 0.5).broadcast_to((4,)) == OrbitCount([3] * 4, 0.5)
    with pytest.raises(OutOfRange, match=r"shape: expected one that \(2,\) broadcasts to, found \(3,\)"):
        epoch.broadcast_to((3,))


def test_equality_is_one_answer() -> None:
    """Epochs are equal, as one bool, if shape and instants are; equal ones have one hash; other types are unequal."""
    epoch = Epoch([50000, 50001], [0.5, 0.0])
    same = Epoch([50000, 50000], [0.5, 1.0])
    assert epoch == same
    assert hash(epoch) == hash(same)
    assert epoch != Epoch([50000, 50001], [0.5, 1e-16])
    assert Epoch(50000, 0.5) != Epoch([50000], 0.5)
    assert Epoch(3, 0.5) != OrbitCount(3, 0.5)
    assert Epoch(3, 0.5) != 3.5


@pytest.mark.parametrize("pair", [Epoch(50000, 0.1), Epoch([1, 2], [0.5, 0.25]), OrbitCount([[-7]], 0.75)])
def test_a_pair_survives_pickling_and_copying(pair: Any) -> None:
    """A pickle or a copy is equal and as locked as the original."""
    for other in (pickle.loads(pickle.dumps(pair)), copy.copy(pair), copy.deepcopy(pair)):
        assert other == pair
        assert all(not part.flags.writeable for part in other._parts())


def test_what_is_printed_can_be_read_back() -> None:
    """The repr of a single epoch or a few is Python that makes an equal one; of many it is short."""
    for pair in (Epoch(50000, 0.1), Epoch([50000, 50001], [0.1, 1e-11]), OrbitCount(-3, 1.0 / 3.0)):
        assert eval(repr(pair)) == pair
    assert repr(Epoch(50000, 0.25)) == "Epoch(day=50000, fraction=0.25)"
    assert len(repr(Epoch(np.arange(10_000), 0.1))) < 120


@examples
@given(mjd=st.floats(-1e6, 1e6))
def test_a_date_in_one_number_goes_in_and_out(mjd: float) -> None:
    """from_mjd keeps every bit of a positive date; to_mjd rounds once."""
    epoch = Epoch.from_mjd(mjd)
    assert type(epoch.to_mjd()) is np.float64
    if mjd >= 0.0:
        assert exact(epoch) == Fraction(mjd)
    assert epoch.to_mjd() == float(exact(epoch))
    assert abs(epoch.to_mjd() - mjd) <= 2 * HALF_ULP + np.spacing(abs(mjd)) / 2  # two roundings


@examples
@given(epoch=epochs)
def test_decimals_are_exact(epoch: Epoch) -> None:
    """to_decimal has every digit, so that from_decimal makes the same epoch, whatever the context."""
    with decimal.localcontext(prec=3):
        value = epoch.to_decimal()
        assert Fraction(value) == exact(epoch)
        assert Epoch.from_decimal(value) == epoch


@examples
@given(value=st.decimals(-(10**6), 10**6, places=25))
def test_a_decimal_is_rounded_once(value: Decimal) -> None:
    """from_decimal has the exact day and the double nearest to the fraction."""
    epoch = Epoch.from_decimal(value)
    rest = Fraction(value) - Fraction(value).__floor__()
    assert exact(epoch) == Fraction(value).__floor__() + Fraction(float(rest))


def test_a_decimal_keeps_what_a_double_loses() -> None:
    """Two instants a tenth of a microsecond apart are one double, but two epochs."""
    early, late = Decimal("52144.900971230"), Decimal("52144.900971231157")
    assert float(early) + 1e-12 == float(early)
    difference = Epoch.from_decimal(late).seconds_since(Epoch.from_decimal(early))
    # each fraction is rounded to half of 1.1e-16 d
    assert difference == pytest.approx(float((late - early) * 86400), abs=2 * HALF_ULP * SECONDS_PER_DAY)


def test_the_last_digit_of_a_day_carries() -> None:
    """A decimal whose fraction rounds to 1 is midnight of the next day; the smallest double survives."""
    assert Epoch.from_decimal(Decimal("50000." + "9" * 30)) == Epoch(50001, 0.0)
    assert Epoch.from_decimal(Decimal("-0." + "0" * 30 + "1")) == Epoch(0, 0.0)
    assert Epoch.from_decimal(Epoch(-(2**52), 5e-324).to_decimal()) == Epoch(-(2**52), 5e-324)


@examples
@given(epoch=epochs, later=seconds)
def test_seconds_are_added_to_the_resolution_of_a_day(epoch: Epoch, later: float) -> None:
    """plus_seconds is off by two roundings of a fraction of a day, 1e-11 s, even after thousands of years."""
    found = exact(epoch.plus_seconds(later))
    error = abs(found - exact(epoch) - Fraction(later) / 86400)
    # the remainder over 86400 is in (-1, 1), the sum in (-1, 2), a negative sum is carried: half an ulp of 1 to 2 each
    assert error <= 4 * HALF_ULP


@examples
@given(start=epochs, end=epochs)
def test_the_time_between_is_right_to_its_last_place(start: Epoch, end: Epoch) -> None:
    """seconds_since is right to 1 ulp of itself, also where nearly a day cancels, and changes sign with order."""
    found = end.seconds_since(start)
    true = (exact(end) - exact(start)) * 86400
    assert type(found) is np.float64
    assert abs(Fraction(float(found)) - true) <= Fraction(float(np.spacing(abs(found))))
    assert start.seconds_since(end) == -found


def test_across_midnight_nothing_is_lost() -> None:
    """An instant before midnight and one after it are as well apart as two on one day."""
    before, after = Epoch(50000, 1.0 - 2.0**-50), Epoch(50001, 2.0**-60)
    assert after.seconds_since(before) == (2.0**-50 + 2.0**-60) * 86400.0


@examples
@given(epoch=epochs, later=seconds)
def test_added_seconds_can_be_taken_off(epoch: Epoch, later: float) -> None:
    """seconds_since undoes plus_seconds, to the resolution of a day and of the seconds themselves."""
    found = epoch.plus_seconds(later).seconds_since(epoch)
    # four half ulp of a fraction, see above, and the ulp of the result
    assert abs(found - later) <= 4 * HALF_ULP * SECONDS_PER_DAY + np.spacing(abs(later))


@examples
@given(
    start=epochs,
    days_later=st.floats(-20_000.0, 20_000.0),
    fraction=fractions,
    period=st.one_of(st.floats(100.0, 1e7), st.floats(1e-3, 1e12)),
)
def test_orbits_are_counted_to_the_last_digit(start: Epoch, days_later: float, fraction: float, period: float) -> None:
    """The count of orbits is right to 2e-16 orbits for the very doubles given, over 50 years either way."""
    end = Epoch(start.day + int(days_later), fraction)
    count = orbits_elapsed(start, end, period)
    true = (exact(end) - exact(start)) * 86400 / Fraction(period)
    assert 0.0 <= count.fraction < 1.0
    # the fraction, at most 1/2 in size, is rounded three times, and once more when it is carried
    assert abs(exact(count) - true) <= 2e-16


def test_fifty_years_of_a_short_orbit() -> None:
    """Over 50 years at P = 0.1 d the phase is right to 1e-14 orbits, where doubles alone are off by 1e-11."""
    rng = np.random.default_rng(1)
    start = Epoch(rng.integers(40_000, 42_000, 500), rng.random(500))
    end = Epoch(start.day + 18_262, rng.random(500))
    period = 8640.0 * (1.0 + 1e-3 * rng.random(500))
    count = orbits_elapsed(start, end, period)
    errors, plain = [], []
    for i in range(500):
        a, b = Epoch(start.day[i], start.fraction[i]), Epoch(end.day[i], end.fraction[i])
        true = (exact(b) - exact(a)) * 86400 / Fraction(float(period[i]))
        errors.append(float(abs(exact(OrbitCount(count.whole[i], count.fraction[i])) - true)))
        plain.append(float(abs(Fraction(float(b.seconds_since(a) / period[i])) - true)))
    assert max(errors) <= 2e-16  # the guarantee; what was asked for is 1e-14
    assert max(plain) > 1e-11  # so that the test is known to tell the two apart


def test_before_the_start_orbits_are_rounded_down() -> None:
    """A quarter of an orbit before the start is the orbit -1 at phase 0.75; whole orbits have fraction 0."""
    start, end = Epoch(50000, 0.5), Epoch([50000, 50000, 50000, 50001, 49999], [0.4375, 0.5625, 0.5, 0.25, 0.75])
    count = orbits_elapsed(start, end, 21600.0)  # a quarter of a day, so that all numbers are exact
    assert count == OrbitCount([-1, 0, 0, 3, -3], [0.75, 0.25, 0.0, 0.0, 0.0])


def test_a_count_of_a_count() -> None:
    """Counting forward and back gives counts that sum to 0."""
    start, end = Epoch(50000, 0.123), Epoch(57123, 0.789)
    forth, back = orbits_elapsed(start, end, 12345.678), orbits_elapsed(end, start, 12345.678)
    total = OrbitCount(forth.whole + back.whole, forth.fraction + back.fraction)
    assert abs(total.to_float()) <= 2 * 2e-16  # the guarantee, twice


def test_epochs_and_periods_broadcast() -> None:
    """Shapes (2, 1), (3,) and () make (2, 3), lane by lane as one call for each; a single one gives scalars."""
    start, end = Epoch([[50000], [50001]], 0.25), Epoch([51000, 52000, 53000], 0.75)
    count = orbits_elapsed(start, end, 1e4)
    assert count.shape == (2, 3)
    single = orbits_elapsed(Epoch(50001, 0.25), Epoch(52000, 0.75), 1e4)
    assert single == OrbitCount(count.whole[1, 1], count.fraction[1, 1])
    assert type(single.to_float()) is np.float64
    assert orbits_elapsed(Epoch(0), Epoch(1), np.full((2, 2), 1e3)).shape == (2, 2)
    assert end.seconds_since(start).shape == (2, 3)
    assert start.plus_seconds(np.zeros(4)).shape == (2, 4)
    assert orbits_elapsed(Epoch(np.empty(0, dtype=int)), Epoch(0), 1.0).shape == (0,)


def test_a_count_as_one_number() -> None:
    """to_float is whole plus fraction, rounded once."""
    assert OrbitCount(123456, 0.1).to_float() == 123456.1
    assert OrbitCount(-1, 0.75).to_float() == -0.25


ONE = Epoch(50000, 0.5)
BAD = [
    (lambda: Epoch(50000.5), "day: expected integers, found an array of type float64; put the rest into the fraction"),
    (lambda: Epoch(True), "day: expected integers, found an array of type bool"),
    (lambda: Epoch(2**52 + 1), "day: expected -4.5036e+15 <= day <= 4.5036e+15, found"),
    (lambda: Epoch(2**52, 2.0), "day: expected -4.5036e+15 <= day <= 4.5036e+15, found"),
    (lambda: Epoch(2**70), "day: expected integers, found an array of type object"),
    (lambda: Epoch(0, np.nan), "fraction: expected a finite number, found nan"),
    (lambda: Epoch([0, 1], [0.5, np.inf]), "fraction: expected a finite number, found inf at index (1,)"),
    (lambda: Epoch(0, "0.5"), "fraction: expected real numbers, found an array of type <U3"),
    (lambda: Epoch([1, 2], [0.1, 0.2, 0.3]), "shapes that broadcast together, found day (2,), fraction (3,)"),
    (lambda: OrbitCount(1.0), "whole: expected integers, found an array of type float64"),
    (lambda: Epoch.from_mjd([1.0, np.nan]), "fraction: expected a finite number, found nan at index (1,)"),
    (lambda: Epoch.from_decimal(50000.5), "epoch: expected a decimal.Decimal [d], found 50000.5; use Epoch.from_mjd"),
    (lambda: Epoch.from_decimal(Decimal("NaN")), "epoch: expected a finite date of magnitude 2**52 at most [d]"),
    (lambda: Epoch.from_decimal(Decimal("1e999999")), "epoch: expected a finite date of magnitude 2**52 at most [d]"),
    (lambda: Epoch.from_decimal(Decimal("1e-999999")), "epoch: expected at most 2000 decimal places"),
    (lambda: Epoch([1, 2]).to_decimal(), "shape of the epoch: expected (), found (2,); take one element"),
    (lambda: ONE.plus_seconds(np.inf), "seconds: expected "),
    (lambda: ONE.plus_seconds([0.0, np.nan]), "found nan at index (1,)"),
    (lambda: Epoch([1, 2]).plus_seconds(np.zeros(3)), "found epoch (2,), seconds (3,)"),
    (lambda: Epoch([1, 2]).seconds_since(Epoch([1, 2, 3])), "found start (3,), end (2,)"),
    (lambda: orbits_elapsed(ONE, ONE, 0.0), "period: expected 0 < period <= 1e+20 [s], found 0.0"),
    (lambda: orbits_elapsed(ONE, ONE, [1.0, np.nan]), "period: expected 0 < period <= 1e+20 [s], found nan at index"),
    (lambda: orbits_elapsed(ONE, Epoch(0), 1e-300), "orbits elapsed: expected -4.5036e+15 <= orbits elapsed <= 4.5"),
    (lambda: orbits_elapsed(Epoch([1, 2]), ONE, np.ones(3)), "found start (2,), end (), period (3,)"),
]


@pytest.mark.parametrize(("call", "message"), BAD, ids=[str(n) for n in range(len(BAD))])
def test_what_is_out_of_range_is_refused_by_name(call: Any, message: str) -> None:
    """The error names what is wrong, what was expected with its unit, and what was found and where."""
    with pytest.raises(OutOfRange) as caught:
        call()
    assert message in str(caught.value)
    assert isinstance(caught.value, ValueError)
    assert isinstance(caught.value, ClockfallError)
