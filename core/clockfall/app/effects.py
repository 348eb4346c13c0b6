"""`clockfall effects`: the installed effects."""

from __future__ import annotations

import dataclasses
import json
import textwrap
from collections.abc import Iterator
from typing import Any

import click

from clockfall.app.analyses import Block
from clockfall.app.printing import print_blocks
from clockfall.effects.card import Card, OwnParameter
from clockfall.effects.host import Effect, Host
from clockfall.effects.loading import load_host
from clockfall.files.quantity import format_quantity


@click.group("effects", invoke_without_command=True)
@click.option("--json", "as_json", is_flag=True, help="Print JSON.")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
@click.pass_context
def command(ctx: click.Context, *, as_json: bool, debug: bool) -> None:
    """List the installed effects; 'effects show NAME' reads one."""
    del debug  # read by clockfall.app.main before any option is parsed
    if ctx.invoked_subcommand is not None:
        return
    host = load_host()
    if as_json:
        broken = [{"effect": error.effect, "reason": str(error)} for error in host.broken]
        report = {"effects": [_described(host, effect) for effect in host.effects], "broken": broken}
        click.echo(json.dumps(report, indent=2))
        return
    rows = tuple((e.name, f"{e.distribution} {e.version}", e.card.summary) for e in host.effects)
    blocks = [Block(rows, ("effect", "installed by", "what it is"))]
    if host.broken:
        blocks.append(Block(tuple((e.effect, str(e)) for e in host.broken), title="Could not be loaded"))
    print_blocks("Installed effects", blocks)


@command.command("show")
@click.argument("name")
@click.option("--json", "as_json", is_flag=True, help="Print JSON.")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
def show(name: str, *, as_json: bool, debug: bool) -> None:
    """Read the card of the effect NAME: formula, sources, what it needs and gives, and how far it may be trusted."""
    del debug  # read by clockfall.app.main before any option is parsed
    host = load_host()
    effect = host.effect(name)
    if as_json:
        click.echo(json.dumps(_described(host, effect), indent=2))
    else:
        print_blocks(f"{effect.name}: {effect.card.summary}", _card_blocks(host, effect))


def _described(host: Host, effect: Effect) -> dict[str, Any]:
    card = dataclasses.asdict(effect.card)
    card["gives"] = {
        "rates": [rate.name for rate in effect.card.rates],
        "parameters": [_parameter(p) for p in effect.card.predicts],
    }
    card["parameters"] = [_parameter(p) for p in effect.card.parameters]
    return {
        **card,
        "distribution": effect.distribution,
        "version": effect.version,
        "hooks": list(host.hooks_of(effect)),
    }


def _parameter(parameter: Any) -> dict[str, Any]:
    """Return a card's parameter without what JSON cannot say (infinite ends of a range)."""
    described = dataclasses.asdict(parameter)
    within = described.pop("within", None)
    if within is not None:
        described["within"] = parameter.within.text(parameter.name, parameter.unit)
    return described


def _card_blocks(host: Host, effect: Effect) -> Iterator[Block]:
    card = effect.card
    formula = [("formula" if k == 0 else "", part) for k, part in enumerate(textwrap.wrap(card.formula, 62))]
    sources = [("source" if k == 0 else "", source) for k, source in enumerate(card.sources)]
    rows = [
        *formula,
        *sources,
        ("nature", card.nature),
        ("order", card.order),
        ("valid", card.valid),
        ("needs", ", ".join(card.needs)),
        ("replaces", ", ".join(card.replaces) or "nothing"),
        *((("delay", card.delay),) if card.delay else ()),
        ("installed by", f"{effect.distribution} {effect.version}"),
        ("hooks", ", ".join(host.hooks_of(effect))),
    ]
    yield Block(tuple(rows))
    yield Block(tuple(_gives(card)), ("gives", "unit", "meaning"))
    if card.parameters:
        own = tuple((p.name, p.unit or "1", _default(p), p.meaning) for p in card.parameters)
        yield Block(own, ("own parameter", "unit", "default", "meaning"), f"Read from [effects.{card.name}]")
    if card.choices:
        words = tuple((choice.name, " or ".join(choice.words), choice.meaning) for choice in card.choices)
        yield Block(words, ("own choice", "words, the first by default", "meaning"))


def _default(parameter: OwnParameter) -> str:
    if parameter.default is None:
        return "none"
    return format_quantity(parameter.default, parameter.default_uncertainty, parameter.default_uncertainty)


def _gives(card: Card) -> Iterator[tuple[str, str, str]]:
    for rate in card.rates:
        yield rate.name, "per second", f"rate of {rate.of}"
    for parameter in card.predicts:
        extra = f"; needs {', '.join(parameter.needs)}" if parameter.needs else ""
        where = f"; where {parameter.defined_where}" if parameter.defined_where else ""
        yield parameter.name, parameter.unit or "1", f"{parameter.meaning}{extra}{where}"
