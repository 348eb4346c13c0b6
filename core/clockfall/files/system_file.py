"""The system file: TOML in, a System out, or all of its faults at once. Described in DEVELOPERS.md."""

from __future__ import annotations

import datetime
import difflib
import hashlib
import math
import os
import re
import tomllib
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace
from decimal import Decimal
from importlib import resources
from pathlib import Path
from typing import Any, Final, Literal

import numpy as np

from clockfall.analysis.parallax import PRIORS
from clockfall.analysis.system import NodeElements, System, Uncertain
from clockfall.binary.constants import SECONDS_PER_DAY
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import Range
from clockfall.binary.state import FIELDS
from clockfall.effects.card import Card
from clockfall.effects.checks import rate_units
from clockfall.errors import BadInput
from clockfall.files.correlations import CorrelationReader
from clockfall.files.faults import BadFile, Fault
from clockfall.files.quantity import NotAQuantity, Quantity, parse_quantity
from clockfall.files.toml_text import LARGEST_DOUBLE, KeyPath, deepest_nesting, key_lines, kind_of, number_text
from clockfall.files.units import UnitFault, factor

LARGEST_FILE: Final = 2**20
"""Bytes; a system file is a page or two."""

DEEPEST_NESTING: Final = 50
"""A reader of TOML calls itself once for each bracket, and takes a dotted key's parts squared."""

LONGEST_NAME: Final = 200
"""Characters of a system's name, which heads every table."""

MOST_HINTS: Final = 100
"""Faults that get the nearest right name; in a file with more it is the wrong file, and looking is slow."""

FIELD_TABLES: Final = ("orbit", "masses", "sky", "spin")
TABLES: Final = ("system", *FIELD_TABLES, "measured", "apparent", "effects", "correlation")
_HOMES: Final = {
    **{"name": "system", "notes": "system", "only": "effects", "without": "effects"},
    **{"parallax": "sky", "distance_prior": "sky"},
    **dict.fromkeys(("eccentricity_sine", "eccentricity_cosine", "ascending_node_epoch"), "orbit"),
}
"""The tables of keys that are neither a field nor measured."""

_SEXAGESIMAL: Final = re.compile(r"([+-]?)([0-9]{1,3}):([0-9]{1,2}):([0-9].*)")


@dataclass(frozen=True, slots=True)
class SystemFile:
    """A system and the text that it came from.

    Attributes
    ----------
    system : System
        What is known.
    text, sha256 : str
        The whole file and its SHA-256.
    path : str
        Its name.
    """

    system: System
    text: str
    sha256: str
    path: str


def read_system(path: str | os.PathLike[str], cards: Iterable[Card]) -> SystemFile:
    """Read a system file.

    Parameters
    ----------
    cards : iterable of Card
        Of the installed effects: they name the parameters that may be measured, and effects' own parameters.

    Raises
    ------
    BadFile
        With every fault of the file.
    """
    name = os.fspath(path)
    return parse_system(_text(Path(name), name), cards, name=name)


def demo_system(cards: Iterable[Card]) -> SystemFile:
    """Return the invented binary that comes with clockfall."""
    text = resources.files("clockfall.files").joinpath("demo.toml").read_text(encoding="utf-8")
    return parse_system(text, cards, name="demo.toml")


def parse_system(text: str, cards: Iterable[Card], *, name: str = "system") -> SystemFile:
    """Read a system from text; see `read_system`."""
    try:
        sha256 = hashlib.sha256(text.encode()).hexdigest()
    except UnicodeEncodeError as error:
        raise _whole(name, "a system file (TOML text)", "text with half of a character (a lone surrogate)") from error
    toml = text.removeprefix("\ufeff")  # some editors put this mark before UTF-8
    if deepest_nesting(toml) > DEEPEST_NESTING:
        raise _whole(name, "TOML", f"brackets or keys nested more than {DEEPEST_NESTING} deep")
    try:
        tables = tomllib.loads(toml)
    except tomllib.TOMLDecodeError as error:
        raise BadFile(name, [_not_toml(error, toml)]) from error
    except (RecursionError, ValueError, OverflowError) as error:  # an integer too long to read, for instance
        raise _whole(name, "TOML", f"text that cannot be read ({str(error)[:80]})") from error
    system = _Reader(tables, tuple(cards), key_lines(toml)).system(name)
    return SystemFile(system, text, sha256, name)


def _whole(name: str, expected: str, found: str, hint: str = "") -> BadFile:
    return BadFile(name, [Fault("", None, expected, found, hint)])


def _text(path: Path, name: str) -> str:
    """Return the text of a file after checks that nothing about it can harm or hang."""
    expected = "a system file (TOML text)"
    try:
        if not path.exists():
            near = difflib.get_close_matches(path.name, [p.name for p in path.parent.glob("*.toml")], n=1)
            raise _whole(name, expected, "no such file", f"did you mean {near[0]}?" if near else "")
        if not path.is_file():
            raise _whole(name, expected, "a directory" if path.is_dir() else "something that is not a regular file")
        with path.open("rb") as stream:
            content = stream.read(LARGEST_FILE + 1)  # never more, whatever size the file says it has
        size = max(path.stat().st_size, len(content))
        if size > LARGEST_FILE:
            raise _whole(name, f"{expected} of at most {LARGEST_FILE} bytes", f"{size} bytes")
    except (OSError, ValueError) as error:
        if isinstance(error, BadFile):
            raise
        raise _whole(name, expected, f"it cannot be read: {getattr(error, 'strerror', None) or error}") from error
    if not content.strip():
        raise _whole(name, expected, "an empty file")
    try:
        return content.decode("utf-8")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        kind = "an HDF5 file" if content.startswith(b"\x89HDF") else "bytes that are not UTF-8 text"
        hint = "read a result with 'clockfall show'" if content.startswith(b"\x89HDF") else ""
        raise BadFile(name, [Fault("", line, expected, kind, hint)]) from error


def _not_toml(error: tomllib.TOMLDecodeError, text: str) -> Fault:
    message = str(error)
    place = re.search(r"\(at line (\d+), column \d+\)", message)
    line = int(place[1]) if place else text.count("\n") + 1
    said = re.sub(r"\s*\(at .*\)", "", message)
    content = text.split("\n")[line - 1].strip() if line <= text.count("\n") + 1 else ""
    bare = re.match(r"[\w.-]+\s*=\s*[-+.\d]", content)
    hint = "write quantities as text in quotes" if bare else ""
    return Fault("", line, "TOML", f"{content[:60]!r} ({said})", hint)


class _Reader:
    """Reads the tables of one file, gathering faults as it goes."""

    def __init__(self, tables: dict[str, Any], cards: tuple[Card, ...], lines: Mapping[KeyPath, int]) -> None:
        self.tables = tables
        self.cards = {card.name: card for card in cards}
        self.parameters = {p.name: p for card in cards for p in card.predicts}
        self.lines = lines
        self.faults: list[Fault] = []
        self.faulty: set[str] = set()  # the keys that have a fault

    def system(self, file: str) -> System:
        """Return the system, or raise all faults."""
        for name in self.tables:
            if name not in TABLES:
                self.fault((name,), f"a table: {', '.join(TABLES)}", f"{name!r}", self.misplaced(name, TABLES))
        name = self.name()
        fields, epoch, epoch_uncertainty = self.fields()
        node_elements = self.node_elements()
        parallax, distance_prior = self.parallax()
        measured = self.values("measured", self.measured_unit)
        apparent = self.values("apparent", self.apparent_unit)
        settings, choices = self.settings()
        only, without = self.effect_list("only"), self.effect_list("without")
        system = System(
            name=name,
            fields=fields,
            periastron_epoch=epoch,
            periastron_epoch_uncertainty=epoch_uncertainty,
            node_elements=node_elements,
            parallax=parallax,
            distance_prior=distance_prior,
            measured=measured,
            apparent=apparent,
            settings=settings,
            choices=choices,
            only=only,
            without=without or (),
        )
        correlations = CorrelationReader(self, system).read(self.tables.get("correlation", []))
        if self.faults:
            raise BadFile(file, self.faults)
        return replace(system, correlations=correlations)

    # -- faults and places

    def fault(self, path: KeyPath, expected: str, found: str, hint: str = "") -> None:
        """Note a fault at a key path."""
        line = next((self.lines[path[:k]] for k in range(len(path), 0, -1) if path[:k] in self.lines), None)
        self.faults.append(Fault(_shown(path), line, expected, found, hint))
        self.faulty.add(str(path[-1]))

    def nearest(self, name: str, known: Iterable[str]) -> str:
        """Return the nearest of the known names, or ""."""
        near = difflib.get_close_matches(name, [*known], n=1) if len(self.faults) < MOST_HINTS else []
        return near[0] if near else ""

    def did_you_mean(self, name: str, known: Iterable[str]) -> str:
        """Return a hint with the nearest of the known names, or ""."""
        near = self.nearest(name, known)
        return f"did you mean {near}?" if near else ""

    def misplaced(self, name: str, known: Iterable[str]) -> str:
        """Return a hint for an unknown name: where it belongs, or the nearest right one."""
        known = [*known]
        plain = name.replace("-", "_").lower()
        if plain not in known and (home := self.home(plain)):
            return f"{plain} belongs in [{home}]"
        if plain not in known and plain in TABLES:
            return f"[{plain}] is a table of its own"
        names = [*known, *FIELDS, *self.parameters]
        near = self.nearest(plain, names) or self.nearest(name, names)
        if not near:
            return ""
        elsewhere = "" if near in known else f", which belongs in [{self.home(near)}]"
        return f"did you mean {near}{elsewhere}?"

    def home(self, name: str) -> str:
        """Return the table in which a known name belongs, or ""."""
        if name in FIELDS:
            return FIELDS[name].group
        return "measured" if name in self.parameters or _rate_of(name) else _HOMES.get(name, "")

    def table(self, name: str) -> dict[str, Any]:
        """Return a table of the file, empty where it is missing or no table."""
        found = self.tables.get(name, {})
        if isinstance(found, dict):
            return found
        self.fault((name,), f"a table, [{name}]", kind_of(found))
        return {}

    # -- tables

    def name(self) -> str:
        """Return the system's name."""
        table = self.table("system")
        for key in table:
            if key not in ("name", "notes"):
                self.fault(
                    ("system", key), "a key of [system]: name, notes", key, self.misplaced(key, ("name", "notes"))
                )
        for key in ("name", "notes"):
            if key in table and not isinstance(table[key], str):
                self.fault(("system", key), "text in quotes", kind_of(table[key]))
        name = table.get("name")
        if name is None and isinstance(self.tables.get("system", {}), dict):
            self.fault(("system",), '[system] with name = "..."', "no name", "the name is printed beside every number")
        elif isinstance(name, str) and not (name.strip() and name.isprintable() and len(name) <= LONGEST_NAME):
            expected = f"a name of one line, at most {LONGEST_NAME} printable characters"
            self.fault(("system", "name"), expected, repr(name[: LONGEST_NAME + 1]))
        return name if isinstance(name, str) else ""

    def fields(self) -> tuple[dict[str, Uncertain], Epoch | None, Uncertain]:
        """Return the state fields of all their tables, and the epoch apart."""
        fields: dict[str, Uncertain] = {}
        epoch, epoch_uncertainty = None, Uncertain(0.0)
        for table in FIELD_TABLES:
            known = [name for name, description in FIELDS.items() if description.group == table]
            besides = [name for name, home in _HOMES.items() if home == table]
            for key, value in self.table(table).items():
                path = (table, key)
                if key in besides:
                    continue  # `parallax` and `node_elements` read them
                if key not in known:
                    expected = f"a key of [{table}]: {', '.join([*known, *besides])}"
                    self.fault(path, expected, key, self.misplaced(key, [*known, *besides]))
                elif key == "periastron_epoch":
                    epoch, epoch_uncertainty = self.epoch(path, value) or (None, epoch_uncertainty)
                elif (found := self.field(path, value)) is not None:
                    fields[key] = found
        self.check_eccentricity(fields)
        if "parallax" in self.table("sky") and "distance" in fields:
            self.fault(("sky", "parallax"), "a distance or a parallax", "both", "leave one of them out")
        return fields, epoch, epoch_uncertainty

    def node_elements(self) -> NodeElements | None:
        """Return Laplace-Lagrange elements, which stand in the place of those of periastron."""
        orbit = self.table("orbit")
        names = ("eccentricity_sine", "eccentricity_cosine", "ascending_node_epoch")
        given = [name for name in names if name in orbit]
        if not given:
            return None
        for name in names:
            if name not in orbit:
                self.fault(("orbit", given[0]), f"{name} beside it", "none", "the three belong together")
        if "orbital_period" not in orbit:
            self.fault(("orbit", given[0]), "orbital_period beside it", "none")
        for name in ("eccentricity", "one_minus_eccentricity", "longitude_of_periastron", "periastron_epoch"):
            if name in orbit:
                expected = f"either {name} or the elements of the node ({', '.join(names)})"
                self.fault(("orbit", name), expected, "both", "leave one of them out")
        numbers = [self.quantity(("orbit", name), orbit[name], "") for name in names[:2] if name in orbit]
        epoch = self.epoch(("orbit", names[2]), orbit[names[2]]) if names[2] in orbit else None
        sine, cosine = numbers if len(numbers) == 2 else (None, None)
        if sine is None or cosine is None or epoch is None:
            return None
        e = float(np.hypot(sine.value, cosine.value))
        if not e < 1.0:
            self.fault(("orbit", names[0]), "an eccentricity below 1", f"{e:.6g}")
        return NodeElements(sine, cosine, *epoch)

    def parallax(self) -> tuple[Uncertain | None, Literal["none", "volume"]]:
        """Return a parallax [rad] and the prior by which it becomes a distance."""
        sky = self.table("sky")
        prior = sky.get("distance_prior", "none")
        if prior not in PRIORS:
            self.fault(("sky", "distance_prior"), "'none' or 'volume'", kind_of(prior))
        elif "distance_prior" in sky and "parallax" not in sky:
            self.fault(("sky", "distance_prior"), "a parallax beside it", "no parallax")
        found = self.quantity(("sky", "parallax"), sky["parallax"], "rad") if "parallax" in sky else None
        return found, "volume" if prior == "volume" else "none"

    def field(self, path: KeyPath, value: Any) -> Uncertain | None:
        """Return one state field in clockfall's unit."""
        name = str(path[-1])
        description = FIELDS[name]
        if name in ("right_ascension", "declination") and isinstance(value, str) and ":" in value:
            angle = self.sexagesimal(path, value, hours=name == "right_ascension")
            return angle and self.within(path, angle, description.within, "rad", value)
        return self.quantity(path, value, description.unit, description.within)

    def sexagesimal(self, path: KeyPath, text: str, *, hours: bool) -> Uncertain | None:
        """Return an angle [rad] written with colons; the seconds may have an uncertainty, as any quantity may."""
        expected = f'{_example(str(path[-1]), "rad")}, or degrees as in "17.2 deg"'
        match = _SEXAGESIMAL.fullmatch(text.strip().replace("\u2212", "-"))
        try:
            seconds = parse_quantity(match[4] if match else "")
        except NotAQuantity:
            match = None
        if not match or seconds.unit:
            self.fault(path, expected, repr(text[:80]))
        elif int(match[3]) >= 60 or not 0 <= seconds.value < 60:
            self.fault(path, "minutes and seconds below 60", repr(text))
        elif hours and (match[1] == "-" or int(match[2]) >= 24):
            self.fault(path, "hours from 0 to 24", repr(text))
        else:
            return _angle(match, seconds, hours=hours)
        return None

    def check_eccentricity(self, fields: dict[str, Uncertain]) -> None:
        """Refuse e and 1 - e that contradict each other; where both are given, 1 - e counts."""
        if "eccentricity" not in fields or "one_minus_eccentricity" not in fields:
            return
        e, rest = fields["eccentricity"].value, fields["one_minus_eccentricity"].value
        if abs((1.0 - e) - rest) > 2.0 * np.spacing(1.0):
            path = ("orbit", "one_minus_eccentricity")
            self.fault(path, f"1 - eccentricity, {1.0 - e:.6g}", f"{rest:.6g}", "give one of the two")
        del fields["eccentricity"]

    def epoch(self, path: KeyPath, value: Any) -> tuple[Epoch, Uncertain] | None:
        """Return an instant, exactly as written, and its uncertainty [s]."""
        expected = 'an MJD (TDB) as text, such as "57241.118205(2)"'
        if not isinstance(value, str):
            is_number = isinstance(value, int | float) and not isinstance(value, bool)
            hint = f'a bare number loses digits; write "{number_text(value)}"' if is_number else ""
            self.fault(path, expected, kind_of(value), hint)
            return None
        found = self.parsed(path, value, expected)
        if found is None:
            return None
        if found.unit not in ("", "MJD"):
            self.fault(path, expected, f"the unit {found.unit!r}", "epochs are modified Julian dates, without a unit")
            return None
        if abs(found.value) > 10**7:
            self.fault(path, expected, f"{value!r}, more than 27000 years from MJD 0")
            return None
        if Decimal(2400000) < found.value < Decimal(2600000):
            self.fault(path, expected, f"{value!r}", "this looks like a Julian date; subtract 2400000.5")
            return None
        plus, minus = (float(side) * SECONDS_PER_DAY for side in (found.plus, found.minus))
        return Epoch.from_decimal(found.value), Uncertain(0.0, plus, minus)

    def values(self, table: str, unit_of: Callable[[str], str | None]) -> dict[str, Uncertain]:
        """Return the quantities of [measured] or [apparent]."""
        found: dict[str, Uncertain] = {}
        for key, value in self.table(table).items():
            unit = unit_of(key)
            if unit is None:
                rates = [f"{name}_rate" for name in FIELDS if name != "periastron_epoch"]
                known = rates if table == "apparent" else [*rates, *self.parameters]
                expected = (
                    "<field>_rate" if table == "apparent" else "<field>_rate or a parameter that an effect predicts"
                )
                self.fault((table, key), expected, key, self.misplaced(key, known))
            elif (quantity := self.quantity((table, key), value, unit)) is not None:
                found[key] = quantity
        return found

    def measured_unit(self, key: str) -> str | None:
        """Return the unit of something measured, or None where it is nothing known."""
        return self.parameters[key].unit if key in self.parameters else self.apparent_unit(key)

    def apparent_unit(self, key: str) -> str | None:
        """Return the unit of a rate, or None where it is none."""
        field = _rate_of(key)
        return rate_units(field)[0] if field else None

    def settings(self) -> tuple[dict[str, dict[str, Uncertain]], dict[str, dict[str, str]]]:
        """Return the own parameters of effects, and their choices."""
        found: dict[str, dict[str, Uncertain]] = {}
        choices: dict[str, dict[str, str]] = {}
        for name, table in self.table("effects").items():
            if name in ("only", "without"):
                continue
            card = self.cards.get(name)
            if card is None:
                expected = f"an installed effect, only or without (effects: {', '.join(self.cards)})"
                hint = self.did_you_mean(name.replace("_", "-"), [*self.cards, "only", "without"])
                self.fault(("effects", name), expected, name, hint)
            elif not isinstance(table, dict):
                self.fault(("effects", name), f"a table, [effects.{name}]", kind_of(table))
            else:
                choices[name] = self.own_choices(card, table)
                found[name] = self.own_parameters(card, {k: v for k, v in table.items() if not card.choice(k)})
        return found, {name: words for name, words in choices.items() if words}

    def own_choices(self, card: Card, table: dict[str, Any]) -> dict[str, str]:
        """Return the words chosen for one effect."""
        found = {}
        for choice in card.choices:
            word = table.get(choice.name)
            if word is None:
                continue
            if not isinstance(word, str) or word not in choice.words:
                expected = f"one of {', '.join(repr(w) for w in choice.words)}"
                hint = self.did_you_mean(word, choice.words) if isinstance(word, str) else ""
                self.fault(("effects", card.name, choice.name), expected, kind_of(word), hint)
            else:
                found[choice.name] = word
        return found

    def own_parameters(self, card: Card, table: dict[str, Any]) -> dict[str, Uncertain]:
        """Return one effect's own parameters, each in its declared unit."""
        found = {}
        for key, value in table.items():
            own = card.own(key)
            path = ("effects", card.name, key)
            if own is None:
                known = [item.name for items in (card.parameters, card.choices) for item in items]
                expected = f"a parameter of {card.name}: {', '.join(known) or 'it has none'}"
                self.fault(path, expected, key, self.did_you_mean(key.replace("-", "_"), known))
            elif (quantity := self.quantity(path, value, own.unit, own.within)) is not None:
                found[key] = quantity
        return found

    def effect_list(self, key: str) -> tuple[str, ...] | None:
        """Return [effects] only or without."""
        names = self.table("effects").get(key)
        if names is None:
            return None
        wrong = [name for name in names if not isinstance(name, str)] if isinstance(names, list) else [names]
        if wrong:
            within = " in the list" if isinstance(names, list) else ""
            self.fault(("effects", key), 'a list of effects, such as ["shapiro-delay"]', kind_of(wrong[0]) + within)
            return None
        for name in names:
            if name not in self.cards:
                hint = self.did_you_mean(name.replace("_", "-"), self.cards)
                self.fault(("effects", key), "an installed effect", name, hint)
        return tuple(names)

    # -- quantities

    def parsed(self, path: KeyPath, text: str, expected: str) -> Quantity | None:
        """Return a quantity as written."""
        try:
            return parse_quantity(text)
        except NotAQuantity as error:
            self.fault(path, expected, repr(text[:80]), error.hint)
            return None

    def quantity(self, path: KeyPath, value: Any, unit: str, within: Range | None = None) -> Uncertain | None:
        """Return a quantity in `unit`, inside its range."""
        expected = "a quantity as text, such as " + _example(str(path[-1]), unit)
        if isinstance(value, int | float) and not isinstance(value, bool):
            if factor_or_none("", unit) is None:
                hint = f'write "{number_text(value)} {_usual(unit)}"' if abs(value) <= LARGEST_DOUBLE else ""
                self.fault(path, expected, f"{kind_of(value)} without a unit", hint)
                return None
            found: Quantity | None = self.parsed(path, number_text(value), expected)
        elif isinstance(value, str):
            found = self.parsed(path, value, expected)
        else:
            is_time = isinstance(value, datetime.date | datetime.time)
            self.fault(path, expected, kind_of(value), "write it in quotes" if is_time else "")
            return None
        if found is None:
            return None
        try:
            scale = factor(found.unit, unit)
        except UnitFault as error:
            self.fault(path, error.expected, error.found, error.hint or f"such as {_example(str(path[-1]), unit)}")
            return None
        numbers = [float(number) * scale for number in (found.value, found.plus, found.minus)]
        if not all(math.isfinite(number) for number in numbers):
            self.fault(path, expected, f"{value!r}, beyond the largest double")
            return None
        return self.within(path, Uncertain(*numbers), within, unit, value)

    def within(
        self, path: KeyPath, quantity: Uncertain, within: Range | None, unit: str, written: Any
    ) -> Uncertain | None:
        """Return the quantity if its value lies inside its range."""
        if within is not None and not within.holds(quantity.value):
            close = path[-1] == "eccentricity" and quantity.value == 1.0
            hint = "a double cannot tell it from 1; give one_minus_eccentricity" if close else ""
            self.fault(path, within.text(str(path[-1]), unit), f"{written!r}", hint)
            return None
        return quantity


def _shown(path: KeyPath) -> str:
    """Return a key path as a fault names it: ``[orbit] eccentricity``, ``[[correlation]] 1, value``."""
    if path[0] == "correlation" and len(path) > 1:
        number, *rest = path[1:]
        return ", ".join([f"[[correlation]] {int(number) + 1}", *(str(part) for part in rest)])
    table, key = (path[:-1], str(path[-1])) if len(path) > 1 else (path, "")
    return f"[{'.'.join(str(part) for part in table)}] {key}".strip()


def factor_or_none(unit_from: str, unit_to: str) -> float | None:
    """Return the factor between two units, or None where they do not fit."""
    try:
        return factor(unit_from, unit_to)
    except BadInput:
        return None


def _rate_of(key: str) -> str:
    """Return the field whose rate `key` names, or ""."""
    field = key.removesuffix("_rate")
    return field if field != key and field in FIELDS and field != "periastron_epoch" else ""


def _usual(unit: str) -> str:
    """Return the unit in which people write a quantity that is `unit` inside."""
    usual = {"s": "s", "rad": "deg", "rad/s": "deg/yr", "Msun": "Msun", "ls": "s", "1/s": "1/yr", "Msun ls2": "g cm2"}
    return usual.get(unit, unit)


def _example(key: str, unit: str) -> str:
    """Return an example of a quantity for a fault's message."""
    examples = {
        "orbital_period": '"0.3230(1) d"',
        "distance": '"1.9(2) kpc"',
        "eccentricity": '"0.617(1)"',
        "orbital_period_rate": '"-2.40(1)e-12"',
        "right_ascension": '"08:41:12.30"',
        "declination": '"-17:02:44.1"',
    }
    return examples.get(key, f'"1.23(4) {_usual(unit)}"' if unit not in ("", "s/s") else '"1.23(4)"')


def _angle(match: re.Match[str], seconds: Quantity, *, hours: bool) -> Uncertain:
    """Return a sexagesimal angle [rad]."""
    unit = math.pi / 12.0 if hours else math.pi / 180.0
    value = (int(match[2]) + int(match[3]) / 60.0 + float(seconds.value) / 3600.0) * unit
    plus, minus = (float(side) / 3600.0 * unit for side in (seconds.plus, seconds.minus))
    return Uncertain(-value, minus, plus) if match[1] == "-" else Uncertain(value, plus, minus)
