"""Widening of the orbit by the mass that spinning bodies lose as their rotation slows."""

from __future__ import annotations

import numpy as np

from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="spin-down-mass-loss",
        summary="Rotational energy leaves, and its mass with it: the orbit widens.",
        formula="P_b rate = sum over bodies of 8 pi^2 I P_rate P_b/(M P^3)  (c = 1)",
        sources=("Damour & Taylor 1991, ApJ 366, 501",),
        order="leading order; energy lost as dE/dt = 4 pi^2 I P_rate/P^3, carried off isotropically and fast",
        valid="mass loss slow against the orbit; no wind caught by the companion",
        needs=(
            "mass_1",
            "mass_2",
            "orbital_period",
            "spin_period_1",
            "spin_period_rate_1",
            "moment_of_inertia_1",
        ),
        gives=(Rate("orbital_period"),),
    )


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return the rate of the orbital period [s/s]; shape batch.

    Body i loses the mass 4 pi^2 I P_rate/P^3 in a second, and P_b goes as M^-2 where a M stays the same. Body 2 takes
    part where its spin and moment of inertia are known.
    """
    M, P_b = state.known("total_mass", "orbital_period")
    spins = [state.known("spin_period_1", "spin_period_rate_1", "moment_of_inertia_1")]
    if all(v is not None for v in (state.spin_period_2, state.spin_period_rate_2, state.moment_of_inertia_2)):
        spins.append(state.known("spin_period_2", "spin_period_rate_2", "moment_of_inertia_2"))
    lost = [4.0 * np.pi**2 * I * P_rate / (P * P * P) for P, P_rate, I in spins]
    return Rates({"orbital_period": 2.0 * np.sum(lost, axis=0) * P_b / M})
