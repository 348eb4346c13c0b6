"""Relativistic deformation of the orbit: the radial and angular eccentricities differ from e_T."""

from __future__ import annotations

from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Parameter, Predicted, hook


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
        order="leading order (1PN)",
        valid="beta^2 << 1",
        needs=("mass_1", "mass_2", "orbital_period"),
        gives=(
            Parameter("radial_deformation", "", "delta_r, relative excess of the radial eccentricity"),
            Parameter("angular_deformation", "", "delta_theta, relative excess of the angular eccentricity"),
        ),
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
