"""Aberration delay: the pulsar's beam meets us early or late as its orbital velocity turns the light's direction."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray, Range
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, Delay, OwnParameter, Parameter, Predicted, Settings, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="aberration-delay",
        summary="Body 1 must turn a little more or less to send its beam to us, as its orbital velocity aberrates it.",
        formula=(
            "delay = A [sin(omega + nu) + e sin omega] + B [cos(omega + nu) + e cos omega];  "
            "A = P/P_b x/sin i sin eta/(sin lambda sqrt(1-e^2)),  "
            "B = P/P_b x/sin i cos i cos eta/(sin lambda sqrt(1-e^2))"
        ),
        sources=(
            "Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44, 263 (from memory; there i is 180 deg less ours and "
            "eta runs the other way, so that both signs are minus)",
            "Damour & Taylor 1992, Phys. Rev. D 45, 1840 (from memory; likewise)",
        ),
        order="first order in the orbital velocity",
        valid=(
            "slow orbit; a rigid beam; a spin axis far from the line of sight: orbital velocity << sin lambda. Spin is "
            "right-handed about its axis; i below 90 deg means that position angles grow along the orbit"
        ),
        needs=(
            "spin_period_1",
            "sin_inclination",
            "orbital_period",
            "eccentricity",
            "longitude_of_periastron",
            "projected_semi_major_axis",
        ),
        gives=(
            Parameter("aberration_sine_amplitude", "s", "A of the aberration delay", "us", defined_where="sin i <= 1"),
            Parameter(
                "aberration_cosine_amplitude", "s", "B of the aberration delay", "us", defined_where="sin i <= 1"
            ),
        ),
        parameters=(
            OwnParameter(
                "spin_axis_inclination",
                "rad",
                "lambda, angle of body 1's spin axis to the line of sight",
                within=Range(above=0.0, below=math.pi),
            ),
            OwnParameter(
                "spin_axis_position_angle",
                "rad",
                "eta, position angle of body 1's spin axis less that of the ascending node",
            ),
        ),
        delay="change of the rotational phase at which the beam meets us",
    )


@hook
def predicted_parameters(state: BinaryState, settings: Settings) -> Predicted:
    """Return A and B [s]; shape batch."""
    P, P_b, x, sin_i = state.known("spin_period_1", "orbital_period", "projected_semi_major_axis", "sin_inclination")
    (s_2,) = state.known("one_minus_e_squared")
    # values that do not belong together can give sin i > 1, which has no orbit behind it
    sin_i = np.where(sin_i <= 1.0, sin_i, np.nan)
    cos_i = np.sqrt((1.0 - sin_i) * (1.0 + sin_i))
    if state.inclination is not None:
        cos_i = np.copysign(cos_i, np.cos(state.inclination))
    eta = settings["spin_axis_position_angle"]
    common = P / P_b * x / (sin_i * np.sin(settings["spin_axis_inclination"]) * np.sqrt(s_2))
    return Predicted(
        {
            "aberration_sine_amplitude": common * np.sin(eta),
            "aberration_cosine_amplitude": common * cos_i * np.cos(eta),
        }
    )


@hook
def delay(orbit: Orbit, parameters: Mapping[str, FloatArray]) -> Delay:
    """Return the aberration delay [s]; shape batch + (times,)."""
    if "aberration_sine_amplitude" not in parameters:  # sin i > 1: neither has a meaning
        return Delay(np.zeros(orbit.shape))
    e, r = orbit.eccentricity, orbit.one_minus_e_cos_E
    cos_nu, sin_nu = (orbit.cos_E - e) / r, orbit.root * orbit.sin_E / r
    sine = orbit.sin_omega * (cos_nu + e) + orbit.cos_omega * sin_nu
    cosine = orbit.cos_omega * (cos_nu + e) - orbit.sin_omega * sin_nu
    A, B = parameters["aberration_sine_amplitude"], parameters["aberration_cosine_amplitude"]
    return Delay(A * sine + B * cosine)


@hook
def cautions(state: BinaryState) -> tuple[Caution, ...]:
    """Tell which side of the sky the orbit is taken to be seen from, where nothing says it."""
    if state.inclination is not None:
        return ()
    return (Caution("the inclination is not given, and taken below 90 deg: beyond it the sign of B is the other"),)
