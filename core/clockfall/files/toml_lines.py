"""On which line of a TOML text each key stands; tomllib does not say."""

from __future__ import annotations

import re
from collections.abc import Mapping

_KEY_PART = r"""(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')"""
_KEY = rf"{_KEY_PART}(?:\s*\.\s*{_KEY_PART})*"
_TABLE = re.compile(rf"\s*(\[\[?)\s*({_KEY})\s*\]\]?")
_ASSIGNMENT = re.compile(rf"\s*({_KEY})\s*=")

KeyPath = tuple[str | int, ...]


def key_lines(text: str) -> Mapping[KeyPath, int]:
    """Return key path -> line (from 1) of tables and keys; array tables have their number in the path.

    A light scanner, good for what people write by hand: a key inside an inline table is not found, and a key-like line
    inside a multi-line string is; the caller treats a missing line as unknown.
    """
    lines: dict[KeyPath, int] = {}
    counts: dict[KeyPath, int] = {}
    table: KeyPath = ()
    for number, line in enumerate(text.split("\n"), start=1):
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
