"""System files: what is written is what is known, exactly, in clockfall's units."""

from __future__ import annotations

import hashlib
import math
from decimal import Decimal

import numpy as np
import pytest
from astropy import units as u
from astropy.coordinates import Angle

from clockfall.analysis.draws import draw
from clockfall.analysis.system import Correlation
from clockfall.binary.constants import NEWTONIAN_CONSTANT, SOLAR_MASS, SPEED_OF_LIGHT
from clockfall.effects import Card, OwnParameter
from clockfall.effects.loading import load_host
from clockfall.files.system_file import SystemFile, demo_system, parse_system

HOST = load_host()
OWN = Card(
    name="own-effect",
    summary="invented",
    formula="none",
    sources=("invented for this test",),
    order="none",
    valid="everywhere",
    needs=("mass_1",),
    gives=(),
    parameters=(OwnParameter("ring_radius", "au", "radius"), OwnParameter("share", "", "a pure number")),
)
TEXT = """
[system]
name = "Halden 7"
notes = "kept, and not read"
[orbit]
orbital_period = "0.25(1) d"
eccentricity = 0.4
projected_semi_major_axis = "299792.458 km"
longitude_of_periastron = "90(1) deg"
periastron_epoch = "57241.1182051234567(20)"
[masses]
mass_1 = "1.4(1) Msun"
mass_2 = "1.3 +0.2 -0.1 Msun"
[sky]
right_ascension = "08:41:12.30(5)"
declination = "-00:02:44.1"
proper_motion_ra = "3.6 arcsec/yr"
distance = "1 kpc"
[spin]
moment_of_inertia_1 = "1.3(2)e45 g cm2"
[measured]
longitude_of_periastron_rate = "4(1) deg/yr"
einstein_delay_amplitude = "2.5(5) ms"
orbital_period_rate = "-1.0(1)e-12"
[apparent]
orbital_period_rate = "0.01(1)e-12"
[effects]
without = ["shapiro-delay"]
[effects.own-effect]
ring_radius = "149597870.7(10) km"
share = "0.5(1)"
[[correlation]]
between = ["mass_1", "mass_2"]
value = -0.5
[[correlation]]
between = ["measured.orbital_period_rate", "effects.own-effect.share"]
value = 0.25
"""


@pytest.fixture(scope="module")
def file() -> SystemFile:
    """Return the text above, read."""
    return parse_system(TEXT, (*HOST.cards, OWN), name="halden.toml")


def test_fields_come_in_our_units(file: SystemFile) -> None:
    """Days become seconds, degrees radians, kilometres light-seconds; uncertainties with them."""
    fields = file.system.fields
    assert fields["orbital_period"].value == 21600.0
    assert fields["orbital_period"].plus == 864.0
    assert fields["eccentricity"].exact
    assert fields["projected_semi_major_axis"].value == pytest.approx(1.0, rel=4e-16)
    assert fields["longitude_of_periastron"].value == pytest.approx(math.pi / 2, rel=4e-16)
    assert (fields["mass_2"].plus, fields["mass_2"].minus) == (0.2, 0.1)
    assert fields["proper_motion_ra"].value == pytest.approx(3.6 * math.pi / 648000 / 31557600, rel=1e-15)
    # the moment of inertia goes in as G I/(GM_sun c^2) by the same G that makes the nominal solar mass kilograms
    expected = 1.3e38 / (SOLAR_MASS * SPEED_OF_LIGHT**2)
    assert fields["moment_of_inertia_1"].value == pytest.approx(expected, rel=1e-15)
    assert pytest.approx(1.3271244e20, rel=1e-15) == NEWTONIAN_CONSTANT * SOLAR_MASS


def test_sexagesimal_angles_against_astropy(file: SystemFile) -> None:
    """Right ascension in hours, declination in degrees, the sign of -00 kept: as astropy reads them."""
    fields = file.system.fields
    assert fields["right_ascension"].value == pytest.approx(Angle("08h41m12.30s").radian, rel=4e-16)
    assert fields["declination"].value == pytest.approx(Angle("-00d02m44.1s").radian, rel=1e-15)
    assert fields["right_ascension"].plus == pytest.approx((0.05 * u.arcsec * 15).to_value(u.rad), rel=1e-15)


def test_the_epoch_keeps_every_digit(file: SystemFile) -> None:
    """An epoch with more digits than a double has is kept to its last; its uncertainty is in seconds."""
    epoch = file.system.periastron_epoch
    assert epoch is not None
    assert int(epoch.day) == 57241
    assert abs(epoch.to_decimal() - Decimal("57241.1182051234567")) < Decimal("1e-16")
    assert file.system.periastron_epoch_uncertainty.plus == pytest.approx(2.0e-12 * 86400, rel=1e-12)


def test_measurements_come_in_the_effects_units(file: SystemFile) -> None:
    """Rates are per second, parameters in the unit of the effect's card, own parameters in theirs."""
    system = file.system
    assert system.measured["longitude_of_periastron_rate"].value == pytest.approx(
        4 * math.pi / 180 / 31557600, rel=1e-15
    )
    assert system.measured["einstein_delay_amplitude"].value == pytest.approx(2.5e-3, rel=1e-15)
    assert system.apparent["orbital_period_rate"].value == 1e-14
    assert system.settings["own-effect"]["ring_radius"].value == pytest.approx(1.0, rel=4e-16)
    assert system.without == ("shapiro-delay",)
    assert system.only is None


def test_correlations_find_their_quantities(file: SystemFile) -> None:
    """A key alone names a quantity where it is the only one; with its table it always does."""
    assert file.system.correlations == (
        Correlation(("fields", "mass_1"), ("fields", "mass_2"), -0.5),
        Correlation(("measured", "orbital_period_rate"), ("settings", "own-effect", "share"), 0.25),
    )
    sample = draw(file.system, (*HOST.cards, OWN))
    rate, share = sample.measured["orbital_period_rate"][1:], sample.settings["own-effect"]["share"][1:]
    assert np.corrcoef(rate, share)[0, 1] == pytest.approx(0.25, abs=0.01)  # 8192 Sobol draws


def test_the_text_is_kept_with_its_checksum(file: SystemFile) -> None:
    """The whole text and its SHA-256 stay with the system."""
    assert file.text == TEXT
    assert file.sha256 == hashlib.sha256(TEXT.encode()).hexdigest()


def test_the_demo_is_whole_and_invented() -> None:
    """The demo can be read, is named as invented, and can be weighed."""
    demo = demo_system(HOST.cards)
    assert "invented" in demo.text
    assert "PSR" not in demo.text
    assert {"longitude_of_periastron_rate", "einstein_delay_amplitude"} <= set(demo.system.measured)


def test_one_minus_e_alone_or_with_e() -> None:
    """1 - e may be given alone, or beside an e that agrees with it; then it is what counts."""
    base = '[system]\nname = "x"\n[orbit]\n'
    alone = parse_system(f'{base}one_minus_eccentricity = "1e-20"\n', HOST.cards).system
    assert alone.fields["one_minus_eccentricity"].value == 1e-20
    both = parse_system(f'{base}eccentricity = 0.75\none_minus_eccentricity = "0.25(1)"\n', HOST.cards).system
    assert set(both.fields) == {"one_minus_eccentricity"}
