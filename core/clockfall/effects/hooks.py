"""The hooks: the whole contract between clockfall and an effect.

An effect is a module (or any object) with functions of these names marked ``@hook``. It implements
`describe` and those to which it contributes. A hook returns a contribution and changes nothing; any argument
that is not needed may be left out of the signature. What is returned is checked for type, name, shape and
finiteness, and an exception in a hook is reported with the effect's name.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import pluggy

from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects.card import Card
from clockfall.effects.contributions import Caution, ClosedFormTrack, Delay, Predicted, Rates, Settings

PROJECT: Final = "clockfall"

hook: Final = pluggy.HookimplMarker(PROJECT)
"""Marks a function as the implementation of the hook of the same name."""

_specification = pluggy.HookspecMarker(PROJECT)


@_specification
def describe() -> Card:
    """Return the effect's card. Called once, when the effect is loaded; every effect has it."""
    raise NotImplementedError


@_specification
def secular_rates(state: BinaryState, settings: Settings) -> Rates:
    """Return the effect's contributions to orbit-averaged rates [field unit per second].

    Called whenever rates are summed; only when all that the card needs is known. The host adds the
    contributions of all effects. May raise any exception: the effect is then left out, by name.

    Parameters
    ----------
    state : BinaryState, shape batch
        Frozen.
    settings : mapping of str to array, shape batch
        The effect's own parameters.
    """
    raise NotImplementedError


@_specification
def predicted_parameters(state: BinaryState, settings: Settings) -> Predicted:
    """Return parameters that timing measures, as this effect predicts them [units of the card].

    Called like `secular_rates`. A parameter whose own `needs` are not known is left out of what is returned.
    A parameter may be predicted by one active effect alone.
    """
    raise NotImplementedError


@_specification
def delay(orbit: Orbit, parameters: Mapping[str, FloatArray], settings: Settings) -> Delay:
    """Return what the effect adds to the time from emission to arrival [s].

    Called with the orbit carried to many emission times, several times over as arrival is inverted to emission; so it
    must depend on nothing but its arguments. Delays add: one that changes another effect's is the difference.

    Parameters
    ----------
    orbit : Orbit, shape batch + (times,)
        `orbit.state` has shape batch + (1,), so that it broadcasts with the times.
    parameters : mapping of name to array, shape batch + (1,)
        The parameters that this effect predicts; what was measured or is being fitted may stand in for them.
    settings : mapping of name to array, shape batch + (1,)
        The effect's own parameters.
    """
    raise NotImplementedError


@_specification
def cautions(state: BinaryState, settings: Settings) -> tuple[Caution, ...]:
    """Return statements about the validity of this effect's numbers for this state; () where there is none.

    Called once for each analysis, with the whole batch.
    """
    raise NotImplementedError


@_specification
def closed_form_track(state: BinaryState, times: FloatArray, settings: Settings) -> ClosedFormTrack:
    """Return the exact track, offered only by an effect that has one for itself alone.

    Called with `times`, shape (times,) [s since the state's instant], which may be empty. The host says which
    other active effects the track leaves out.
    """
    raise NotImplementedError
