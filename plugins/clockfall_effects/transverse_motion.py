"""Apparent change of every period by motion across the line of sight (Shklovskii 1970)."""

from __future__ import annotations

from clockfall.binary.state import BinaryState
from clockfall.effects import APPARENT, Card, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="transverse-motion",
        summary="A body moving across the sky recedes ever faster: periods seem to grow.",
        formula="P rate = P mu^2 d  (c = 1), for the orbital and the spin period",
        sources=("Shklovskii 1970, Soviet Astronomy 13, 562",),
        order="exact for uniform motion, at this instant",
        valid="mu t << 1",
        nature=APPARENT,
        needs=("proper_motion_ra", "proper_motion_dec", "distance", "orbital_period"),
        gives=(Rate("orbital_period"), Rate("spin_period_1")),
    )


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return apparent rates of the orbital and, where it is known, the spin period [s/s]; shape batch."""
    mu_a, mu_d, d, P_b = state.known("proper_motion_ra", "proper_motion_dec", "distance", "orbital_period")
    stretch = (mu_a**2 + mu_d**2) * d
    rates = {"orbital_period": P_b * stretch}
    if state.spin_period_1 is not None:
        rates["spin_period_1"] = state.spin_period_1 * stretch
    return Rates(rates)
