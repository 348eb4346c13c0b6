"""Mass ratio: both bodies move round one centre of mass, on orbits whose sizes are as the masses of the other."""

from __future__ import annotations

from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Parameter, Predicted, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="mass-ratio",
        summary="Both bodies circle one centre of mass: where both orbits are timed, their sizes give the mass ratio.",
        formula="R = x_2/x_1 = m_1/m_2",
        sources=(
            "Damour & Deruelle 1985, Ann. Inst. H. Poincare A 43, 107 (from memory)",
            "Lyne et al. 2004, Science 303, 1153",
        ),
        order="exact to 1PN with the orbits' sizes of Damour & Deruelle, whatever the theory of gravity",
        valid="two bodies; the terms dropped are smaller by beta^4",
        needs=("mass_1", "mass_2"),
        gives=(Parameter("mass_ratio", "", "ratio m_1/m_2, that of the two projected semi-major axes x_2/x_1"),),
    )


@hook
def predicted_parameters(state: BinaryState) -> Predicted:
    """Return R = m_1/m_2 [1]; shape batch."""
    m_1, m_2 = state.known("mass_1", "mass_2")
    return Predicted({"mass_ratio": m_1 / m_2})
