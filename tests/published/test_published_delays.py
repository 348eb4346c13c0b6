"""The sizes of delays as published. Sources: fixtures/published, each value with its own."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from clockfall.analysis.delays import delays_of
from clockfall.analysis.motion import secular_motion
from clockfall.analysis.study import Choices
from clockfall.analysis.system import Uncertain
from clockfall.analysis.weighing import study
from clockfall.files.units import factor

from .conftest import Analysed

Named = Callable[[str], Analysed]


def test_einstein_delay_of_hulse_taylor(analysed: Named) -> None:
    """The Einstein delay of B1913+16 swings by 4.307(4) ms either way (Weisberg & Huang 2016; memory)."""
    pulsar = analysed("psr-b1913+16")
    found = delays_of(pulsar.host, pulsar.system, Choices(phases=720)).column("delay_einstein_delay").values
    measured = pulsar.system.measured["einstein_delay_amplitude"]
    assert np.max(found) == pytest.approx(measured.value, abs=measured.plus)
    assert np.min(found) == pytest.approx(-measured.value, abs=measured.plus)


def test_shapiro_delay_of_the_double_pulsar(analysed: Named) -> None:
    """The Shapiro delay of J0737-3039A peaks near 100 us over its mean, at conjunction (Kramer et al. 2006; memory).

    -2 r ln(1 - s) with r = 6.15 us and s = 0.999936 is 119 us. The published masses bear s = 0.99994 out only with the
    spin, so the measured values stand in.
    """
    pulsar = analysed("psr-j0737-3039a")
    outcome = delays_of(pulsar.host, pulsar.system, Choices(phases=20000, rates="measured"))
    found = outcome.column("delay_shapiro_delay").values
    assert 90e-6 < np.max(found) - np.mean(found) < 130e-6


def test_second_rates_over_fifty_years(analysed: Named) -> None:
    """The changes of the period's and the advance's rates are those of Peters's own evolution, to 1e-5.

    d(P rate)/dt along the decay by the powers of the published formula: P rate goes as P^(-5/3) F(e), the advance as
    P^(-5/3)/(1 - e^2). For B1913+16 they are 3 ns and 0.7 us of the arrival after fifty years.
    """
    pulsar = analysed("psr-b1913+16")
    choices = Choices(draws=1, only=("quadrupole-decay", "periastron-advance", "einstein-delay"))
    system = replace(pulsar.system, apparent={}, without=())
    of = study(pulsar.host, system, choices)
    motion = secular_motion(pulsar.host, of.sample, of.choices, of.predicted)
    P, e = (float(v[0]) for v in of.sample.state.known("orbital_period", "eccentricity"))
    P_rate, e_rate = (float(of.predicted[f"{n}_rate"].total[0]) for n in ("orbital_period", "eccentricity"))
    omega_rate = float(of.predicted["longitude_of_periastron_rate"].total[0])

    def ln_F(e: float) -> float:
        return float(np.log((1 + 73 / 24 * e**2 + 37 / 96 * e**4) / (1 - e**2) ** 3.5))

    by_e = (ln_F(e + 1e-6) - ln_F(e - 1e-6)) / 2e-6
    expected = P_rate * (-5 / 3 * P_rate / P + by_e * e_rate)
    assert float(motion.period_second_rate[0]) == pytest.approx(expected, rel=1e-5, abs=0.0)
    advance_change = omega_rate * (-5 / 3 * P_rate / P + 2 * e * e_rate / (1 - e**2))
    n_change = -P_rate / P  # of n, relative: the advance that follows the true anomaly quickens with it
    expected = advance_change - omega_rate * n_change
    assert float(motion.second_drift[0]) == pytest.approx(expected, rel=1e-4, abs=0.0)
    # x shrinks with the orbit: a goes as P^(2/3)
    x = float(of.sample.state.known("projected_semi_major_axis")[0][0])
    assert float(motion.axis_rate[0]) == pytest.approx(2 / 3 * P_rate / P * x, rel=1e-12, abs=0.0)


def test_measured_rates_stand_in(analysed: Named) -> None:
    """With measured rates the whole measured advance and decay are used; with predicted ones the effects' sums."""
    pulsar = analysed("psr-b1913+16")
    of = study(pulsar.host, pulsar.system, Choices(draws=1))
    central = of.sample.central()
    by = {
        rates: secular_motion(
            pulsar.host, central, of.choices,
            {n: replace(p, intrinsic=p.intrinsic[:1], apparent=p.apparent[:1]) for n, p in of.predicted.items()}, rates,
        )
        for rates in ("predicted", "measured")
    }  # fmt: skip
    measured = pulsar.system.measured["orbital_period_rate"].value
    assert float(by["measured"].period_rate[0]) == pytest.approx(measured, rel=1e-12, abs=0.0)
    assert float(by["predicted"].period_rate[0]) == pytest.approx(
        float(of.predicted["orbital_period_rate"].total[0]), rel=1e-12, abs=0.0
    )


def test_sin_i_above_1_has_no_shapiro_delay(analysed: Named) -> None:
    """Central values that give sin i > 1 leave the Shapiro delay out, with a word, and all else stands."""
    pulsar = analysed("psr-b1913+16")
    wide = Uncertain(4.0 * factor("ls", "ls"))
    outcome = delays_of(
        pulsar.host, replace(pulsar.system, fields={**pulsar.system.fields, "projected_semi_major_axis": wide})
    )
    assert np.all(outcome.column("delay_shapiro_delay").values == 0.0)
    assert any("sin i =" in said.text for said in outcome.cautions)


def test_another_theory_has_its_own_delays(analysed: Named) -> None:
    """Under the scalar-tensor theory its own Einstein and Shapiro delays take the replaced ones' places.

    Without charges they are general relativity's. A matter charge alone changes Newton's constant for light and bodies
    alike: the bodies are weighed the heavier for it, and every delay stays.
    """
    pulsar = analysed("psr-b1913+16")
    plain = delays_of(pulsar.host, pulsar.system, Choices(phases=32))
    both = sum(plain.column(f"delay_{name}_delay").values for name in ("einstein", "shapiro"))

    def theory(**own: float) -> np.ndarray:
        settings = {"mono-scalar-tensor": {name: Uncertain(value) for name, value in own.items()}}
        outcome = delays_of(pulsar.host, replace(pulsar.system, settings=settings), Choices(phases=32))
        return outcome.column("delay_mono_scalar_tensor").values

    assert theory(charge_1=0.0, charge_2=0.0) == pytest.approx(both, abs=1e-12)
    assert theory(charge_1=0.0, charge_2=0.0, matter_charge=0.1) == pytest.approx(both, abs=1e-12)
    # gamma weighs the bodies, so the Einstein delay stays; the masses, and the Shapiro delay with them, do not
    assert 1e-7 < np.max(np.abs(theory(charge_1=0.3, charge_2=0.3) - both)) < 1e-5
