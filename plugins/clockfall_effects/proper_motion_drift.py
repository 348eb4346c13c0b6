"""Apparent drift of x and omega as the line of sight turns with proper motion."""

from __future__ import annotations

import numpy as np

from clockfall.binary.state import BinaryState
from clockfall.effects import APPARENT, Card, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="proper-motion-drift",
        summary="As the binary moves across the sky we see its orbit from a changing side.",
        formula=(
            "x rate = x cot i (mu_ra cos Omega - mu_dec sin Omega);  "
            "omega rate = (mu_ra sin Omega + mu_dec cos Omega)/sin i"
        ),
        sources=("Kopeikin 1996, ApJ 467, L93; signs derived for the convention stated under valid",),
        order="exact for uniform motion, at this instant",
        valid=(
            "Omega is the position angle, from north through east, of the node where body 1 recedes; "
            "i below 90 deg means that position angles grow along the orbit"
        ),
        nature=APPARENT,
        needs=("proper_motion_ra", "proper_motion_dec", "ascending_node", "inclination", "projected_semi_major_axis"),
        gives=(Rate("projected_semi_major_axis"), Rate("longitude_of_periastron")),
    )


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return apparent rates of x [ls/s] and of omega [rad/s]; shape batch.

    With K the direction towards the binary and mu its rate, the node is n = K x L/sin i and cos i = -L.K for a fixed
    orbital angular momentum L: so i changes by mu.(n x K), and the node slides back by mu.n/sin i.
    """
    mu_a, mu_d, Omega, i, x = state.known(
        "proper_motion_ra", "proper_motion_dec", "ascending_node", "inclination", "projected_semi_major_axis"
    )
    across = mu_a * np.cos(Omega) - mu_d * np.sin(Omega)
    along = mu_a * np.sin(Omega) + mu_d * np.cos(Omega)
    return Rates(
        {
            "projected_semi_major_axis": x * np.cos(i) / np.sin(i) * across,
            "longitude_of_periastron": along / np.sin(i),
        }
    )
