"""A scrambled Sobol sequence: points that fill the unit cube more evenly than chance would.

Sobol 1967, USSR Comput. Math. Math. Phys. 7, 86; direction numbers of Joe & Kuo 2008, SIAM J. Sci. Comput. 30, 2635;
random linear scrambling and a digital shift after Matousek 1998, J. Complexity 14, 527. The first 2^k points are a
digital net whatever the scrambling. scipy.stats has the same sequence; it is written out here since the import alone of
scipy.stats takes longer than all else that a command does.
"""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from clockfall.binary.ranges import FloatArray
from clockfall.errors import OutOfRange

BITS: Final = 52
"""Of each coordinate: a half unit added to it is still a double below 1."""

_JOE_KUO: Final = (
    (3, 1),
    (7, 1, 3),
    (11, 1, 3, 1),
    (13, 1, 1, 1),
    (19, 1, 1, 3, 3),
    (25, 1, 3, 5, 13),
    (37, 1, 1, 5, 5, 17),
    (41, 1, 1, 5, 5, 5),
    (47, 1, 1, 7, 11, 19),
    (55, 1, 1, 5, 1, 1),
    (59, 1, 1, 1, 3, 11),
    (61, 1, 3, 5, 5, 31),
    (67, 1, 3, 3, 9, 7, 49),
    (91, 1, 1, 1, 15, 21, 21),
    (97, 1, 3, 1, 13, 27, 49),
    (103, 1, 1, 1, 15, 7, 5),
    (109, 1, 3, 1, 15, 13, 25),
    (115, 1, 1, 5, 5, 19, 61),
    (131, 1, 3, 7, 11, 23, 15, 103),
    (137, 1, 3, 7, 13, 13, 15, 69),
    (143, 1, 1, 3, 13, 7, 35, 63),
    (145, 1, 3, 5, 9, 1, 25, 53),
    (157, 1, 3, 1, 13, 9, 35, 107),
    (167, 1, 3, 1, 5, 27, 61, 31),
    (171, 1, 1, 5, 11, 19, 41, 61),
    (185, 1, 3, 5, 3, 3, 13, 69),
    (191, 1, 1, 7, 13, 1, 19, 1),
    (193, 1, 3, 7, 5, 13, 19, 59),
    (203, 1, 1, 3, 9, 25, 29, 41),
    (211, 1, 3, 5, 13, 23, 1, 55),
    (213, 1, 3, 7, 3, 13, 59, 17),
    (229, 1, 3, 1, 3, 5, 53, 69),
    (239, 1, 1, 5, 5, 23, 33, 13),
    (241, 1, 1, 7, 7, 1, 61, 123),
    (247, 1, 1, 7, 9, 13, 61, 49),
    (253, 1, 3, 3, 5, 3, 55, 33),
    (285, 1, 3, 1, 15, 31, 13, 49, 245),
    (299, 1, 3, 5, 15, 31, 59, 63, 97),
    (301, 1, 3, 1, 11, 11, 11, 77, 249),
    (333, 1, 3, 1, 11, 27, 43, 71, 9),
    (351, 1, 1, 7, 15, 21, 11, 81, 45),
    (355, 1, 3, 7, 3, 25, 31, 65, 79),
    (357, 1, 3, 1, 1, 19, 11, 3, 205),
    (361, 1, 1, 5, 9, 19, 21, 29, 157),
    (369, 1, 3, 7, 11, 1, 33, 89, 185),
    (391, 1, 3, 3, 3, 15, 9, 79, 71),
    (397, 1, 3, 7, 11, 15, 39, 119, 27),
    (425, 1, 1, 3, 1, 11, 31, 97, 225),
    (451, 1, 1, 1, 3, 23, 43, 57, 177),
    (463, 1, 3, 7, 7, 17, 17, 37, 71),
    (487, 1, 3, 1, 5, 27, 63, 123, 213),
    (501, 1, 1, 3, 5, 11, 43, 53, 133),
    (529, 1, 3, 5, 5, 29, 17, 47, 173, 479),
    (539, 1, 3, 3, 11, 3, 1, 109, 9, 69),
    (545, 1, 1, 1, 5, 17, 39, 23, 5, 343),
    (557, 1, 3, 1, 5, 25, 15, 31, 103, 499),
    (563, 1, 1, 1, 11, 11, 17, 63, 105, 183),
    (601, 1, 1, 5, 11, 9, 29, 97, 231, 363),
    (607, 1, 1, 5, 15, 19, 45, 41, 7, 383),
    (617, 1, 3, 7, 7, 31, 19, 83, 137, 221),
    (623, 1, 1, 1, 3, 23, 15, 111, 223, 83),
    (631, 1, 1, 5, 13, 31, 15, 55, 25, 161),
    (637, 1, 1, 3, 13, 25, 47, 39, 87, 257),
)
"""For each dimension after the first: the primitive polynomial as bits, then the first direction integers m."""

DIMENSIONS: Final = len(_JOE_KUO) + 1

_Bits = npt.NDArray[np.uint64]


def sobol(dimensions: int, power: int, rng: np.random.Generator | None) -> FloatArray:
    """Return the first 2^power points.

    Parameters
    ----------
    dimensions : int
        From 1 to `DIMENSIONS`.
    power : int
        From 0 to 30.
    rng : numpy Generator or None
        Scrambles the sequence; None leaves it plain.

    Returns
    -------
    array, shape (dimensions, 2^power)
        In (0, 1), each coordinate in the middle of its cell of 2^-52; the order of the points is the natural one.

    Raises
    ------
    OutOfRange
        Too many dimensions or points.
    """
    if not 1 <= dimensions <= DIMENSIONS:
        raise OutOfRange("dimensions of a Sobol sequence", f"1 to {DIMENSIONS}", str(dimensions))
    if not 0 <= power <= 30:
        raise OutOfRange("power of a Sobol sequence", "0 to 30", str(power))
    directions = _directions(dimensions, power)
    shift = np.zeros(dimensions, dtype=np.uint64)
    if rng is not None:
        directions = _scrambled(directions, rng)
        shift = rng.integers(0, 2**BITS, dimensions, dtype=np.uint64)
    points = np.empty((dimensions, 2**power))
    row = np.empty(2**power, dtype=np.uint64)
    for dimension in range(dimensions):  # one at a time, so that it stays in the cache
        row[0] = shift[dimension]
        for k in range(power):  # the second half of each doubling is the first one with one more bit of the index set
            np.bitwise_xor(row[: 2**k], directions[dimension, k], out=row[2**k : 2 ** (k + 1)])
        np.add(row, 0.5, out=points[dimension])
        points[dimension] *= 2.0**-BITS
    return points


def _directions(dimensions: int, power: int) -> _Bits:
    """Return the direction numbers, shape (dimensions, power), as integers of `BITS` bits."""
    found = np.zeros((dimensions, power), dtype=np.uint64)
    found[0] = [1 << (BITS - 1 - k) for k in range(power)]
    for row, (polynomial, *first) in enumerate(_JOE_KUO[: dimensions - 1], start=1):
        degree = polynomial.bit_length() - 1
        m = list(first)
        for k in range(degree, power):
            # the recurrence of Bratley & Fox 1988, ACM Trans. Math. Softw. 14, 88
            value = m[k - degree] ^ (m[k - degree] << degree)
            for i in range(1, degree):
                if polynomial >> (degree - i) & 1:
                    value ^= m[k - i] << i
            m.append(value)
        found[row] = [m[k] << (BITS - 1 - k) for k in range(power)]
    return found


def _scrambled(directions: _Bits, rng: np.random.Generator) -> _Bits:
    """Multiply the bits of each direction number by a random lower triangular matrix with a unit diagonal."""
    dimensions = directions.shape[0]
    place = np.uint64(1) << np.arange(BITS - 1, -1, -1, dtype=np.uint64)  # row r makes the bit of this place
    above = ~(place | (place - np.uint64(1))) & np.uint64(2**BITS - 1)  # the places that stand before it
    rows = (rng.integers(0, 2**BITS, (dimensions, BITS), dtype=np.uint64) & above) | place
    parity = np.bitwise_count(rows[:, :, None] & directions[:, None, :]) & 1
    return np.asarray(np.sum(parity.astype(np.uint64) * place[:, None], axis=1, dtype=np.uint64))
