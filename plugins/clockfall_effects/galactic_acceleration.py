"""Apparent change of every period by the Galaxy's different pull on the binary and on the Sun."""

from __future__ import annotations

from typing import Final

import numpy as np

from clockfall.binary.constants import PARSEC, SPEED_OF_LIGHT
from clockfall.binary.ranges import POSITIVE, FloatArray
from clockfall.binary.sky import galactic_direction
from clockfall.binary.state import BinaryState
from clockfall.effects import APPARENT, Card, Caution, OwnChoice, OwnParameter, Rate, Rates, Settings, hook

LIGHT_SECONDS_PER_KPC: Final = 1e3 * PARSEC / SPEED_OF_LIGHT


@hook
def describe() -> Card:
    """Return the card of this effect."""
    return Card(
        name="galactic-acceleration",
        summary="The Galaxy pulls the binary and the Sun differently: periods seem to change.",
        formula=(
            "P rate = P n.(g_binary - g_Sun)/c;  flat: in the plane -cos b (Theta_0^2/R_0) "
            "[cos l + B/(sin^2 l + B^2)], B = (d/R_0) cos b - cos l, and across it -K_z abs(sin b), "
            "K_z = [2.27 z + 3.68 (1 - exp(-4.31 z))] 1e-9 cm/s^2, z in kpc"
        ),
        sources=(
            "Damour & Taylor 1991, ApJ 366, 501; Nice & Taylor 1995, ApJ 441, 429 (flat)",
            "Holmberg & Flynn 2004, MNRAS 352, 440; Lazaridis et al. 2009, MNRAS 400, 805 (K_z)",
            "Irrgang et al. 2013, A&A 549, A137, model I (bulge-disc-halo); constants from memory",
            "GRAVITY Collaboration 2021, A&A 647, A59 (R_0); Kramer et al. 2021, PRX 11, 041050 (Theta_0); from memory",
        ),
        order="exact for the chosen model of the Galaxy; spiral arms, bar and peculiar accelerations are left out",
        valid="flat: circular speed constant between Sun and binary, z < 1.5 kpc; bulge-disc-halo: a smooth Galaxy",
        nature=APPARENT,
        needs=("right_ascension", "declination", "distance", "orbital_period"),
        gives=(Rate("orbital_period"), Rate("spin_period_1")),
        parameters=(
            OwnParameter("sun_distance", "kpc", "the Sun's distance R_0 from the centre", 8.275, 0.034, POSITIVE),
            OwnParameter("sun_speed", "km/s", "circular speed Theta_0 at the Sun, for 'flat'", 240.5, 4.1, POSITIVE),
        ),
        choices=(OwnChoice("model", ("flat", "bulge-disc-halo"), "model of the Galaxy"),),
    )


def acceleration(state: BinaryState, settings: Settings) -> FloatArray:
    """Return n.(g_binary - g_Sun)/c, the relative apparent rate of every period [1/s]; shape batch."""
    ra, dec, d = state.known("right_ascension", "declination", "distance")
    direction = galactic_direction(ra, dec)
    d_kpc, R_0 = d / LIGHT_SECONDS_PER_KPC, settings["sun_distance"]
    if settings.choice("model") == "flat":
        kpc_per_s2 = flat_rotation(direction, d_kpc, R_0, settings["sun_speed"] * 1e3 / (1e3 * PARSEC))
        vertical = holmberg_flynn(np.abs(direction[2]) * d_kpc) * np.abs(direction[2])
        return kpc_per_s2 * LIGHT_SECONDS_PER_KPC - vertical
    x, y, z = (component * d_kpc for component in direction)
    pull = bulge_disc_halo(R_0 - x, -y, z)
    ours = bulge_disc_halo(R_0, np.zeros_like(R_0), np.zeros_like(R_0))
    # the axes of the potential point from the centre outwards through the Sun, those of `direction` the other way
    difference = [-(pull[0] - ours[0]), -(pull[1] - ours[1]), pull[2] - ours[2]]
    along_sight = direction[0] * difference[0] + direction[1] * difference[1] + direction[2] * difference[2]
    return along_sight * LIGHT_SECONDS_PER_KPC


def flat_rotation(
    direction: tuple[FloatArray, FloatArray, FloatArray], d: FloatArray, R_0: FloatArray, Theta_0: FloatArray
) -> FloatArray:
    """Return the difference of the pulls in the plane along the line of sight [kpc/s^2], from [kpc], [kpc], [kpc/s].

    Damour & Taylor (1991): a circular speed that is the same everywhere. With l and b the Galactic coordinates.
    """
    towards, along, _ = direction  # cos b cos l, cos b sin l
    cos_b = np.hypot(towards, along)
    cos_l, sin_l = towards / cos_b, along / cos_b
    B = d / R_0 * cos_b - cos_l
    return -cos_b * Theta_0**2 / R_0 * (cos_l + B / (sin_l**2 + B**2))


def holmberg_flynn(z: FloatArray) -> FloatArray:
    """Return K_z/c [1/s], the pull towards the plane at the height z [kpc]; published up to 1.5 kpc."""
    return (2.27 * z + 3.68 * (1.0 - np.exp(-4.31 * z))) * 1e-11 / SPEED_OF_LIGHT


# Irrgang et al. (2013), model I: masses in 2.325e7 Msun, which is (10 km/s)^2 kpc/G; lengths in kpc. Exponent 2,
# cut-off of the halo at 200 kpc. From memory; the tests check the circular speed that the paper gives.
BULGE: Final = (409.0, 0.23)
DISC: Final = (2856.0, 4.22, 0.292)
HALO: Final = (1018.0, 2.562)
_TEN_KM_S: Final = 1e4 / (1e3 * PARSEC)  # [kpc/s]


def bulge_disc_halo(x: FloatArray, y: FloatArray, z: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return the pull of Irrgang et al. (2013), model I [kpc/s^2], at a place from the Galactic centre [kpc]."""
    R_2, r_2 = x**2 + y**2, x**2 + y**2 + z**2
    r = np.sqrt(r_2)
    bulge = BULGE[0] / (r_2 + BULGE[1] ** 2) ** 1.5
    # inside the cut-off the halo's mass within r is M r^2/(a (a + r)) for the exponent 2
    halo = HALO[0] / (HALO[1] * (HALO[1] + r) * r)
    root = np.sqrt(z**2 + DISC[2] ** 2)
    disc = DISC[0] / (R_2 + (DISC[1] + root) ** 2) ** 1.5
    in_plane = (bulge + halo + disc) * _TEN_KM_S**2
    upwards = (bulge + halo + disc * (DISC[1] + root) / root) * _TEN_KM_S**2
    return -in_plane * x, -in_plane * y, -upwards * z


@hook
def secular_rates(state: BinaryState, settings: Settings) -> Rates:
    """Return apparent rates of the orbital and, where it is known, the spin period [s/s]; shape batch."""
    (P_b,) = state.known("orbital_period")
    stretch = acceleration(state, settings)
    rates = {"orbital_period": P_b * stretch}
    if state.spin_period_1 is not None:
        rates["spin_period_1"] = state.spin_period_1 * stretch
    return Rates(rates)


@hook
def cautions(state: BinaryState, settings: Settings) -> tuple[Caution, ...]:
    """Say which Sun was taken, and where the vertical law is used beyond its range."""
    ra, dec, d = state.known("right_ascension", "declination", "distance")
    R_0, Theta_0 = (np.ravel(settings[name])[0] for name in ("sun_distance", "sun_speed"))
    model = settings.choice("model")
    used = f"R_0 = {R_0:.3f} kpc" + (f", Theta_0 = {Theta_0:.1f} km/s" if model == "flat" else "")
    said = [Caution(f"the Galaxy is modelled as {model!r} with {used}")]
    height = float(np.max(np.abs(galactic_direction(ra, dec)[2]) * d / LIGHT_SECONDS_PER_KPC))
    if model == "flat" and height > 1.5:
        said.append(Caution(f"the vertical law is published up to z = 1.5 kpc, and some draws lie at {height:.1f} kpc"))
    return tuple(said)
