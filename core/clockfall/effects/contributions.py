"""What a hook may return. Each is data: frozen, and fit to be pickled."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from clockfall.binary.ranges import FloatArray

Settings = Mapping[str, FloatArray]
"""An effect's own parameters by name, each in its declared unit and of the state's batch shape, read-only."""

Values = Mapping[str, FloatArray | np.float64]


@dataclass(frozen=True, slots=True)
class Rates:
    """Orbit-averaged contributions to d(field)/dt.

    Attributes
    ----------
    of : mapping of str to array, shape batch [the field's unit per second]
        By field name, for instance ``Rates({"orbital_period": P_b_rate})``.
    """

    of: Values


@dataclass(frozen=True, slots=True)
class Predicted:
    """Predicted parameters.

    Attributes
    ----------
    values : mapping of str to array, shape batch [the unit declared on the card]
        By parameter name.
    """

    values: Values


@dataclass(frozen=True, slots=True)
class Caution:
    """A statement that a number is used outside, or near the edge of, its range of validity.

    Attributes
    ----------
    statement : str
        One sentence, with the size of the matter.
    """

    statement: str


@dataclass(frozen=True, slots=True)
class ClosedFormTrack:
    """The exact evolution under one effect alone.

    Attributes
    ----------
    orbital_period, eccentricity : array, shape batch + (times,) [s], [1]
        At each time; NaN after merger.
    merger_time : array, shape batch [s]
        From the state's instant to merger.
    """

    orbital_period: FloatArray
    eccentricity: FloatArray
    merger_time: FloatArray | np.float64
