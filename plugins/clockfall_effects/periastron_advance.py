"""Advance of periastron at the first post-Newtonian order."""

from __future__ import annotations

import numpy as np

from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="periastron-advance",
        summary="The ellipse turns in its plane, as Mercury's does: general relativity, first order.",
        formula="omega rate = k n,  k = 3 beta^2/(1 - e^2),  beta = (T_sun M n)^(1/3)",
        sources=(
            "Robertson 1938, Ann. Math. 39, 101",
            "Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44, 263",
        ),
        order="1PN; the terms dropped are smaller by about beta^2/(1 - e^2) (2PN) and by the bodies' spins",
        valid="beta^2/(1 - e^2) << 1; two point masses",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("longitude_of_periastron"),),
    )


def advance_per_radian(state: BinaryState) -> FloatArray:
    """Return k = 3 beta^2/(1 - e^2): radians of advance for each radian of mean anomaly [1]; shape batch."""
    beta, one_minus_e_squared = state.known("orbital_velocity", "one_minus_e_squared")
    return 3.0 * beta**2 / one_minus_e_squared


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return the rate of the longitude of periastron [rad/s]; shape batch."""
    (n,) = state.known("mean_motion")
    return Rates({"longitude_of_periastron": advance_per_radian(state) * n})


@hook
def cautions(state: BinaryState) -> tuple[Caution, ...]:
    """Say how large the next order is, where a good measurement would notice it."""
    # The 2PN coefficient f_O lies between 2 and 13/2 for e < 0.7 whatever the masses, so k itself is a fair guess.
    dropped = float(np.max(advance_per_radian(state)))
    if dropped < 1e-6:
        return ()
    statement = f"first order only: the rate is good to about {dropped:.0e} of itself (2PN and spin left out)"
    return (Caution(statement, unless=("periastron-advance-second-order",)),)
