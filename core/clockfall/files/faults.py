"""The faults of a user's file: all of them, each with its place, what was expected, what was found, and a hint."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable
from dataclasses import dataclass

from clockfall.errors import BadInput

WIDTH = 80


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault.

    Attributes
    ----------
    path : str
        Where, for instance ``[orbit] orbital_period``; "" for the file as a whole.
    line : int or None
        The line, from 1; None where it is not known.
    expected, found, hint : str
        In words; "" for nothing to say.
    """

    path: str
    line: int | None
    expected: str
    found: str
    hint: str = ""

    def __str__(self) -> str:
        where = ", ".join(part for part in (f"line {self.line}" if self.line else "", self.path) if part)
        lines = [f"  {_shortened(_printable(where), WIDTH - 2)}"] if where else []
        for label, text in (("expected", self.expected), ("found", self.found), ("hint", self.hint)):
            if text:
                start = f"    {label + ':':<10}"
                lines += textwrap.wrap(
                    _printable(text), WIDTH, initial_indent=start, subsequent_indent=" " * 14, max_lines=4
                )
        return "\n".join(lines)


def _printable(text: str) -> str:
    """Replace control characters, which could act on the reader's terminal, and what no terminal can encode."""
    return "".join(c if c.isprintable() else f"\\x{ord(c):02x}" for c in text)


def _shortened(text: str, width: int) -> str:
    return text if len(text) <= width else f"{text[: width - 3]}..."


class BadFile(BadInput):
    """A file with faults.

    Attributes
    ----------
    file : str
        Its name.
    faults : tuple of Fault
        All of them, each once, in the order of their lines.
    """

    def __init__(self, file: str, faults: Iterable[Fault]) -> None:
        self.file = file
        different = dict.fromkeys(faults)
        self.faults = tuple(sorted(different, key=lambda fault: (fault.line or 0, fault.path)))
        count = "1 fault" if len(self.faults) == 1 else f"{len(self.faults)} faults"
        super().__init__("\n".join([f"{_printable(file)}: {count}", *(str(fault) for fault in self.faults)]))
