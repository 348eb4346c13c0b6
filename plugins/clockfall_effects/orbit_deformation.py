"""Relativistic deformation of the orbit: the radial and angular eccentricities differ from e_T."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Delay, Parameter, Predicted, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="orbit-deformation",
        summary="The orbit is not quite an ellipse: e_r = e (1 + delta_r), e_theta = e (1 + delta_theta).",
        formula=(
            "delta_r = beta^2 (3 X_1^2 + 6 X_1 X_2 + 2 X_2^2),  delta_theta = beta^2 (7/2 X_1^2 + 6 X_1 X_2 + 2 X_2^2)"
        ),
        sources=("Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44, 263",),
        order=(
            "leading order (1PN); that the advance follows the true anomaly of e_theta, not of e, is left out: k e "
            "delta_theta of the orbit's size"
        ),
        valid="beta^2 << 1",
        needs=("mass_1", "mass_2", "orbital_period"),
        gives=(
            Parameter("radial_deformation", "", "delta_r, relative excess of the radial eccentricity"),
            Parameter("angular_deformation", "", "delta_theta, relative excess of the angular eccentricity"),
        ),
        delay="what the deformation changes of the Roemer delay",
    )


@hook
def predicted_parameters(state: BinaryState) -> Predicted:
    """Return both deformations [1]; shape batch."""
    m_1, m_2, M, beta = state.known("mass_1", "mass_2", "total_mass", "orbital_velocity")
    X_1, X_2 = m_1 / M, m_2 / M
    common = 6.0 * X_1 * X_2 + 2.0 * X_2**2
    return Predicted(
        {
            "radial_deformation": beta**2 * (3.0 * X_1**2 + common),
            "angular_deformation": beta**2 * (3.5 * X_1**2 + common),
        }
    )


@hook
def delay(orbit: Orbit, parameters: Mapping[str, FloatArray]) -> Delay:
    """Return the Roemer delay of the deformed orbit less that of the ellipse [s]; shape batch + (times,).

    Damour & Deruelle (1986): x [sin omega (cos E - e_r) + sqrt(1 - e_theta^2) cos omega sin E].
    """
    e, root = orbit.eccentricity, orbit.root
    delta_r, delta_theta = parameters["radial_deformation"], parameters["angular_deformation"]
    # sqrt(1 - e_theta^2) - sqrt(1 - e^2), without the difference of near numbers
    wider = -(e**2) * delta_theta * (2.0 + delta_theta)
    narrowed = wider / (root + np.sqrt(root**2 + wider))
    x = orbit.projected_semi_major_axis
    return Delay(x * (narrowed * orbit.cos_omega * orbit.sin_E - orbit.sin_omega * e * delta_r))
