"""Classical advance of periastron by a companion that tides and rotation flatten."""

from __future__ import annotations

import numpy as np

from clockfall.binary.constants import SOLAR_RADIUS, SPEED_OF_LIGHT, T_SUN
from clockfall.binary.ranges import POSITIVE, FloatArray, Range
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, OwnParameter, Rate, Rates, Settings, hook

LIGHT_SECONDS_PER_SOLAR_RADIUS = SOLAR_RADIUS / SPEED_OF_LIGHT


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="tidal-and-rotational-quadrupole",
        summary="A white dwarf or a star is no point: its flattening turns the ellipse. Idle unless its size is given.",
        formula=(
            "tide: omega rate = 15 n k (m_1/m_2) (R/a)^5 (1 + 3/2 e^2 + 1/8 e^4)/(1-e^2)^5;  rotation: omega rate = "
            "n Q [1 - 3/2 sin^2 theta + cot i sin theta cos theta cos Phi],  x rate = x n Q cot i sin theta cos theta "
            "sin Phi,  Q = k (R/a)^2 Omega^2 R^3/(G m_2)/(1-e^2)^2"
        ),
        sources=(
            "Sterne 1939, MNRAS 99, 451 (tide; aligned rotation)",
            "Lai, Bildsten & Kaspi 1995, ApJ 452, 819; Wex 1998, MNRAS 298, 67 (rotation at any angle)",
        ),
        order="leading order in the flattening; tides in equilibrium, without lag",
        valid="companion well inside its Roche lobe, spin slow against break-up",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("longitude_of_periastron"), Rate("projected_semi_major_axis")),
        parameters=(
            OwnParameter("companion_radius", "Rsun", "radius R of the companion", within=POSITIVE),
            OwnParameter(
                "apsidal_constant", "", "apsidal motion constant k of the companion", within=Range(at_least=0.0)
            ),
            OwnParameter("companion_spin_rate", "rad/s", "angular velocity Omega of the companion", 0.0),
            OwnParameter("companion_spin_to_orbit", "deg", "angle theta between companion's spin and orbit", 0.0),
            OwnParameter("companion_spin_azimuth", "deg", "precession angle Phi of the companion's spin", 0.0),
        ),
    )


def rotational_flattening(state: BinaryState, settings: Settings) -> FloatArray:
    """Return Q [1]; shape batch."""
    m_2, a, s_2 = state.known("mass_2", "relative_semi_major_axis", "one_minus_e_squared")
    R = settings["companion_radius"] * LIGHT_SECONDS_PER_SOLAR_RADIUS
    spin_over_breakup = settings["companion_spin_rate"] ** 2 * R**3 / (T_SUN * m_2)
    return settings["apsidal_constant"] * (R / a) ** 2 * spin_over_breakup / s_2**2


def tidal_advance(state: BinaryState, settings: Settings) -> FloatArray:
    """Return the advance by the tide [rad/s]; shape batch."""
    m_1, m_2, n, a, e, s_2 = state.known(
        "mass_1", "mass_2", "mean_motion", "relative_semi_major_axis", "eccentricity", "one_minus_e_squared"
    )
    R = settings["companion_radius"] * LIGHT_SECONDS_PER_SOLAR_RADIUS
    shape = (1.0 + 1.5 * e**2 + 0.125 * e**4) / s_2**5
    return 15.0 * n * settings["apsidal_constant"] * m_1 / m_2 * (R / a) ** 5 * shape


@hook
def secular_rates(state: BinaryState, settings: Settings) -> Rates:
    """Return the rates of omega [rad/s] and, for a tilted spin and a known x, of x [ls/s]; shape batch."""
    (n,) = state.known("mean_motion")
    theta, Phi = (np.radians(settings[f"companion_spin_{name}"]) for name in ("to_orbit", "azimuth"))
    rotation = n * rotational_flattening(state, settings)
    bracket = 1.0 - 1.5 * np.sin(theta) ** 2
    if state.sin_inclination is None or state.projected_semi_major_axis is None:
        return Rates({"longitude_of_periastron": tidal_advance(state, settings) + rotation * bracket})
    s = np.minimum(state.sin_inclination, 1.0)
    tilt = np.sqrt((1.0 - s) * (1.0 + s)) / s * np.sin(theta) * np.cos(theta)
    return Rates(
        {
            "longitude_of_periastron": tidal_advance(state, settings) + rotation * (bracket + tilt * np.cos(Phi)),
            "projected_semi_major_axis": state.projected_semi_major_axis * rotation * tilt * np.sin(Phi),
        }
    )


@hook
def cautions(state: BinaryState, settings: Settings) -> tuple[Caution, ...]:
    """Say where the companion is too large for its orbit, or spins too fast."""
    a, rest = state.known("relative_semi_major_axis", "one_minus_eccentricity")
    R = settings["companion_radius"] * LIGHT_SECONDS_PER_SOLAR_RADIUS
    filling = float(np.max(R / (a * rest)))
    if filling < 0.3:
        return ()
    return (Caution(f"the companion's radius is {filling:.0%} of the separation at periastron: it may overflow"),)
