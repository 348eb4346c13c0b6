"""Advance of periastron by the spin of body 1 (Lense-Thirring)."""

from __future__ import annotations

import numpy as np

from clockfall.binary.constants import T_SUN
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, OwnParameter, Rate, Rates, Settings, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="spin-orbit-advance",
        summary="The spinning pulsar drags space round with it, and turns the ellipse back.",
        formula=(
            "omega rate = -3 n beta^3 beta_S g_S/(1-e^2),  beta_S = I Omega/(T_sun m_1^2) (c = 1);  aligned: "
            "g_S = X_1 (4 X_1 + 3 X_2)/(3 sqrt(1-e^2));  general: g_S = X_1 (4 X_1 + 3 X_2)/(6 sqrt(1-e^2) sin^2 i) "
            "[(3 sin^2 i - 1) cos delta + cos i cos lambda]"
        ),
        sources=(
            "Barker & O'Connell 1975, Phys. Rev. D 12, 329",
            "Damour & Schaefer 1988, Nuovo Cim. B 101, 127",
        ),
        order="leading order in the spin of body 1; the companion's spin and spin-squared terms are dropped",
        valid="beta_S << 1; the spin is aligned with the orbit unless its two angles are given",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity", "spin_period_1", "moment_of_inertia_1"),
        gives=(Rate("longitude_of_periastron"),),
        parameters=(
            OwnParameter("spin_to_orbit", "deg", "angle delta between spin and orbital angular momentum", 0.0),
            OwnParameter(
                "spin_azimuth",
                "deg",
                "angle in the orbital plane from the projected line of sight to the projected spin",
                0.0,
            ),
        ),
    )


def spin_parameter(state: BinaryState, I: FloatArray) -> FloatArray:
    """Return beta_S = I Omega/(T_sun m_1^2) [1], with I in Msun ls^2: c S/(G m_1^2); shape batch."""
    m_1, P = state.known("mass_1", "spin_period_1")
    return I * (2.0 * np.pi / P) / (T_SUN * m_1**2)


def aligned_advance(state: BinaryState, I: FloatArray) -> FloatArray:
    """Return the rate of the longitude of periastron by an aligned spin of moment of inertia I [rad/s]; shape batch."""
    m_1, m_2, M, n = state.known("mass_1", "mass_2", "total_mass", "mean_motion")
    beta, s_2 = state.known("orbital_velocity", "one_minus_e_squared")
    X_1, X_2 = m_1 / M, m_2 / M
    g_S = X_1 * (4.0 * X_1 + 3.0 * X_2) / (3.0 * np.sqrt(s_2))
    return -3.0 * n * beta**3 / s_2 * spin_parameter(state, I) * g_S


def geometry(state: BinaryState, settings: Settings) -> FloatArray:
    """Return [(3 sin^2 i - 1) cos delta + cos i cos lambda]/(2 sin^2 i) [1], which is 1 when aligned; shape batch.

    The angle lambda between spin and line of sight follows from delta and the azimuth Phi of the spin about the orbital
    angular momentum: cos lambda = cos i cos delta + sin i sin delta cos Phi. Of the two inclinations with the same sine
    the one below 90 deg is taken.
    """
    delta, azimuth = np.radians(settings["spin_to_orbit"]), np.radians(settings["spin_azimuth"])
    if np.all(delta == 0.0):
        return np.ones(state.shape)
    (s,) = state.known("sin_inclination")
    s = np.minimum(s, 1.0)
    cos_i = np.sqrt((1.0 - s) * (1.0 + s))
    cos_lambda = cos_i * np.cos(delta) + s * np.sin(delta) * np.cos(azimuth)
    return ((3.0 * s**2 - 1.0) * np.cos(delta) + cos_i * cos_lambda) / (2.0 * s**2)


@hook
def secular_rates(state: BinaryState, settings: Settings) -> Rates:
    """Return the part of the rate of the longitude of periastron that the spin adds [rad/s]; shape batch."""
    (I,) = state.known("moment_of_inertia_1")
    return Rates({"longitude_of_periastron": aligned_advance(state, I) * geometry(state, settings)})


@hook
def cautions(settings: Settings) -> tuple[Caution, ...]:
    """Say that alignment is assumed."""
    if np.all(settings["spin_to_orbit"] == 0.0):
        return (Caution("the spin of body 1 is taken as aligned with the orbit"),)
    return ()
