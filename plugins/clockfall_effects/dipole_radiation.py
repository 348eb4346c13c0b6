"""Dipole radiation of a scalar field: the strongest sign of a second field of gravity."""

from __future__ import annotations

import numpy as np

from clockfall.binary.constants import T_SUN
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, OwnParameter, Rate, Rates, Settings, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="dipole-radiation",
        summary="Bodies with different scalar charges radiate dipole waves. Idle unless charges are given.",
        formula="P_b rate = -(4 pi^2/P_b) T_sun (m_1 m_2/M) (1 + e^2/2) (1 - e^2)^(-5/2) (alpha_1 - alpha_2)^2",
        sources=("Damour & Esposito-Farese 1996, Phys. Rev. D 54, 1474",),
        order="leading order in beta and in the charges",
        valid="charges much smaller than 1; beta^2/(1 - e^2) << 1",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("orbital_period"),),
        parameters=(
            OwnParameter("charge_1", "", "scalar charge alpha_1 of body 1, relative to its mass"),
            OwnParameter("charge_2", "", "scalar charge alpha_2 of body 2"),
        ),
    )


@hook
def secular_rates(state: BinaryState, settings: Settings) -> Rates:
    """Return the rate of the orbital period by dipole radiation [s/s]; shape batch."""
    m_1, m_2, M, P_b = state.known("mass_1", "mass_2", "total_mass", "orbital_period")
    e, s_2 = state.known("eccentricity", "one_minus_e_squared")
    difference = settings["charge_1"] - settings["charge_2"]
    scale = -4.0 * np.pi**2 / P_b * T_SUN * m_1 * m_2 / M
    return Rates({"orbital_period": scale * (1.0 + 0.5 * e**2) / (s_2**2 * np.sqrt(s_2)) * difference**2})
