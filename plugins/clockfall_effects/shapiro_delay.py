"""Shapiro delay: light from body 1 is late where it passes through the gravity of body 2."""

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
        name="shapiro-delay",
        summary="Signals passing the companion arrive late; most where the pulsar stands behind it.",
        formula=(
            "delay = -2 r ln{1 - e cos E - s [sin omega (cos E - e) + sqrt(1 - e^2) cos omega sin E]};  "
            "r = T_sun m_2,  s = sin i = x n^(2/3) T_sun^(-1/3) M^(2/3)/m_2 [1 + (3 - nu/3) beta^2];  "
            "ratio = s/(1 + abs(cos i)),  amplitude = r ratio^3"
        ),
        sources=(
            "Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44, 263",
            "Damour & Deruelle 1985, Ann. Inst. H. Poincare A 43, 107 (mass function to 1PN; from memory)",
            "Freire & Wex 2010, MNRAS 409, 199 (orthometric form)",
        ),
        order="r to leading order; s by the mass function to 1PN, for the anomalistic period",
        valid="beta^2 << 1; the line of sight passes the companion far outside its Schwarzschild radius",
        needs=("mass_2",),
        gives=(
            Parameter("shapiro_range", "s", "range r of the Shapiro delay", shown_in="us"),
            Parameter(
                "shapiro_shape",
                "",
                "shape s of the Shapiro delay, sin i",
                needs=("sin_inclination",),
                defined_where="sin i <= 1",
            ),
            Parameter(
                "orthometric_ratio",
                "",
                "ratio of successive harmonics of the Shapiro delay",
                needs=("sin_inclination",),
                defined_where="sin i <= 1",
            ),
            Parameter(
                "orthometric_amplitude",
                "s",
                "third harmonic's amplitude of the Shapiro delay",
                shown_in="us",
                needs=("sin_inclination",),
                defined_where="sin i <= 1",
            ),
        ),
        delay="what the companion's gravity adds to the light's way; none where the inclination is not known",
    )


@hook
def predicted_parameters(state: BinaryState) -> Predicted:
    """Return range [s], shape [1] and the orthometric pair [1], [s]; shape batch."""
    (m_2,) = state.known("mass_2")
    r = T_SUN * m_2
    if state.sin_inclination is None:
        return Predicted({"shapiro_range": r})
    # values that do not belong together can give sin i > 1, which has no orbit behind it
    s = np.where(state.sin_inclination <= 1.0, state.sin_inclination, np.nan)[()]
    cos_i = np.sqrt((1.0 - s) * (1.0 + s))
    ratio = s / (1.0 + cos_i)
    return Predicted(
        {
            "shapiro_range": r,
            "shapiro_shape": s,
            "orthometric_ratio": ratio,
            "orthometric_amplitude": r * ratio**3,
        }
    )


@hook
def delay(orbit: Orbit, parameters: Mapping[str, FloatArray]) -> Delay:
    """Return the Shapiro delay [s]; shape batch + (times,)."""
    if "shapiro_shape" not in parameters:
        return Delay(np.zeros(orbit.shape))
    r, s = parameters["shapiro_range"], parameters["shapiro_shape"]
    along, across = orbit.cos_E - orbit.eccentricity, orbit.root * orbit.sin_E
    behind = orbit.sin_omega * along + orbit.cos_omega * across  # towards the far side, over the semi-major axis
    # it all but vanishes where the pulsar stands behind the companion, edge-on; the logarithm takes r to microseconds
    Lambda = orbit.one_minus_e_cos_E - s * behind
    by_E = orbit.eccentricity * orbit.sin_E - s * (
        orbit.root * orbit.cos_omega * orbit.cos_E - orbit.sin_omega * orbit.sin_E
    )
    return Delay(-2.0 * r * np.log(Lambda), -2.0 * r * by_E / Lambda * orbit.eccentric_rate)
