"""Finding the installed effects, one entry point at a time.

pluggy 1.7 stops at the first broken entry point, skips a second one of the same name in silence and does not
name the plugin that raised. So the loop is our own: sorted, each step guarded, every fault kept by name.
"""

from __future__ import annotations

import importlib.metadata
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from itertools import groupby
from typing import Any, Final

import pluggy

from clockfall.effects import hooks
from clockfall.effects.card import Card
from clockfall.effects.host import Effect, EffectError, Host

ENTRY_POINT_GROUP: Final = "clockfall.effects"


@dataclass(frozen=True, slots=True)
class Candidate:
    """An effect on offer: where it comes from, and how to load it.

    Attributes
    ----------
    name, distribution, version : str
        Of the entry point, and of what installed it.
    load : callable
        Imports the effect and returns the object that has its hooks; may raise anything.
    """

    name: str
    distribution: str
    version: str
    load: Callable[[], Any]


def installed_candidates() -> Iterator[Candidate]:
    """Yield every installed effect, in no particular order."""
    for entry_point in importlib.metadata.entry_points(group=ENTRY_POINT_GROUP):
        distribution = entry_point.dist
        yield Candidate(
            entry_point.name,
            distribution.name if distribution else "unknown distribution",
            distribution.version if distribution else "",
            entry_point.load,
        )


def load_host(candidates: Iterable[Candidate] | None = None, *, strict: bool = False) -> Host:
    """Load effects one by one, in the order of their names.

    Parameters
    ----------
    candidates : iterable of Candidate, optional
        Default: all that is installed.
    strict : bool
        Raise the first fault instead of leaving the effect out.

    Returns
    -------
    Host
        With the effects that loaded, and in `Host.broken` an EffectError for each that did not.

    Raises
    ------
    EffectError
        With `strict`, for the first effect that cannot be used.
    """
    manager = pluggy.PluginManager(hooks.PROJECT)
    manager.add_hookspecs(hooks)
    effects: list[Effect] = []
    broken: list[EffectError] = []
    found = sorted(installed_candidates() if candidates is None else candidates, key=lambda c: (c.name, c.distribution))
    for name, group in groupby(found, key=lambda c: c.name):
        same_name = list(group)
        try:
            if len(same_name) > 1:
                raise _duplicate(name, same_name)
            effects.append(_load(manager, same_name[0]))
        except EffectError as error:
            if strict:
                raise
            broken.append(error)
    return Host(manager, tuple(effects), tuple(broken), strict=strict)


def _duplicate(name: str, same_name: list[Candidate]) -> EffectError:
    owners = " and ".join(f"{c.distribution} {c.version}".strip() for c in same_name)
    return EffectError(
        name, "", owners, "several effects have this name, and none of them is used; uninstall all but one"
    )


def _load(manager: pluggy.PluginManager, candidate: Candidate) -> Effect:
    """Import, register and check one effect; on any fault it leaves no trace in `manager`."""

    def fault(step: str, reason: str) -> EffectError:
        return EffectError(candidate.name, step, candidate.distribution, reason)

    try:
        plugin = candidate.load()
    except (Exception, SystemExit) as error:  # an import may raise anything, and none of it may stop the others
        raise fault("import", _said(error)) from error
    try:
        manager.register(plugin, candidate.name)
        manager.check_pending()
        _refuse_what_cannot_be_called(manager, plugin)
        card = _card(manager, plugin)
    except Exception as error:
        if manager.is_registered(plugin):
            manager.unregister(plugin)
        raise fault("registration", _said(error)) from error
    if card.name != candidate.name:
        manager.unregister(plugin)
        raise fault("describe", f"its card is named {card.name!r}, its entry point {candidate.name!r}; make them equal")
    if bool(card.delay) != any(caller.name == "delay" for caller in manager.get_hookcallers(plugin) or ()):
        manager.unregister(plugin)
        raise fault("describe", "its card describes a delay if and only if it has the hook of that name")
    return Effect(card, candidate.distribution, candidate.version, plugin)


def _said(error: BaseException) -> str:
    return f"{type(error).__name__}: {error}" if str(error) else type(error).__name__


def _refuse_what_cannot_be_called(manager: pluggy.PluginManager, plugin: object) -> None:
    """Refuse wrappers, which could change other effects' results, and defaults, which would never be filled in."""
    for caller in manager.get_hookcallers(plugin) or ():
        for implementation in caller.get_hookimpls():
            if implementation.plugin is not plugin:
                continue
            if implementation.wrapper or implementation.hookwrapper:
                raise TypeError(f"hook {caller.name} is a wrapper; an effect contributes, it does not wrap others")
            if implementation.kwargnames:
                names = ", ".join(implementation.kwargnames)
                raise TypeError(f"hook {caller.name} gives default values to {names}; they would never be passed")


def _card(manager: pluggy.PluginManager, plugin: object) -> Card:
    for implementation in manager.hook.describe.get_hookimpls():
        if implementation.plugin is plugin:
            card = implementation.function()
            if not isinstance(card, Card):
                raise TypeError(f"describe() returned {type(card).__name__}, expected Card")
            return card
    raise TypeError("it has no describe() hook; every effect describes itself by a Card")
