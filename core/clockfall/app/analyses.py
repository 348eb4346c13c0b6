"""An analysis as the command line sees it: how to compute it, and how to say what it found."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib import import_module
from pathlib import Path
from typing import Any, Final

from clockfall.analysis.outcome import Outcome, Said
from clockfall.analysis.study import Choices
from clockfall.analysis.system import System
from clockfall.effects.host import Host
from clockfall.errors import BadInput
from clockfall.files.results import Result
from clockfall.files.system_file import parse_system

NAMES: Final = ("decay", "rates", "weigh", "inspiral", "delays")


@dataclass(frozen=True, slots=True)
class Block:
    """A table, or lines, of an analysis's output.

    Attributes
    ----------
    rows : tuple of tuples of str
        Cells; an empty row is a blank line.
    heading : tuple of str
        Above the columns; () for none.
    title : str
        Above the block; "" for none.
    """

    rows: tuple[tuple[str, ...], ...]
    heading: tuple[str, ...] = ()
    title: str = ""


@dataclass(frozen=True, slots=True)
class Analysis:
    """One analysis.

    Attributes
    ----------
    name : str
        Of the command, and in a result file.
    compute : callable
        (host, system, choices) -> Outcome.
    report : callable
        Outcome -> what --json prints, without what all analyses share.
    blocks : callable
        Outcome -> the tables that people read.
    headline : callable
        Outcome -> the one line that --quiet prints.
    """

    name: str
    compute: Callable[[Host, System, Choices], Outcome]
    report: Callable[[Outcome], dict[str, Any]]
    blocks: Callable[[Outcome], Iterator[Block]]
    headline: Callable[[Outcome], str]


def analysis(name: str) -> Analysis:
    """Return the analysis called `name`; a result file may hold any text there."""
    if name not in NAMES:
        raise BadInput(f"the result is of {name!r}, which this clockfall does not know (it knows {', '.join(NAMES)})")
    found = import_module(f"clockfall.app.{name}").ANALYSIS
    assert isinstance(found, Analysis)
    return found


def full_report(of: Analysis, outcome: Outcome) -> dict[str, Any]:
    """Return all that --json prints."""
    return {
        "system": outcome.facts.get("system", ""),
        **of.report(outcome),
        "idle": [{"effect": said.effect, "reason": said.text} for said in outcome.idle],
        "failed": [{"effect": said.effect, "reason": said.text} for said in outcome.failed],
        "cautions": [_caution(said) for said in outcome.cautions],
        "draws": outcome.draws,
        "seed": outcome.seed,
    }


def masses_from(outcome: Outcome) -> str:
    """Say whether the masses were given, or by what they were weighed."""
    used = outcome.facts.get("used", "").split()
    return f"weighed by {' and '.join(used)}" if used else outcome.facts["masses_from"]


def _caution(said: Said) -> dict[str, Any]:
    return {"effect": said.effect or None, "statement": said.text}


def system_of(result: Result, file: Path, host: Host) -> System:
    """Return the system that a result file was computed from, read with the effects of today."""
    return parse_system(result.system_text, host.cards, name=f"{file} (its system file)").system
