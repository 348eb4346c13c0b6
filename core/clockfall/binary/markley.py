"""Kepler's equation solved for many lanes at once, by Markley's method without iteration.

F. L. Markley, Celest. Mech. Dyn. Astr. 63, 101 (1995): a starter good to 3e-4 and one fifth-order correction. Arguments
are taken as checked; `clockfall.binary.kepler` is the door.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from clockfall.binary.ranges import FloatArray

# One value for each lane, or one for all.
Lanes: TypeAlias = FloatArray | float
Rows: TypeAlias = Sequence[FloatArray]

# Most lanes worked on at a time: many enough to hide the cost of a call, few enough for the scratch to stay in cache.
_BLOCK = 25_000
_SCRATCH_ROWS = 12
# Doubles in a cache line.
_LINE = 8

# 2 pi in three parts. The first two have 25 bits each, so that a whole number of turns below 2**27 times either of
# them is exact; their sum is the double next to 2 pi.
_TWO_PI_HIGH = float.fromhex("0x1.921fb5p+2")
_TWO_PI_MIDDLE = float.fromhex("0x1.110b46p-24")
_TWO_PI_LOW = float.fromhex("0x1.1a62633145c07p-52")
_TURNS_PER_RADIAN = 0.5 / np.pi
_TWO_PI = 2.0 * np.pi
# Up to here [rad] the number of turns stays below 2**27.
_LARGEST_NEAR_ANOMALY = 2.0**29
# From here on [rad] two neighbouring doubles are 2 rad apart, and |E - M| = |e sin E| < 1 rad is below the rounding.
_COARSE_ANOMALY = 2.0**53

# (E - sin E) / E**3 - 1/6 and (1 - cos E) / E**2 as polynomials in E**2 on 0 <= E <= pi, constant term first: minimax
# in the relative error (Remez exchange in 50 digits, the coefficients rounded one after another, each time refitting
# the rest). Largest errors relative to (E - sin E) / E**3 and (1 - cos E) / E**2: 6e-18 and 8e-15. The second serves
# derivatives alone, which multiply a correction of less than 4e-4 E. The constant term of the first is what the
# double next to 1/6 lacks.
SIXTH = 1.0 / 6.0
E_MINUS_SIN = (
    9.25185853854297e-18,
    -0.008333333333333323,
    0.00019841269841265748,
    -2.7557319223434017e-06,
    2.505210834876495e-08,
    -1.6059042451885537e-10,
    7.647132021707107e-13,
    -2.8110081689602283e-15,
    8.18211574772315e-18,
    -1.7729742158837053e-20,
)
_ONE_MINUS_COS = (
    0.4999999999999961,
    -0.04166666666660838,
    0.00138888888874223,
    -2.4801587157563484e-05,
    2.7557312064040134e-07,
    -2.087655530479638e-09,
    1.146738211692996e-11,
    -4.746502395503361e-14,
    1.3852134129931996e-16,
)

# Cuts 17 bits off the top of a double, so that the cube of what is cut off has no rounding.
_SPLITTER = 2.0**36 + 1.0

# Markley's alpha = (3 pi**2 + 1.6 pi (pi - M) / (1 + e)) / (pi**2 - 6), as alpha = first + second (pi - M) / (1 + e).
_ALPHA_FIRST = 3.0 * np.pi**2 / (np.pi**2 - 6.0)
_ALPHA_SECOND = 1.6 * np.pi / (np.pi**2 - 6.0)

# A double's bit pattern is nearly 2**52 (1023 + log2 x). A third of it plus this is nearly the pattern of the cube
# root; 0.0337 makes the errors of both signs equal, 3.2 percent.
_CUBE_ROOT_BIAS = np.uint64(round((1023.0 * 2.0 / 3.0 - 0.0337) * 2.0**52))


@dataclass(frozen=True, slots=True)
class Eccentricity:
    """The eccentricity in the one form that was given; the other is formed from it where it is needed.

    Attributes
    ----------
    values : ndarray, any shape [1]
        e or 1 - e, checked.
    complement : bool
        Whether they are 1 - e.
    """

    values: FloatArray
    complement: bool

    def pair(self) -> tuple[FloatArray, FloatArray]:
        """Return e and 1 - e."""
        other = np.asarray(1.0 - self.values)
        return (other, self.values) if self.complement else (self.values, other)

    def flattened(self, shape: tuple[int, ...]) -> Eccentricity:
        """Repeat to `shape` and flatten; one value for all lanes stays one value, which costs no memory traffic."""
        flat = self.values if self.values.size == 1 else np.broadcast_to(self.values, shape)
        return Eccentricity(flat.reshape(-1), self.complement)

    def pair_of(self, part: slice, other: FloatArray) -> tuple[Lanes, Lanes]:
        """Return e and 1 - e of some lanes of a flattened one, the form that was not given being put into `other`."""
        if self.values.size == 1:
            value = float(self.values[0])
            return (1.0 - value, value) if self.complement else (value, 1.0 - value)
        given = self.values[part]
        np.subtract(1.0, given, out=other)
        return (other, given) if self.complement else (given, other)


def polynomial(coefficients: tuple[float, ...], t: FloatArray, out: FloatArray) -> FloatArray:
    """Put the polynomial in t into out, by Horner's rule."""
    np.multiply(t, coefficients[-1], out=out)
    for coefficient in coefficients[-2:0:-1]:
        out += coefficient
        out *= t
    out += coefficients[0]
    return out


def solve(M: FloatArray, form: Eccentricity) -> FloatArray:
    """Solve Kepler's equation for flat M, checked, with the eccentricity flat or one for all."""
    if M.size == 0:
        return np.empty(0)
    largest = max(float(M.max()), -float(M.min()))
    if largest > _LARGEST_NEAR_ANOMALY:
        return _solve_far(M, form)
    E = _aligned(M.size)
    blocks = _ceiling(M.size, _BLOCK)
    lanes = _ceiling(M.size, blocks)  # equal blocks, as a short last one would cost as many calls as a full one
    row = _ceiling(lanes, _LINE) * _LINE
    rows = _aligned(_SCRATCH_ROWS * row).reshape(_SCRATCH_ROWS, row)
    solve_block = _solve_first_turn if largest <= np.pi else _solve_any_turn
    for start in range(0, M.size, lanes):
        part = slice(start, start + lanes)
        other, *scratch = rows[:, : E[part].size]
        e, o = form.pair_of(part, other)
        solve_block(M[part], e, o, E[part], scratch)
    return E


def _ceiling(number: int, unit: int) -> int:
    return -(-number // unit)


def _aligned(size: int) -> FloatArray:
    """Return an array, not filled, that begins at a cache line, which makes passes over it up to a quarter faster."""
    memory = np.empty(size + _LINE)
    skip = -(memory.__array_interface__["data"][0] // memory.itemsize) % _LINE
    return memory[skip : skip + size]


def _solve_far(M: FloatArray, form: Eccentricity) -> FloatArray:
    """Solve where some |M| is too large for the quick reduction, leaving the other lanes to it."""
    far = np.abs(M) > _LARGEST_NEAR_ANOMALY
    near = np.where(far, _within_one_turn(M), M)
    E = solve(near, form)
    return np.where(far, M + (E - near), E)


def _within_one_turn(M: FloatArray) -> FloatArray:
    """Return M less its whole turns; 0 where M is so coarse that E = M.

    The remainder by the double next to 2 pi is exact. What that double lacks is then taken off for each turn, which
    may lead over the half turn again.
    """
    near = np.fmod(M, _TWO_PI)
    near -= np.rint(near * _TURNS_PER_RADIAN) * _TWO_PI
    near -= np.rint((M - near) / _TWO_PI) * _TWO_PI_LOW
    near -= np.rint(near * _TURNS_PER_RADIAN) * _TWO_PI
    return np.where(np.abs(M) < _COARSE_ANOMALY, near, 0.0)


def _solve_any_turn(M: FloatArray, e: Lanes, o: Lanes, E: FloatArray, scratch: Rows) -> None:
    """Solve for |M| up to 2**29 rad: take off whole turns, solve, put them back."""
    near, high, low, lowest, *_ = scratch
    turns = high
    np.multiply(M, _TURNS_PER_RADIAN, out=turns)
    np.rint(turns, out=turns)
    np.multiply(turns, _TWO_PI_LOW, out=lowest)
    np.multiply(turns, _TWO_PI_MIDDLE, out=low)
    high *= _TWO_PI_HIGH
    np.subtract(M, high, out=near)
    near -= low
    near -= lowest
    low += lowest
    _solve_first_turn(near, e, o, E, scratch[3:])
    E += low
    E += high


def _solve_first_turn(M: FloatArray, e: Lanes, o: Lanes, E: FloatArray, scratch: Rows) -> None:
    """Solve for |M| <= pi, as an odd function of M."""
    size, *rows = scratch
    np.abs(M, out=size)
    _starter(size, e, o, E, rows)
    _correct(size, e, o, E, rows)
    np.copysign(E, M, out=E)


def _starter(M: FloatArray, e: Lanes, o: Lanes, E: FloatArray, rows: Rows) -> None:
    """Put a first value of E, good to 3e-4 of itself, into E, for 0 <= M <= pi.

    Markley (1995), eqs. 20, 5, 9, 10, 14 and 15 (equation numbers from memory):
    alpha = (3 pi**2 + 1.6 pi (pi - M) / (1 + e)) / (pi**2 - 6),  d = 3 (1 - e) + alpha e,
    q = 2 alpha d (1 - e) - M**2,  r = 3 alpha d (d - 1 + e) M + M**3,  w = (r + sqrt(q**3 + r**2))**(2/3),
    E = (2 r w / (w**2 + w q + q**2) + M) / d.
    """
    alpha, d, r, x, y, M_squared, *_ = rows
    np.add(e, 1.0, out=x)
    np.divide(_ALPHA_SECOND, x, out=x)
    np.subtract(np.pi, M, out=alpha)
    alpha *= x
    alpha += _ALPHA_FIRST

    np.multiply(o, 3.0, out=x)
    np.multiply(alpha, e, out=d)
    d += x

    alpha *= d
    np.multiply(M, M, out=M_squared)
    np.subtract(d, o, out=r)
    r *= alpha
    r *= 3.0
    r += M_squared
    r *= M

    q = alpha
    q *= o
    q += q
    q -= M_squared

    q_squared = M_squared
    np.multiply(q, q, out=q_squared)
    np.multiply(q_squared, q, out=x)
    np.multiply(r, r, out=y)
    x += y
    np.sqrt(x, out=x)
    x += r
    w = E
    _two_thirds_power(x, w, rows[4], rows[6])

    q += w
    q *= w
    q += q_squared
    r *= w
    r += r
    r /= q
    r += M
    np.divide(r, d, out=E)


def _two_thirds_power(x: FloatArray, y: FloatArray, cube: FloatArray, top: FloatArray) -> None:
    """Put x**(2/3) into y, to 5e-5 of itself, for normal x > 0, at a fraction of the cost of a full cube root.

    A first guess at the cube root from the bit pattern, good to 3.2 percent (W. Kahan, Computing a Real Cube Root,
    lecture notes, 1991), then one step of Halley's method, y (2 x + y**3) / (x + 2 y**3), good to 2.3e-5. Spoils x.
    """
    bits = y.view(np.uint64)
    np.floor_divide(x.view(np.uint64), 3, out=bits)
    bits += _CUBE_ROOT_BIAS
    np.multiply(y, y, out=cube)
    cube *= y
    np.add(x, x, out=top)
    top += cube
    x += cube
    x += cube
    top /= x
    y *= top
    y *= y


def _correct(M: FloatArray, e: Lanes, o: Lanes, E: FloatArray, rows: Rows) -> None:
    """Improve E by one fifth-order step, for 0 <= M <= pi.

    Markley (1995), eqs. 21 to 24 (equation numbers from memory). With f = (1 - e) E + e (E - sin E) - M and its
    derivatives f1 = (1 - e) + e (1 - cos E), f2 = e sin E, f3 = e cos E, f4 = -f2, the step E - s is found from
    s = f / (f1 - f f2 / (2 f1)), then from s = f / (f1 - s f2/2 + s**2 f3/6), then from
    s = f / (f1 - s f2/2 + s**2 f3/6 + s**3 f2/24). An E good to 3e-4 of itself becomes good to 1e-17 of itself,
    apart from rounding. E is shortened first, so that its square and its cube have no rounding.
    """
    square, lag, rise, f, s, work, *_ = rows
    _shorten(E, work)
    np.multiply(E, E, out=square)
    polynomial(E_MINUS_SIN, square, lag)
    lag += SIXTH
    np.multiply(square, E, out=work)
    lag *= work
    lag *= e
    polynomial(_ONE_MINUS_COS, square, rise)
    rise *= square
    rise *= e
    _residual(M, e, o, E, lag, (f, s, work))

    half_f2 = work
    np.multiply(E, e, out=half_f2)
    half_f2 -= lag
    half_f2 *= 0.5
    sixth_f3 = square
    np.subtract(e, rise, out=sixth_f3)
    sixth_f3 *= SIXTH
    f1 = rise
    f1 += o
    _step(f, f1, half_f2, sixth_f3, s, lag)
    E -= s


def _shorten(values: FloatArray, work: FloatArray) -> None:
    """Round values to 17 bits, in place: T. J. Dekker, Numer. Math. 18, 224 (1971), after G. W. Veltkamp."""
    np.multiply(values, _SPLITTER, out=work)
    np.subtract(work, values, out=values)
    np.subtract(work, values, out=values)


def _residual(M: FloatArray, e: Lanes, o: Lanes, E: FloatArray, lag: FloatArray, rows: Rows) -> None:
    """Put f = (1 - e) E + lag - M into the first row, where lag = e (E - sin E).

    M is first taken off the larger of the two terms, which is at least about M/2, so that neither this difference nor
    the sum with the smaller term is rounded. At last comes what 1 - e lost when it was formed from e.
    """
    f, smaller, lost = rows
    np.multiply(o, E, out=smaller)
    np.maximum(smaller, lag, out=f)
    np.minimum(smaller, lag, out=smaller)
    f -= M
    f += smaller
    np.subtract(1.0, o, out=lost)
    lost -= e
    lost *= E
    f += lost


def _step(
    f: FloatArray, f1: FloatArray, half_f2: FloatArray, sixth_f3: FloatArray, s: FloatArray, work: FloatArray
) -> None:
    """Put the step of `_correct` into s. Spoils work."""
    np.divide(f, f1, out=s)
    s *= half_f2
    np.subtract(f1, s, out=s)
    np.divide(f, s, out=s)

    np.multiply(s, sixth_f3, out=work)
    _divide_by_slope(f, f1, half_f2, s, work)

    np.multiply(half_f2, 1.0 / 12.0, out=work)
    work *= s
    work += sixth_f3
    work *= s
    _divide_by_slope(f, f1, half_f2, s, work)


def _divide_by_slope(f: FloatArray, f1: FloatArray, half_f2: FloatArray, s: FloatArray, work: FloatArray) -> None:
    """Replace s by f / (f1 - s (half_f2 - work)). Spoils work."""
    np.subtract(half_f2, work, out=work)
    work *= s
    np.subtract(f1, work, out=work)
    np.divide(f, work, out=s)
