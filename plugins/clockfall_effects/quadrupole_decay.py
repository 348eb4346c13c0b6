"""Decay of the orbit by gravitational radiation at leading (quadrupole) order."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np

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
        order="leading order (2.5PN in the motion); what is dropped is smaller by (3 + 6 e^2) beta^2/(1 - e^2) or so",
        valid="beta^2/(1 - e^2) << 1, and decay slow against the orbit; two point masses in vacuum",
        needs=("mass_1", "mass_2", "orbital_period", "eccentricity"),
        gives=(Rate("orbital_period"), Rate("eccentricity")),
    )


# --- the rates -------------------------------------------------------------------------------------------------------


def enhancement(eccentricity: FloatArray, one_minus_e_squared: FloatArray) -> FloatArray:
    """Return F(e), the power radiated over that of the circular orbit of the same period [1].

    Parameters
    ----------
    eccentricity : array, any shape [1]
        e, 0 <= e < 1.
    one_minus_e_squared : array, broadcasts with eccentricity [1]
        1 - e^2, given beside e so that nothing is lost near e = 1; at least 1e-80.

    Notes
    -----
    Peters & Mathews (1963), eq. (17) (equation number from memory).
    """
    e_2, s_2 = np.square(eccentricity), one_minus_e_squared
    return (1.0 + e_2 * (73.0 / 24.0 + e_2 * (37.0 / 96.0))) / (s_2 * s_2 * s_2 * np.sqrt(s_2))


def decay_scale(state: BinaryState) -> FloatArray:
    """Return nu beta^5 = (T_sun n)^(5/3) m_1 m_2 M^(-1/3) [1], common to both rates; shape batch."""
    m_1, m_2, n, beta = state.known("mass_1", "mass_2", "mean_motion", "orbital_velocity")
    return m_1 * m_2 * np.square(T_SUN * n) / beta  # one cube root, that in beta, and no power of a small number


def _w(e_2: FloatArray) -> FloatArray:
    """Return 1 + 121/304 e^2, which stands in every formula of the evolution."""
    return 1.0 + 121.0 / 304.0 * e_2


@hook
def secular_rates(state: BinaryState) -> Rates:
    """Return the rates of the orbital period [s/s] and of the eccentricity [1/s]; shape batch.

    The first is the radiated power, Peters & Mathews (1963), eq. (16), through Kepler's third law; the second is
    Peters (1964), eq. (5.7) (equation numbers from memory).
    """
    e, s_2, n = state.known("eccentricity", "one_minus_e_squared", "mean_motion")
    scale = decay_scale(state)
    return Rates(
        {
            "orbital_period": -192.0 * np.pi / 5.0 * scale * enhancement(e, s_2),
            "eccentricity": -304.0 / 15.0 * scale * n * e * _w(np.square(e)) / (s_2 * s_2 * np.sqrt(s_2)),
        }
    )


# --- the time to merger ----------------------------------------------------------------------------------------------

# S(s) with s = sqrt(1 - e^2) is Peters's integral with its behaviour at both ends taken out: smooth, from 768/425 at
# e = 1 to 1 at e = 0. Its nearest singularity is s = -1, so a rational function of type (8, 7) follows it on [0, 1] to
# 1.2e-16 of itself (minimax in the relative error: Remez exchange in 50 digits). The tests integrate anew.
S_NUMERATOR: Final = (
    1.807058823529412,
    0.0984860347714989,
    -0.9225987790710086,
    0.17866901751973366,
    0.02587085600811205,
    -0.004506549065511516,
    0.0012279455688253913,
    -0.00020680004951527167,
    3.920188998238526e-05,
)
S_DENOMINATOR: Final = (
    1.0,
    1.510017315709622,
    -0.4162268819542242,
    -1.2175018105295372,
    -0.0032062241430147864,
    0.32971743838850226,
    0.010985421061555601,
    -0.029745507431374725,
)


def _polynomial(coefficients: tuple[float, ...], x: FloatArray) -> FloatArray:
    """Return the polynomial in x, constant term first, by Horner's rule."""
    value = coefficients[-1] * x
    for coefficient in coefficients[-2:0:-1]:
        value += coefficient
        value *= x
    value += coefficients[0]
    return value


def _S(s: FloatArray) -> FloatArray:
    return _polynomial(S_NUMERATOR, s) / _polynomial(S_DENOMINATOR, s)


def _blocks(size: int, width: int = 1) -> Iterator[slice]:
    """Yield slices of a batch, each with few enough elements of `width` numbers for the scratch to stay in cache."""
    lanes = max(1, 16_000 // max(1, width))
    return (slice(start, start + lanes) for start in range(0, size, lanes))


def merger_fraction(one_minus_e_squared: FloatArray) -> FloatArray:
    """Return s^7 S(s), the time to merger over that of the circular orbit of the same period [1].

    Parameters
    ----------
    one_minus_e_squared : array, any shape [1]
        s^2 = 1 - e^2, in (0, 1].

    Returns
    -------
    array, the same shape [1]
        Right to 1e-15 of itself for the very double given.

    Notes
    -----
    (48/19) (a/c_0)^(-4) times the integral of Peters (1964), eq. (5.14), a/c_0 being that of eq. (5.11) (equation
    numbers from memory).
    """
    given = np.ravel(one_minus_e_squared)
    fraction = np.empty(given.size)
    for part in _blocks(given.size):
        s_2 = given[part]
        s = np.sqrt(s_2)
        fraction[part] = s_2 * s_2 * s_2 * s * _S(s)
    return fraction.reshape(np.shape(one_minus_e_squared))[()]


def merger_time(state: BinaryState) -> FloatArray:
    """Return the time to merger [s]; shape batch.

    Peters (1964), eqs. (5.10, 5.14) (equation numbers from memory): the time in which a, as the quadrupole formula
    shrinks it, reaches 0. Good as long as the orbit is wide against M; the last orbits are no longer its business.
    """
    names = ("mass_1", "mass_2", "orbital_period", "eccentricity", "one_minus_eccentricity")
    fields = [np.ravel(values) for values in state.known(*names)]
    T = np.empty(fields[0].size)
    for part in _blocks(T.size):
        m_1, m_2, P_b, e, rest = (values[part] for values in fields)
        M, n, s_2 = m_1 + m_2, 2.0 * np.pi / P_b, rest * (1.0 + e)
        circular = 5.0 / 256.0 / T_SUN**2 * np.cbrt(T_SUN * M * n) / (m_1 * m_2 * n * n * n)  # a^4/(4 b)
        T[part] = circular * merger_fraction(s_2)
    return T.reshape(state.shape)[()]


# --- the orbit at a time ---------------------------------------------------------------------------------------------

# Along every orbit q = e^2/(1 - e^2) is the same function of H, below: with h = H^(19/24) it is h R(h)^(29/19), and R
# is nearly rational: R_SLOPE h + R_CONSTANT + sum of residue/(h + distance). This one gives ln q to 2e-5 from e = 0 to
# 1 - e = 1e-32 (minimax in R, of type (5, 4); constants rounded).
R_SLOPE: Final = 0.2369448
R_CONSTANT: Final = 0.1540469
R_POLES: Final = ((0.01193473, 0.9855077), (2.888276, 7.142147), (9.13002, 38.71648), (79.69179, 411.5496))
"""Residue and distance of each pole; all lie at h < 0, so that every term is positive."""

LARGEST_ECCENTRICITY: Final = np.nextafter(1.0, 0.0)
"""Long before the state's instant 1 - e falls below the rounding of e; 1 itself would be no ellipse."""


@hook
def closed_form_track(state: BinaryState, times: FloatArray) -> ClosedFormTrack:
    """Return period [s] and eccentricity at `times` [s], before or after the state's instant, and the merger time [s].

    Both are right to 2e-14 of themselves for the time that is left, T - t, which has the rounding of T and of t;
    backwards to t = -1e12 T, to 1e-13.
    """
    T = merger_time(state)
    P = np.empty((np.size(T), times.size))
    e = np.empty_like(P)
    orbit = [np.ravel(values) for values in (T, *state.known("orbital_period", "eccentricity", "one_minus_e_squared"))]
    for rows in _blocks(len(P), times.size):
        for columns in _blocks(times.size):
            P[rows, columns], e[rows, columns] = _orbit_after(times[columns], *(values[rows, None] for values in orbit))
    shape = state.shape + times.shape
    return ClosedFormTrack(P.reshape(shape), e.reshape(shape), T)


def _orbit_after(
    t: FloatArray, T: FloatArray, P_0: FloatArray, e_0: FloatArray, s_0_2: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return period [s] and eccentricity at `t` [s], NaN from merger on; shape of the arguments broadcast together.

    The time left goes as a^4 s^7 S, and P_b as a^(3/2). By Peters (1964), eq. (5.11) (equation number from memory),
    these are, with w = 1 + 121/304 e^2,

        H = e^(48/19) w^(3480/2299) S/s = q^(24/19) s^(29/19) w^(3480/2299) S,
        P_b = const q^(9/19) s^(-39/19) w^(1305/2299).

    The unknown is rho = q/q_0. With D = s_0^2 + rho e_0^2, e^2 is rho e_0^2/D and 1 - e^2 is s_0^2/D, so that nothing
    is lost near e = 1, and e_0 = 0 is no special case.
    """
    gone = t / T
    ln_left = np.log(1.0 - np.where(gone < 1.0, gone, np.nan))
    e_0_2 = e_0**2
    ln_s_0_2, ln_w_0, ln_S_0 = np.log(s_0_2), np.log(_w(e_0_2)), np.log(_S(np.sqrt(s_0_2)))

    ln_h = 145.0 / 121.0 * ln_w_0 + 19.0 / 24.0 * (ln_S_0 - 0.5 * ln_s_0_2) + 19.0 / 24.0 * ln_left  # less ln e_0^2
    ln_rho = ln_s_0_2 + ln_h + 29.0 / 19.0 * np.log(_R(e_0_2 * np.exp(ln_h)))
    rho = np.exp(ln_rho)
    D = s_0_2 + rho * e_0_2
    e_2, s_2 = rho * e_0_2 / D, s_0_2 / D
    w, S = _w(e_2), _S(np.sqrt(s_2))
    ln_D, ln_w = np.log(D), np.log(w) - ln_w_0
    ln_H = 24.0 / 19.0 * ln_rho - 29.0 / 38.0 * ln_D + 3480.0 / 2299.0 * ln_w + np.log(S) - ln_S_0
    step = _halley(ln_H - ln_left, e_2, s_2, w, S)

    # `step` is below 2e-5, and what it does to e and P_b is wanted to its second order: by the slopes half way. For
    # each d ln rho, d ln e is s^2/2 and d ln P_b, by eqs. (5.6, 5.7), is (9/19) (1 + 73/24 e^2 + 37/96 e^4)/w.
    middle = e_2 + 0.5 * step * e_2 * s_2
    up_e = 0.5 * step * (1.0 - middle)
    up_P = step * (1.0 + middle * (73.0 / 24.0 + middle * (37.0 / 96.0))) / _w(middle)
    e = e_0 * np.sqrt(rho / D) * (1.0 + up_e * (1.0 + 0.5 * up_e))
    P = P_0 * np.exp(9.0 / 19.0 * (ln_rho + up_P) + 39.0 / 38.0 * ln_D + 1305.0 / 2299.0 * ln_w)
    return P, np.minimum(e, LARGEST_ECCENTRICITY)


def _R(h: FloatArray) -> FloatArray:
    value = R_SLOPE * h + R_CONSTANT
    for residue, distance in R_POLES:
        value += residue / (h + distance)
    return value


def _halley(miss: FloatArray, e_2: FloatArray, s_2: FloatArray, w: FloatArray, S: FloatArray) -> FloatArray:
    """Return the one step in ln rho that takes off what ln H is too large by.

    Halley's method leaves 0.011 times the cube of the start's error, 1e-16. By eq. (5.7) ln H has the slope
    24/(19 w S) in ln q, between 24/19 at e = 0 and 1/2 at e = 1; `bend` is the slope of ln(w S), for which S need not
    be differentiated, since ln H and its slope are both known (equation number from memory).
    """
    slope = 24.0 / 19.0 / (w * S)
    bend = slope - 24.0 / 19.0 + 29.0 / 38.0 * e_2 - (3480.0 / 2299.0 - 1.0) * 121.0 / 304.0 * e_2 * s_2 / w
    return -miss / (slope + 0.5 * bend * miss)


# --- where not to trust it -------------------------------------------------------------------------------------------


def next_order_size(state: BinaryState) -> FloatArray:
    """Return about how much of the decay the next order is [1]; shape batch.

    Within a factor of 2 whatever the masses: (3 + 6 e^2) is a straight line in e^2 through the next order's coefficient
    (Blanchet & Schaefer 1989, MNRAS 239, 845), which for equal masses goes from 3.1 at e = 0 to 9.3 at e = 1.
    """
    beta, e, s_2 = state.known("orbital_velocity", "eccentricity", "one_minus_e_squared")
    return (3.0 + 6.0 * e**2) * beta**2 / s_2


@hook
def cautions(state: BinaryState) -> tuple[Caution, ...]:
    """Say how large the next order is, and where the orbit is too tight for this formula to mean much."""
    a, M, rest = state.known("relative_semi_major_axis", "total_mass", "one_minus_eccentricity")
    said = []
    dropped = float(np.max(next_order_size(state)))
    if dropped > 1e-6:
        statement = f"leading order only: the decay is good to about {dropped:.0e} of itself"
        said.append(Caution(statement, unless=("radiation-next-order",)))
    closest = float(np.min(a * rest / (T_SUN * M)))
    if closest < 30.0:
        said.append(Caution(f"at periastron the bodies come within {closest:.0f} GM/c^2: the formula is a rough guide"))
    return tuple(said)
