"""The orbit carried to emission times: where body 1 is, and how the ellipse lies, at each of many instants.

Time is that of the pulsar's clock in units of barycentric time (Damour & Deruelle 1986, Ann. Inst. H. Poincare A 44,
263): the constant Doppler factor between the two is absorbed in all quantities, as timing always does. The mean
anomaly counts periods that change steadily; the advance of periastron follows the true anomaly, drifts follow time.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, fields, replace
from functools import cached_property
from typing import Final, TypeVar

import numpy as np

from clockfall.binary.constants import SECONDS_PER_DAY
from clockfall.binary.epoch import Epoch, halves, two_product, two_sum
from clockfall.binary.kepler import eccentric_anomaly
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.errors import OutOfRange

T = TypeVar("T")

LARGEST_PERIOD_CHANGE: Final = 0.05
"""Of the period, relative: beyond it two rates do not describe the period any more."""

_NEAR: Final = 0.4  # rad of eccentric anomaly by which an orbit is moved with series; ten terms leave 1e-17 there
_NARROW: Final = 1e-3  # 1 - e below which 1 - cos E needs more than the difference
_SMALL: Final = 1e-3  # rad by which omega turns with two terms of a series; the third is 1e-23
_CUBIC: Final = tuple((-1) ** k / math.factorial(2 * k + 3) for k in range(7))
_VERSINE: Final = tuple((-1) ** k / math.factorial(2 * k + 2) for k in range(7))
_TWO_PI: Final = 2.0 * math.pi


@dataclass(frozen=True, eq=False)
class SecularMotion:
    """How the elements of a binary run with time, about its `periastron_epoch`.

    Attributes
    ----------
    state : BinaryState, shape batch
        With orbital period, eccentricity, longitude of periastron, projected semi-major axis and periastron epoch.
    period_rate, period_second_rate : array, shape batch [1], [1/s]
    advance_per_radian : array, shape batch [1]
        k: radians of periastron advance for each radian of true anomaly, that which the orbit itself does.
    drift, second_drift : array, shape batch [rad/s], [rad/s^2]
        What the longitude of periastron does with time besides.
    eccentricity_rate : array, shape batch [1/s]
    axis_rate : array, shape batch [ls/s]
        Of the projected semi-major axis.

    Raises
    ------
    OutOfRange
        The state lacks one of the five elements.
    """

    state: BinaryState
    period_rate: FloatArray
    period_second_rate: FloatArray
    advance_per_radian: FloatArray
    drift: FloatArray
    second_drift: FloatArray
    eccentricity_rate: FloatArray
    axis_rate: FloatArray

    def __post_init__(self) -> None:
        for name in ("orbital_period", "eccentricity", "longitude_of_periastron", "projected_semi_major_axis"):
            self._need(name)
        self._need("periastron_epoch")

    def _need(self, name: str) -> None:
        if getattr(self.state, name) is None:
            raise OutOfRange(name, "a value, since delays need the whole orbit", "none")

    @cached_property
    def state_along_times(self) -> BinaryState:
        """The state with an axis added for times; shape batch + (1,)."""
        return along_times(self.state)

    def seconds(self, times: Epoch) -> tuple[FloatArray, FloatArray]:
        """Return the time since the periastron epoch as the sum of two doubles [s]; shape batch + (times,)."""
        epoch = self.state.periastron_epoch
        assert epoch is not None
        # whole days are exact in seconds; their rest is rounded at 1e-11 s, the resolution of an epoch
        days = (times.day - epoch.day[..., None]).astype(np.float64)
        return two_sum(days * SECONDS_PER_DAY, (times.fraction - epoch.fraction[..., None]) * SECONDS_PER_DAY)

    def at(self, seconds: FloatArray, low: FloatArray | float = 0.0) -> Orbit:
        """Return the orbit at emission times.

        Parameters
        ----------
        seconds, low : array, shape batch + (times,) [s]
            Since the periastron epoch, as the sum of two doubles.

        Raises
        ------
        OutOfRange
            A time at which the period has changed by more than 5 %.
        """
        state = self.state_along_times
        P, e, o = state.known("orbital_period", "eccentricity", "one_minus_eccentricity")
        omega_0, x_0 = state.known("longitude_of_periastron", "projected_semi_major_axis")
        a, b = self.period_rate[..., None] / P, 0.5 * self.period_second_rate[..., None] / P
        change = (a + b * seconds) * seconds
        if np.any(np.abs(change) > LARGEST_PERIOD_CHANGE):
            worst = float(np.max(np.abs(change)))
            raise OutOfRange(
                "time", f"one at which the period has changed by less than {LARGEST_PERIOD_CHANGE:.0%}",
                f"a change of {worst:.3g}", "two rates do not describe the period so far from the periastron epoch",
            )  # fmt: skip
        whole, turn = _orbits(seconds, low, P, a, b)
        M = _TWO_PI * turn
        e_t, o_t = e, o
        if np.any(self.eccentricity_rate):
            grown = self.eccentricity_rate[..., None] * seconds
            e_t, o_t = e + grown, o - grown
        E = np.asarray(eccentric_anomaly(M, e_t, one_minus_eccentricity=o_t))
        n = _TWO_PI / (P * (1.0 + change))
        drift = (self.drift[..., None] + 0.5 * self.second_drift[..., None] * seconds) * seconds
        k = self.advance_per_radian[..., None]
        beta_half = _beta(e_t, o_t)
        sin_E, cos_E = np.sin(E), np.cos(E)
        nu = E + 2.0 * np.arctan(beta_half * sin_E / (1.0 - beta_half * cos_E))
        omega = omega_0 + (k * (nu + _TWO_PI * whole) + drift)
        return Orbit(
            state=state,
            seconds=seconds,
            low=np.broadcast_to(low, seconds.shape),
            whole=whole,
            mean_anomaly=M,
            eccentric_anomaly=E,
            sin_E=sin_E,
            cos_E=cos_E,
            true_anomaly=nu,
            longitude_of_periastron=omega,
            sin_omega=np.sin(omega),
            cos_omega=np.cos(omega),
            eccentricity=e_t,
            one_minus_eccentricity=o_t,
            projected_semi_major_axis=x_0 + self.axis_rate[..., None] * seconds,
            mean_motion=n,
            advance_per_radian=k,
            drift=self.drift[..., None] + self.second_drift[..., None] * seconds,
        )


@dataclass(frozen=True, eq=False)
class Orbit:
    """The orbit at emission times; arrays of shape batch + (times,) unless said otherwise, and not to be changed.

    Attributes
    ----------
    state : BinaryState, shape batch + (1,)
        Elements, masses and all else at the periastron epoch; it broadcasts with the times.
    seconds, low : array [s]
        Time since the periastron epoch, as the sum of two doubles.
    whole : array [orbits]
        Whole orbits since then.
    mean_anomaly, eccentric_anomaly, true_anomaly : array [rad]
        Within half a turn of zero.
    sin_E, cos_E, sin_omega, cos_omega : array [1]
    longitude_of_periastron : array [rad]
        omega, the accumulated advance included.
    eccentricity, one_minus_eccentricity : array [1]
        Of shape batch + (1,) where they do not change.
    projected_semi_major_axis : array [ls]
    mean_motion : array [rad/s]
        n = 2 pi over the period of that time.
    advance_per_radian : array, shape batch + (1,) [1]
    drift : array [rad/s]
        What omega does with time besides following the true anomaly.
    """

    state: BinaryState
    seconds: FloatArray
    low: FloatArray
    whole: FloatArray
    mean_anomaly: FloatArray
    eccentric_anomaly: FloatArray
    sin_E: FloatArray
    cos_E: FloatArray
    true_anomaly: FloatArray
    longitude_of_periastron: FloatArray
    sin_omega: FloatArray
    cos_omega: FloatArray
    eccentricity: FloatArray
    one_minus_eccentricity: FloatArray
    projected_semi_major_axis: FloatArray
    mean_motion: FloatArray
    advance_per_radian: FloatArray
    drift: FloatArray

    def __post_init__(self) -> None:
        # all effects share these arrays
        for field in fields(self):
            _lock(getattr(self, field.name))

    @property
    def shape(self) -> tuple[int, ...]:
        """Batch + (times,)."""
        return self.seconds.shape

    @cached_property
    def one_minus_e_cos_E(self) -> FloatArray:
        """The distance of the bodies over the semi-major axis [1], without loss near periastron."""
        versine = 1.0 - self.cos_E
        if np.min(self.one_minus_eccentricity) < _NARROW:
            near = self.cos_E > 0.0
            versine = np.where(near, self.sin_E**2 / np.where(near, 1.0 + self.cos_E, 1.0), versine)
        return _lock(self.one_minus_eccentricity + self.eccentricity * versine)

    @cached_property
    def root(self) -> FloatArray:
        """sqrt(1 - e^2) [1]."""
        return _lock(np.sqrt(self.one_minus_eccentricity * (1.0 + self.eccentricity)))

    @cached_property
    def eccentric_rate(self) -> FloatArray:
        """dE/dT [rad/s]."""
        return _lock(self.mean_motion / self.one_minus_e_cos_E)

    @cached_property
    def longitude_rate(self) -> FloatArray:
        """D omega/dT [rad/s]."""
        return _lock(self.advance_per_radian * self.eccentric_rate * self.root / self.one_minus_e_cos_E + self.drift)

    def times(self) -> Epoch:
        """Return the instants of emission, TDB."""
        epoch = self.state.periastron_epoch
        assert epoch is not None
        return epoch.plus_seconds(self.seconds).plus_seconds(self.low)

    def shifted(self, dT: FloatArray) -> Orbit:
        """Return the orbit microseconds later: its time and mean anomaly; all else hardly changes, and is left."""
        seconds, low = two_sum(self.seconds, dT)
        M = self.mean_anomaly + self.mean_motion * dT
        return replace(self, seconds=seconds, low=self.low + low, mean_anomaly=M)

    def moved(self, dT: FloatArray) -> Orbit:
        """Return the orbit a little later, by series about this one.

        Parameters
        ----------
        dT : array [s]
            So small that E moves by less than 0.4; where one moves farther, Kepler's equation is solved anew for all.
        """
        e, r = self.eccentricity, self.one_minus_e_cos_E
        dM = self.mean_motion * dT
        d, cubic, versine = _kepler_step(dM, r, e * self.sin_E, e * self.cos_E)
        if np.max(np.abs(d), initial=0.0) > _NEAR:
            E = np.asarray(
                eccentric_anomaly(self.mean_anomaly + dM, e, one_minus_eccentricity=self.one_minus_eccentricity)
            )
            sin_E, cos_E = np.sin(E), np.cos(E)
        else:
            E = self.eccentric_anomaly + d
            sin_d = d - cubic
            sin_E = self.sin_E + (self.cos_E * sin_d - self.sin_E * versine)
            cos_E = self.cos_E - (self.sin_E * sin_d + self.cos_E * versine)
        half = _beta(e, self.one_minus_eccentricity)
        # the half angles by which both true anomalies run ahead of the eccentric ones, subtracted as tangents
        before, after = half * self.sin_E / (1.0 - half * self.cos_E), half * sin_E / (1.0 - half * cos_E)
        moved = (E - self.eccentric_anomaly) + 2.0 * np.arctan((after - before) / (1.0 + after * before))
        turned = self.advance_per_radian * moved + self.drift * dT
        sin_t, versine_t = _sine_and_versine(turned)
        seconds, low = two_sum(self.seconds, dT)
        return Orbit(
            state=self.state,
            seconds=seconds,
            low=self.low + low,
            whole=self.whole,
            mean_anomaly=self.mean_anomaly + dM,
            eccentric_anomaly=E,
            sin_E=sin_E,
            cos_E=cos_E,
            true_anomaly=self.true_anomaly + moved,
            longitude_of_periastron=self.longitude_of_periastron + turned,
            sin_omega=self.sin_omega + (self.cos_omega * sin_t - self.sin_omega * versine_t),
            cos_omega=self.cos_omega - (self.sin_omega * sin_t + self.cos_omega * versine_t),
            eccentricity=e,
            one_minus_eccentricity=self.one_minus_eccentricity,
            projected_semi_major_axis=self.projected_semi_major_axis,
            mean_motion=self.mean_motion,
            advance_per_radian=self.advance_per_radian,
            drift=self.drift,
        )


def _lock(values: T) -> T:
    """Make an array read-only; anything else is left."""
    if isinstance(values, np.ndarray):
        values.flags.writeable = False
    return values


def along_times(state: BinaryState) -> BinaryState:
    """Return the state with an axis added for times; shape batch + (1,)."""
    longer = {}
    for name, value in state.items():
        if isinstance(value, Epoch):
            longer[name] = Epoch(value.day[..., None], value.fraction[..., None])
        else:
            longer[name] = value[..., None]  # type: ignore[assignment]  # a mapping of both kinds
    return BinaryState(**longer)


def _beta(e: FloatArray, o: FloatArray) -> FloatArray:
    """Return e/(1 + sqrt(1 - e^2))."""
    return e / (1.0 + np.sqrt(o * (1.0 + e)))


def _orbits(
    seconds: FloatArray, low: FloatArray | float, P: FloatArray, a: FloatArray, b: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return whole orbits and the rest, within half an orbit of zero, for P(T) = P (1 + a T + b T^2).

    The count at a constant period is exact to rounding (Dekker 1971); what its change adds is the integral of 1/P(T) as
    a series in a T, whose first dropped term is (a T)^5/6 of the count.
    """
    orbits = seconds / P
    whole = np.rint(orbits)
    if np.max(np.abs(whole), initial=0.0) < 2.0**26:
        high, tail = halves(P)  # of 26 bits each, so that a count of 26 bits times either of them is exact
        rest = ((seconds - whole * high) - whole * tail + low) / P
    else:
        product, product_low = two_product(whole, P)
        rest = ((seconds - product) + (low - product_low)) / P
    T = seconds
    series = T * (-a / 2.0 + T * ((a**2 - b) / 3.0 + T * (-(a**3 - 2.0 * a * b) / 4.0 + T * (a**4 - 3.0 * a**2 * b + b**2) / 5.0)))  # fmt: skip  # noqa: E501
    rest = rest + orbits * series
    more = np.rint(rest)
    return whole + more, rest - more


def _kepler_step(
    dM: FloatArray, r: FloatArray, e_sin: FloatArray, e_cos: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Solve Kepler's equation for the step d of E that belongs to a step of M; return d, d - sin d and 1 - cos d.

    Newton's method on short series; where d is large the answer is rough, and to be thrown away.
    """
    d = np.clip(dM / r, -1.0, 1.0)
    largest = float(np.max(np.abs(d), initial=0.0))
    terms = 4 if largest < 0.03 else 5 if largest < 0.1 else 7  # each leaves 1e-17
    for _ in range(8):
        t = d * d
        cubic, versine = d * _series(t, _CUBIC[:terms]), _series(t, _VERSINE[:terms])
        value = r * d + e_cos * cubic + e_sin * versine - dM
        slope = r + e_cos * versine + e_sin * (d - cubic)
        step = value / np.where(slope > 0.0, slope, r)
        d = np.clip(d - step, -1.0, 1.0)
        if np.max(np.abs(step), initial=0.0) < 1e-9:  # the next one would be the square of it
            break
    # to the last digit: both change by their slopes times the last step
    return d, cubic - step * versine, versine - step * (d - cubic)


def _series(t: FloatArray, coefficients: tuple[float, ...]) -> FloatArray:
    """Return the polynomial in t without a constant term, by Horner's rule."""
    total = t * coefficients[-1]
    for coefficient in coefficients[-2::-1]:
        total += coefficient
        total *= t
    return total


def _sine_and_versine(angle: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return sin and 1 - cos of angles that are small as a rule."""
    if np.max(np.abs(angle), initial=0.0) > _SMALL:
        return np.sin(angle), 2.0 * np.sin(0.5 * angle) ** 2
    t = angle * angle
    return angle * (1.0 - t * (1.0 / 6.0 - t / 120.0)), t * (0.5 - t / 24.0)
