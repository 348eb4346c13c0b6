"""Hypothesis strategies for binaries."""

from __future__ import annotations

from typing import Any

import numpy as np
from hypothesis import strategies as st

from clockfall.binary.constants import T_SUN
from clockfall.binary.state import BinaryState

FASTEST = 0.3
"""The largest orbital velocity beta [c] that is drawn: beyond it no post-Newtonian formula means anything."""


def eccentricities(largest: float = 0.9999) -> st.SearchStrategy[float]:
    """Draw eccentricities, with 0 and the largest among them [1]."""
    return st.one_of(st.just(0.0), st.just(largest), st.floats(0.0, largest, allow_subnormal=False))


def _slow_enough(fields: dict[str, Any]) -> bool:
    total = np.asarray(fields["mass_1"]) + np.asarray(fields["mass_2"])
    return bool(np.all(T_SUN * total * 2.0 * np.pi / np.asarray(fields["orbital_period"]) < FASTEST**3))


@st.composite
def binaries(draw: st.DrawFn, shape: tuple[int, ...] = (), largest_eccentricity: float = 0.9999) -> BinaryState:
    """Draw states with masses 0.1 ... 100 Msun, periods 10 s ... 10^4 d, any e up to the largest.

    Parameters
    ----------
    shape : tuple of int
        The batch shape.
    largest_eccentricity : float
        At most 1 - 1e-15 [1].
    """

    def array(elements: st.SearchStrategy[float]) -> Any:
        size = int(np.prod(shape))
        values = draw(st.lists(elements, min_size=size, max_size=size))
        return np.reshape(np.array(values), shape)

    logs = st.floats(-1.0, 2.0)
    fields = {
        "mass_1": 10.0 ** array(logs),
        "mass_2": 10.0 ** array(logs),
        "orbital_period": 10.0 ** array(st.floats(1.0, 8.9)),
        "eccentricity": array(eccentricities(largest_eccentricity)),
        "longitude_of_periastron": array(st.floats(0.0, 2.0 * np.pi)),
    }
    if not _slow_enough(fields):
        fields["orbital_period"] = fields["orbital_period"] * 1e3
    return BinaryState(**fields)
