"""What the companion's motion, and the bending of the light, change of the Shapiro delay."""

from __future__ import annotations

import numpy as np

from clockfall.binary.constants import T_SUN
from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Caution, Delay, hook

NEAREST = 3.0
"""In Einstein radii: nearer, the second image has 1 % of the light or more."""


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="shapiro-motion-and-bending",
        summary="The companion moves while the light passes it, and bends the light onto a way round it.",
        formula=(
            "delay = -2 r {ln(Lambda'/Lambda) + v_K (ln Lambda - 1)} + 2 r {4 q/(1 + w)^2 - 2 ln[(1 + w)/2]};  "
            "a Lambda' = a Lambda - v.rho + v^2 z^2/(rho + z), of the parts across the line of sight;  "
            "w = sqrt(1 + 4 q),  q = 4 r z/b^2: Einstein radius over impact parameter, squared"
        ),
        sources=(
            "Kopeikin & Schaefer 1999, Phys. Rev. D 60, 124002 (from memory; derived here from the retarded field)",
            "Lai & Rafikov 2005, ApJ 621, L41 (from memory)",
            "Kramer et al. 2021, Phys. Rev. X 11, 041050 (from memory)",
        ),
        order=(
            "first order in the companion's velocity, and the second where the line of sight passes near it; the "
            "main image of a point lens, exactly. Left out: a constant times v_K, which is a shift of the epoch; "
            "r^2/b (15 pi/4); the turn of the beam by the bending"
        ),
        valid="b many Einstein radii; below 3 the other image matters",
        needs=(
            "mass_1",
            "mass_2",
            "sin_inclination",
            "orbital_period",
            "eccentricity",
            "longitude_of_periastron",
            "projected_semi_major_axis",
        ),
        gives=(),
        delay="what the companion's motion and the bending of light change of the Shapiro delay",
    )


@hook
def delay(orbit: Orbit) -> Delay:
    """Return the change of the Shapiro delay [s]; shape batch + (times,)."""
    m_1, m_2, M, a, sin_i = orbit.state.known(
        "mass_1", "mass_2", "total_mass", "relative_semi_major_axis", "sin_inclination"
    )
    # where sin i > 1 the Shapiro delay itself has no meaning, and says so; edge-on stands in for it here
    s = np.minimum(sin_i, 1.0)
    along, across = orbit.cos_E - orbit.eccentricity, orbit.root * orbit.sin_E
    rho = a * orbit.one_minus_e_cos_E
    behind = a * s * (orbit.sin_omega * along + orbit.cos_omega * across)
    speed = -(m_1 / M) * a * orbit.eccentric_rate  # of body 2, against that of the relative orbit
    v_K = speed * s * (orbit.root * orbit.cos_omega * orbit.cos_E - orbit.sin_omega * orbit.sin_E)
    v_rho = speed * a * orbit.eccentricity * orbit.sin_E * orbit.one_minus_e_cos_E
    v_2 = speed**2 * orbit.one_minus_e_cos_E * (2.0 - orbit.one_minus_e_cos_E)
    r = T_SUN * m_2
    return Delay(motion(r, a, rho, behind, v_K, v_rho, v_2) + bending(r, impact(rho, behind, v_K, v_rho, v_2), behind))


def impact(rho: FloatArray, behind: FloatArray, v_K: FloatArray, v_rho: FloatArray, v_2: FloatArray) -> FloatArray:
    """Return the square of the distance [ls^2] at which straight light passes body 2, which has moved meanwhile.

    Parameters
    ----------
    rho, behind : array [ls]
        Distance of body 1 from body 2, and the part of it along the line of sight, positive on the far side.
    v_K, v_rho, v_2 : array [c], [ls], [c^2]
        Velocity of body 2 along the line of sight, times the vector from body 2 to 1, and squared.
    """
    z: FloatArray = np.maximum(behind, 0.0)
    b_2: FloatArray = (rho - behind) * (rho + behind) - 2.0 * z * (v_rho - v_K * behind) + z**2 * (v_2 - v_K**2)
    return b_2


def motion(
    r: FloatArray,
    a: FloatArray,
    rho: FloatArray,
    behind: FloatArray,
    v_K: FloatArray,
    v_rho: FloatArray,
    v_2: FloatArray,
) -> FloatArray:
    """Return what the motion of body 2 adds to -2 r ln Lambda [s]; a is a unit of length, the rest as in `impact`.

    The field at the light is that of body 2 at the retarded time; for uniform motion its integral along the straight
    ray is (1 + v_K) times the logarithm of b^2/(rho + z), b taken as the light passes, rho + z at the retarded time.
    """
    plain = rho - behind
    z: FloatArray = np.maximum(behind, 0.0)
    moved = -(v_rho - v_K * behind) + (v_2 - v_K**2) * z**2 / (rho + z)
    return -2.0 * r * (np.log1p(moved / plain) + v_K * (np.log(plain / a) - 1.0))


def bending(r: FloatArray, b_2: FloatArray, behind: FloatArray) -> FloatArray:
    """Return the delay by a point lens, main image, less that along the straight line [s].

    Parameters
    ----------
    r, b_2, behind : array [s], [ls^2], [ls]
        Shapiro range, square of the impact parameter, distance behind the lens; none in front of it.
    """
    q = 4.0 * r * np.maximum(behind, 0.0) / b_2
    w = np.sqrt(1.0 + 4.0 * q)
    return 2.0 * r * (4.0 * q / (1.0 + w) ** 2 - 2.0 * np.log1p(2.0 * q / (1.0 + w)))


@hook
def cautions(state: BinaryState) -> tuple[Caution, ...]:
    """Warn where the light passes within a few Einstein radii."""
    m_2, a, sin_i, e, omega = state.known(
        "mass_2", "relative_semi_major_axis", "sin_inclination", "eccentricity", "longitude_of_periastron"
    )
    s = np.minimum(sin_i, 1.0)
    z = a * (1.0 - e**2) / (1.0 + e * np.sin(omega))  # at conjunction, where omega + nu is 90 deg
    radii = np.sqrt(z * (1.0 - s) * (1.0 + s) / (4.0 * T_SUN * m_2))
    share = float(np.mean(radii < NEAREST))
    if share == 0.0:
        return ()
    return (
        Caution(
            f"in {share:.0%} of the draws the light passes within {NEAREST:g} Einstein radii of the companion, where "
            "a second image is seen too"
        ),
    )
