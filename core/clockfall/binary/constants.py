"""The constants of nature and of convention that clockfall uses, each with its source.

Inside clockfall times are in seconds, angles in radians, masses in nominal solar masses, lengths in
light-seconds, and c = 1. A mass m enters a formula as T_SUN * m, never as G times kilograms: the product
GM is known far better than G is.
"""

from __future__ import annotations

import math
from typing import Final

SPEED_OF_LIGHT: Final = 299_792_458.0
"""c [m/s]. Exact by definition of the metre (SI)."""

GM_SUN: Final = 1.3271244e20
"""Nominal solar mass parameter GM_sun [m^3/s^2]. Exact by IAU 2015 Resolution B3."""

T_SUN: Final = GM_SUN / SPEED_OF_LIGHT**3
"""GM_sun / c^3 [s], 4.925490947641e-6: the nominal solar mass as a time."""

NEWTONIAN_CONSTANT: Final = 6.67430e-11
"""G [m^3/kg/s^2], CODATA 2022, relative standard uncertainty 2.2e-5. Used for moments of inertia alone."""

SOLAR_MASS: Final = GM_SUN / NEWTONIAN_CONSTANT
"""The nominal solar mass [kg]; as uncertain as G is."""

SECONDS_PER_DAY: Final = 86_400.0
"""[s]. Exact; the day of TDB."""

DAYS_PER_YEAR: Final = 365.25
"""The Julian year [d]. Exact by convention of the IAU."""

SECONDS_PER_YEAR: Final = DAYS_PER_YEAR * SECONDS_PER_DAY
"""The Julian year [s]."""

ASTRONOMICAL_UNIT: Final = 149_597_870_700.0
"""The astronomical unit [m]. Exact by IAU 2012 Resolution B2."""

LIGHT_SECONDS_PER_AU: Final = ASTRONOMICAL_UNIT / SPEED_OF_LIGHT
"""The astronomical unit [ls], 499.004783836."""

PARSEC: Final = ASTRONOMICAL_UNIT * 648_000.0 / math.pi
"""The parsec [m]. Exact by IAU 2015 Resolution B2 (note 4)."""

SOLAR_RADIUS: Final = 6.957e8
"""The nominal solar radius [m]. Exact by IAU 2015 Resolution B3."""

CONSTANTS: Final[dict[str, tuple[float, str, str]]] = {
    "speed_of_light": (SPEED_OF_LIGHT, "m s-1", "SI, exact"),
    "nominal_solar_mass_parameter": (GM_SUN, "m3 s-2", "IAU 2015 Resolution B3, exact"),
    "newtonian_constant": (NEWTONIAN_CONSTANT, "m3 kg-1 s-2", "CODATA 2022"),
    "julian_year": (SECONDS_PER_YEAR, "s", "IAU, exact"),
    "astronomical_unit": (ASTRONOMICAL_UNIT, "m", "IAU 2012 Resolution B2, exact"),
}
"""What a result file records: name -> (value, unit, source)."""
