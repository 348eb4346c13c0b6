"""Annual-orbital parallax: from each place of the Earth the orbit is seen from another side."""

from __future__ import annotations

import numpy as np

from clockfall.binary.earth import earth_motion
from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.sky import equatorial_direction
from clockfall.effects import APPARENT, Card, Delay, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="annual-orbital-parallax",
        summary="As the Earth goes round the Sun we see the orbit from changing sides, and its light as curved fronts.",
        formula="delay = -r.R/d + r^2/(2 d), of the parts of r and R across the line of sight",
        sources=("Kopeikin 1995, ApJ 439, L5 (from memory; derived here from the length of the light's path)",),
        order="first order in 1/d; what has no r in it belongs to the place of the binary on the sky",
        valid=(
            "1900-2100; r and R << d. The Earth's centre stands for the observatory: 4e-5 of R. Omega is the position "
            "angle, from north through east, of the node where body 1 recedes; i below 90 deg means that position "
            "angles grow along the orbit; i is not 0 or 180 deg"
        ),
        nature=APPARENT,
        needs=(
            "right_ascension",
            "declination",
            "distance",
            "inclination",
            "ascending_node",
            "orbital_period",
            "eccentricity",
            "longitude_of_periastron",
            "projected_semi_major_axis",
        ),
        gives=(),
        delay="what body 1's place and the Earth's, across the line of sight, make of the light's way together",
    )


@hook
def delay(orbit: Orbit) -> Delay:
    """Return the annual-orbital and the orbital parallax [s]; shape batch + (times,)."""
    i, Omega, alpha, delta, d = orbit.state.known(
        "inclination", "ascending_node", "right_ascension", "declination", "distance"
    )
    a_1 = orbit.projected_semi_major_axis / np.sin(i)
    along, across = orbit.cos_E - orbit.eccentricity, orbit.root * orbit.sin_E
    node = a_1 * (orbit.cos_omega * along - orbit.sin_omega * across)
    ahead = a_1 * (orbit.sin_omega * along + orbit.cos_omega * across)  # a quarter turn after the node, in the orbit
    east, north = on_the_sky(node, ahead * np.cos(i), Omega)
    earth = earth_motion(orbit.times())
    K = np.stack(np.broadcast_arrays(*equatorial_direction(alpha, delta)), axis=-1)
    # the light is met after it has crossed the orbit, and sooner where the Earth comes to meet it
    late = ahead * np.sin(i) - np.sum(K * earth.position, axis=-1)
    R = earth.position + earth.velocity * late[..., None]
    to_east, to_north = across_the_sky(R, alpha, delta)
    return Delay((0.5 * (east**2 + north**2) - east * to_east - north * to_north) / d)


def on_the_sky(node: FloatArray, ahead: FloatArray, Omega: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the parts to the east and north of a place given along the node and a quarter turn after it [ls]."""
    return node * np.sin(Omega) + ahead * np.cos(Omega), node * np.cos(Omega) - ahead * np.sin(Omega)


def across_the_sky(R: FloatArray, alpha: FloatArray, delta: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the parts of R, shape (..., 3), to the east and north as seen at a place on the sky [unit of R]."""
    X, Y, Z = R[..., 0], R[..., 1], R[..., 2]
    east = Y * np.cos(alpha) - X * np.sin(alpha)
    north = Z * np.cos(delta) - (X * np.cos(alpha) + Y * np.sin(alpha)) * np.sin(delta)
    return east, north
