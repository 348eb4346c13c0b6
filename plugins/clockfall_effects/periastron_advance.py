"""Advance of periastron at the first post-Newtonian order."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np

from clockfall.binary.constants import SOLAR_MASS, SPEED_OF_LIGHT
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, Rate, Rates, hook
from clockfall_effects.spin_orbit_advance import aligned_advance

TYPICAL_INERTIA: Final = 1e38 / (SOLAR_MASS * SPEED_OF_LIGHT**2)
"""1e45 g cm^2, about a neutron star's moment of inertia [Msun ls^2]."""


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
    """Say how large the next orders are, where a good measurement would notice them."""
    return tuple(_left_out(state))


def _left_out(state: BinaryState) -> Iterator[Caution]:
    # The 2PN coefficient f_O lies between 2 and 13/2 for e < 0.7 whatever the masses, so k itself is a fair guess.
    dropped = float(np.max(advance_per_radian(state)))
    if dropped > 1e-6:
        statement = f"first order only: the rate is good to about {dropped:.0e} of itself (2PN left out)"
        yield Caution(statement, unless=("periastron-advance-second-order",))
    if state.spin_period_1 is None:
        return
    (n,) = state.known("mean_motion")
    share = float(np.max(np.abs(aligned_advance(state, np.array(TYPICAL_INERTIA)) / (advance_per_radian(state) * n))))
    if share > 1e-6:
        statement = f"the spin of body 1 is left out: about {share:.0e} of the rate if I_1 = 1e45 g cm2"
        yield Caution(statement, unless=("spin-orbit-advance",))
