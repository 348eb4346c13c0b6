"""Directions on the sky, in equatorial and Galactic coordinates."""

from __future__ import annotations

from typing import Final

import numpy as np

from clockfall.binary.ranges import FloatArray

EQUATORIAL_TO_GALACTIC: Final = (
    (-0.0548755604, -0.8734370902, -0.4838350155),
    (0.4941094279, -0.4448296300, 0.7469822445),
    (-0.8676661490, -0.1980763734, 0.4559837762),
)
"""The rotation from ICRS to Galactic axes: The Hipparcos and Tycho Catalogues (ESA SP-1200, 1997), vol. 1, eq. (1.5.11)
(equation number from memory)."""


def equatorial_direction(
    right_ascension: FloatArray, declination: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return the components of the unit vector along the three ICRS axes [1].

    Parameters
    ----------
    right_ascension, declination : array, broadcast with each other [rad]
        ICRS.
    """
    x = np.cos(declination) * np.cos(right_ascension)
    y = np.cos(declination) * np.sin(right_ascension)
    z = np.sin(declination)
    return x, y, z


def galactic_direction(
    right_ascension: FloatArray, declination: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return the components of the unit vector towards the Galactic centre, rotation, and north pole [1].

    Parameters
    ----------
    right_ascension, declination : array, any shape [rad]
        ICRS.
    """
    x, y, z = equatorial_direction(right_ascension, declination)
    towards, along, north = (a * x + b * y + c * z for a, b, c in EQUATORIAL_TO_GALACTIC)
    return towards, along, north
