"""Advance of periastron at the second post-Newtonian order."""

from __future__ import annotations

from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="periastron-advance-second-order",
        summary="The second order of general relativity's advance of periastron.",
        formula=(
            "omega rate = 3 n beta^4/(1-e^2) [(39/4 X_1^2 + 27/4 X_2^2 + 15 X_1 X_2)/(1-e^2) "
            "- (13/4 X_1^2 + 1/4 X_2^2 + 13/3 X_1 X_2)]"
        ),
        sources=("Damour & Schaefer 1988, Nuovo Cim. B 101, 127, for the Damour-Deruelle e_T of body 1",),
        order="2PN; the terms dropped are smaller than this one by about beta^2/(1 - e^2)",
        valid="beta^2/(1 - e^2) << 1; two point masses",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("longitude_of_periastron"),),
    )


def second_order_factor(X_1: FloatArray, X_2: FloatArray, one_minus_e_squared: FloatArray) -> FloatArray:
    """Return f_O [1], by which beta^2 f_O is the 2PN advance over the 1PN one; any shape."""
    by_e = 39.0 / 4.0 * X_1**2 + 27.0 / 4.0 * X_2**2 + 15.0 * X_1 * X_2
    plain = 13.0 / 4.0 * X_1**2 + 1.0 / 4.0 * X_2**2 + 13.0 / 3.0 * X_1 * X_2
    return by_e / one_minus_e_squared - plain


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return the second-order part of the rate of the longitude of periastron [rad/s]; shape batch."""
    m_1, m_2, M, n = state.known("mass_1", "mass_2", "total_mass", "mean_motion")
    beta, s_2 = state.known("orbital_velocity", "one_minus_e_squared")
    f_O = second_order_factor(m_1 / M, m_2 / M, s_2)
    return Rates({"longitude_of_periastron": 3.0 * n * beta**4 / s_2 * f_O})
