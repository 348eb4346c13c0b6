"""What tomllib does not say of a TOML text: on which line each key stands, how deep it nests, what kind a value is."""

from __future__ import annotations

import math
import re
import sys
from collections.abc import Mapping
from typing import Any, Final

_KEY_PART = r"""(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')"""
_KEY = rf"{_KEY_PART}(?:\s*\.\s*{_KEY_PART})*"
_TABLE = re.compile(rf"\s*(\[\[?)\s*({_KEY})\s*\]\]?")
_ASSIGNMENT = re.compile(rf"\s*({_KEY})\s*=")

KeyPath = tuple[str | int, ...]

LARGEST_DOUBLE: Final = sys.float_info.max
"""TOML's integers have no bound."""

_STRING_OR_COMMENT: Final = re.compile(
    r'''"""(?:\\.|[^\\])*?(?:"{3,5}|\Z)|\'{3}.*?(?:\'{3,5}|\Z)|"(?:\\[^\n]|[^"\\\n])*"?|\'[^\'\n]*\'?|\#[^\n]*''',
    re.DOTALL,
)


def key_lines(text: str) -> Mapping[KeyPath, int]:
    """Return key path -> line (from 1) of tables and keys; array tables have their number in the path.

    A light scanner, good for what people write by hand: a key inside an inline table is not found, and a key-like line
    inside a multi-line string is; the caller treats a missing line as unknown.
    """
    lines: dict[KeyPath, int] = {}
    counts: dict[KeyPath, int] = {}
    table: KeyPath = ()
    for number, line in enumerate(_blanked(text, long_only=True).split("\n"), start=1):
        if found := _TABLE.match(line):
            table = _parts(found[2])
            if found[1] == "[[":
                counts[table] = counts.get(table, -1) + 1
                table = (*table, counts[table])
            lines.setdefault(table, number)
            for length in range(1, len(table)):
                lines.setdefault(table[:length], number)
        elif found := _ASSIGNMENT.match(line):
            path = (*table, *_parts(found[1]))
            for length in range(len(table) + 1, len(path) + 1):
                lines.setdefault(path[:length], number)
    return lines


def _parts(key: str) -> KeyPath:
    return tuple(part.strip("\"'") for part in re.findall(_KEY_PART, key))


def deepest_nesting(text: str) -> int:
    """Return how deep the brackets or the dotted keys of a text are nested at most."""
    bare = _blanked(text, long_only=False)
    deepest = max(piece.count(".") for piece in re.split(r"[\n=,{}\[\]]", bare))
    depth = 0
    for character in bare:
        if character in "[{":
            depth += 1
            deepest = max(deepest, depth)
        elif character in "]}":
            depth -= 1
    return deepest


def _blanked(text: str, *, long_only: bool) -> str:
    """Replace strings (all, or those in three quotes) and comments by the line breaks that they hold."""

    def blank(token: re.Match[str]) -> str:
        found = token[0]
        return found if long_only and not found.startswith(('"""', "'''")) else "\n" * found.count("\n")

    return _STRING_OR_COMMENT.sub(blank, text)


def kind_of(value: Any) -> str:
    """Say what kind of TOML value something is."""
    if isinstance(value, bool):
        return f"the boolean {str(value).lower()}"
    if value is None:
        return "nothing"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return "a list"
    if isinstance(value, str):
        return f"the text {value[:60]!r}"
    if isinstance(value, int | float):
        return f"the number {number_text(value)}"
    return f"a date or time, {value}"


def number_text(value: float) -> str:
    """Return a TOML number as text; Python refuses to write out an integer that is too long."""
    return "beyond 1.8e308" if LARGEST_DOUBLE < abs(value) < math.inf else repr(value)
