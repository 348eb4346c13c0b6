"""The correlations of a system file: each between two of its uncertain quantities, all of them possible together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, Protocol

import numpy as np

from clockfall.analysis.system import Correlation, System
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import FIELDS
from clockfall.files.faults import Fault
from clockfall.files.toml_text import KeyPath, kind_of


class FileReader(Protocol):
    """The reader of the whole file, where faults are noted."""

    faults: list[Fault]
    faulty: set[str]

    def fault(self, path: KeyPath, expected: str, found: str, hint: str = "") -> None:
        """Note a fault at a key path."""

    def did_you_mean(self, name: str, known: Iterable[str]) -> str:
        """Return a hint with the nearest of the known names, or ""."""


class CorrelationReader:
    """Reads [[correlation]] of one file.

    Parameters
    ----------
    file : FileReader
        Where faults are noted.
    system : System
        With all of its quantities.
    """

    def __init__(self, file: FileReader, system: System) -> None:
        self.file = file
        self.addresses = _addresses(system)
        self.quantities = dict(system.quantities())

    def read(self, entries: Any) -> tuple[Correlation, ...]:
        """Return the correlations, each between two uncertain quantities."""
        if not isinstance(entries, list) or not all(isinstance(entry, dict) for entry in entries):
            self.file.fault(
                ("correlation",), "[[correlation]] with between and value", kind_of(entries), "use double brackets"
            )
            return ()
        seen: dict[frozenset[tuple[str, ...]], int] = {}
        found = []
        for number, entry in enumerate(entries):
            correlation = self.one(number, entry)
            if correlation is None:
                continue
            pair = frozenset((correlation.first, correlation.second))
            if pair in seen:
                self.file.fault(
                    ("correlation", number), "each pair once", f"the pair of [[correlation]] {seen[pair] + 1} again"
                )
            seen[pair] = number
            found.append(correlation)
        self.check_matrix(found, seen)
        return tuple(found)

    def one(self, number: int, entry: dict[str, Any]) -> Correlation | None:
        """Return one correlation, or note what is wrong with it."""
        place: KeyPath = ("correlation", number)
        before = len(self.file.faults)
        for key in entry:
            if key not in ("between", "value"):
                self.file.fault((*place, key), "between or value", key)
        between, value = entry.get("between"), entry.get("value")
        if not (isinstance(between, list) and len(between) == 2 and all(isinstance(b, str) for b in between)):
            self.file.fault((*place, "between"), 'two keys, such as ["mass_1", "mass_2"]', kind_of(between))
            return None
        if isinstance(value, bool) or not isinstance(value, int | float) or not -1.0 <= value <= 1.0:
            self.file.fault((*place, "value"), "a number from -1 to 1", kind_of(value))
        paths = [self.address((*place, "between"), name) for name in between]
        if len(self.file.faults) > before or paths[0] is None or paths[1] is None:
            return None
        if paths[0] == paths[1]:
            self.file.fault((*place, "between"), "two different keys", between[0])
            return None
        return Correlation(paths[0], paths[1], float(value))  # type: ignore[arg-type]  # checked to be a number above

    def address(self, place: KeyPath, name: str) -> tuple[str, ...] | None:
        """Return the path of the quantity that a correlation names."""
        paths = self.addresses.get(name, [])
        if not paths:
            if name.rpartition(".")[2] not in self.file.faulty:  # what is given but wrong has its fault already
                self.file.fault(
                    place, "a quantity given in this file", name, self.file.did_you_mean(name, self.addresses)
                )
            return None
        if len(paths) > 1:
            full = " or ".join(
                sorted(other for other, found in self.addresses.items() if found[0] in paths and "." in other)
            )
            self.file.fault(place, "one quantity", f"{name}, which is given {len(paths)} times", f"write {full}")
            return None
        if self.quantities[paths[0]].exact:
            self.file.fault(place, "a quantity with an uncertainty", f"{name}, which is given as exact")
            return None
        return paths[0]

    def check_matrix(self, correlations: list[Correlation], numbers: Mapping[frozenset[tuple[str, ...]], int]) -> None:
        """Refuse correlations that no set of quantities can have together; `numbers` tells where each pair stands."""
        paths = sorted({path for c in correlations for path in (c.first, c.second)})
        matrix = np.eye(len(paths))
        for c in correlations:
            i, j = paths.index(c.first), paths.index(c.second)
            matrix[i, j] = matrix[j, i] = c.value
        wrong = [paths[k] for k in _contradicting(matrix)]
        if wrong:
            first = min(number for pair, number in numbers.items() if pair <= set(wrong))
            found = f"correlations of {', '.join(path[-1] for path in wrong)} that contradict each other"
            hint = "check signs and values"
            self.file.fault(("correlation", first), "a positive semi-definite matrix", found, hint)


def _contradicting(matrix: FloatArray) -> list[int]:
    """Return the rows of a smallest part of a correlation matrix that is not positive semi-definite; [] for none."""

    def wrong(rows: list[int]) -> bool:
        return bool(rows) and bool(np.linalg.eigvalsh(matrix[np.ix_(rows, rows)])[0] < -1e-12 * len(rows))

    rows = list(range(len(matrix)))
    if not wrong(rows):
        return []
    for row in list(rows):
        fewer = [other for other in rows if other != row]
        rows = fewer if wrong(fewer) else rows
    return rows


def _addresses(system: System) -> dict[str, list[tuple[str, ...]]]:
    """Return what a correlation may call each quantity: its key, and its key with the table before it."""
    addresses: dict[str, list[tuple[str, ...]]] = {}
    for path, _ in system.quantities():
        # a parallax and the elements of the node are no fields
        group = FIELDS[path[1]].group if path[1] in FIELDS else "sky" if path[1] == "parallax" else "orbit"
        head = {"fields": group, "settings": "effects"}.get(path[0], path[0])
        for name in (path[-1], ".".join((head, *path[1:]))):
            addresses.setdefault(name, []).append(path)
    return addresses
