"""Geodetic precession: each body's spin turns about the orbit in the curved space of the other."""

from __future__ import annotations

from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Parameter, Predicted, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="geodetic-precession",
        summary="Each body's spin axis swings round the orbital angular momentum.",
        formula="Omega_1 = n beta^2 X_2 (4 X_1 + 3 X_2)/(2 (1-e^2));  Omega_2 with the bodies exchanged",
        sources=("Barker & O'Connell 1975, Phys. Rev. D 12, 329",),
        order="leading order (1PN), averaged over the orbit",
        valid="beta^2/(1 - e^2) << 1; spins small against the orbital angular momentum",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(
            Parameter("geodetic_precession_rate_1", "rad/s", "rate at which body 1's spin precesses", "deg/yr"),
            Parameter("geodetic_precession_rate_2", "rad/s", "rate at which body 2's spin precesses", "deg/yr"),
        ),
    )


@hook
def predicted_parameters(state: BinaryState) -> Predicted:
    """Return both precession rates [rad/s]; shape batch."""
    m_1, m_2, M, n = state.known("mass_1", "mass_2", "total_mass", "mean_motion")
    beta, s_2 = state.known("orbital_velocity", "one_minus_e_squared")

    def rate(own: FloatArray, other: FloatArray) -> FloatArray:
        return n * beta**2 * other * (4.0 * own + 3.0 * other) / (2.0 * s_2)

    X_1, X_2 = m_1 / M, m_2 / M
    return Predicted({"geodetic_precession_rate_1": rate(X_1, X_2), "geodetic_precession_rate_2": rate(X_2, X_1)})
