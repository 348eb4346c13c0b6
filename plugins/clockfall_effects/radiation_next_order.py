"""Decay of the orbit by gravitational radiation: the first post-Newtonian correction to the quadrupole formula."""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.polynomial.polynomial import polyval

from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="radiation-next-order",
        summary="The first correction to the radiated power, of relative order beta^2.",
        formula=(
            "P_b rate = X (quadrupole rate),  X = beta^2/(336 (1-e^2) f) [1273 + 16495/2 e^2 + 42231/8 e^4 + "
            "3947/16 e^6 - nu (924 + 3381 e^2 + 1659/4 e^4 - 259/4 e^6) + D (3297 e^2 + 4221 e^4 + 2331/8 e^6)],  "
            "f = 1 + 73/24 e^2 + 37/96 e^4,  D = (m_1 - m_2)/M"
        ),
        sources=("Blanchet & Schaefer 1989, MNRAS 239, 845, for the Damour-Deruelle e_T of body 1",),
        order="3.5PN in the motion; the terms dropped are smaller than this one by about beta/(1 - e^2)^(1/2)",
        valid="beta^2/(1 - e^2) << 1; two point masses in vacuum",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("orbital_period"),),
    )


# Coefficients of 1, e^2, e^4, e^6 in the bracket on the card.
PLAIN: Final = (1273.0, 16495.0 / 2.0, 42231.0 / 8.0, 3947.0 / 16.0)
TIMES_NU: Final = (924.0, 3381.0, 1659.0 / 4.0, -259.0 / 4.0)
TIMES_D: Final = (0.0, 3297.0, 4221.0, 2331.0 / 8.0)


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return the correction to the rate of the orbital period [s/s]; shape batch."""
    m_1, m_2, M, nu = state.known("mass_1", "mass_2", "total_mass", "symmetric_mass_ratio")
    beta, e, s_2 = state.known("orbital_velocity", "eccentricity", "one_minus_e_squared")
    D, e_2 = (m_1 - m_2) / M, e**2
    bracket = polyval(e_2, PLAIN) - nu * polyval(e_2, TIMES_NU) + D * polyval(e_2, TIMES_D)
    # X times the quadrupole rate, in which f cancels: -(192 pi/5) nu beta^5 f (1 - e^2)^(-7/2)
    quadrupole_over_f = -192.0 * np.pi / 5.0 * nu * beta**5 / (s_2**3 * np.sqrt(s_2))
    return Rates({"orbital_period": quadrupole_over_f * beta**2 / (336.0 * s_2) * bracket})
