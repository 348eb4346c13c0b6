"""Einstein delay: gravitational redshift and time dilation of body 1's clock round an eccentric orbit."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from clockfall.binary.constants import T_SUN
from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Delay, Parameter, Predicted, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="einstein-delay",
        summary="The pulsar's clock runs slow near periastron: redshift and time dilation, once an orbit.",
        formula="delay = gamma sin E,  gamma = e n^(-1/3) T_sun^(2/3) M^(-4/3) m_2 (m_1 + 2 m_2)",
        sources=(
            "Blandford & Teukolsky 1976, ApJ 205, 580",
            "Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44, 263",
        ),
        order="leading order; the terms dropped are smaller by about beta^2",
        valid="beta^2 << 1",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Parameter("einstein_delay_amplitude", "s", "amplitude gamma of the Einstein delay", shown_in="ms"),),
        delay="what the pulsar's clock has lost round the orbit",
    )


@hook
def predicted_parameters(state: BinaryState) -> Predicted:
    """Return the amplitude gamma of the Einstein delay [s]; shape batch."""
    m_1, m_2, M, n, e = state.known("mass_1", "mass_2", "total_mass", "mean_motion", "eccentricity")
    gamma = e * np.cbrt(T_SUN**2 / (n * M**4)) * m_2 * (m_1 + 2.0 * m_2)
    return Predicted({"einstein_delay_amplitude": gamma})


@hook
def delay(orbit: Orbit, parameters: Mapping[str, FloatArray]) -> Delay:
    """Return gamma sin E [s]; shape batch + (times,)."""
    gamma = parameters["einstein_delay_amplitude"]
    return Delay(gamma * orbit.sin_E, gamma * orbit.cos_E * orbit.eccentric_rate)
