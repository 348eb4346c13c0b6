"""Kepler's equation and the anomalies: accuracy against independent arithmetic, shapes, symmetries, errors."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from clockfall.binary.kepler import eccentric_anomaly, eccentric_anomaly_from_true, mean_anomaly, true_anomaly
from clockfall.errors import ClockfallError, OutOfRange

FUNCTIONS = [eccentric_anomaly, mean_anomaly, true_anomaly, eccentric_anomaly_from_true]
EPS = float(np.finfo(np.float64).eps)
DIGITS = 130  # at 1 - e = 1e-60 the terms of Kepler's equation cancel to 60 digits; 40 more, and a reserve

# Every number here is a place where a formula that looks right goes wrong.
NASTY_ONE_MINUS_E = [1e-60, 1e-18, 1e-16, 1e-15, 3e-12, 1e-8, 1e-4, 0.01, 0.5 - 2**-54, 0.5, 0.9, 1.0 - 2**-53, 1.0]
NASTY_M = [
    0.0, 1e-300, 1e-100, 1e-25, 1e-16, 1e-8, 1e-3, 1.0, 1.0786593635482193,
    math.pi / 2, math.nextafter(math.pi, 0.0), math.pi, math.nextafter(math.pi, 4.0), 3.5, 6.0,
    math.nextafter(2 * math.pi, 0.0), 2 * math.pi, math.nextafter(2 * math.pi, 7.0), 3 * math.pi, 20 * math.pi,
    1e4, 1e6 * math.pi, 1e8, 2.0**29, math.nextafter(2.0**29, 1e9), 1e9, 3e12, 2.0**52 + 1.0, 2.0**53, 1e17, 1e300,
]  # fmt: skip


def nasty_pairs() -> tuple[np.ndarray, np.ndarray]:
    """Every nasty M, of both signs, with every nasty 1 - e."""
    M, o = np.meshgrid([*NASTY_M, *(-M for M in NASTY_M)], NASTY_ONE_MINUS_E)
    return M.ravel(), o.ravel()


def random_pairs(count: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """M and 1 - e: each even half of the time, even in the logarithm otherwise; some M of many turns."""
    rng = np.random.default_rng(seed)
    o = np.where(rng.random(count) < 0.5, 10.0 ** rng.uniform(-16.0, 0.0, count), 1.0 - rng.random(count))
    M = np.where(rng.random(count) < 0.5, np.pi * rng.random(count), np.pi * 10.0 ** rng.uniform(-25.0, 0.0, count))
    M = np.where(rng.random(count) < 0.2, 10.0 ** rng.uniform(0.5, 8.0, count), M)
    return M * rng.choice([-1.0, 1.0], count), o


def ulps(found: float, exact: Any) -> float:
    """Error in units in the last place of what was found."""
    return abs(float((mp.mpf(float(found)) - exact) / mp.mpf(float(np.spacing(abs(found))))))


def exact_eccentric_anomaly(M: float, e: Any) -> Any:
    """Newton's method in many digits from above the root, where it cannot miss: f rises and is convex."""
    turn = mp.nint(mp.mpf(M) / (2 * mp.pi))
    near = mp.mpf(M) - 2 * mp.pi * turn
    size = abs(near)
    E = min(mp.pi, size / (1 - e))
    if e > 0:  # (E - sin E) / E**3 falls from 1/6 to 1/pi**2
        E = min(E, mp.cbrt(mp.pi**2 * size / e))
    for _ in range(500):
        step = (E - e * mp.sin(E) - size) / (1 - e * mp.cos(E))
        E -= step
        if abs(step) <= abs(E) * mp.mpf(10) ** -45:
            return mp.sign(near) * E + 2 * mp.pi * turn
    raise AssertionError(f"the oracle did not settle for M = {M!r}, e = {e}")


@pytest.mark.parametrize("given_as", ["eccentricity", "one_minus_eccentricity"])
@pytest.mark.parametrize("pairs", [nasty_pairs(), random_pairs(400, 1)], ids=["nasty", "random"])
def test_eccentric_anomaly_agrees_with_many_digits(given_as: str, pairs: tuple[np.ndarray, np.ndarray]) -> None:
    """E is within 2 ulp of the solution for the very doubles given, whichever of e and 1 - e is given."""
    M, o = pairs
    e = 1.0 - o
    if given_as == "eccentricity":
        M, e = M[e < 1.0], e[e < 1.0]
        found = eccentric_anomaly(M, e)
    else:
        found = eccentric_anomaly(M, e, one_minus_eccentricity=o)
    with mp.workdps(DIGITS):
        exact_e = [mp.mpf(float(x)) for x in e] if given_as == "eccentricity" else [1 - mp.mpf(float(x)) for x in o]
        errors = [ulps(E, exact_eccentric_anomaly(float(m), x)) for E, m, x in zip(found, M, exact_e, strict=True)]
    assert len(errors) >= 300
    assert max(errors) <= 2.0, (M[np.argmax(errors)], e[np.argmax(errors)])  # the guarantee of the docstring


# Arithmetic with unevaluated sums of two doubles, written apart from the code under test and with Taylor's series in
# place of its polynomial: T. J. Dekker, Numer. Math. 18, 224 (1971).
Pair = tuple[np.ndarray, np.ndarray]


def pair_sum(a: Pair, b: Pair) -> Pair:
    """Add two pairs."""
    s = a[0] + b[0]
    v = s - a[0]
    low = (a[0] - (s - v)) + (b[0] - v) + a[1] + b[1]
    total = s + low
    return total, low - (total - s)


def pair_product(a: Pair, b: Pair) -> Pair:
    """Multiply two pairs."""
    p = a[0] * b[0]
    (ah, al), (bh, bl) = halves(a[0]), halves(b[0])
    low = ((ah * bh - p) + ah * bl + al * bh) + al * bl + a[0] * b[1] + a[1] * b[0]
    total = p + low
    return total, low - (total - p)


def halves(a: np.ndarray) -> Pair:
    """Split into two numbers of 26 bits."""
    c = 134217729.0 * a
    high = c - (c - a)
    return high, a - high


def constant(value: Fraction, like: np.ndarray) -> Pair:
    """Write a fraction as a pair, once for each lane."""
    high = float(value)
    return np.full_like(like, high), np.full_like(like, float(value - Fraction(high)))


def single(values: np.ndarray) -> Pair:
    """Make a pair of numbers that need no second part."""
    return values, np.zeros_like(values)


def less_turns(x: np.ndarray, turns: np.ndarray) -> Pair:
    """Take 2 pi turns off x, with 2 pi in three doubles."""
    result = single(x)
    with mp.workdps(60):
        rest = 2 * mp.pi
        for _ in range(3):
            part = float(rest)
            rest -= mp.mpf(part)
            result = pair_sum(result, pair_product(single(-turns), single(np.full_like(x, part))))
    return result


def residual(M: np.ndarray, E: np.ndarray, e: Pair, o: Pair) -> np.ndarray:
    """(1 - e) E + e (E - sin E) - M in 106 bits."""
    turns = np.rint(M / (2 * np.pi))
    M_near, E_near = less_turns(M, turns), less_turns(E, turns)
    square = pair_product(E_near, E_near)
    series = single(np.zeros_like(E))
    for k in range(19, -1, -1):  # the first term left out, E**43 / 43!, is under 1e-22 of E**3 even for E = 5
        term = constant(Fraction((-1) ** k, math.factorial(2 * k + 3)), E)
        series = pair_sum(pair_product(series, square), term)
    E_minus_sin = pair_product(pair_product(series, square), E_near)
    left = pair_sum(pair_product(o, E_near), pair_product(e, E_minus_sin))
    return pair_sum(left, (-M_near[0], -M_near[1]))[0]


def within(ulp: int, M: np.ndarray, E: np.ndarray, e: Pair, o: Pair) -> np.ndarray:
    """Tell where the solution lies within so many ulp of E: there the residual, which rises, changes sign."""
    margin = ulp * np.spacing(np.abs(E))
    return (residual(M, E - margin, e, o) <= 0.0) & (residual(M, E + margin, e, o) >= 0.0)


def less(values: np.ndarray) -> Pair:
    """1 - values, exactly."""
    return pair_sum(single(np.ones_like(values)), single(-values))


def hard_pairs(count: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """M and 1 - e where rounding shows most: E just below 2, where an ulp is least in proportion, and e near 1."""
    rng = np.random.default_rng(seed)
    return rng.uniform(1.05, 1.0907, count), 10.0 ** rng.uniform(-12.0, -3.0, count)


def slow_pairs(count: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Small M, and e a little below 0.5, where 1 - e loses most when it is formed from e."""
    rng = np.random.default_rng(seed)
    return 10.0 ** rng.uniform(-8.0, -2.0, count), rng.uniform(0.5, 0.7, count)


def turned_pairs(count: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """M of a few turns, and any e."""
    rng = np.random.default_rng(seed)
    return rng.uniform(-60.0, 60.0, count), rng.uniform(0.0, 1.0, count)


def far_pairs(count: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """M of 1e8 to 2**53 rad, and 1 - e even in the logarithm, so that some lanes are near periastron at high e."""
    rng = np.random.default_rng(seed)
    return 10.0 ** rng.uniform(8.0, 15.95, count) * rng.choice([-1.0, 1.0], count), 10.0 ** rng.uniform(
        -6.0, 0.0, count
    )


@pytest.mark.parametrize("given_as", ["eccentricity", "one_minus_eccentricity"])
@pytest.mark.parametrize(
    ("pairs", "share"),
    [(random_pairs, 0.0055), (hard_pairs, 0.035), (slow_pairs, 0.02), (turned_pairs, 8e-4), (far_pairs, 1e-4)],
)
def test_a_large_sample_stays_within_the_guarantee(pairs: Any, share: float, given_as: str) -> None:
    """Among 5e4 lanes, whose worst is far worse than that of a few hundred, none is off by more than 2 ulp.

    Few are off by more than 1 ulp: the shares are what is found and a fifth or more, which is no matter of luck, for
    the method has no operation that machines round differently; a rounding that slips into it raises the shares.
    """
    M, o = pairs(50_000, 2)
    if given_as == "eccentricity":
        e = np.nextafter(1.0 - o, 0.0)  # below 1, and with a last bit that 1 - e has no room for where e < 0.5
        E, e_pair, o_pair = eccentric_anomaly(M, e), single(e), less(e)
    else:
        E, e_pair, o_pair = eccentric_anomaly(M, 1.0 - o, one_minus_eccentricity=o), less(o), single(o)
    good = within(2, M, E, e_pair, o_pair)  # the guarantee of the docstring
    assert good.all(), (M[~good], o[~good])
    assert 1.0 - np.mean(within(1, M, E, e_pair, o_pair)) <= share


def test_the_check_of_large_samples_can_fail() -> None:
    """The check sees an error of 3 ulp, so that its silence means something."""
    M, o = random_pairs(10_000, 4)
    E = eccentric_anomaly(M, 1.0 - o, one_minus_eccentricity=o)
    worse = E + 5.0 * np.spacing(np.abs(E))  # 5 less the 2 that E itself may be off
    assert not within(2, M, worse, less(o), single(o)).any()


@pytest.mark.parametrize("function", [mean_anomaly, true_anomaly, eccentric_anomaly_from_true])
@pytest.mark.parametrize("pairs", [nasty_pairs(), random_pairs(400, 5)], ids=["nasty", "random"])
def test_the_other_anomalies_agree_with_many_digits(function: Any, pairs: tuple[np.ndarray, np.ndarray]) -> None:
    """M of E, v of E and E of v have few roundings, near periastron at e -> 1 and on far turns too."""
    angle, o = pairs
    found = function(angle, 1.0 - o, one_minus_eccentricity=o)
    with mp.workdps(400):  # 1e300 rad has 300 digits before the point
        exact = [EXACT[function](mp.mpf(float(x)), mp.mpf(float(y))) for x, y in zip(angle, o, strict=True)]
        errors = [ulps(x, y) for x, y in zip(found, exact, strict=True)]
    assert max(errors) <= 5.0, (angle[np.argmax(errors)], o[np.argmax(errors)])  # about ten roundings of half an ulp


def exact_true_anomaly(E: Any, o: Any) -> Any:
    """Use tan(v/2) = sqrt((1 + e) / (1 - e)) tan(E/2), on the turn of E."""
    turn = mp.nint(E / (2 * mp.pi))
    half = E / 2 - mp.pi * turn
    return 2 * mp.atan2(mp.sqrt(2 - o) * mp.sin(half), mp.sqrt(o) * mp.cos(half)) + 2 * mp.pi * turn


def exact_eccentric_anomaly_from_true(v: Any, o: Any) -> Any:
    """Use the same formula the other way."""
    turn = mp.nint(v / (2 * mp.pi))
    half = v / 2 - mp.pi * turn
    return 2 * mp.atan2(mp.sqrt(o) * mp.sin(half), mp.sqrt(2 - o) * mp.cos(half)) + 2 * mp.pi * turn


EXACT: dict[Any, Any] = {
    mean_anomaly: lambda E, o: E - (1 - o) * mp.sin(E),
    true_anomaly: exact_true_anomaly,
    eccentric_anomaly_from_true: exact_eccentric_anomaly_from_true,
}

angles = st.floats(-1e6, 1e6)
near_angles = st.floats(-math.pi, math.pi)
complements = st.one_of(st.floats(1e-15, 1.0), st.floats(-15.0, 0.0).map(lambda power: 10.0**power))
examples = settings(max_examples=60, deadline=None)


@examples
@given(M=near_angles, o=complements)
def test_mean_anomaly_undoes_eccentric_anomaly(M: float, o: float) -> None:
    """M of E of M is M, relatively, down to the smallest M."""
    E = eccentric_anomaly(M, 1.0 - o, one_minus_eccentricity=o)
    back = mean_anomaly(E, 1.0 - o, one_minus_eccentricity=o)
    # E is off by 2 ulp, M goes at most with its cube, and a few roundings; denormals have fewer digits
    assert back == pytest.approx(M, rel=12 * EPS, abs=1e-320)


@examples
@given(E=angles, o=complements)
def test_the_true_anomaly_goes_there_and_back(E: float, o: float) -> None:
    """E of v of E is E, as nearly as the rounding of v allows."""
    e = 1.0 - o
    v = true_anomaly(E, e, one_minus_eccentricity=o)
    back = eccentric_anomaly_from_true(v, e, one_minus_eccentricity=o)
    slope = (o + 2.0 * e * math.sin(E / 2) ** 2) / math.sqrt(o * (1.0 + e))  # dE/dv
    # five ulp of v, see above, and five of E
    assert abs(back - E) <= 5 * (slope * np.spacing(abs(v)) + np.spacing(abs(E))) + 1e-320


@examples
@given(x=st.floats(allow_nan=False, allow_infinity=False), o=complements)
@pytest.mark.parametrize("function", FUNCTIONS)
def test_the_anomalies_are_odd(function: Any, x: float, o: float) -> None:
    """f(-x) = -f(x), to the last bit, for every finite x."""
    e = 1.0 - o
    assert function(-x, e, one_minus_eccentricity=o) == -function(x, e, one_minus_eccentricity=o)


@examples
@given(x=near_angles, turns=st.integers(-(10**7), 10**7), e=st.floats(0.0, 0.9))
@pytest.mark.parametrize("function", FUNCTIONS)
def test_a_whole_turn_goes_through(function: Any, x: float, turns: int, e: float) -> None:
    """f(x + 2 pi k) = f(x) + 2 pi k, as nearly as x + 2 pi k can be written down."""
    shift = 2.0 * math.pi * turns
    # x + shift is rounded twice, the slope is at most 1 / (1 - e) = 10, the result and its shift are rounded
    allowed = 14 * np.spacing(abs(shift) + math.pi)
    assert abs(function(x + shift, e) - (function(x, e) + shift)) <= allowed


@examples
@given(x=angles, o=complements)
def test_an_anomaly_stays_on_its_turn(x: float, o: float) -> None:
    """|E - M| <= e: the whole turns of M are those of E."""
    e = 1.0 - o
    E = eccentric_anomaly(x, e, one_minus_eccentricity=o)
    assert abs(E - x) <= e + 2 * np.spacing(abs(E))  # two ulp, the guarantee


@pytest.mark.parametrize("function", FUNCTIONS)
@pytest.mark.parametrize("o", [1.0, 0.3, 1e-3, 1e-9, 1e-15])
def test_the_anomalies_rise_without_a_jump(function: Any, o: float) -> None:
    """Over seven turns, finer near the half turns and periastron, each anomaly rises and nowhere leaps."""
    offsets = np.concatenate([-np.geomspace(1.0, 1e-12, 300), [0.0], np.geomspace(1e-12, 1.0, 300)])
    x = np.unique(np.concatenate([np.linspace(-23.5, 23.5, 20_001), *(k * np.pi + offsets for k in range(-7, 8))]))
    y = function(x, 1.0 - o, one_minus_eccentricity=o)
    steps = np.diff(y)
    assert (steps >= -4 * np.spacing(np.abs(y[1:]))).all()  # each of two neighbours may be off by 2 ulp
    # the offsets grow by 9.7 percent a step, and none of the functions grows faster than its argument's offset
    assert steps.max() < 0.12


def test_a_circle_has_one_anomaly() -> None:
    """At e = 0 all four functions return their argument, up to the rounding of their formula."""
    x = np.concatenate([np.array(NASTY_M), np.random.default_rng(6).uniform(-1e4, 1e4, 1000)])
    for function in FUNCTIONS:
        assert (np.abs(function(x, 0.0) - x) <= np.spacing(np.abs(x))).all(), function.__name__


@pytest.mark.parametrize("function", FUNCTIONS)
def test_arguments_broadcast(function: Any) -> None:
    """Shapes (4, 1), (5,) and () make (4, 5), lane by lane the same bits as one call for each."""
    x = np.array([[-40.0], [-1.0], [0.0], [2.0**29 + 1.0]])
    o = np.array([1.0, 0.5, 1e-3, 1e-15, 1e-16])
    found = function(x, 1.0 - o, one_minus_eccentricity=o)
    alone = [[function(a, 1.0 - b, one_minus_eccentricity=b) for b in o] for a in x[:, 0]]
    assert found.shape == (4, 5)
    assert found.dtype == np.float64
    np.testing.assert_array_equal(found, alone)
    np.testing.assert_array_equal(function(x[:, 0], 0.25), function(x[:, 0], np.full(4, 0.25)))
    np.testing.assert_array_equal(function(1.5, 1.0 - o), function(np.full(5, 1.5), 1.0 - o))


@pytest.mark.parametrize("function", FUNCTIONS)
def test_a_batch_is_its_parts(function: Any) -> None:
    """Lanes do not see each other: a large batch, of several cache blocks, has the bits of its parts."""
    M, o = random_pairs(50_001, 7)
    e = 1.0 - o
    whole = function(M, e, one_minus_eccentricity=o)
    parts = [
        function(M[i : i + 997], e[i : i + 997], one_minus_eccentricity=o[i : i + 997]) for i in range(0, 50_001, 997)
    ]
    np.testing.assert_array_equal(whole, np.concatenate(parts))
    np.testing.assert_array_equal(function(M.reshape(3, -1)[:, ::2], 0.4), function(M, 0.4).reshape(3, -1)[:, ::2])


@pytest.mark.parametrize("function", FUNCTIONS)
def test_a_scalar_in_is_a_numpy_scalar_out(function: Any) -> None:
    """Python numbers, numpy scalars and arrays of shape () give a float64 scalar; integers are taken as numbers."""
    for x in (2, 2.0, np.float64(2.0), np.array(2.0), np.int32(2)):
        result = function(x, 0.25)
        assert type(result) is np.float64
        assert result == function([2.0], [0.25])[0]
    assert type(function(2.0, 0.25, one_minus_eccentricity=0.75)) is np.float64


@pytest.mark.parametrize("function", FUNCTIONS)
def test_no_lane_is_no_trouble(function: Any) -> None:
    """An empty batch has an empty answer of the right shape."""
    assert function(np.empty((0, 3)), 0.5).shape == (0, 3)
    assert function(np.empty(0), np.empty((2, 0))).shape == (2, 0)


@pytest.mark.parametrize("function", FUNCTIONS)
def test_the_arguments_stay_as_they_are(function: Any) -> None:
    """No function writes into its arguments, nor hands them back."""
    M, o = random_pairs(1000, 8)
    arguments = [M, 1.0 - o, o]
    before = [a.copy() for a in arguments]
    result = function(M, arguments[1], one_minus_eccentricity=o)
    for a, b in zip(arguments, before, strict=True):
        np.testing.assert_array_equal(a, b)
        assert not np.shares_memory(result, a)


@pytest.mark.parametrize("function", FUNCTIONS)
def test_nothing_overflows_or_is_undefined(function: Any) -> None:
    """Over the whole domain no floating-point fault happens on the way, and every answer is finite."""
    x, o = nasty_pairs()
    x[:40] *= 5e-324  # the smallest numbers of all, with fewer digits than others; underflow is harmless
    with np.errstate(all="raise"):
        assert np.isfinite(function(x, 1.0 - o, one_minus_eccentricity=o)).all()


BAD = [
    ({"e": 1.0}, "eccentricity: expected 0 <= eccentricity < 1, found 1.0"),
    ({"e": -0.1}, "eccentricity: expected 0 <= eccentricity < 1, found -0.1"),
    ({"e": math.nan}, "eccentricity: expected 0 <= eccentricity < 1, found nan"),
    ({"e": [[0.5], [1.2]]}, "eccentricity: expected 0 <= eccentricity < 1, found 1.2 at index (1, 0)"),
    ({"x": math.inf}, "expected a finite number [rad], found inf"),
    ({"x": [1.0, 2.0, math.nan, math.inf]}, "expected a finite number [rad], found nan at index (2,)"),
    ({"x": [[1.0], [-math.inf]]}, "expected a finite number [rad], found -inf at index (1, 0)"),
    ({"x": 1j}, "expected real numbers, found an array of type complex128"),
    ({"x": "1.0"}, "expected real numbers, found an array of type <U3"),
    ({"e": True}, "eccentricity: expected real numbers, found an array of type bool"),
    ({"o": 0.0, "e": 1.0}, "one_minus_eccentricity: expected 1e-60 <= one_minus_eccentricity <= 1, found 0.0"),
    ({"o": [0.5, math.nan]}, "one_minus_eccentricity <= 1, found nan at index (1,)"),
    ({"o": 1e-9, "e": 1.1}, "eccentricity: expected 0 <= eccentricity <= 1, found 1.1"),
    ({"o": 0.25}, "eccentricity + one_minus_eccentricity - 1: expected -1e-12 <= "),
    ({"o": 0.5 + 1e-9}, "eccentricity + one_minus_eccentricity - 1: expected -1e-12 <= "),
    (
        {"x": np.zeros(3), "e": np.zeros(4)},
        "arguments: expected shapes that broadcast together, found anomaly (3,), eccentricity (4,)",
    ),
    (
        {"o": np.full(3, 0.5), "e": np.full(4, 0.5)},
        "shapes that broadcast together, found eccentricity (4,), one_minus_eccentricity (3,)",
    ),
]


@pytest.mark.parametrize(("arguments", "message"), BAD)
@pytest.mark.parametrize("function", FUNCTIONS)
def test_what_is_out_of_range_is_refused_by_name(function: Any, arguments: dict[str, Any], message: str) -> None:
    """The error names what is wrong, the range with its unit, and the first value outside it with its index."""
    given_values = {"x": 1.0, "e": 0.5, "o": None, **arguments}
    with pytest.raises(OutOfRange) as caught:
        function(given_values["x"], given_values["e"], one_minus_eccentricity=given_values["o"])
    assert message in str(caught.value)
    assert isinstance(caught.value, ValueError)
    assert isinstance(caught.value, ClockfallError)
    if "x" in arguments and "e" not in arguments:
        assert caught.value.what in {"mean_anomaly", "eccentric_anomaly", "true_anomaly"}


def test_a_rounded_eccentricity_of_one_is_taken_with_its_complement() -> None:
    """Where 1 - e is below the resolution of e, e = 1 is what a caller has; 1 - e then says what is meant."""
    small = 1e-20
    E = eccentric_anomaly(1e-12, 1.0, one_minus_eccentricity=small)
    # near periastron M = (1 - e) E + E**3 / 6, here with (1 - e) E negligible: 5 roundings, and E**2 / 60 = 5e-10
    assert float(E) == pytest.approx((6e-12) ** (1 / 3), rel=1e-9, abs=0.0)
    assert mean_anomaly(E, 1.0, one_minus_eccentricity=small) == pytest.approx(1e-12, rel=12 * EPS, abs=0.0)
