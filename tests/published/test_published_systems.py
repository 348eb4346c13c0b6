"""The main job on real systems, against what their papers published. Sources: fixtures/published/expected.toml."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from decimal import Decimal
from typing import TYPE_CHECKING

import numpy as np
import pytest
from mpmath import mp, mpf, pi, quad

from clockfall.analysis.budget import decay as decay_of
from clockfall.analysis.outcome import Outcome
from clockfall.analysis.study import Choices
from clockfall.analysis.system import Uncertain
from clockfall.analysis.weigh import weigh as weigh_of
from clockfall.binary.constants import SECONDS_PER_YEAR, SOLAR_MASS, SPEED_OF_LIGHT, T_SUN
from clockfall.binary.state import BinaryState
from clockfall.effects.loading import load_host
from clockfall.files.units import factor

from .conftest import PUBLISHED, Analysed, Published

if TYPE_CHECKING:
    from clockfall.files.quantity import Quantity

Named = Callable[[str], Analysed]
DECAY = "orbital_period_rate"
DEG_PER_YEAR = math.pi / 180.0 / SECONDS_PER_YEAR


def central(outcome: Outcome, quantity: str, role: str = "") -> float:
    """Return a finding's central value."""
    return outcome[quantity, role].drawn.central


def uncertainty(outcome: Outcome, quantity: str, role: str = "") -> float:
    """Return a finding's uncertainty, which must be there."""
    found = outcome[quantity, role].drawn.uncertainty
    assert found is not None
    return found


def inside(value: float, published: Quantity, sigmas: float = 1.0) -> bool:
    """Whether a value lies within the published error."""
    difference = Decimal(value) - published.value
    return -published.minus * Decimal(sigmas) <= difference <= published.plus * Decimal(sigmas)


@pytest.fixture(scope="module")
def decay(analysed: Named) -> Outcome:
    """Return the budget of PSR B1913+16."""
    return analysed("psr-b1913+16").decay()


@pytest.fixture(scope="module")
def rates(analysed: Named) -> Outcome:
    """Return all rates and predictions of PSR J0737-3039A."""
    return analysed("psr-j0737-3039a").rates()


class TestHulseTaylor:
    """PSR B1913+16, Weisberg & Huang 2016."""

    SYSTEM = "psr-b1913+16"

    def test_masses(self, decay: Outcome, published: Published) -> None:
        """The masses weighed from the advance and the Einstein amplitude are the published ones, to more digits."""
        for name, four_decimals in (("mass_1", 1.4379), ("mass_2", 1.3905)):
            assert inside(central(decay, name), published(self.SYSTEM, name))
            # what the published 1.438(1), 1.390(1) are before rounding
            assert central(decay, name) == pytest.approx(four_decimals, abs=5e-5)
            assert uncertainty(decay, name) == pytest.approx(float(published(self.SYSTEM, name).plus), rel=0.2, abs=0.0)

    def test_predicted_decay(self, decay: Outcome, published: Published) -> None:
        """The quadrupole decay is the published prediction within its error, and to 2e-6 of itself."""
        paper = published(self.SYSTEM, "orbital_period_rate_predicted")
        assert inside(central(decay, DECAY, "predicted_intrinsic"), paper)
        assert central(decay, DECAY, "predicted_intrinsic") == pytest.approx(float(paper.value), rel=2e-6, abs=0.0)

    def test_its_uncertainty(self, decay: Outcome, published: Published) -> None:
        """The prediction's own uncertainty is the published one within a factor 1.5."""
        ratio = uncertainty(decay, DECAY, "predicted_intrinsic") / float(
            published(self.SYSTEM, "orbital_period_rate_predicted").plus
        )
        assert 1 / 1.5 < ratio < 1.5

    def test_intrinsic_decay(self, decay: Outcome, published: Published) -> None:
        """With the published Galactic and motion part off, the measured decay is -2.398(4)e-12."""
        paper = published(self.SYSTEM, "orbital_period_rate_intrinsic")
        assert central(decay, DECAY, "intrinsic_observed") == pytest.approx(
            float(paper.value), abs=0.5e-15
        )  # printed digits
        assert uncertainty(decay, DECAY, "intrinsic_observed") == pytest.approx(float(paper.plus), rel=0.1, abs=0.0)

    def test_ratio(self, decay: Outcome, published: Published) -> None:
        """The ratio of measured to predicted is 0.998 +/- 0.0017."""
        paper = published(self.SYSTEM, "orbital_period_rate_ratio")
        assert central(decay, DECAY, "ratio") == pytest.approx(
            float(paper.value), abs=3e-4
        )  # rounding of their two parts
        assert uncertainty(decay, DECAY, "ratio") == pytest.approx(0.0017, abs=1e-4)

    def test_merger_time(self, analysed: Named, decay: Outcome) -> None:
        """The time to merger is Peters's integral at 30 digits (Peters 1964, eq. (5.14), number from memory)."""
        fields = analysed("psr-b1913+16").system.fields
        m_1, m_2 = mpf(central(decay, "mass_1")), mpf(central(decay, "mass_2"))
        P_b, e_0 = mpf(fields["orbital_period"].value), mpf(fields["eccentricity"].value)
        with mp.workdps(30):
            n, M, T = 2 * pi / P_b, m_1 + m_2, mpf(T_SUN)
            circular = 5 / (mpf(256) * (T * n) ** (mpf(5) / 3) * m_1 * m_2 * M ** (-mpf(1) / 3) * n)  # a^4/(4 b)

            def a_over_c_0(e: mpf) -> mpf:  # eq. (5.11)
                return e ** (mpf(12) / 19) / (1 - e**2) * (1 + mpf(121) / 304 * e**2) ** (mpf(870) / 2299)

            def integrand(e: mpf) -> mpf:
                shape = (1 + mpf(121) / 304 * e**2) ** (mpf(1181) / 2299) / (1 - e**2) ** (mpf(3) / 2)
                return e ** (mpf(29) / 19) * shape

            seconds = mpf(48) / 19 * circular / a_over_c_0(e_0) ** 4 * quad(integrand, [0, e_0])
        assert central(decay, "merger_time") == pytest.approx(
            float(seconds), rel=1e-12, abs=0.0
        )  # the integral ends smoothly
        assert central(decay, "merger_time") / SECONDS_PER_YEAR == pytest.approx(300.6e6, abs=0.05e6)

    def test_shapiro_parameters(self, analysed: Named) -> None:
        """The masses predict range and shape within the published errors."""
        weighed = analysed("psr-b1913+16").weigh()
        for name in ("shapiro_range", "shapiro_shape"):
            assert abs(central(weighed, name, "tension_sigma")) < 1.5, name


class TestDoublePulsar:
    """PSR J0737-3039A/B, Kramer et al. 2021, with its published masses."""

    SYSTEM = "psr-j0737-3039a"

    def test_quadrupole_decay(self, analysed: Named, published: Published) -> None:
        """The quadrupole row of the published budget, to 1e-6."""
        outcome = analysed("psr-j0737-3039a").decay()
        found = {f.effect: f.drawn.central for f in outcome.contributions(DECAY)}
        paper = float(published(self.SYSTEM, "orbital_period_rate_by_quadrupole").value)
        assert found["quadrupole-decay"] == pytest.approx(paper, rel=1e-6, abs=0.0)

    @pytest.mark.parametrize("name", ["einstein_delay_amplitude", "shapiro_range"])
    def test_predicted_parameters(self, rates: Outcome, name: str) -> None:
        """Einstein amplitude and range agree with what was measured, within the published errors."""
        measured = rates[name, "measured"].drawn
        assert measured.uncertainty is not None
        assert abs(rates[name, "predicted"].drawn.central - measured.central) < measured.uncertainty

    def test_first_order_advance(self, rates: Outcome) -> None:
        """The 1PN advance alone is 16.89937 deg/yr: inside the error that the masses leave, short of 2PN and spin."""
        found = {f.effect: f.drawn for f in rates.contributions("longitude_of_periastron_rate")}["periastron-advance"]
        assert found.central / DEG_PER_YEAR == pytest.approx(16.89937, abs=5e-6)  # printed digits
        assert found.uncertainty is not None
        # 2PN (+4.4e-4 deg/yr) and spin-orbit (about -4.8e-4 deg/yr) nearly cancel in the sum, which stays inside
        measured = rates["longitude_of_periastron_rate", "measured"].drawn.central
        assert abs(found.central - measured) < found.uncertainty


class TestDoublePulsarBudget:
    """Every row of the published budget of the double pulsar, with the moment of inertia that its mass loss implies."""

    SYSTEM = "psr-j0737-3039a"

    @staticmethod
    def budget(analysed: Named) -> Outcome:
        """Return the budget with a moment of inertia of 1.28e45 g cm^2."""
        pulsar = analysed("psr-j0737-3039a")
        inertia = Uncertain(1.28e45 * factor("g cm2", "Msun ls2"))
        return decay_of(
            pulsar.host, replace(pulsar.system, fields={**pulsar.system.fields, "moment_of_inertia_1": inertia})
        )

    @pytest.mark.parametrize(
        ("effect", "row"),
        [
            ("quadrupole-decay", "quadrupole"),
            ("spin-down-mass-loss", "mass_loss"),
            ("transverse-motion", "transverse_motion"),
            ("galactic-acceleration", "galaxy"),
        ],
    )
    def test_rows(self, analysed: Named, published: Published, effect: str, row: str) -> None:
        """Each contribution lies within the published error of its row."""
        found = {f.effect: f.drawn.central for f in self.budget(analysed).contributions(DECAY)}
        assert inside(found[effect], published(self.SYSTEM, f"orbital_period_rate_by_{row}"))

    def test_next_order(self, analysed: Named, published: Published) -> None:
        """The next order of the radiation is the published one to 1 %."""
        found = {f.effect: f.drawn.central for f in self.budget(analysed).contributions(DECAY)}
        paper = float(published(self.SYSTEM, "orbital_period_rate_by_next_order").value)
        assert found["radiation-next-order"] == pytest.approx(paper, rel=0.01, abs=0.0)

    def test_ratio(self, analysed: Named, published: Published) -> None:
        """Measured over predicted is 0.999963(63)."""
        outcome = self.budget(analysed)
        paper = published(self.SYSTEM, "orbital_period_rate_ratio")
        assert inside(central(outcome, DECAY, "ratio"), paper)
        # the published masses come without their correlation, which widens our error a little
        assert uncertainty(outcome, DECAY, "ratio") == pytest.approx(float(paper.plus), rel=0.1, abs=0.0)


class TestDoublePulsarWeighed:
    """The masses of the double pulsar from its advance and Shapiro shape, as Kramer et al. 2021 had them."""

    SYSTEM = "psr-j0737-3039a"

    @staticmethod
    def weighed(analysed: Named, **fields: Uncertain) -> Outcome:
        """Weigh by advance and shape; the published masses in the file are not used."""
        pulsar = analysed("psr-j0737-3039a")
        system = replace(pulsar.system, fields={**pulsar.system.fields, **fields})
        return weigh_of(pulsar.host, system, Choices(use=("longitude_of_periastron_rate", "shapiro_shape")))

    def test_with_the_spin(self, analysed: Named, published: Published) -> None:
        """With the moment of inertia that the published mass loss implies, both masses lie within the published error.

        They agree to a tenth of it, and so do the uncertainties, to a tenth.
        """
        inertia = Uncertain(1.28e45 * factor("g cm2", "Msun ls2"))
        outcome = self.weighed(analysed, moment_of_inertia_1=inertia)
        for name in ("mass_1", "mass_2"):
            paper = published(self.SYSTEM, name)
            assert inside(central(outcome, name), paper, 0.1)
            width = 0.5 * float(paper.plus + paper.minus)
            assert uncertainty(outcome, name) == pytest.approx(width, rel=0.1, abs=0.0)

    def test_without_the_spin(self, analysed: Named, published: Published) -> None:
        """Without the spin-orbit term the total mass is off by more than 10 sigma, and both masses by more than 3."""
        outcome = self.weighed(analysed)
        papers = [published(self.SYSTEM, name) for name in ("mass_1", "mass_2")]
        total = float(sum(paper.value for paper in papers))
        assert abs(central(outcome, "total_mass") - total) > 10.0 * uncertainty(outcome, "total_mass")
        for name, paper in zip(("mass_1", "mass_2"), papers, strict=True):
            assert not inside(central(outcome, name), paper, 3.0)

    def test_by_the_mass_ratio(self, analysed: Named, published: Published) -> None:
        """Advance and mass ratio R = 1.0714(11) (Kramer et al. 2006, Science 314, 97; memory) give the masses too.

        They lie within one of that solution's own errors of the later masses, which is some hundred times as wide.
        """
        pulsar = analysed("psr-j0737-3039a")
        inertia = Uncertain(1.28e45 * factor("g cm2", "Msun ls2"))
        system = replace(
            pulsar.system,
            fields={**pulsar.system.fields, "moment_of_inertia_1": inertia},
            measured={**pulsar.system.measured, "mass_ratio": Uncertain(1.0714, 0.0011, 0.0011)},
        )
        choices = Choices(use=("longitude_of_periastron_rate", "mass_ratio"))
        outcome = weigh_of(pulsar.host, system, choices)
        for name in ("mass_1", "mass_2"):
            later = float(published(self.SYSTEM, name).value)
            assert abs(central(outcome, name) - later) < uncertainty(outcome, name)
            assert uncertainty(outcome, name) == pytest.approx(7e-4, rel=0.1, abs=0.0)  # 1.3381(7), 1.2489(7) there


def test_hulse_taylor_cleaned_by_effects(analysed: Named, published: Published) -> None:
    """From sky and distance alone (9.8(31) kpc, as Deller et al. 2018 quote it) the apparent part is -0.025(4)e-12.

    Within 1.5 of the published errors, with R_0 and Theta_0 as the effect states them; the ratio within half an error.
    """
    pulsar = analysed("psr-b1913+16")
    distance = Uncertain(*(number * factor("kpc", "ls") for number in (9.8, 3.1, 3.1)))
    system = replace(pulsar.system, fields={**pulsar.system.fields, "distance": distance}, apparent={})
    outcome = decay_of(pulsar.host, system)
    assert central(outcome, DECAY, "apparent") == pytest.approx(-0.025e-12, abs=1.5 * 0.004e-12)
    paper = published("psr-b1913+16", "orbital_period_rate_ratio")
    assert inside(central(outcome, DECAY, "ratio"), paper, 0.5)


def test_leading_order_is_what_the_paper_took(analysed: Named, published: Published) -> None:
    """With the next orders in, masses and prediction move by more than the printed error: said, not hidden.

    The advance then weighs M smaller by 2 f_O beta^2/3 = 9e-6 of itself, and the decay with it.
    """
    pulsar = analysed("psr-b1913+16")
    everything = decay_of(pulsar.host, replace(pulsar.system, without=()))
    paper = published("psr-b1913+16", "orbital_period_rate_predicted")
    moved = central(everything, DECAY, "predicted_intrinsic") - float(paper.value)
    assert 5e-17 < moved < 1.2e-16
    assert inside(central(everything, DECAY, "ratio"), published("psr-b1913+16", "orbital_period_rate_ratio"))


@pytest.mark.parametrize("name", ["psr-j1738+0333", "psr-j0348+0432"])
def test_white_dwarf_systems(analysed: Named, published: Published, name: str) -> None:
    """The predicted decay of two pulsars with white dwarfs lies inside the published error."""
    outcome = analysed(name).decay()
    assert inside(central(outcome, DECAY, "predicted_intrinsic"), published(name, "orbital_period_rate_predicted"))


def test_a_young_pulsar(analysed: Named, published: Published) -> None:
    """PSR J1141-6545: measured over predicted is 1.04(6)."""
    outcome = analysed("psr-j1141-6545").decay()
    paper = published("psr-j1141-6545", "orbital_period_rate_ratio")
    assert inside(central(outcome, DECAY, "ratio"), paper)
    assert uncertainty(outcome, DECAY, "ratio") == pytest.approx(
        float(paper.plus), rel=0.15, abs=0.0
    )  # one printed digit


def test_perihelion_of_mercury(analysed: Named, published: Published) -> None:
    """The advance of Mercury's perihelion is 42.98 arcsec in a century."""
    outcome = analysed("sun-mercury").rates()
    rate = central(outcome, "longitude_of_periastron_rate", "total")
    paper = published("sun-mercury", "longitude_of_periastron_rate")
    assert paper.unit == "arcsec/yr"
    per_year = rate * SECONDS_PER_YEAR * 648000.0 / math.pi
    assert per_year == pytest.approx(float(paper.value), abs=5e-5)  # printed digits


def test_power_radiated_by_jupiter(analysed: Named, published: Published) -> None:
    """Jupiter's orbit, taken as circular, radiates 5.2 kW: the energy -G m_1 m_2/(2a) lost as the period shrinks.

    d ln E = -(2/3) d ln P_b, so the power is (2/3)(G m_1 m_2/(2a)) abs(P_b rate)/P_b.
    """
    jupiter = analysed("sun-jupiter")
    fields = {**jupiter.system.fields, "eccentricity": Uncertain(0.0)}
    outcome = decay_of(jupiter.host, replace(jupiter.system, fields=fields))
    m_1, m_2, P_b = (fields[name].value for name in ("mass_1", "mass_2", "orbital_period"))
    a = (T_SUN * (m_1 + m_2) * (P_b / (2 * math.pi)) ** 2) ** (1 / 3)  # light-seconds
    energy = T_SUN * m_1 * m_2 / (2 * a) * SOLAR_MASS * SPEED_OF_LIGHT**2  # joules
    power = 2 / 3 * energy * abs(central(outcome, DECAY, "predicted_intrinsic")) / P_b
    paper = published("sun-jupiter", "radiated_power")
    assert paper.unit == "kW"
    assert power / 1e3 == pytest.approx(float(paper.value), abs=0.05)  # printed digits


def test_circular_mergers(published: Published) -> None:
    """The published times to merger of circular orbits, for a chirp mass of 1 Msun from 1 h and of 1.21 from 100 Hz."""
    equal = 2.0**0.2  # two equal masses of this many chirp masses
    host = load_host()

    def time(chirp_mass: float, period: float) -> float:
        mass = equal * chirp_mass
        state = BinaryState(mass_1=mass, mass_2=mass, orbital_period=period, eccentricity=0.0)
        offered = host.apply(state).closed_form_track(np.empty(0))
        assert offered is not None
        return float(offered[1].merger_time)

    hour = published("circular-merger", "time_from_1_h")
    assert hour.unit == "yr"
    assert time(1.0, 3600.0) / SECONDS_PER_YEAR == pytest.approx(
        float(hour.value), rel=5e-4, abs=0.0
    )  # four printed digits, G then
    wave = published("circular-merger", "time_from_100_hz")
    assert wave.unit == "s"
    assert time(1.21, 2.0 / 100.0) == pytest.approx(float(wave.value), abs=0.02)  # chirp mass printed to three digits


def test_every_fixture_can_be_read() -> None:
    """Every published system file is free of faults, and every value in it has a mark beside or above it."""
    for path in sorted(PUBLISHED.glob("*.toml")):
        if path.name == "expected.toml":
            continue
        Analysed(path.stem)
        for line in path.read_text().splitlines():
            is_value = "=" in line and not line.startswith(("#", "name", "between", "value"))
            if is_value and path.name.startswith("psr-") and "#" not in line:
                before = path.read_text().split(line)[0].rstrip().splitlines()[-1]
                assert before.startswith("#"), f"{path.name}: {line}"
