"""Weighing: which parameters are taken, what the posterior makes of them, and what is said of contradictions.

The data are computed from masses that the test knows, with published formulas written out here.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from clockfall.analysis.budget import decay
from clockfall.analysis.outcome import Outcome
from clockfall.analysis.study import Choices
from clockfall.analysis.system import System, Uncertain
from clockfall.analysis.weigh import weigh
from clockfall.analysis.weighing import CannotWeigh, study
from clockfall.binary.constants import T_SUN
from clockfall.effects.loading import load_host
from clockfall.errors import BadInput

HOST = load_host(strict=True)
ADVANCE, GAMMA, DECAY = "longitude_of_periastron_rate", "einstein_delay_amplitude", "orbital_period_rate"
RANGE, SHAPE = "shapiro_range", "shapiro_shape"
M_1, M_2, P_B, E = 1.41, 1.27, 21000.0, 0.3
FAST = Choices(draws=1024)
FIRST_ORDER = ("periastron-advance-second-order", "radiation-next-order", "spin-orbit-advance")


def synthetic(**widths: float) -> System:
    """Return a system of M_1 and M_2 whose parameters are measured with these relative uncertainties.

    The formulas to leading order: Robertson 1938; Blandford & Teukolsky 1976; Damour & Deruelle 1986; Peters & Mathews
    1963. The projected axis is that of sin i = 0.8 by the mass function to 1PN.
    """
    n, M = 2.0 * math.pi / P_B, M_1 + M_2
    beta_2, nu = (T_SUN * M * n) ** (2 / 3), M_1 * M_2 / M**2
    F = (1 + 73 / 24 * E**2 + 37 / 96 * E**4) * (1 - E**2) ** -3.5
    exact = {
        ADVANCE: 3 * beta_2 / (1 - E**2) * n,
        GAMMA: E * n ** (-1 / 3) * T_SUN ** (2 / 3) * M ** (-4 / 3) * M_2 * (M_1 + 2 * M_2),
        DECAY: -192 * math.pi / 5 * (T_SUN * n) ** (5 / 3) * M_1 * M_2 * M ** (-1 / 3) * F,
        RANGE: T_SUN * M_2,
        SHAPE: 0.8,
    }
    x = 0.8 * M_2 * (T_SUN / (n * M) ** 2) ** (1 / 3) / (1 + (3 - nu / 3) * beta_2)
    orbit = {"orbital_period": P_B, "eccentricity": E, "projected_semi_major_axis": x}
    measured = {name: Uncertain(exact[name], abs(w * exact[name]), abs(w * exact[name])) for name, w in widths.items()}
    return System(
        "synthetic", {name: Uncertain(value) for name, value in orbit.items()}, measured=measured, without=FIRST_ORDER
    )


def central(outcome: Outcome, quantity: str, role: str = "") -> float:
    """Return a finding's central value."""
    return outcome[quantity, role].drawn.central


ALL = {ADVANCE: 1e-6, GAMMA: 1e-3, DECAY: 1e-3, RANGE: 1e-2, SHAPE: 1e-2}


def test_all_parameters_of_one_truth_give_it_back() -> None:
    """Data without noise give the true masses and a chi-squared of 0, whichever parameters weigh."""
    system = synthetic(**ALL)
    for use in ((ADVANCE, GAMMA), (ADVANCE, RANGE), (ADVANCE, GAMMA, RANGE), tuple(ALL)):
        outcome = weigh(HOST, system, replace(FAST, use=use))
        # Newton's method and the search of the best masses leave far less than the error bar
        assert central(outcome, "mass_1") == pytest.approx(
            M_1, abs=1e-3 * (outcome["mass_1", ""].drawn.uncertainty or 0)
        )
        assert central(outcome, "mass_2") == pytest.approx(
            M_2, abs=1e-3 * (outcome["mass_2", ""].drawn.uncertainty or 0)
        )
        role = "used" if len(use) > 2 else "joint"
        assert central(outcome, "chi_squared", role) < 1e-4
        assert central(outcome, "degrees_of_freedom", role) == (len(use) if len(use) > 2 else len(ALL)) - 2


def test_the_best_two_are_those_that_know_most() -> None:
    """The pair that weighs is the one whose bands cross in the smallest area; the decay is kept for the test."""
    best = study(HOST, synthetic(**ALL), FAST).used
    assert best == (ADVANCE, GAMMA)
    assert study(HOST, synthetic(**{**ALL, SHAPE: 1e-5}), FAST).used == (ADVANCE, SHAPE)
    assert study(HOST, synthetic(**{**ALL, ADVANCE: 0.5, GAMMA: 1e-6, RANGE: 1e-6}), FAST).used == (GAMMA, RANGE)
    assert study(HOST, synthetic(**{**ALL, DECAY: 1e-9}), FAST).used == (ADVANCE, GAMMA)
    with pytest.raises(CannotWeigh, match="orbital_period_rate is kept for the test"):
        study(HOST, synthetic(**{ADVANCE: 1e-6, DECAY: 1e-3}), FAST)


def test_two_ways_to_weigh_agree() -> None:
    """Solved draw by draw or integrated over the plane, two well-measured parameters give the same masses to 3 %."""
    system = synthetic(**{ADVANCE: 1e-6, GAMMA: 1e-3})
    by_draws = study(HOST, system, Choices(draws=8192)).sample.state.known("mass_1", "mass_2")
    outcome = weigh(HOST, system, Choices(draws=8192))
    for name, draws in zip(("mass_1", "mass_2"), by_draws, strict=True):
        width = outcome[name, ""].drawn.uncertainty
        assert width == pytest.approx(float(np.std(draws[1:])), rel=0.03, abs=0.0)


def test_more_than_two_are_better_than_two() -> None:
    """A third parameter as good as the second narrows the masses, by what the inverse variances say."""
    system = synthetic(**{ADVANCE: 1e-7, GAMMA: 1e-3, RANGE: 1e-3})

    def width(use: tuple[str, ...]) -> float:
        return weigh(HOST, system, replace(FAST, use=use))["mass_2", ""].drawn.uncertainty or math.nan

    by_two = [width((ADVANCE, GAMMA)), width((ADVANCE, RANGE))]
    together = 1.0 / math.sqrt(sum(w**-2 for w in by_two))
    assert width((ADVANCE, GAMMA, RANGE)) == pytest.approx(together, rel=0.05, abs=0.0)  # 1024 draws


def test_a_wrong_measurement_is_found_by_the_fit() -> None:
    """A range off by 6 sigma gives a chi-squared of 36 in the fit of all, a pull of 6 and a small p-value."""
    system = synthetic(**ALL)
    off = system.measured[RANGE]
    system = replace(system, measured={**system.measured, RANGE: replace(off, value=off.value + 6 * off.plus)})
    outcome = weigh(HOST, system, FAST)
    # the other parameters hold the masses a hundred times better than the range does
    assert central(outcome, "chi_squared", "joint") == pytest.approx(36.0, rel=0.02, abs=0.0)
    assert central(outcome, RANGE, "joint_pull") == pytest.approx(-6.0, rel=0.02, abs=0.0)
    # 36 for three degrees of freedom: tables of the chi-squared distribution give 7.5e-8
    assert central(outcome, "p_value", "joint") == pytest.approx(7.5e-8, rel=0.15, abs=0.0)


def test_parameters_without_common_masses_are_refused() -> None:
    """Values that no masses give together are refused by name, with the chi-squared of the best masses."""
    system = synthetic(**ALL)
    far = {**system.measured, RANGE: replace(system.measured[RANGE], value=5e3 * system.measured[RANGE].value)}
    with pytest.raises(BadInput, match="no masses"):
        weigh(HOST, replace(system, measured=far), replace(FAST, use=(ADVANCE, GAMMA, RANGE)))
    # left to itself clockfall weighs by what fits, and says of the rest that it does not
    outcome = weigh(HOST, replace(system, measured=far), FAST)
    assert any("joint fit: no masses" in said.text for said in outcome.cautions)


def test_an_uncertain_moment_of_inertia_widens_the_masses() -> None:
    """With the spin in, the uncertainty of I goes into the masses as much as its share of the advance says."""
    spin = {"spin_period_1": Uncertain(0.02)}
    fields = {**synthetic(**ALL).fields, **spin}
    system = replace(synthetic(**{ADVANCE: 1e-9, GAMMA: 1e-6}), without=(), fields=fields)

    def total(inertia: Uncertain) -> Outcome:
        return weigh(HOST, replace(system, fields={**fields, "moment_of_inertia_1": inertia}), Choices(draws=4096))

    I = 5.6e-11  # about 1e45 g cm^2
    known, uncertain = total(Uncertain(I)), total(Uncertain(I, 0.3 * I, 0.3 * I))
    without = weigh(HOST, replace(system, without=("spin-orbit-advance",), fields={**fields}), FAST)
    moved = central(known, "total_mass") - central(without, "total_mass")
    width = uncertain["total_mass", ""].drawn.uncertainty or 0.0
    assert abs(moved) > 100.0 * (known["total_mass", ""].drawn.uncertainty or math.inf)
    assert width == pytest.approx(0.3 * abs(moved), rel=0.05, abs=0.0)


def test_masses_given_and_overdetermined() -> None:
    """Masses that contradict what was measured are told with their distance, by each analysis, and are not hidden."""
    masses = {"mass_1": Uncertain(1.6, 0.01, 0.01), "mass_2": Uncertain(1.27, 0.01, 0.01)}
    system = synthetic(**ALL)
    given = replace(system, fields={**system.fields, **masses})
    said = [s.text for s in decay(HOST, given, FAST).cautions]
    assert any(text.startswith("contradictory inputs: the masses given predict") for text in said)
    said = [s.text for s in weigh(HOST, given, FAST).cautions]
    # (1.6 - 1.41)/0.01, the weighed mass being known much better
    assert any("mass_1 given, which is not used here, is 1" in text for text in said)
    agreeing = replace(system, fields={**system.fields, "mass_1": Uncertain(M_1, 0.01, 0.01), "mass_2": Uncertain(M_2)})
    assert not any("contradictory" in s.text for s in decay(HOST, agreeing, FAST).cautions)


def test_an_inclination_that_contradicts_the_masses() -> None:
    """An inclination beside masses and projected axis is given twice over: 30 deg against sin i = 0.8 is told."""
    system = synthetic(**ALL)
    inclination = Uncertain(math.radians(30.0), 0.01, 0.01)
    system = replace(system, fields={**system.fields, "inclination": inclination})
    assert any("the inclination given is" in s.text for s in decay(HOST, system, FAST).cautions)


def test_exact_parameters_are_solved() -> None:
    """Two exact values give the masses without a posterior; three have no room and are refused."""
    system = synthetic(**{ADVANCE: 0.0, GAMMA: 0.0, RANGE: 0.0})
    outcome = weigh(HOST, system, Choices(use=(ADVANCE, GAMMA)))
    assert central(outcome, "mass_1") == pytest.approx(M_1, rel=1e-9, abs=0.0)
    with pytest.raises(BadInput, match="need an uncertainty"):
        weigh(HOST, system, Choices(use=(ADVANCE, GAMMA, RANGE)))


def test_a_value_that_no_masses_give() -> None:
    """A shape above 1 belongs to no orbit: the nearest masses are taken, and how far off they are is said."""
    system = synthetic(**{RANGE: 1e-2, SHAPE: 1e-2})
    # sin i is at most 1: a shape of 1.02 +/- 0.01 is 2 sigma off
    system = replace(system, measured={**system.measured, SHAPE: Uncertain(1.02, 0.01, 0.01)})
    outcome = weigh(HOST, system, FAST)
    assert any(
        "no masses give the two measured values; the nearest are 2.0 sigma off" in s.text for s in outcome.cautions
    )


def test_a_decay_that_weighed_is_no_test() -> None:
    """Where the decay weighed the bodies there is no ratio of measured to predicted, and it is said why."""
    outcome = decay(HOST, synthetic(**ALL), replace(FAST, use=(ADVANCE, DECAY)))
    assert outcome.get(DECAY, "ratio") is None
    assert any("is no test of theory" in said.text for said in outcome.cautions)
