"""BinaryState: the one description of a binary that all effects share."""

from __future__ import annotations

import dataclasses
import difflib
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from types import MappingProxyType
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from clockfall.binary.constants import T_SUN
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import ANY, POSITIVE, FloatArray, Range, common_shape
from clockfall.errors import OutOfRange, UnknownField


@dataclass(frozen=True, slots=True)
class FieldDescription:
    """What is to be known about one state field.

    Attributes
    ----------
    unit : str
        Unit inside clockfall; "" for a pure number.
    shown_in : str
        Unit in which people read it.
    meaning : str
        One line.
    group : str
        The table of a system file that holds it.
    within : Range
        Where it has a meaning, in `unit`.
    """

    unit: str
    shown_in: str
    meaning: str
    group: str
    within: Range = ANY


def _described(unit: str, shown_in: str, meaning: str, group: str, within: Range = ANY) -> Any:
    description = FieldDescription(unit, shown_in, meaning, group, within)
    return dataclasses.field(default=None, metadata={"description": description})


_UNIT_INTERVAL: Final = Range(at_least=0.0, below=1.0)


@dataclass(frozen=True, init=False, eq=False, repr=False)
class BinaryState:
    """A binary, or a batch of binaries, at one instant.

    Every field is None (not known) or a read-only float64 array of the one batch shape; a single binary
    has shape (). Elements hold at `periastron_epoch`; `orbital_period` is anomalistic, from periastron to
    periastron. `eccentricity` is the Damour-Deruelle e_T. `eccentricity` and `one_minus_eccentricity` are
    two ways to say the same: give either, or both where 1 - e is known better than a double near 1 can say.
    Derived quantities are computed once, when they are asked for, and shared.

    Parameters
    ----------
    **fields : array_like or Epoch or None
        Values by field name, in clockfall's units (see `FIELDS`); they are copied and broadcast together.

    Raises
    ------
    UnknownField
        A name that is no field; the message gives the nearest one.
    OutOfRange
        A value outside its range, NaN or infinite, or shapes that do not fit together.
    """

    mass_1: FloatArray | None = _described("Msun", "Msun", "mass of body 1, the timed one", "masses", POSITIVE)
    mass_2: FloatArray | None = _described("Msun", "Msun", "mass of body 2, the companion", "masses", POSITIVE)
    orbital_period: FloatArray | None = _described(
        "s", "d", "orbital period, periastron to periastron", "orbit", POSITIVE
    )
    eccentricity: FloatArray | None = _described("", "", "eccentricity e_T", "orbit", _UNIT_INTERVAL)
    one_minus_eccentricity: FloatArray | None = _described(
        "", "", "1 - e, where it is known better than e", "orbit", Range(above=0.0, at_most=1.0)
    )
    longitude_of_periastron: FloatArray | None = _described("rad", "deg", "longitude of periastron of body 1", "orbit")
    periastron_epoch: Epoch | None = _described("d", "MJD", "a passage of periastron, TDB", "orbit")
    projected_semi_major_axis: FloatArray | None = _described(
        "ls", "ls", "projected semi-major axis of body 1", "orbit", POSITIVE
    )
    inclination: FloatArray | None = _described(
        "rad", "deg", "inclination of the orbit", "orbit", Range(at_least=0.0, at_most=math.pi)
    )
    ascending_node: FloatArray | None = _described("rad", "deg", "position angle of the ascending node", "orbit")
    spin_period_1: FloatArray | None = _described("s", "s", "spin period of body 1", "spin", POSITIVE)
    spin_period_rate_1: FloatArray | None = _described("s/s", "s/s", "rate of the spin period of body 1", "spin")
    moment_of_inertia_1: FloatArray | None = _described(
        "Msun ls2", "g cm2", "moment of inertia of body 1", "spin", POSITIVE
    )
    spin_period_2: FloatArray | None = _described("s", "s", "spin period of body 2", "spin", POSITIVE)
    spin_period_rate_2: FloatArray | None = _described("s/s", "s/s", "rate of the spin period of body 2", "spin")
    moment_of_inertia_2: FloatArray | None = _described(
        "Msun ls2", "g cm2", "moment of inertia of body 2", "spin", POSITIVE
    )
    right_ascension: FloatArray | None = _described("rad", "deg", "right ascension", "sky")
    declination: FloatArray | None = _described(
        "rad", "deg", "declination", "sky", Range(at_least=-math.pi / 2, at_most=math.pi / 2)
    )
    proper_motion_ra: FloatArray | None = _described(
        "rad/s", "mas/yr", "proper motion in right ascension, times cos(declination)", "sky"
    )
    proper_motion_dec: FloatArray | None = _described("rad/s", "mas/yr", "proper motion in declination", "sky")
    distance: FloatArray | None = _described("ls", "kpc", "distance", "sky", POSITIVE)
    redshift: FloatArray | None = _described("", "", "cosmological redshift", "sky", Range(at_least=0.0))
    shape: tuple[int, ...] = ()

    def __init__(self, **fields: npt.ArrayLike | Epoch | None) -> None:
        for name in fields:
            if name not in FIELDS:
                raise UnknownField(name, f"BinaryState has no field {name!r}{_nearest(name)}")
        given = {name: _checked(name, value) for name, value in fields.items() if value is not None}
        _complete_eccentricity(given)
        shape = common_shape(**{name: value.shape for name, value in given.items()})
        for name in FIELDS:
            value = given.get(name)
            if isinstance(value, Epoch):
                value = value.broadcast_to(shape)
            elif value is not None:
                value = np.broadcast_to(value, shape)
            object.__setattr__(self, name, value)
        object.__setattr__(self, "shape", shape)

    def __reduce__(self) -> tuple[Any, ...]:
        return _rebuild, (dict(self.items()),)

    def __repr__(self) -> str:
        known = ", ".join(f"{name}={value}" if not self.shape else name for name, value in self.items())
        return f"BinaryState(shape {self.shape}: {known})"

    def items(self) -> Iterator[tuple[str, FloatArray | Epoch]]:
        """Yield (name, value) of every field that is known."""
        for name in FIELDS:
            value = getattr(self, name)
            if value is not None:
                yield name, value

    def replace(self, **fields: npt.ArrayLike | Epoch | None) -> BinaryState:
        """Return a state with `fields` changed; the batch shape is found anew."""
        kept: dict[str, Any] = dict(self.items())
        if "eccentricity" in fields or "one_minus_eccentricity" in fields:
            kept.pop("eccentricity", None)
            kept.pop("one_minus_eccentricity", None)
        return BinaryState(**{**kept, **fields})

    def take(self, index: slice | npt.NDArray[np.intp]) -> BinaryState:
        """Return the part of the batch that `index` selects along its first axis."""
        parts: dict[str, Any] = {}
        for name, value in self.items():
            parts[name] = Epoch(value.day[index], value.fraction[index]) if isinstance(value, Epoch) else value[index]
        return BinaryState(**parts)

    def known(self, *names: str) -> tuple[FloatArray, ...]:
        """Return fields or derived quantities by name, in the order asked for.

        Raises
        ------
        UnknownField
            One of them is not known to this binary, or is no field.
        """
        values = []
        for name in names:
            value = getattr(self, name, None)
            if value is None:
                is_name = name in FIELDS or name in DERIVED
                raise UnknownField(
                    name, f"{name} is not known for this binary" if is_name else f"no field {name!r}{_nearest(name)}"
                )
            values.append(value)
        return tuple(values)

    def _derived(self, *names: str) -> tuple[FloatArray, ...] | None:
        """Return the named quantities, or None where one of them is not known."""
        values = [getattr(self, name) for name in names]
        return None if any(value is None for value in values) else tuple(values)

    @cached_property
    def total_mass(self) -> FloatArray | None:
        """M = m_1 + m_2 [Msun]."""
        masses = self._derived("mass_1", "mass_2")
        return None if masses is None else _locked(masses[0] + masses[1])

    @cached_property
    def symmetric_mass_ratio(self) -> FloatArray | None:
        """Nu = m_1 m_2 / M^2 [1]."""
        masses = self._derived("mass_1", "mass_2")
        return None if masses is None else _locked(masses[0] * masses[1] / (masses[0] + masses[1]) ** 2)

    @cached_property
    def chirp_mass(self) -> FloatArray | None:
        """nu^(3/5) M [Msun]."""
        masses = self._derived("symmetric_mass_ratio", "total_mass")
        return None if masses is None else _locked(masses[0] ** 0.6 * masses[1])

    @cached_property
    def mean_motion(self) -> FloatArray | None:
        """N = 2 pi / P_b [rad/s]."""
        return None if self.orbital_period is None else _locked(2.0 * math.pi / self.orbital_period)

    @cached_property
    def orbital_velocity(self) -> FloatArray | None:
        """Beta = (T_sun M n)^(1/3) [c]: the speed on a circular orbit of this period."""
        known = self._derived("total_mass", "mean_motion")
        return None if known is None else _locked(np.cbrt(T_SUN * known[0] * known[1]))

    @cached_property
    def relative_semi_major_axis(self) -> FloatArray | None:
        """A = (T_sun M / n^2)^(1/3) [ls], Kepler's third law."""
        known = self._derived("total_mass", "mean_motion")
        return None if known is None else _locked(np.cbrt(T_SUN * known[0] / known[1] ** 2))

    @cached_property
    def one_minus_e_squared(self) -> FloatArray | None:
        """1 - e^2 = (1 - e)(1 + e) [1], without loss near e = 1."""
        known = self._derived("one_minus_eccentricity", "eccentricity")
        return None if known is None else _locked(known[0] * (1.0 + known[1]))

    @cached_property
    def sin_inclination(self) -> FloatArray | None:
        """The sine of the inclination [1]; from the mass function where x and both masses are known.

        x n^(2/3) M^(2/3) / (T_sun^(1/3) m_2) (1 + (3 - nu/3) beta^2): Kepler's third law projected, to first
        post-Newtonian order for the anomalistic period (Damour & Deruelle 1985, Ann. Inst. H. Poincare A 43, 107:
        n = (G M/a_R^3)^(1/2) [1 + (nu - 9) G M/(2 a_R c^2)], a_1 = a_R m_2/M). It may exceed 1 where the values do not
        belong together; whoever prints it says so.
        """
        known = self._derived(
            "projected_semi_major_axis", "mass_2", "total_mass", "mean_motion", "symmetric_mass_ratio"
        )
        if known is None:
            return None if self.inclination is None else _locked(np.sin(self.inclination))
        x, m_2, M, n, nu = known
        beta_2 = np.cbrt(T_SUN * M * n) ** 2
        return _locked(x * np.cbrt((n * M) ** 2 / T_SUN) / m_2 * (1.0 + (3.0 - nu / 3.0) * beta_2))


def _locked(values: Any) -> FloatArray:
    """Return a derived quantity such that nobody who shares it can change it; a scalar cannot be changed anyway."""
    if isinstance(values, np.ndarray):
        values.flags.writeable = False
        values = values.view()
    return values  # type: ignore[no-any-return]  # an array, or a numpy scalar, as whoever derived it made it


def _rebuild(fields: dict[str, Any]) -> BinaryState:
    return BinaryState(**fields)


FIELDS: Final[Mapping[str, FieldDescription]] = MappingProxyType(
    {f.name: f.metadata["description"] for f in dataclasses.fields(BinaryState) if f.metadata}
)
"""Every state field and what is to be known about it."""

DERIVED: Final = frozenset(name for name, member in vars(BinaryState).items() if isinstance(member, cached_property))
"""The names of the derived quantities."""


def _nearest(name: str) -> str:
    near = difflib.get_close_matches(name, [*FIELDS, *DERIVED], n=1)
    return f"; did you mean {near[0]!r}?" if near else ""


def _checked(name: str, value: npt.ArrayLike | Epoch) -> FloatArray | Epoch:
    """Copy one field's value into a read-only array inside its range."""
    if name == "periastron_epoch":
        if not isinstance(value, Epoch):
            raise OutOfRange(name, "an Epoch (two-part MJD, TDB)", repr(value), "use Epoch.from_mjd(...)")
        return value
    try:
        array = np.array(value, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise OutOfRange(name, "numbers", repr(value)[:80]) from error
    description = FIELDS[name]
    description.within.check(name, array, description.unit)
    array.flags.writeable = False
    return array.view()  # a view of read-only memory cannot be made writeable again


def _complete_eccentricity(given: dict[str, FloatArray | Epoch]) -> None:
    """Supply e from 1 - e or the other way round; refuse a pair that does not agree to rounding."""
    e, rest = given.get("eccentricity"), given.get("one_minus_eccentricity")
    if isinstance(e, np.ndarray) and rest is None:
        given["one_minus_eccentricity"] = _read_only(1.0 - e)
    elif isinstance(rest, np.ndarray) and e is None:
        # below 2^-53 the nearest double to 1 - rest is 1 itself, which is no ellipse; the largest double under it is
        given["eccentricity"] = _read_only(np.minimum(1.0 - rest, np.nextafter(1.0, 0.0)))
    elif isinstance(rest, np.ndarray) and isinstance(e, np.ndarray):
        apart = np.abs((1.0 - e) - rest)
        if np.any(apart > 2.0 * np.spacing(1.0)):  # each of the two is rounded once
            raise OutOfRange(
                "one_minus_eccentricity", "1 - eccentricity", f"a difference of {float(np.max(apart)):.3g}", "give one"
            )


def _read_only(array: FloatArray) -> FloatArray:
    array = np.array(array)
    array.flags.writeable = False
    return array.view()
