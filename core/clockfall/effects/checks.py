"""What an effect returned, checked for type, name, shape and finiteness before it may count."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import FIELDS, BinaryState
from clockfall.effects.card import Card, Parameter
from clockfall.effects.contributions import Caution, ClosedFormTrack, Delay, Predicted, Rates

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Contribution:
    """What one effect adds to one rate, or predicts of one parameter.

    Attributes
    ----------
    card : Card
        Of the effect.
    name : str
        ``<field>_rate`` or the parameter's name.
    unit, shown_in : str
        The unit of `values`, and that in which people read them.
    meaning : str
        One line.
    values : array, shape batch
        NaN where the prediction has no meaning, which only `defined_where` allows; elsewhere finite.
    defined_where : str
        The condition under which the prediction has a meaning; "" for always.
    """

    card: Card
    name: str
    unit: str
    shown_in: str
    meaning: str
    values: FloatArray
    defined_where: str = ""


class BadReturn(TypeError):
    """An effect returned something that cannot be added, or changed what it must not."""


def _expect(returned: object, kind: type[T], hook: str) -> T:
    if not isinstance(returned, kind):
        raise BadReturn(f"{hook} returned {type(returned).__name__}, expected {kind.__name__}")
    return returned


def _array(name: str, values: object, shape: tuple[int, ...], *, nan_allowed: bool = False) -> FloatArray:
    """Check one returned array: float64, of the batch's shape, finite (or NaN where the card allows it)."""
    if isinstance(values, float) and shape == ():
        values = np.float64(values)
    if not isinstance(values, np.ndarray | np.float64) or values.dtype != np.float64:
        found = f"an array of {values.dtype}" if isinstance(values, np.ndarray) else type(values).__name__
        raise BadReturn(f"{name} is {found}, expected float64")
    if values.shape != shape:
        raise BadReturn(f"{name} has shape {values.shape}, expected the batch's shape {shape}")
    bad = np.isinf(values) if nan_allowed else ~np.isfinite(values)
    if bad.any():
        raise BadReturn(f"{name} is not finite in {int(np.sum(bad))} of {values.size} elements")
    return np.asarray(values)


def rates(card: Card, state: BinaryState, returned: object) -> Iterator[Contribution]:
    """Check what `secular_rates` returned; yield each rate as a contribution."""
    declared = {rate.of for rate in card.rates}
    for of, values in _expect(returned, Rates, "secular_rates").of.items():
        if of not in declared:
            raise BadReturn(f"it returned a rate of {of!r}, which its card does not give")
        unit, shown_in, meaning = _rate_description(card, of)
        name = f"{of}_rate"
        yield Contribution(card, name, unit, shown_in, meaning, _array(name, values, state.shape))


def _rate_description(card: Card, of: str) -> tuple[str, str, str]:
    own = card.own(of)
    if of in FIELDS:
        return rate_units(of)
    unit = own.unit if own else ""
    return f"{unit or '1'}/s", f"{unit or '1'}/yr", f"rate of {own.meaning}" if own else ""


def rate_units(of: str) -> tuple[str, str, str]:
    """Return (unit, unit shown, meaning) of the rate of a state field."""
    description = FIELDS[of]
    meaning = f"rate of the {description.meaning}"
    if description.unit == "s":
        return "s/s", "s/s", meaning
    return f"{description.unit or '1'}/s", f"{description.shown_in or '1'}/yr", meaning


def parameters(card: Card, state: BinaryState, returned: object) -> Iterator[Contribution]:
    """Check what `predicted_parameters` returned; yield each parameter as a contribution."""
    declared: dict[str, Parameter] = {parameter.name: parameter for parameter in card.predicts}
    for name, values in _expect(returned, Predicted, "predicted_parameters").values.items():
        if name not in declared:
            raise BadReturn(f"it returned {name!r}, which its card does not give")
        parameter = declared[name]
        array = _array(name, values, state.shape, nan_allowed=bool(parameter.defined_where))
        shown_in = parameter.shown_in or parameter.unit
        yield Contribution(card, name, parameter.unit, shown_in, parameter.meaning, array, parameter.defined_where)


def delay(card: Card, orbit: Orbit, returned: object) -> Iterator[tuple[Card, Delay]]:
    """Check what `delay` returned; yield it with its card, both arrays of the orbit's shape."""
    found = _expect(returned, Delay, "delay")
    arrays = []
    for name in ("seconds", "rate"):
        values = getattr(found, name)
        if isinstance(values, np.ndarray | np.float64) and values.shape != orbit.shape:
            with suppress(ValueError):  # a delay may be the same at all times; any other shape is told below
                values = np.broadcast_to(values, orbit.shape)
        arrays.append(None if values is None and name == "rate" else _array(name, values, orbit.shape))
    seconds, rate = arrays
    assert seconds is not None
    yield card, Delay(seconds, rate)


def cautions(card: Card, state: BinaryState, returned: object) -> Iterator[tuple[str, Caution]]:
    """Check what `cautions` returned; yield each with its effect's name."""
    del state  # part of the common signature
    for caution in _expect(returned, tuple, "cautions"):
        yield card.name, _expect(caution, Caution, "cautions")


def track(
    card: Card, state: BinaryState, returned: object, *, times: FloatArray
) -> Iterator[tuple[str, ClosedFormTrack]]:
    """Check a closed-form track; yield it with its effect's name."""
    found = _expect(returned, ClosedFormTrack, "closed_form_track")
    _array("merger_time", found.merger_time, state.shape)
    for name in ("orbital_period", "eccentricity"):
        _array(name, getattr(found, name), state.shape + times.shape, nan_allowed=True)
    yield card.name, found
