"""Decay of the orbit by gravitational radiation at leading (quadrupole) order."""

from __future__ import annotations

from typing import Final

import numpy as np

from clockfall.binary.blocks import in_blocks
from clockfall.binary.constants import T_SUN
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, ClosedFormTrack, Rate, Rates, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="quadrupole-decay",
        summary="Gravitational waves carry energy away: the orbit shrinks and becomes rounder.",
        formula=(
            "P_b rate = -(192 pi/5) (T_sun n)^(5/3) m_1 m_2 M^(-1/3) F(e),  "
            "F(e) = (1 + 73/24 e^2 + 37/96 e^4) (1 - e^2)^(-7/2);  "
            "e rate = -(304/15) (T_sun n)^(5/3) n m_1 m_2 M^(-1/3) e (1 + 121/304 e^2) (1 - e^2)^(-5/2)"
        ),
        sources=(
            "Peters & Mathews 1963, Phys. Rev. 131, 435, eqs. (16-17; numbers from memory)",
            "Peters 1964, Phys. Rev. 136, B1224, eqs. (5.6-5.7, 5.11, 5.14; numbers from memory)",
        ),
        order="leading order (2.5PN in the motion); what is dropped is smaller by (3 + 7 e^2) beta^2/(1 - e^2) or so",
        valid="beta^2/(1 - e^2) << 1, and decay slow against the orbit; two point masses in vacuum",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("orbital_period"), Rate("eccentricity")),
    )


def enhancement(eccentricity: FloatArray, one_minus_e_squared: FloatArray) -> FloatArray:
    """Return F(e), the power radiated over that of the circular orbit of the same period [1].

    Parameters
    ----------
    eccentricity, one_minus_e_squared : array, any shape [1]
        e and 1 - e^2, both given, so that nothing is lost near e = 1.

    Notes
    -----
    Peters & Mathews (1963), eq. (17) (equation number from memory).
    """
    e_2 = eccentricity**2
    s_6 = one_minus_e_squared * one_minus_e_squared * one_minus_e_squared
    return (1.0 + e_2 * (73.0 / 24.0 + e_2 * (37.0 / 96.0))) / (s_6 * np.sqrt(one_minus_e_squared))


def decay_scale(m_1: FloatArray, m_2: FloatArray, n: FloatArray) -> FloatArray:
    """Return (T_sun n)^(5/3) m_1 m_2 M^(-1/3) [1], common to all formulas, from [Msun], [Msun], [rad/s]; any shape."""
    y = T_SUN * n
    return y * np.cbrt(y * y / (m_1 + m_2)) * m_1 * m_2  # numpy's power of an array is many times slower


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return the rates of the orbital period [s/s] and of the eccentricity [1/s]; shape batch."""
    m_1, m_2, n, e, s_2 = state.known("mass_1", "mass_2", "mean_motion", "eccentricity", "one_minus_e_squared")
    scale = decay_scale(m_1, m_2, n)
    return Rates(
        {
            "orbital_period": -192.0 * np.pi / 5.0 * scale * enhancement(e, s_2),
            "eccentricity": -304.0 / 15.0 * scale * n * e * _one_plus(e) / (s_2**2 * np.sqrt(s_2)),
        }
    )


def _one_plus(e: FloatArray) -> FloatArray:
    """Return 1 + 121/304 e^2, which stands in every formula of the evolution."""
    return 1.0 + 121.0 / 304.0 * e**2


# The time to merger is a^4/(4 b) s^7 S(s) with s = sqrt(1 - e^2) and b = (64/5) G^3 m_1 m_2 M/c^5: Peters's
# integral, eq. (5.14), with its behaviour at both ends taken out. S is smooth, from 768/425 at e = 1 to 1 at e = 0.
# It is interpolated by a rational function at 15 Chebyshev nodes of [0, 1], computed to 50 digits; relative error
# at most 1.8e-15. The tests compute the integral anew.
S_NUMERATOR: Final = (
    1.8070588235294101504,
    0.20128302116412788134,
    -0.99846925957632736974,
    0.21393809339081361771,
    0.010248706686592488996,
    0.00027143378555286110514,
    -0.00011804048958136218623,
    0.000070627470415371141607,
)
S_DENOMINATOR: Final = (
    1.0,
    1.5669036688561198737,
    -0.37541346918677648516,
    -1.2582419373757341416,
    -0.01673012172677167926,
    0.33720598345970717339,
    0.0092338433893141896012,
    -0.028674561454857460668,
)


def shape_factor(s: FloatArray) -> FloatArray:
    """Return S(s) [1] for s = sqrt(1 - e^2) in (0, 1]; any shape."""
    numerator, denominator = S_NUMERATOR[-1] * s, S_DENOMINATOR[-1] * s
    for a, b in zip(S_NUMERATOR[-2:0:-1], S_DENOMINATOR[-2:0:-1], strict=True):
        numerator += a
        numerator *= s
        denominator += b
        denominator *= s
    return (numerator + S_NUMERATOR[0]) / (denominator + S_DENOMINATOR[0])


def merger_time_over_circular(one_minus_e_squared: FloatArray) -> FloatArray:
    """Return s^7 S(s) [1], the time to merger over that of the circular orbit of the same period; any shape."""
    s = np.sqrt(one_minus_e_squared)
    cube = s * one_minus_e_squared
    return cube * cube * s * shape_factor(s)


def merger_time(state: BinaryState) -> FloatArray:
    """Return the time to merger [s]; shape batch.

    Peters (1964), eqs. (5.10, 5.14) (equation numbers from memory): the time in which a, as the quadrupole formula
    shrinks it, reaches 0. Good as long as the orbit is wide against M; the last orbits are no longer its business.
    """

    def time(m_1: FloatArray, m_2: FloatArray, P_b: FloatArray, e: FloatArray, rest: FloatArray) -> FloatArray:
        n = 2.0 * np.pi / P_b
        circular = 5.0 / (256.0 * decay_scale(m_1, m_2, n) * n)
        return circular * merger_time_over_circular(rest * (1.0 + e))

    return in_blocks(time, *state.known("mass_1", "mass_2", "orbital_period", "eccentricity", "one_minus_eccentricity"))


@hook
def closed_form_track(state: BinaryState, times: FloatArray) -> ClosedFormTrack:
    """Return period [s] and eccentricity at `times` [s], before or after the state's instant, and the merger time [s].

    Peters (1964), eq. (5.11) (equation number from memory), turned round. The remaining time is a function of e alone
    along an orbit, H(e) = e^(48/19) (1 + 121/304 e^2)^(3480/2299) S(s)/s, and falls as 1 - t/T. With
    q = e^2/(1 - e^2), d ln H/d ln q = 24/(19 (1 + 121/304 e^2) S) lies between 1/2 and 24/19, so that Newton's
    method in ln q meets no obstacle from e = 0 to e = 1.
    """
    e_0, s_2, P_0 = (value[..., None] for value in state.known("eccentricity", "one_minus_e_squared", "orbital_period"))
    T = merger_time(state)
    left = 1.0 - times / np.asarray(T)[..., None]  # shape batch + (times,)
    with np.errstate(invalid="ignore"):
        remaining = np.where(left > 0.0, left, np.nan)
    q_0 = e_0**2 / s_2  # 0 where it underflows, as on a circle: it counts beside 1 alone
    d = _change_of_ln_q(q_0, np.log(remaining))
    s_2_then = 1.0 / (1.0 + q_0 * np.exp(d))
    e_then = e_0 * np.exp(0.5 * d) * np.sqrt(s_2_then / s_2)
    before, after = merger_time_over_circular(s_2), merger_time_over_circular(s_2_then)
    period = (
        P_0 * (remaining * before / after) ** 0.375
    )  # a^4 is the remaining time over s^7 S, and P_b goes as a^(3/2)
    return ClosedFormTrack(period, e_then, T)


def _change_of_ln_q(q_0: FloatArray, ln_remaining: FloatArray) -> FloatArray:
    """Return d = ln(q/q_0) where ln H has changed by `ln_remaining`; shape batch + (times,), NaN where that is NaN."""

    def ln_h_and_slope(d: FloatArray | float) -> tuple[FloatArray, FloatArray]:
        q = q_0 * np.exp(d)
        w, S = 1.0 + 121.0 / 304.0 * q / (1.0 + q), shape_factor(1.0 / np.sqrt(1.0 + q))
        # p = q/(1 + q) = e^2 and s^2 = 1/(1 + q); ln H but for the constant 24/19 ln q_0
        ln_h = 24.0 / 19.0 * d + (0.5 - 24.0 / 19.0) * np.log1p(q) + 3480.0 / 2299.0 * np.log(w) + np.log(S)
        return ln_h, 24.0 / (19.0 * w * S)

    start, slope = ln_h_and_slope(0.0)
    d = ln_remaining / slope
    for _ in range(_NEWTON_STEPS):
        ln_h, slope = ln_h_and_slope(d)
        d = d - (ln_h - start - ln_remaining) / slope
    return d


_NEWTON_STEPS: Final = 7
"""Quadratic convergence from a start that is never off by more than the curvature of a nearly straight line."""


@hook
def cautions(state: BinaryState) -> tuple[Caution, ...]:
    """Say how large the next order is, and where the orbit is too tight for this formula to mean much."""
    beta, e, s_2 = state.known("orbital_velocity", "eccentricity", "one_minus_e_squared")
    a, M, rest = state.known("relative_semi_major_axis", "total_mass", "one_minus_eccentricity")
    said = []
    # A straight line in e^2 between the next order's ends for equal masses, 3.1 at e = 0 and 9.3 at e = 1 (Blanchet &
    # Schaefer 1989, MNRAS 239, 845).
    dropped = float(np.max((3.0 + 7.0 * e**2) * beta**2 / s_2))
    if dropped > 1e-6:
        said.append(Caution(f"leading order only: the decay is good to about {dropped:.0e} of itself"))
    closest = float(np.min(a * rest / (T_SUN * M)))
    if closest < 30.0:
        said.append(Caution(f"at periastron the bodies come within {closest:.0f} GM/c^2: the formula is a rough guide"))
    return tuple(said)
