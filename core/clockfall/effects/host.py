"""The host: it asks every effect for its contribution, checks it, and never forgets whose it is."""

from __future__ import annotations

import dataclasses
import difflib
from collections.abc import Callable, Collection, Iterator, Mapping
from dataclasses import dataclass
from functools import partial
from typing import Any, TypeVar

import numpy as np
import pluggy

from clockfall.binary.orbit import Orbit
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects import checks
from clockfall.effects.card import Card, OwnParameter
from clockfall.effects.checks import BadReturn, Contribution
from clockfall.effects.contributions import Caution, ClosedFormTrack, Delay, Settings
from clockfall.errors import BadInput, ClockfallError

T = TypeVar("T")


class EffectError(ClockfallError):
    """An effect failed, or returned what it must not.

    Attributes
    ----------
    effect, hook, distribution, reason : str
        Who failed, where, what it was installed by, and how.
    """

    def __init__(self, effect: str, hook: str, distribution: str, reason: str) -> None:
        super().__init__(effect, hook, distribution, reason)
        self.effect = effect
        self.hook = hook
        self.distribution = distribution
        self.reason = reason

    def __str__(self) -> str:
        where = f" in {self.hook}" if self.hook else ""
        return f"effect {self.effect!r} ({self.distribution}) failed{where}: {self.reason}"


class UnknownEffect(BadInput):
    """An effect was asked for by a name that no installed effect has.

    Attributes
    ----------
    name : str
        The name asked for.
    nearest : str
        The nearest installed name, or "".
    """

    def __init__(self, name: str, installed: Collection[str]) -> None:
        self.name = name
        near = difflib.get_close_matches(name, installed, n=1)
        self.nearest = near[0] if near else ""
        hint = f"; did you mean {self.nearest!r}?" if near else ""
        super().__init__(f"no installed effect is named {name!r}{hint} (installed: {', '.join(sorted(installed))})")


@dataclass(frozen=True, slots=True)
class Effect:
    """One loaded effect: its card, where it was installed from, and the object that has its hooks."""

    card: Card
    distribution: str
    version: str
    plugin: object

    @property
    def name(self) -> str:
        """The card's name."""
        return self.card.name


@dataclass(frozen=True, slots=True)
class Idle:
    """An installed effect that does not apply, wholly or for one of its parameters, and why."""

    effect: str
    reason: str


class Host:
    """The loaded effects. Built by `clockfall.effects.loading.load_host` and held by its caller.

    Attributes
    ----------
    effects : tuple of Effect
        In the order of their names.
    broken : tuple of EffectError
        One for each installed effect that could not be loaded.
    """

    def __init__(
        self,
        manager: pluggy.PluginManager,
        effects: tuple[Effect, ...],
        broken: tuple[EffectError, ...],
        *,
        strict: bool = False,
    ) -> None:
        self._manager = manager
        self.effects = effects
        self.broken = broken
        self.strict = strict

    @property
    def cards(self) -> tuple[Card, ...]:
        """The cards of all loaded effects."""
        return tuple(effect.card for effect in self.effects)

    def effect(self, name: str) -> Effect:
        """Return the effect called `name`; raises UnknownEffect."""
        for effect in self.effects:
            if effect.name == name:
                return effect
        raise UnknownEffect(name, [e.name for e in self.effects])

    def hooks_of(self, effect: Effect) -> tuple[str, ...]:
        """Return the names of the hooks that `effect` implements, sorted."""
        return tuple(sorted(caller.name for caller in self._manager.get_hookcallers(effect.plugin) or ()))

    def apply(
        self,
        state: BinaryState,
        settings: Mapping[str, Mapping[str, Any]] | None = None,
        *,
        only: Collection[str] | None = None,
        without: Collection[str] = (),
    ) -> Applied:
        """Sort the effects into active and idle ones for `state`.

        Parameters
        ----------
        state : BinaryState, shape batch
            The binary.
        settings : mapping of effect name to mapping of own parameter to array_like
            Values of effects' own parameters, in their declared units.
        only, without : collections of str
            Names of effects to use alone, or to leave out.

        Raises
        ------
        UnknownEffect
            A name in `only`, `without` or `settings` that is no installed effect.
        BadInput
            Two active effects replace the same one, or predict the same parameter.
        """
        given = settings or {}
        for name in (*(only or ()), *without, *given):
            self.effect(name)
        ready: list[tuple[Effect, Settings]] = []
        idle: list[Idle] = []
        for effect in self.effects:
            own = _own_settings(effect.card, given.get(effect.name, {}), state.shape)
            reason = _asked_away(effect, only, without) or _missing(effect.card, state, own)
            if reason:
                idle.append(Idle(effect.name, reason))
            else:
                ready.append((effect, own))
                idle.extend(_missing_for_parameters(effect.card, state))
        replaced = _replacements([effect for effect, _ in ready])
        idle.extend(Idle(name, f"replaced by {by}") for name, by in replaced.items())
        active = tuple((effect, own) for effect, own in ready if effect.name not in replaced)
        _refuse_rival_predictions([effect.card for effect, _ in active])
        idle.sort(key=lambda i: (i.effect, i.reason))
        return Applied(self._manager, state, active, tuple(idle), list(self.broken), self.strict)


@dataclass(slots=True)
class Applied:
    """The effects that are active for one state; ask it for their contributions.

    Attributes
    ----------
    idle : tuple of Idle
        The effects that do not apply, each with the reason.
    failures : list of EffectError
        Effects that could not be loaded, and those that failed as their hooks were called; all are left out.
    """

    _manager: pluggy.PluginManager
    state: BinaryState
    _active: tuple[tuple[Effect, Settings], ...]
    idle: tuple[Idle, ...]
    failures: list[EffectError]
    _strict: bool

    @property
    def active(self) -> tuple[Effect, ...]:
        """The active effects, in the order of their names."""
        return tuple(effect for effect, _ in self._active)

    def settings_of(self, effect: Effect) -> Settings:
        """Return an active effect's own parameters as they are used."""
        return next(own for other, own in self._active if other is effect)

    def secular_rates(self) -> tuple[Contribution, ...]:
        """Return every active effect's contribution to every rate [field unit per second]."""
        return tuple(self._collect("secular_rates", checks.rates))

    def predicted_parameters(self) -> tuple[Contribution, ...]:
        """Return every predicted parameter, each with the effect that predicts it."""
        return tuple(self._collect("predicted_parameters", checks.parameters))

    def cautions(self) -> tuple[tuple[str, Caution], ...]:
        """Return (effect name, caution) for every caution of an active effect that no other active effect meets."""
        active = {effect.name for effect in self.active}
        found = self._collect("cautions", checks.cautions)
        return tuple((name, caution) for name, caution in found if active.isdisjoint(caution.unless))

    def closed_form_track(self, times: FloatArray) -> tuple[str, ClosedFormTrack] | None:
        """Return (effect name, track) of the first active effect that offers a closed form, or None."""
        check = partial(checks.track, times=times)
        return next(self._collect("closed_form_track", check, times=times), None)

    def delays(
        self, orbit: Orbit, parameters: Mapping[str, Mapping[str, FloatArray]]
    ) -> tuple[tuple[Card, Delay], ...]:
        """Return every active effect's delay, with its card, in the order of their names.

        Parameters
        ----------
        orbit : Orbit, shape batch + (times,)
            The orbit of this state, carried to emission times.
        parameters : mapping of effect name to mapping of parameter to array, shape batch + (1,)
            What each effect predicts, or what stands in for it; see `delay_parameters`.
        """

        def arguments(effect: Effect, own: Settings) -> dict[str, object]:
            along = Settings({name: value[..., None] for name, value in own.items()}, own.choices)
            return {"orbit": orbit, "parameters": parameters.get(effect.name, {}), "settings": along}

        def check(card: Card, state: BinaryState, returned: object) -> Iterator[tuple[Card, Delay]]:
            del state  # the orbit's own is checked for changes
            return checks.delay(card, orbit, returned)

        return tuple(self._collect("delay", check, arguments))

    def delay_parameters(
        self, instead: Mapping[str, FloatArray] | None = None
    ) -> Mapping[str, Mapping[str, FloatArray]]:
        """Return what each effect predicts, by effect and name, for its own delay; shape batch + (1,).

        Parameters
        ----------
        instead : mapping of parameter to array, shape batch
            Values that stand in for predicted ones.
        """
        found: dict[str, dict[str, FloatArray]] = {}
        for contribution in self.predicted_parameters():
            values = (instead or {}).get(contribution.name, contribution.values)
            if np.all(np.isnan(values)):  # without meaning, as where sin i > 1: as if it were not known
                continue
            found.setdefault(contribution.card.name, {})[contribution.name] = np.asarray(values)[..., None]
        return found

    def others_changing_the_orbit(self, name: str) -> tuple[str, ...]:
        """Return the active intrinsic effects besides `name` that change the period or the eccentricity."""
        shape_of_orbit = {"orbital_period", "eccentricity"}
        return tuple(
            effect.name
            for effect in self.active
            if effect.name != name
            and effect.card.nature == "intrinsic"
            and any(rate.of in shape_of_orbit for rate in effect.card.rates)
        )

    def _collect(
        self,
        hook: str,
        checked: Callable[[Card, BinaryState, Any], Iterator[T]],
        arguments_of: Callable[[Effect, Settings], dict[str, Any]] | None = None,
        **more: Any,
    ) -> Iterator[T]:
        """Call `hook` of each active effect in turn; yield what it contributed, checked."""
        implementations = {id(i.plugin): i for i in getattr(self._manager.hook, hook).get_hookimpls()}
        for effect, own in self._active:
            implementation = implementations.get(id(effect.plugin))
            if implementation is None:
                continue
            arguments = arguments_of(effect, own) if arguments_of else {"state": self.state, "settings": own, **more}
            before = _field_identities(self.state)
            try:
                with np.errstate(divide="raise", over="raise", invalid="raise"):
                    returned = implementation.function(*(arguments[name] for name in implementation.argnames))
                _refuse_change(self.state, before)
                contributed = list(checked(effect.card, self.state, returned))
            except Exception as error:
                reason = str(error) if isinstance(error, BadReturn) else f"{type(error).__name__}: {error}"
                failure = EffectError(effect.name, hook, effect.distribution, reason)
                failure.__cause__ = error
                if self._strict:
                    raise failure from error
                if str(failure) not in {str(known) for known in self.failures}:
                    self.failures.append(failure)
                continue
            finally:
                _restore(self.state, before)
            yield from contributed


def _asked_away(effect: Effect, only: Collection[str] | None, without: Collection[str]) -> str:
    if effect.name in without or (only is not None and effect.name not in only):
        return "left out on request"
    return ""


def _missing(card: Card, state: BinaryState, own: Settings) -> str:
    fields = [name for name in card.needs if getattr(state, name) is None]
    parameters = [p.name for p in card.parameters if p.name not in own]
    reasons = []
    if fields:
        reasons.append(f"needs {', '.join(fields)}")
    if parameters:
        reasons.append(f"needs {', '.join(parameters)} in [effects.{card.name}]")
    return "; ".join(reasons)


def _missing_for_parameters(card: Card, state: BinaryState) -> Iterator[Idle]:
    for parameter in card.predicts:
        missing = [name for name in parameter.needs if getattr(state, name) is None]
        if missing:
            yield Idle(card.name, f"{parameter.name} needs {', '.join(missing)}")


def _own_settings(card: Card, given: Mapping[str, Any], shape: tuple[int, ...]) -> Settings:
    """Return the effect's own parameters and choices, given or by default, of the batch's shape."""
    own: dict[str, FloatArray] = {}
    for parameter in card.parameters:
        value = given.get(parameter.name, parameter.default)
        if value is not None:
            own[parameter.name] = _own_value(card, parameter, value, shape)
    words = {choice.name: str(given.get(choice.name, choice.words[0])) for choice in card.choices}
    for choice in card.choices:
        if words[choice.name] not in choice.words:
            allowed = ", ".join(choice.words)
            raise BadInput(
                f"[effects.{card.name}] {choice.name}: expected one of {allowed}, found {words[choice.name]!r}"
            )
    known = [item.name for items in (card.parameters, card.choices) for item in items]
    for name in given:
        if name not in known:
            near = difflib.get_close_matches(name, known, n=1)
            hint = f"; did you mean {near[0]!r}?" if near else ""
            raise BadInput(f"effect {card.name!r} has no parameter {name!r}{hint}")
    return Settings(own, words)


def _own_value(card: Card, parameter: OwnParameter, value: Any, shape: tuple[int, ...]) -> FloatArray:
    array = np.array(value, dtype=np.float64)
    parameter.within.check(f"[effects.{card.name}] {parameter.name}", array, parameter.unit)
    array.flags.writeable = False
    return np.broadcast_to(array, shape)


def _replacements(ready: list[Effect]) -> dict[str, str]:
    """Return name replaced -> name of the effect that replaces it; refuse two that replace the same one."""
    replaced: dict[str, str] = {}
    for effect in ready:
        for name in effect.card.replaces:
            if name in replaced:
                raise BadInput(
                    f"effects {replaced[name]!r} and {effect.name!r} both replace {name!r}; leave one of them out"
                )
            replaced[name] = effect.name
    return {name: by for name, by in replaced.items() if any(effect.name == name for effect in ready)}


def _refuse_rival_predictions(cards: list[Card]) -> None:
    predictor: dict[str, str] = {}
    for card in cards:
        for parameter in card.predicts:
            if parameter.name in predictor:
                raise BadInput(
                    f"effects {predictor[parameter.name]!r} and {card.name!r} both predict {parameter.name}; "
                    "leave one of them out, or let one declare that it replaces the other"
                )
            predictor[parameter.name] = card.name


def _field_identities(state: BinaryState) -> dict[str, object]:
    return {f.name: getattr(state, f.name) for f in dataclasses.fields(state)}


def _refuse_change(state: BinaryState, before: dict[str, object]) -> None:
    changed = [name for name, value in before.items() if getattr(state, name) is not value]
    if changed:
        raise BadReturn(f"it changed the shared state ({', '.join(changed)}); a hook changes nothing")


def _restore(state: BinaryState, before: dict[str, object]) -> None:
    for name, value in before.items():
        if getattr(state, name) is not value:
            object.__setattr__(state, name, value)
