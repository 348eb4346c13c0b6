"""Gravity by a metric and one massless scalar field: a whole theory in the place of general relativity.

Each body A has a scalar charge alpha_A = d ln m_A/d phi_0, which is how its mass depends on the scalar field round it.
Two bodies attract by G_12 = G_* (1 + alpha_1 alpha_2): G_* for the metric, the product for the scalar. Masses come in
nominal solar masses with Newton's constant as light bodies show it in the solar system, G = G_* (1 + alpha_0^2).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import reduce
from typing import Final

import numpy as np

from clockfall.binary.constants import T_SUN
from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray, Range
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, Delay, OwnParameter, Parameter, Predicted, Rate, Rates, Settings, hook
from clockfall_effects import einstein_delay, periastron_advance, quadrupole_decay, shapiro_delay

# below 1 the bodies attract each other whatever the signs: 1 + alpha_1 alpha_2 > 0
CHARGE: Final = Range(above=-1.0, below=1.0)
REAL_ANGLE: Final = "sin i <= 1"


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="mono-scalar-tensor",
        summary=(
            "A theory with a massless scalar field beside the metric, in the place of general relativity. Idle unless "
            "charges are given."
        ),
        formula=(
            "g = 1 + alpha_1 alpha_2,  v_o = (G_12 M n)^(1/3),  G_12 = G_* g,  G_* = G/(1 + alpha_0^2);  "
            "omega rate = k n,  k = 3 v_o^2/(1-e^2) [(1 - alpha_1 alpha_2/3)/g - (X_1 beta_2 alpha_1^2 + X_2 beta_1 "
            "alpha_2^2)/(6 g^2)];  "
            "gamma = (e/n) (X_2/g) v_o^2 [1 + g X_2 + alpha_2 k_1],  r = G_* m_2,  "
            "s = sin i = n x/(X_2 v_o) [1 + (3 - nu/3) v_o^2];  "
            "P_b rate = -2 pi (nu/g) {v_o^3 (alpha_1 - alpha_2)^2 (1 + e^2/2) (1-e^2)^(-5/2) + 3/2 v_o^5 A^2 e^2 "
            "(1 + e^2/4) (1-e^2)^(-7/2) + 96/5 v_o^5 (1 + B^2/6) F(e)};  "
            "e rate = -n (nu/g) e {v_o^3/2 (alpha_1 - alpha_2)^2 (1-e^2)^(-3/2) + v_o^5/2 A^2 (1 + e^2/4) "
            "(1-e^2)^(-5/2) + 304/15 v_o^5 (1 + B^2/6) (1 + 121/304 e^2) (1-e^2)^(-5/2)};  "
            "A = 5/3 (alpha_1 + alpha_2) - 2/3 (alpha_1 X_1 + alpha_2 X_2) + (beta_1 alpha_2 + beta_2 alpha_1)/g,  "
            "B = alpha_1 X_2 + alpha_2 X_1"
        ),
        sources=(
            "Damour & Esposito-Farese 1992, Class. Quantum Grav. 9, 2093, eqs. (6.52) (waves; numbers from memory)",
            "Damour & Esposito-Farese 1996, Phys. Rev. D 54, 1474 (advance and delays; formulas from memory)",
            "Freire & Wex 2010, MNRAS 409, 199 (orthometric form)",
        ),
        order=(
            "leading order of each: 1PN advance and delays; scalar dipole at 1.5PN, scalar monopole, scalar quadrupole "
            "and tensor quadrupole at 2.5PN in the motion. Dropped: the dipole's own next order, also 2.5PN, which "
            "goes as alpha_1 - alpha_2"
        ),
        valid="v_o^2/(1-e^2) << 1; charges between -1 and 1; a scalar field without mass on the scale of the orbit",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(
            Rate("orbital_period"),
            Rate("eccentricity"),
            Rate("longitude_of_periastron"),
            Parameter("einstein_delay_amplitude", "s", "amplitude gamma of the Einstein delay", "ms"),
            Parameter("shapiro_range", "s", "range r of the Shapiro delay", "us"),
            Parameter("shapiro_shape", "", "shape s of the Shapiro delay, sin i", "", ("sin_inclination",), REAL_ANGLE),
            Parameter(
                "orthometric_ratio",
                "",
                "ratio of successive harmonics of the Shapiro delay",
                needs=("sin_inclination",),
                defined_where=REAL_ANGLE,
            ),
            Parameter(
                "orthometric_amplitude",
                "s",
                "third harmonic's amplitude of the Shapiro delay",
                "us",
                ("sin_inclination",),
                REAL_ANGLE,
            ),
        ),
        parameters=(
            OwnParameter("charge_1", "", "scalar charge alpha_1 of body 1, relative to its mass", within=CHARGE),
            OwnParameter("charge_2", "", "scalar charge alpha_2 of body 2", within=CHARGE),
            OwnParameter("charge_slope_1", "", "beta_1 = d alpha_1/d phi_0, how the field changes charge 1", 0.0),
            OwnParameter("charge_slope_2", "", "beta_2 = d alpha_2/d phi_0", 0.0),
            OwnParameter("inertia_response_1", "", "k_1 = -d ln I_1/d phi_0; alpha_0 where body 1 is no star", 0.0),
            OwnParameter("matter_charge", "", "scalar charge alpha_0 of light bodies, as in the Sun", 0.0, 0.0, CHARGE),
        ),
        replaces=("quadrupole-decay", "periastron-advance", "einstein-delay", "shapiro-delay", "dipole-radiation"),
        delay="Einstein and Shapiro delay together, by this theory's amplitude, range and shape",
    )


@dataclass(frozen=True, slots=True)
class Letters:
    """What the papers' letters stand for; each of the batch's shape.

    Attributes
    ----------
    X_1, X_2 : array [1]
        Shares of the total mass.
    n : array [rad/s]
        Mean motion.
    e, s_2 : array [1]
        Eccentricity, and 1 - e^2.
    a_1, a_2, b_1, b_2 : array [1]
        Charges alpha and their slopes beta.
    g : array [1]
        1 + alpha_1 alpha_2, which is G_12/G_*.
    G_star : array [s/Msun]
        G_*/c^3.
    v : array [1]
        v_o = (G_12 M n)^(1/3)/c, the speed on a circular orbit of this period.
    """

    X_1: FloatArray
    X_2: FloatArray
    n: FloatArray
    e: FloatArray
    s_2: FloatArray
    a_1: FloatArray
    a_2: FloatArray
    b_1: FloatArray
    b_2: FloatArray
    g: FloatArray
    G_star: FloatArray
    v: FloatArray


def letters(state: BinaryState, settings: Settings) -> Letters:
    """Return the papers' letters for a state; shape batch."""
    m_1, m_2, M, n = state.known("mass_1", "mass_2", "total_mass", "mean_motion")
    e, s_2 = state.known("eccentricity", "one_minus_e_squared")
    a_1, a_2, a_0 = (settings[name] for name in ("charge_1", "charge_2", "matter_charge"))
    g, G_star = 1.0 + a_1 * a_2, T_SUN / (1.0 + a_0**2)
    return Letters(
        X_1=m_1 / M,
        X_2=m_2 / M,
        n=n,
        e=e,
        s_2=s_2,
        a_1=a_1,
        a_2=a_2,
        b_1=settings["charge_slope_1"],
        b_2=settings["charge_slope_2"],
        g=g,
        G_star=G_star,
        v=np.cbrt(G_star * g * M * n),
    )


# --- the orbit and the clock -----------------------------------------------------------------------------------------


def advance_per_radian(of: Letters) -> FloatArray:
    """Return k: radians of advance for each radian of mean anomaly [1]; shape batch.

    It is (v_o^2/(1-e^2)) (2 + 2 gamma - beta) of two bodies with gamma = 1 - 2 alpha_1 alpha_2/g and
    beta = 1 + (X_1 beta_2 alpha_1^2 + X_2 beta_1 alpha_2^2)/(2 g^2).
    """
    bend = (1.0 - of.a_1 * of.a_2 / 3.0) / of.g
    slopes = of.X_1 * of.b_2 * of.a_1**2 + of.X_2 * of.b_1 * of.a_2**2
    return 3.0 * of.v**2 / of.s_2 * (bend - slopes / (6.0 * of.g**2))


def einstein_amplitude(of: Letters, k_1: FloatArray) -> FloatArray:
    """Return gamma [s]; shape batch.

    In the bracket: the redshift, the time dilation, and the pulsar's spin, which slows as the companion's scalar field
    makes it bulkier.
    """
    return of.e / of.n * of.X_2 / of.g * of.v**2 * (1.0 + of.g * of.X_2 + of.a_2 * k_1)


def shapiro_shape(of: Letters, state: BinaryState) -> FloatArray:
    """Return s = sin i [1] by Kepler's law with G_12 to 1PN, or from the inclination; NaN above 1; shape batch."""
    x = state.projected_semi_major_axis
    if x is None:
        (s,) = state.known("sin_inclination")
    else:
        # the 1PN term of general relativity: what the charges change of it is smaller by their squares
        s = of.n * x / (of.X_2 * of.v) * (1.0 + (3.0 - of.X_1 * of.X_2 / 3.0) * of.v**2)
    return np.where(s <= 1.0, s, np.nan)[()]


@hook
def predicted_parameters(state: BinaryState, settings: Settings) -> Predicted:
    """Return Einstein amplitude [s], Shapiro range [s] and shape [1], and the orthometric pair [1], [s]; shape batch.

    Light does not feel the scalar field, and what it does to rulers and clocks drops out of a null ray: so the range
    has G_* alone.
    """
    of = letters(state, settings)
    (m_2,) = state.known("mass_2")
    r = of.G_star * m_2
    always = {
        "einstein_delay_amplitude": einstein_amplitude(of, settings["inertia_response_1"]),
        "shapiro_range": r,
    }
    if state.sin_inclination is None:
        return Predicted(always)
    s = shapiro_shape(of, state)
    ratio = s / (1.0 + np.sqrt((1.0 - s) * (1.0 + s)))
    return Predicted({**always, "shapiro_shape": s, "orthometric_ratio": ratio, "orthometric_amplitude": r * ratio**3})


@hook
def delay(orbit: Orbit, parameters: Mapping[str, FloatArray]) -> Delay:
    """Return Einstein and Shapiro delay [s], of the same forms as in general relativity; shape batch + (times,)."""
    clock, light = einstein_delay.delay(orbit, parameters), shapiro_delay.delay(orbit, parameters)
    rates = [part.rate for part in (clock, light) if part.rate is not None]
    return Delay(clock.seconds + light.seconds, reduce(np.add, rates))


# --- the waves: each returns its part of the rates of P_b [s/s] and e [1/s] -------------------------------------------


def dipole(of: Letters) -> tuple[FloatArray, FloatArray]:
    """Return the rates by scalar dipole waves: there are none where both bodies have one charge."""
    scale = of.X_1 * of.X_2 / of.g * of.v**3 * (of.a_1 - of.a_2) ** 2 / (of.s_2 * np.sqrt(of.s_2))
    return -2.0 * np.pi * scale * (1.0 + 0.5 * of.e**2) / of.s_2, -0.5 * of.n * scale * of.e


def monopole(of: Letters) -> tuple[FloatArray, FloatArray]:
    """Return the rates by scalar monopole waves: the whole charge breathes as the distance and the speed change.

    They carry no angular momentum.
    """
    A = (
        5.0 / 3.0 * (of.a_1 + of.a_2)
        - 2.0 / 3.0 * (of.a_1 * of.X_1 + of.a_2 * of.X_2)
        + (of.b_1 * of.a_2 + of.b_2 * of.a_1) / of.g
    )
    scale = of.X_1 * of.X_2 / of.g * of.v**5 * A**2 * (1.0 + 0.25 * of.e**2) / (of.s_2**2 * np.sqrt(of.s_2))
    return -3.0 * np.pi * scale * of.e**2 / of.s_2, -0.5 * of.n * scale * of.e


def quadrupoles(of: Letters) -> tuple[FloatArray, FloatArray]:
    """Return the rates by quadrupole waves of the metric and of the scalar, which is B^2/6 of the former."""
    B = of.a_1 * of.X_2 + of.a_2 * of.X_1
    scale = of.X_1 * of.X_2 / of.g * of.v**5 * (1.0 + B**2 / 6.0)
    rounding = of.e * (1.0 + 121.0 / 304.0 * of.e**2) / (of.s_2**2 * np.sqrt(of.s_2))
    return (
        -192.0 * np.pi / 5.0 * scale * quadrupole_decay.enhancement(of.e, of.s_2),
        -304.0 / 15.0 * of.n * scale * rounding,
    )


@hook
def secular_rates(state: BinaryState, settings: Settings) -> Rates:
    """Return the rates of the period [s/s], the eccentricity [1/s] and omega [rad/s]; shape batch.

    Those of e are derived here from the energy and the angular momentum that the same waves carry away.
    """
    of = letters(state, settings)
    (P_dipole, e_dipole), (P_monopole, e_monopole) = dipole(of), monopole(of)
    P_quadrupoles, e_quadrupoles = quadrupoles(of)
    return Rates(
        {
            "orbital_period": P_dipole + P_monopole + P_quadrupoles,
            "eccentricity": e_dipole + e_monopole + e_quadrupoles,
            "longitude_of_periastron": of.n * advance_per_radian(of),
        }
    )


# --- where not to trust it -------------------------------------------------------------------------------------------


def dropped_dipole_share(of: Letters) -> FloatArray:
    """Return about how much of the decay the dropped next order of the dipole is [1]; shape batch.

    It goes as v_o^5 (alpha_1 - alpha_2) (a sum of charges, and of slopes times charges); Damour & Esposito-Farese
    (1992), its form from memory. A power of ten, not more.
    """
    sums = np.abs(of.a_1) + np.abs(of.a_2) + np.abs(of.b_1 * of.a_2) + np.abs(of.b_2 * of.a_1)
    shape = (1.0 + 3.0 * of.e**2) / (of.s_2**3 * np.sqrt(of.s_2))
    dropped = 4.0 * np.pi * of.X_1 * of.X_2 / of.g * of.v**5 * np.abs(of.a_1 - of.a_2) * sums * shape
    share: FloatArray = dropped / np.abs(dipole(of)[0] + monopole(of)[0] + quadrupoles(of)[0])
    return share


@hook
def cautions(state: BinaryState, settings: Settings) -> tuple[Caution, ...]:
    """Say what the replaced effects would say, what is dropped of the dipole, and what stays general relativity's."""
    of = letters(state, settings)
    said = [*periastron_advance.cautions(state), *quadrupole_decay.cautions(state)]
    share = float(np.max(dropped_dipole_share(of)))
    if share > 1e-6:
        said.append(Caution(f"the dipole radiation's next order is left out: about {share:.0e} of the decay"))
    a_0, products = settings["matter_charge"], (np.abs(of.b_1) * of.a_2**2, np.abs(of.b_2) * of.a_1**2)
    strength = float(np.max([a_0**2, of.a_1**2, of.a_2**2, *products]))
    if strength > 0.0:
        said.append(
            Caution(
                "second-order advance, next-order radiation, spin-orbit advance, geodetic precession and orbit "
                f"deformation stay general relativity's: off by about {strength:.0e} of themselves"
            )
        )
    stronger = float(np.max(np.abs(of.G_star * of.g / T_SUN - 1.0)))
    if state.projected_semi_major_axis is not None and stronger > 1e-6:
        said.append(
            Caution(
                f"sin_inclination is by Newton's constant, {stronger:.0e} off the bodies' own; shapiro_shape is not"
            )
        )
    return tuple(said)
