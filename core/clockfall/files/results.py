"""Result files: one HDF5 layout for every command, described in DEVELOPERS.md.

h5py is used here alone. A file from a stranger is only data: nothing in it is executed or followed, and sizes are
checked before anything is read.
"""

from __future__ import annotations

import dataclasses
import hashlib
import json
import math
import os
import platform
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from types import MappingProxyType
from typing import Any, Final

import numpy as np

from clockfall.analysis.draws import MOST_DRAWS
from clockfall.analysis.outcome import Column, Drawn, Finding, Outcome, Said, UsedEffect
from clockfall.analysis.study import Choices
from clockfall.binary.constants import CONSTANTS
from clockfall.binary.epoch import Epoch
from clockfall.errors import BadInput
from clockfall.files.units import cf_units
from clockfall.files.whole import written_whole

FORMAT_NAME: Final = "clockfall result"
FORMAT_VERSION: Final = 1
"""Raised by one whenever a reader of the last version would misread a file; see DEVELOPERS.md for what changed."""

LARGEST_FILE: Final = 2**32
MOST_VARIABLES: Final = 4096
_LIBRARIES: Final = ("numpy", "scipy", "h5py", "pluggy")


class BadResultFile(BadInput):
    """A file cannot be read as a result.

    Attributes
    ----------
    file, reason : str
        Which, and why.
    """

    def __init__(self, file: str | os.PathLike[str], reason: str) -> None:
        self.file = os.fspath(file)
        self.reason = reason
        super().__init__(f"{self.file}: {reason}")


@dataclass(frozen=True, slots=True)
class Result:
    """An outcome and all that is needed to repeat it.

    Attributes
    ----------
    command : str
        The analysis.
    choices : Choices
        What the user chose beside the system file.
    system_text : str
        The whole system file.
    outcome : Outcome
        What was found.
    versions : mapping of str to str
        Of clockfall, Python and the libraries that computed it.
    """

    command: str
    choices: Choices
    system_text: str
    outcome: Outcome
    versions: Mapping[str, str]

    @property
    def system_sha256(self) -> str:
        """SHA-256 of the system file's text."""
        return hashlib.sha256(self.system_text.encode()).hexdigest()


def current_versions() -> dict[str, str]:
    """Return the versions of what computes here."""
    return {
        "clockfall": version("clockfall"),
        "python": platform.python_version(),
        **{library: version(library) for library in _LIBRARIES},
    }


def write_result(path: Path, result: Result, *, overwrite: bool = False) -> None:
    """Write a result file whole or not at all.

    Raises
    ------
    CannotWrite
        The target exists (without `overwrite`), or the system refuses.
    """
    import h5py  # 0.2 s, needed only with a file

    with written_whole(path, overwrite=overwrite) as unfinished, h5py.File(unfinished, "w", libver="earliest") as file:
        _write(file, result)
        file.flush()


def _write(file: Any, result: Result) -> None:
    import h5py  # as above

    text = h5py.string_dtype("utf-8")
    outcome = result.outcome
    attributes: dict[str, Any] = {
        "Conventions": "CF-1.11",
        "title": f"clockfall {result.command}: {outcome.facts.get('system', '')}",
        "format_name": FORMAT_NAME,
        "format_version": FORMAT_VERSION,
        "command": result.command,
        "choices": json.dumps(dataclasses.asdict(dataclasses.replace(result.choices, times=None))),
        "facts": json.dumps(dict(outcome.facts)),
        "draws": outcome.draws,
        "seed": outcome.seed,
        "system_sha256": result.system_sha256,
        **{f"version_{name}": number for name, number in result.versions.items()},
    }
    for name, value in attributes.items():
        file.attrs[name] = value
    for name, (number, unit, source) in CONSTANTS.items():
        constant = file.create_dataset(f"constant_{name}", data=number)
        constant.attrs.update({"units": unit, "long_name": name.replace("_", " "), "source": source})
    file.create_dataset("system_text", data=result.system_text, dtype=text)
    if outcome.draws:
        _scale(file, "draw", np.arange(1, outcome.draws + 1), "number of the draw")
    for number, finding in enumerate(outcome.findings):
        _write_finding(file, finding, number)
    if outcome.columns:
        _scale(file, "row", np.arange(1, outcome.columns[0].values.size + 1), "number of the row")
    for number, column in enumerate(outcome.columns):
        _write_column(file, column, number)
    for table, rows in _text_tables(outcome).items():
        if rows:
            _write_table(file, table, rows, text)


def _scale(file: Any, name: str, values: Any, long_name: str) -> None:
    """Write a coordinate of its own dimension."""
    scale = file.create_dataset(name, data=values)
    scale.attrs["long_name"] = long_name
    scale.make_scale(name)


def _write_finding(file: Any, finding: Finding, number: int) -> None:
    drawn = finding.drawn
    has_draws = drawn.draws.size > 0
    dataset = file.create_dataset(finding.name, data=drawn.draws if has_draws else drawn.central, dtype="f8")
    if has_draws:
        dataset.dims[0].attach_scale(file["draw"])
    low, high = drawn.interval or (math.nan, math.nan)
    attributes: dict[str, Any] = {
        "units": cf_units(finding.unit),
        "long_name": finding.meaning,
        "central_value": drawn.central,
        "lower": low,
        "upper": high,
        "draws_set_aside": drawn.set_aside,
        "unit": finding.unit,
        "shown_in": finding.shown_in,
        "quantity": finding.quantity,
        "role": finding.role,
        "order": number,
        "effect": finding.effect,
        "nature": finding.nature,
        "sources": "\n".join(finding.sources),
    }
    for name, value in attributes.items():
        if value != "":
            dataset.attrs[name] = value


def _write_column(file: Any, column: Column, number: int) -> None:
    dataset = file.create_dataset(column.name, data=column.values)
    dataset.dims[0].attach_scale(file["row"])
    attributes: dict[str, Any] = {
        "units": cf_units(column.unit),
        "long_name": column.meaning,
        "column": number,
        "unit": column.unit,
        "shown_in": column.shown_in,
        "effect": column.effect,
        "nature": column.nature,
        "sources": "\n".join(column.sources),
    }
    for name, value in attributes.items():
        if value != "":
            dataset.attrs[name] = value


def _text_tables(outcome: Outcome) -> dict[str, list[dict[str, str]]]:
    """Return the tables of text: dimension -> rows of columns."""
    return {
        "used": [dataclasses.asdict(effect) for effect in outcome.used],
        "idle": [dataclasses.asdict(said) for said in outcome.idle],
        "failed": [dataclasses.asdict(said) for said in outcome.failed],
        "caution": [dataclasses.asdict(said) for said in outcome.cautions],
    }


def _write_table(file: Any, table: str, rows: list[dict[str, str]], text: Any) -> None:
    _scale(file, table, np.arange(1, len(rows) + 1), f"number of the row about {table}")
    for column in rows[0]:
        dataset = file.create_dataset(f"{table}_{column}", data=[row[column] for row in rows], dtype=text)
        dataset.attrs["long_name"] = f"{column} ({table} effects)" if table != "caution" else f"caution: {column}"
        dataset.dims[0].attach_scale(file[table])


def read_result(path: str | os.PathLike[str]) -> Result:
    """Read a result file.

    Raises
    ------
    BadResultFile
        It is no result file, cut short, damaged, of a newer format, too large, or holds anything but plain data
        of its own (links, external storage, virtual datasets, foreign filters).
    """
    import h5py  # as above

    file_path = Path(path)
    _check_plain_file(file_path)
    try:
        is_hdf5 = h5py.is_hdf5(file_path)
        with h5py.File(file_path, "r") as file:
            _refuse_what_is_not_plain(file, file_path)
            return _read(file, file_path)
    except BadResultFile:
        raise
    except OSError as error:
        reason = "is cut short or damaged" if is_hdf5 else "is not an HDF5 file"
        raise BadResultFile(path, f"{reason} ({_first_line(error)})") from error
    except (KeyError, ValueError, TypeError, AttributeError, RuntimeError, IndexError, RecursionError) as error:
        raise BadResultFile(path, f"is damaged, or not written by clockfall ({_first_line(error)})") from error


def _first_line(error: BaseException) -> str:
    return (str(error).splitlines() or [type(error).__name__])[0][:160]


def _check_plain_file(path: Path) -> None:
    try:
        if not path.exists():
            raise BadResultFile(path, "there is no such file")
        if not path.is_file():
            raise BadResultFile(path, "is not a regular file")
        size = path.stat().st_size
        if size == 0:
            raise BadResultFile(path, "is empty")
        if size > LARGEST_FILE:
            raise BadResultFile(path, f"is larger than {LARGEST_FILE} bytes, more than any result of one system")
        with path.open("rb"):
            pass
    except (OSError, ValueError) as error:
        if isinstance(error, BadResultFile):
            raise
        raise BadResultFile(path, f"cannot be read ({getattr(error, 'strerror', None) or error})") from error


def _refuse_what_is_not_plain(file: Any, path: Path) -> None:
    """Refuse anything that points out of the file, or that would run foreign code or fill the memory."""
    import h5py  # as above

    if len(file) > MOST_VARIABLES:
        raise BadResultFile(path, f"holds {len(file)} variables, more than {MOST_VARIABLES}")
    for name in file:
        link = file.get(name, getlink=True)
        if not isinstance(link, h5py.HardLink):
            raise BadResultFile(path, f"holds a link ({type(link).__name__}) at {name!r}; a result holds none")
        item = file[name]
        if not isinstance(item, h5py.Dataset):
            raise BadResultFile(path, f"holds a group at {name!r}; a result holds none")
        if item.external or item.is_virtual:
            raise BadResultFile(path, f"keeps the data of {name!r} outside itself; a result holds its own data")
        if item.id.get_create_plist().get_nfilters():
            raise BadResultFile(path, f"packs {name!r} by a filter; a result is not packed")
        if item.size is None or item.size > MOST_DRAWS:
            raise BadResultFile(path, f"{name!r} has {item.size} elements, more than {MOST_DRAWS}")


def _read(file: Any, path: Path) -> Result:
    if file.attrs.get("format_name") != FORMAT_NAME:
        raise BadResultFile(path, "is an HDF5 file, but not a clockfall result")
    number = int(file.attrs["format_version"])
    if number > FORMAT_VERSION:
        raise BadResultFile(
            path, f"has format version {number}, newer than the version {FORMAT_VERSION} that this clockfall reads"
        )
    if number < 1:
        raise BadResultFile(path, f"has format version {number}, which never was")
    draws = int(file.attrs["draws"])
    findings = sorted(_read_findings(file, draws), key=lambda numbered: numbered[0])
    tables = {name: _read_table(file, name) for name in ("used", "idle", "failed", "caution")}
    outcome = Outcome(
        findings=tuple(finding for _, finding in findings),
        facts=MappingProxyType({str(k): str(v) for k, v in json.loads(file.attrs["facts"]).items()}),
        used=tuple(UsedEffect(**row) for row in tables["used"]),
        idle=tuple(Said(**row) for row in tables["idle"]),
        failed=tuple(Said(**row) for row in tables["failed"]),
        cautions=tuple(Said(**row) for row in tables["caution"]),
        draws=draws,
        seed=int(file.attrs["seed"]),
        columns=tuple(column for _, column in sorted(_read_columns(file), key=lambda numbered: numbered[0])),
    )
    text = str(file["system_text"].asstr()[()])
    prefix = "version_"
    versions = {name.removeprefix(prefix): str(v) for name, v in file.attrs.items() if name.startswith(prefix)}
    result = Result(str(file.attrs["command"]), _read_choices(file), text, outcome, MappingProxyType(versions))
    if result.system_sha256 != file.attrs["system_sha256"]:
        raise BadResultFile(path, "its system file does not have the recorded SHA-256; it was changed or damaged")
    return result


def _read_choices(file: Any) -> Choices:
    raw = json.loads(file.attrs["choices"])
    only = raw["only"]
    return Choices(
        draws=int(raw["draws"]),
        seed=int(raw["seed"]),
        only=None if only is None else tuple(str(name) for name in only),
        without=tuple(str(name) for name in raw["without"]),
        use=tuple(str(name) for name in raw["use"]),
        solve_for=str(raw.get("solve_for", "")),
        limit=str(raw.get("limit", "")),
        times=_read_times(file) if not raw.get("phases", 1) else None,
        phases=int(raw.get("phases", 24)),
        by="emission" if raw.get("by") == "emission" else "arrival",
        rates="measured" if raw.get("rates") == "measured" else "predicted",
    )


def _read_times(file: Any) -> Epoch:
    """Return the times of a table of delays, which its choices name by their columns alone."""
    return Epoch(np.asarray(file["time_day"][()]), np.asarray(file["time_fraction"][()]))


def _read_columns(file: Any) -> Iterator[tuple[int, Column]]:
    rows = len(file["row"]) if "row" in file else 0
    for name, dataset in file.items():
        attributes = dataset.attrs
        if "column" not in attributes:
            continue
        values = np.asarray(dataset[()])
        if values.shape != (rows,) or values.dtype.kind not in "fi":
            raise ValueError(f"{name} has shape {values.shape}, expected ({rows},) numbers")
        values = values.astype(np.int64 if values.dtype.kind == "i" else np.float64)
        text = {key: str(attributes.get(key, "")) for key in ("unit", "shown_in", "effect", "nature")}
        sources = tuple(str(attributes["sources"]).split("\n")) if "sources" in attributes else ()
        column = Column(name, values, meaning=str(attributes.get("long_name", "")), sources=sources, **text)
        yield int(attributes["column"]), column


def _read_findings(file: Any, draws: int) -> Iterator[tuple[int, Finding]]:
    for dataset in file.values():
        attributes = dataset.attrs
        if "quantity" not in attributes:
            continue
        values = np.asarray(dataset[()], dtype=np.float64)
        if values.shape not in ((), (draws,)):
            raise ValueError(f"{dataset.name} has shape {values.shape}, expected () or ({draws},)")
        text = {name: str(attributes.get(name, "")) for name in ("unit", "shown_in", "role", "effect", "nature")}
        finding = Finding(
            quantity=str(attributes["quantity"]),
            drawn=Drawn(float(attributes["central_value"]), values if values.shape else np.empty(0)),
            meaning=str(attributes.get("long_name", "")),
            sources=tuple(str(attributes["sources"]).split("\n")) if "sources" in attributes else (),
            **text,
        )
        yield int(attributes["order"]), finding


def _read_table(file: Any, table: str) -> list[dict[str, str]]:
    prefix = f"{table}_"
    columns = {
        name.removeprefix(prefix): file[name].asstr()[()]
        for name in file
        if name.startswith(prefix) and "quantity" not in file[name].attrs
    }
    length = len(file[table]) if table in file else 0
    return [{column: str(values[row]) for column, values in columns.items()} for row in range(length)]
