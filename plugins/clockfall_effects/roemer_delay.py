"""Roemer delay: light takes time to cross the orbit along the line of sight."""

from __future__ import annotations

from clockfall.binary.orbit import Orbit
from clockfall.effects import Card, Delay, hook


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="roemer-delay",
        summary="Light takes time to cross the orbit: signals from its far side arrive late.",
        formula="delay = x [sin omega (cos E - e) + sqrt(1 - e^2) cos omega sin E]",
        sources=(
            "Blandford & Teukolsky 1976, ApJ 205, 580",
            "Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44, 263",
        ),
        order="exact for an ellipse; the orbit's deformation is an effect of its own",
        valid="any orbit; the companion's pull on the light is another effect",
        needs=("orbital_period", "eccentricity", "longitude_of_periastron", "projected_semi_major_axis"),
        gives=(),
        delay="position of body 1 along the line of sight",
    )


@hook
def delay(orbit: Orbit) -> Delay:
    """Return the Roemer delay [s]; shape batch + (times,)."""
    x, e, root = orbit.projected_semi_major_axis, orbit.eccentricity, orbit.root
    along, across = orbit.cos_E - e, root * orbit.sin_E
    seconds = x * (orbit.sin_omega * along + orbit.cos_omega * across)
    by_E = x * (root * orbit.cos_omega * orbit.cos_E - orbit.sin_omega * orbit.sin_E)
    by_omega = x * (orbit.cos_omega * along - orbit.sin_omega * across)
    return Delay(seconds, by_E * orbit.eccentric_rate + by_omega * orbit.longitude_rate)
