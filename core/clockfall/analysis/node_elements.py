"""Near-circular orbits by Laplace-Lagrange elements: e sin omega, e cos omega and a passage of the ascending node.

The mean longitude M + omega is 0 at that passage, and the period between such passages is shorter than that between
periastrons by 1 + k, since periastron runs ahead by k radians for each radian of mean anomaly. The conversion is exact;
no expansion in e is involved.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import FloatArray
from clockfall.errors import BadInput

if TYPE_CHECKING:
    from clockfall.analysis.draws import Sample

_TWO_PI = 2.0 * math.pi


def periastron_elements(
    sine: FloatArray, cosine: FloatArray, node_epoch: Epoch, period: FloatArray | Epoch
) -> dict[str, FloatArray | Epoch]:
    """Return eccentricity, longitude and epoch of periastron, for a period as it is given; shape batch.

    Parameters
    ----------
    sine, cosine : array, shape batch [1]
        e sin omega and e cos omega.
    node_epoch : Epoch, shape batch
    period : array, shape batch [s]

    Raises
    ------
    BadInput
        e is 1 or more in the middle.
    """
    assert isinstance(period, np.ndarray)
    e = np.hypot(sine, cosine)
    if not e[0] < 1.0:
        raise BadInput(f"eccentricity_sine and eccentricity_cosine: expected e < 1, found e = {e[0]:.6g}")
    omega = np.mod(np.arctan2(sine, cosine), _TWO_PI)
    return {
        "eccentricity": np.minimum(e, np.nextafter(1.0, 0.0)),
        "longitude_of_periastron": omega,
        "periastron_epoch": node_epoch.plus_seconds(omega / _TWO_PI * period),
    }


def anomalistic(sample: Sample, advance: Callable[[Sample], FloatArray]) -> Sample:
    """Return a sample whose period runs from periastron to periastron.

    Parameters
    ----------
    advance : callable
        Sample -> its intrinsic rate of the longitude of periastron, shape batch [rad/s].
    """
    state = sample.state
    P_node, omega = state.known("orbital_period", "longitude_of_periastron")
    epoch = state.periastron_epoch
    assert epoch is not None
    found: Sample = sample
    for _ in range(3):  # k changes by k^2 of itself as the period does: twice would do
        k = advance(found) * found.state.known("orbital_period")[0] / _TWO_PI
        P = P_node * (1.0 + k)
        changed: dict[str, Any] = {
            "orbital_period": P,
            # periastron has moved on until it is passed
            "longitude_of_periastron": omega * (1.0 + k),
            "periastron_epoch": epoch.plus_seconds(omega / _TWO_PI * (P - P_node)),
        }
        found = replace(sample, state=state.replace(**changed), counts_nodes=False)
    return found
