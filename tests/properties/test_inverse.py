"""The inverse questions: the value that makes theory agree, and the largest that may be."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from clockfall.analysis.budget import decay
from clockfall.analysis.inverse import limit_of, solve_for
from clockfall.analysis.study import Choices
from clockfall.analysis.system import System, Uncertain
from clockfall.effects.loading import load_host
from clockfall.errors import BadInput
from clockfall.files.system_file import read_system
from clockfall.files.units import factor

HOST = load_host(strict=True)
PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"
DECAY = "orbital_period_rate"
FEW = Choices(draws=1024)


def system(name: str) -> System:
    """Return a published system."""
    return read_system(PUBLISHED / f"{name}.toml", HOST.cards).system


def test_the_distance_found_makes_the_decay_agree() -> None:
    """Put back into the system, the distance that was found gives a ratio of 1, and its spread is the measurement's."""
    pulsar = system("psr-j0737-3039a")
    (found,), _ = solve_for(HOST, pulsar, FEW, "distance")
    fields = {**pulsar.fields, "distance": Uncertain(found.drawn.central)}
    again = decay(HOST, replace(pulsar, fields=fields), FEW)
    assert again[DECAY, "ratio"].drawn.central == pytest.approx(1.0, abs=1e-9)  # Newton to 1e-11 of the distance
    assert found.drawn.interval is not None


def test_two_distances_are_both_said() -> None:
    """Motion and Galaxy pull opposite ways, so that a second distance agrees as well: it is said."""
    _, said = solve_for(HOST, system("psr-j0737-3039a"), FEW, "distance")
    assert any("agree as well" in statement.text for statement in said)


def test_the_moment_of_inertia_of_the_double_pulsar() -> None:
    """The advance that 1PN and 2PN leave asks for about 1.28e45 g cm^2, what the published mass loss implies.

    Published masses come without their correlation, so the spread is wide, some 0.2e45.
    """
    (found,), _ = solve_for(HOST, system("psr-j0737-3039a"), FEW, "moment_of_inertia_1")
    in_cgs = found.drawn.central * factor("Msun ls2", "g cm2")
    assert in_cgs == pytest.approx(1.28e45, rel=0.03, abs=0.0)
    assert found.drawn.uncertainty is not None
    assert 0.1 < found.drawn.uncertainty * factor("Msun ls2", "g cm2") / 1e45 < 0.4


def test_what_cannot_be_solved_is_refused() -> None:
    """An unknown field, a rate not measured or used already, a value out of reach: refused, with the reason."""
    pulsar = system("psr-j0737-3039a")
    with pytest.raises(BadInput, match="expected one of distance"):
        solve_for(HOST, pulsar, FEW, "eccentricity")
    with pytest.raises(BadInput, match="not in \\[measured\\]"):
        solve_for(HOST, replace(pulsar, measured={}), FEW, "distance")
    with pytest.raises(BadInput, match="weighed the bodies already"):
        solve_for(HOST, system("psr-b1913+16"), FEW, "moment_of_inertia_1")
    far_off = replace(pulsar, measured={**pulsar.measured, DECAY: Uncertain(-5e-12, 1e-16, 1e-16)})
    with pytest.raises(BadInput, match="no value from"):
        solve_for(HOST, far_off, FEW, "distance")


def test_the_limit_on_a_charge_in_closed_form() -> None:
    """The decay goes as -K q^2, so the limit on q is the 95 % quantile of exp(-(r + K q^2)^2/(2 s^2))."""
    pulsar = system("psr-j1738+0333")
    (found,), said = limit_of(HOST, pulsar, FEW, "dipole-radiation.charge_1")
    plain = decay(HOST, pulsar, FEW)
    difference = plain[DECAY, "intrinsic_observed"].drawn.draws - plain[DECAY, "predicted_intrinsic"].drawn.draws
    r, s = np.nanmean(difference), np.nanstd(difference)
    one = decay(
        HOST,
        replace(pulsar, settings={"dipole-radiation": {"charge_1": Uncertain(1e-3), "charge_2": Uncertain(0)}}),
        FEW,
    )
    K = (plain[DECAY, "predicted_intrinsic"].drawn.central - one[DECAY, "predicted_intrinsic"].drawn.central) / 1e-6
    q = np.linspace(0.0, 0.02, 200_001)
    mass = np.cumsum(np.exp(-0.5 * ((r + K * q**2) / s) ** 2))
    expected = np.interp(0.95 * mass[-1], mass, q)
    # the uncertain masses make K itself uncertain by a few per cent
    assert found.drawn.central == pytest.approx(expected, rel=0.03, abs=0.0)
    assert any("charge_2 taken as 0" in statement.text for statement in said)


def test_limits_that_cannot_be_are_refused() -> None:
    """A misspelt parameter, or one that does not change the decay, is refused with the reason."""
    pulsar = system("psr-j1738+0333")
    with pytest.raises(BadInput, match=r"did you mean dipole-radiation\.charge_1"):
        limit_of(HOST, pulsar, FEW, "dipole-radiation.charg_1")
    with pytest.raises(BadInput, match="does not change the decay"):
        limit_of(HOST, pulsar, FEW, "spin-orbit-advance.spin_to_orbit")
