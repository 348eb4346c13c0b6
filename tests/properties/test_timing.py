"""Delays and emission times against the implicit timing equation solved exactly at 40 digits."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from types import SimpleNamespace

import numpy as np
import pytest
from mpmath import mp, mpf

from clockfall.analysis.timing import delays
from clockfall.binary.constants import SECONDS_PER_YEAR, T_SUN
from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import SecularMotion
from clockfall.binary.state import BinaryState
from clockfall.effects import Card, Delay, hook
from clockfall.effects.host import Applied
from clockfall.effects.loading import Candidate, installed_candidates, load_host
from clockfall.errors import OutOfRange

HOST = load_host(strict=True)
DEG_PER_YEAR = math.pi / 180.0 / SECONDS_PER_YEAR
PLAIN = ("roemer-delay", "einstein-delay", "shapiro-delay", "orbit-deformation")
FIFTY_YEARS = 50.0 * 365.25


@dataclass(frozen=True)
class Case:
    """An orbit, and how it runs."""

    P_b: float  # d
    e: float
    x: float
    advance: float = 4.0  # deg/yr
    sin_i: float = 0.7
    P_rate: float = -2.4e-12
    P_second: float = 3e-28
    e_rate: float = -1e-18
    x_rate: float = 1e-14
    drift: float = 1e-13  # rad/s
    second_drift: float = 3e-25
    omega: float = 1.9
    m_1: float = 1.44

    def state(self) -> BinaryState:
        """Return the state; the companion's mass is what the mass function asks for, within reason."""
        m_2 = 1.2
        return BinaryState(
            mass_1=self.m_1,
            mass_2=m_2,
            orbital_period=self.P_b * 86400.0,
            eccentricity=self.e,
            longitude_of_periastron=self.omega,
            projected_semi_major_axis=self.x,
            periastron_epoch=Epoch(52144, 0.90097849),
        )

    def motion(self) -> SecularMotion:
        """Return how it runs."""
        n = 2.0 * math.pi / (self.P_b * 86400.0)
        numbers = (
            self.P_rate,
            self.P_second,
            self.advance * DEG_PER_YEAR / n,
            self.drift,
            self.second_drift,
            self.e_rate,
            self.x_rate,
        )
        return SecularMotion(self.state(), *(np.array(v) for v in numbers))

    def parameters(self) -> dict[str, float]:
        """Return what stands in for predicted parameters."""
        return {
            "einstein_delay_amplitude": 4.3e-3 * self.e,
            "shapiro_range": T_SUN * 1.2,
            "shapiro_shape": self.sin_i,
            "radial_deformation": 4e-6,
            "angular_deformation": 5e-6,
        }


CASES = {
    "short and eccentric": Case(0.1, 0.9, 1.0, advance=10.0),
    "fast advance, large": Case(1.7, 0.3, 20.0, advance=17.0),
    "e = 0.99": Case(8.0, 0.99, 20.0),
    "circular": Case(0.3, 0.0, 2.0, e_rate=0.0),
    "e = 1e-7": Case(0.3, 1e-7, 2.0, e_rate=0.0),
    "edge-on": Case(0.1, 0.09, 1.4, advance=17.0, sin_i=0.99999),
    "wide": Case(1000.0, 0.6, 500.0, advance=1e-4, P_rate=1e-11, drift=1e-15),
}


class Exact:
    """The timing equation at 40 digits, from the very doubles that the case holds."""

    def __init__(self, case: Case) -> None:
        state, motion = case.state(), case.motion()
        self.P, self.e_0, self.omega_0, self.x_0 = (
            mpf(float(v))
            for v in state.known(
                "orbital_period", "eccentricity", "longitude_of_periastron", "projected_semi_major_axis"
            )
        )
        names = ("period_rate", "period_second_rate", "advance_per_radian", "drift", "second_drift")
        self.P_rate, self.P_second, self.k, self.drift, self.second = (mpf(float(getattr(motion, n))) for n in names)
        self.e_rate, self.x_rate = mpf(float(motion.eccentricity_rate)), mpf(float(motion.axis_rate))
        self.own = {name: mpf(value) for name, value in case.parameters().items()}

    def orbits(self, T: mpf) -> mpf:
        """Return the integral of 1/P(T), in closed form."""
        a, b = self.P_rate / self.P, self.P_second / (2 * self.P)
        if b == 0:
            return mp.log1p(a * T) / a / self.P if a else T / self.P
        root = mp.sqrt(a**2 - 4 * b)  # complex where the period has no zero; the integral stays real
        both = [mp.log(1 + (a + sign * root) * T / 2) for sign in (1, -1)]
        return mp.re((both[0] - both[1]) / root) / self.P

    def delay(self, T: mpf) -> mpf:
        """Return the sum of all delays at the emission time T since periastron."""
        e, x = self.e_0 + self.e_rate * T, self.x_0 + self.x_rate * T
        turns = self.orbits(T)
        whole = mp.nint(turns)
        M = 2 * mp.pi * (turns - whole)
        E = M + e * mp.sin(M)
        for _ in range(200):
            step = (E - e * mp.sin(E) - M) / (1 - e * mp.cos(E))
            step = max(min(step, mpf(1)), mpf(-1))
            E -= step
            if abs(step) < mpf(10) ** -38:
                break
        nu = 2 * mp.atan2(mp.sqrt(1 + e) * mp.sin(E / 2), mp.sqrt(1 - e) * mp.cos(E / 2))
        omega = self.omega_0 + self.k * (nu + 2 * mp.pi * whole) + self.drift * T + self.second * T**2 / 2
        e_r = e * (1 + self.own["radial_deformation"])
        e_theta = e * (1 + self.own["angular_deformation"])
        roemer = x * (mp.sin(omega) * (mp.cos(E) - e_r) + mp.sqrt(1 - e_theta**2) * mp.cos(omega) * mp.sin(E))
        plain = mp.sin(omega) * (mp.cos(E) - e) + mp.sqrt(1 - e**2) * mp.cos(omega) * mp.sin(E)
        shapiro = -2 * self.own["shapiro_range"] * mp.log(1 - e * mp.cos(E) - self.own["shapiro_shape"] * plain)
        return roemer + self.own["einstein_delay_amplitude"] * mp.sin(E) + shapiro

    def of_arrival(self, t: mpf) -> tuple[mpf, mpf]:
        """Return the delay and the emission time of an arrival, by the secant method."""
        T_0, T_1 = t - self.delay(t), t - self.delay(t - self.delay(t))
        g_0 = T_0 + self.delay(T_0) - t
        for _ in range(100):
            g_1 = T_1 + self.delay(T_1) - t
            if abs(g_1) < mpf(10) ** -30 or g_1 == g_0:
                break
            T_0, T_1, g_0 = T_1, T_1 - g_1 * (T_1 - T_0) / (g_1 - g_0), g_1
        return self.delay(T_1), T_1


def applied(state: BinaryState) -> Applied:
    """Return the four delays that the exact equation has, for a state."""
    return HOST.apply(state, only=PLAIN)


def arrivals(number: int, seed: int = 3) -> Epoch:
    """Return arrivals over fifty years, unsorted."""
    rng = np.random.default_rng(seed)
    return Epoch(rng.integers(52144, 52144 + int(FIFTY_YEARS), number), rng.random(number))


@pytest.mark.parametrize("name", list(CASES))
def test_delays_to_40_digits(name: str) -> None:
    """Over fifty years the sum of the delays is right to 0.1 ns, and to 10 ps for P_b = 0.1 d and e = 0.9.

    Advance, decay with its second rate, drifts of x and e and omega are all on; arrivals are inverted exactly.
    """
    case = CASES[name]
    times = arrivals(60)
    found = delays(
        applied(case.state()), case.motion(), times, instead={k: np.array(v) for k, v in case.parameters().items()}
    )
    with mp.workdps(45):
        exact = Exact(case)
        start = mpf(52144) + mpf(float(case.state().periastron_epoch.fraction))  # type: ignore[union-attr]
        worst = 0.0
        for k in range(times.shape[0]):
            t = (mpf(int(times.day[k])) + mpf(float(times.fraction[k])) - start) * 86400
            delay, T = exact.of_arrival(t)
            worst = max(worst, abs(float(mpf(float(found.total[k])) - delay)))
            assert abs(float(mpf(float(found.emission[k])) - T)) < 1e-6  # one double of seconds over fifty years
    assert worst < (1e-11 if name == "short and eccentric" else 1e-10), worst


def test_orbital_phase_over_fifty_years() -> None:
    """The phase of emissions over fifty years is right to 1e-14 orbits."""
    case = CASES["short and eccentric"]
    motion = case.motion()
    times = arrivals(200, seed=5)
    orbit = motion.at(*motion.seconds(times))
    with mp.workdps(45):
        exact = Exact(case)
        start = mpf(52144) + mpf(float(case.state().periastron_epoch.fraction))  # type: ignore[union-attr]
        for k in range(times.shape[0]):
            T = (mpf(int(times.day[k])) + mpf(float(times.fraction[k])) - start) * 86400
            turns = exact.orbits(T)
            assert orbit.whole[k] == int(mp.nint(turns))
            assert abs(float(mpf(float(orbit.mean_anomaly[k])) / (2 * mp.pi) - (turns - mp.nint(turns)))) < 1e-14


def test_moving_an_orbit_is_the_same_as_carrying_it() -> None:
    """An orbit moved by seconds is the orbit carried to the later time, at any eccentricity, to rounding."""
    for case in CASES.values():
        motion = case.motion()
        seconds, low = motion.seconds(arrivals(500))
        dT = np.random.default_rng(1).uniform(-20.0, 20.0, 500)
        moved, carried = motion.at(seconds, low).moved(dT), motion.at(seconds + dT, low)
        # seconds of fifty years in one double are 2e-7 s apart, which the second way rounds to
        slack = 3e-7 * case.motion().at(seconds, low).eccentric_rate
        away = np.abs(np.angle(np.exp(1j * (moved.eccentric_anomaly - carried.eccentric_anomaly))))
        assert np.all(away < slack + 1e-12)
        assert np.allclose(np.hypot(moved.sin_E, moved.cos_E), 1.0, rtol=0, atol=1e-15 * 4)
        assert np.allclose(np.hypot(moved.sin_omega, moved.cos_omega), 1.0, rtol=0, atol=1e-15 * 4)


def only_roemer(state: BinaryState) -> Applied:
    """Return the Roemer delay alone."""
    return HOST.apply(state, only=("roemer-delay",))


def steady(case: Case) -> Case:
    """Return the case without any change of the elements."""
    none = dict.fromkeys(("P_rate", "P_second", "e_rate", "x_rate", "drift", "second_drift", "advance"), 0.0)
    return replace(case, **none)


@pytest.mark.parametrize("e", [0.1, 0.6])
def test_the_published_closed_inverse(e: float) -> None:
    """The closed inverse of Damour & Deruelle agrees to its own order: what it drops goes as (n x)^3 times x.

    Damour & Deruelle 1986, eqs. (46-52) (numbers from memory): Delta = D [1 - m D' + (m D')^2 + m^2 D D''/2
    - e sin E/(1 - e cos E) m^2 D D'/2], m = n/(1 - e cos E), D of E at the arrival, primes by E.
    """
    errors = []
    for x in (1.0, 2.0, 4.0):
        case = steady(Case(0.3, e, x))
        motion, times = case.motion(), arrivals(400)
        exact = delays(only_roemer(case.state()), motion, times).total
        orbit = motion.at(*motion.seconds(times))
        sin_w, cos_w, root = orbit.sin_omega, orbit.cos_omega, orbit.root
        D = x * (sin_w * (orbit.cos_E - e) + root * cos_w * orbit.sin_E)
        D_1 = x * (-sin_w * orbit.sin_E + root * cos_w * orbit.cos_E)
        D_2 = -x * (sin_w * orbit.cos_E + root * cos_w * orbit.sin_E)
        m = orbit.eccentric_rate
        bend = e * orbit.sin_E / orbit.one_minus_e_cos_E
        closed = D * (1 - m * D_1 + (m * D_1) ** 2 + m**2 * D * D_2 / 2 - bend * m**2 * D * D_1 / 2)
        errors.append(float(np.max(np.abs(closed - exact))))
    n = 2 * math.pi / (0.3 * 86400.0)
    assert errors[2] < 30.0 * (n * 4.0 / (1 - e)) ** 3 * 4.0
    slopes = np.diff(np.log(errors)) / math.log(2.0)
    assert slopes == pytest.approx([4.0, 4.0], abs=0.1)


def test_the_low_eccentricity_expansion() -> None:
    """The two-term expansion in e agrees to its own order, e^2 x: Lange et al. 2001, MNRAS 326, 274 (from memory).

    x [sin Phi + (kappa/2) sin 2 Phi - (eta/2) cos 2 Phi] - (3/2) x eta, Phi the mean longitude from the node, eta = e
    sin omega, kappa = e cos omega.
    """
    errors = []
    for e in (1e-4, 1e-3, 1e-2):
        case = steady(Case(0.3, e, 2.0))
        motion, times = case.motion(), arrivals(400)
        exact = delays(only_roemer(case.state()), motion, times, by="emission").total
        orbit = motion.at(*motion.seconds(times))
        Phi, eta, kappa = orbit.mean_anomaly + case.omega, e * math.sin(case.omega), e * math.cos(case.omega)
        short = 2.0 * (np.sin(Phi) + 0.5 * kappa * np.sin(2 * Phi) - 0.5 * eta * np.cos(2 * Phi)) - 3.0 * eta
        errors.append(float(np.max(np.abs(short - exact))))
    assert np.diff(np.log10(errors)) == pytest.approx([2.0, 2.0], abs=0.05)
    assert errors[0] < 3.0 * 1e-8 * 2.0


def test_a_circular_orbit_is_smooth() -> None:
    """Through e = 0 the delays are continuous: the difference from the circular orbit goes as e, down to rounding."""
    times = arrivals(300)
    circle = steady(Case(0.3, 0.0, 2.0))
    parameters = {name: np.array(value) for name, value in circle.parameters().items()}

    def total(e: float) -> np.ndarray:
        case = replace(circle, e=e)
        return delays(applied(case.state()), case.motion(), times, instead=parameters).total

    differences = [float(np.max(np.abs(total(e) - total(0.0)))) for e in (1e-4, 1e-6, 1e-8, 1e-10)]
    assert np.diff(np.log10(differences)) == pytest.approx([-2.0] * 3, abs=0.02)
    assert float(np.max(np.abs(total(1e-300) - total(0.0)))) == 0.0


def test_a_third_partys_delay_takes_part_in_the_inversion() -> None:
    """A delay of a third party, without a rate, is inverted with the rest: arrival less delay is emission."""

    def describe() -> Card:
        return Card(
            name="wind", summary="A wind.", formula="-", sources=("invented",), order="-", valid="-", needs=(),
            gives=(), delay="wind of the companion",
        )  # fmt: skip

    def delay(orbit: object) -> Delay:
        return Delay(1e-3 * orbit.cos_E**2)  # type: ignore[attr-defined]

    plugin = SimpleNamespace(describe=hook(describe), delay=hook(delay))
    host = load_host([*installed_candidates(), Candidate("wind", "test", "0", lambda: plugin)], strict=True)
    case = CASES["short and eccentric"]
    found = delays(
        host.apply(case.state(), only=(*PLAIN, "wind")), case.motion(), arrivals(50),
        instead={k: np.array(v) for k, v in case.parameters().items()},
    )  # fmt: skip
    assert float(np.max(found.by_effect["wind"])) > 1e-4
    again = case.motion().at(found.emission)
    # emission in one double is good to 2e-7 s over fifty years; cos^2 E changes by n/(1 - e) of it
    assert found.by_effect["wind"] == pytest.approx(1e-3 * again.cos_E**2, abs=1e-3 * 3e-7 * 1e-2)
    seconds, low = case.motion().seconds(arrivals(50))
    assert found.total == pytest.approx((seconds - found.emission) + low, abs=3e-7)


def test_a_batch_is_what_its_members_are() -> None:
    """A batch of orbits gives what each one gives alone, whatever the blocks the times are cut into."""
    cases = [CASES["short and eccentric"], CASES["edge-on"]]
    times = arrivals(33)
    names = ("period_rate", "period_second_rate", "advance_per_radian", "drift", "second_drift", "eccentricity_rate")
    states = [case.state() for case in cases]
    together = {
        name: np.array([float(getattr(state, name)) for state in states])
        for name in ("mass_1", "mass_2", "orbital_period", "eccentricity", "longitude_of_periastron")
    }
    epoch = states[0].periastron_epoch
    assert epoch is not None
    state = BinaryState(
        **together,
        projected_semi_major_axis=np.array([case.x for case in cases]),
        periastron_epoch=epoch.broadcast_to((2,)),
    )
    motions = [case.motion() for case in cases]
    rates = [np.array([float(getattr(m, name)) for m in motions]) for name in names]
    motion = SecularMotion(state, *rates, axis_rate=np.array([float(m.axis_rate) for m in motions]))
    both = delays(only_roemer(state), motion, times).total
    for k, case in enumerate(cases):
        alone = delays(only_roemer(case.state()), case.motion(), times).total
        assert both[k] == pytest.approx(alone, rel=0, abs=2e-12)


def test_a_period_that_its_rates_no_longer_describe() -> None:
    """So far away that the period would have changed by a twentieth, a time is refused with the change."""
    case = replace(CASES["edge-on"], P_rate=-1e-6)
    with pytest.raises(OutOfRange, match="two rates do not describe"):
        case.motion().at(np.array([1e9]))
