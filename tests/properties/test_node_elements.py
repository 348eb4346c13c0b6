"""Near-circular orbits by Laplace-Lagrange elements: the same delays as the elements of periastron give."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from clockfall.analysis.delays import delays_of
from clockfall.analysis.study import Choices
from clockfall.analysis.weighing import study
from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import SecularMotion
from clockfall.effects.loading import load_host
from clockfall.files.faults import BadFile
from clockfall.files.system_file import parse_system

HOST = load_host(strict=True)
HEAD = '[system]\nname = "x"\n[masses]\nmass_1 = "1.4 Msun"\nmass_2 = "0.2 Msun"\n[orbit]\n'
TIMES = Epoch(np.arange(57000, 57400, 7), 0.31)


def node_file(e: float, omega: float, period: float, *, more: str = "") -> str:
    """Return a system file by elements of the node; the period [d] counts node passages."""
    sine, cosine = e * math.sin(omega), e * math.cos(omega)
    return (
        f'{HEAD}orbital_period = "{period!r} d"\nprojected_semi_major_axis = "0.34 s"\n'
        f'ascending_node_epoch = "57000.1"\neccentricity_sine = "{sine:.17e}"\n'
        f'eccentricity_cosine = "{cosine:.17e}"\n{more}'
    )


@settings(max_examples=20, deadline=None)
@given(st.floats(0.0, 0.5), st.floats(0.0, 6.28))
def test_the_node_is_passed_when_the_file_says(e: float, omega: float) -> None:
    """At the node's epoch M + omega is 0, and one given period later it is again: the advance is taken into account."""
    system = parse_system(node_file(e, omega, 0.35), HOST.cards).system
    of = study(HOST, system, Choices(draws=1, only=("periastron-advance",)))
    state = of.sample.central().state
    (P,) = state.known("orbital_period")
    k = float(of.predicted["longitude_of_periastron_rate"].intrinsic[0] * P[0] / (2 * math.pi))
    assert P[0] == pytest.approx(0.35 * 86400.0 * (1.0 + k), rel=1e-13, abs=0.0)
    assert k > 1e-6
    zero = np.zeros(1)
    motion = SecularMotion(state, zero, zero, np.full(1, k), zero, zero, zero, zero)
    passages = Epoch.from_mjd(57000.1).plus_seconds(0.35 * 86400.0 * np.arange(0.0, 2000.0, 77.0))
    orbit = motion.at(*motion.seconds(passages))
    # the mean longitude M + omega, in which omega advances with the mean anomaly on average
    mean = orbit.mean_anomaly + 2 * np.pi * orbit.whole
    longitude = mean * (1.0 + k) + state.known("longitude_of_periastron")[0]
    away = np.angle(np.exp(1j * longitude))
    assert np.max(np.abs(away)) < 1e-7  # one double of the MJD is 6e-7 s


def test_both_ways_give_the_same_delays() -> None:
    """Elements of periastron, converted by hand with the advance, give the delays that the node's give, to 0.1 ns."""
    e, omega, P_node = 3e-4, 1.1, 0.35
    by_node = parse_system(node_file(e, omega, P_node), HOST.cards).system
    state = study(HOST, by_node, Choices(draws=1)).sample.central().state
    P, w = (float(v[0]) for v in state.known("orbital_period", "longitude_of_periastron"))
    epoch = state.periastron_epoch
    assert epoch is not None
    text = (
        f'{HEAD}orbital_period = "{P / 86400.0!r} d"\nprojected_semi_major_axis = "0.34 s"\neccentricity = "{e!r}"\n'
        f'longitude_of_periastron = "{math.degrees(w)!r} deg"\n'
        f'periastron_epoch = "{Epoch(epoch.day[0], epoch.fraction[0]).to_decimal()}"\n'
    )
    by_periastron = parse_system(text, HOST.cards).system
    choices = Choices(draws=1, times=TIMES)
    one, other = (delays_of(HOST, system, choices).column("delay_total").values for system in (by_node, by_periastron))
    assert one == pytest.approx(other, abs=1e-10)


def test_a_circular_orbit_by_the_node() -> None:
    """With e = 0 exactly the Roemer delay is x sin of the phase from the node, advance or not."""
    system = parse_system(node_file(0.0, 0.0, 0.35), HOST.cards).system
    choices = Choices(draws=1, times=TIMES, by="emission", only=("roemer-delay", "periastron-advance"))
    found = delays_of(HOST, system, choices).column("delay_roemer_delay").values
    phase = 2 * np.pi * np.mod(TIMES.seconds_since(Epoch.from_mjd(57000.1)) / (0.35 * 86400.0), 1.0)
    assert found == pytest.approx(0.34 * np.sin(phase), abs=0.34 * 1e-9)  # 6e-7 s of one double of the MJD


def test_it_is_said_which_period_is_meant() -> None:
    """The output names the period from periastron to periastron, and by which advance it is had."""
    system = parse_system(node_file(1e-3, 0.5, 0.35), HOST.cards).system
    assert any("counts passages of the node" in s.text for s in study(HOST, system, Choices(draws=1)).cautions)


@pytest.mark.parametrize(
    ("remove", "add", "expected"),
    [
        ("eccentricity_sine", "", "eccentricity_sine beside it"),
        ("ascending_node_epoch", "", "ascending_node_epoch beside it"),
        ("", 'eccentricity = "0.1"\n', "leave one of them out"),
        ("", 'periastron_epoch = "57000"\n', "leave one of them out"),
        ("orbital_period", "", "orbital_period beside it"),
    ],
)
def test_halves_and_doubles_are_refused(remove: str, add: str, expected: str) -> None:
    """Elements of the node come as three, with a period, and not beside those of periastron."""
    lines = [line for line in node_file(1e-3, 0.5, 0.35, more=add).splitlines() if not (remove and remove in line)]
    with pytest.raises(BadFile) as caught:
        parse_system("\n".join(lines), HOST.cards)
    assert expected in str(caught.value)
