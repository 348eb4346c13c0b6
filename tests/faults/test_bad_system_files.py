"""Every sort of bad system file that a user produces: all faults named, exit code 2, never a traceback."""

from __future__ import annotations

import contextlib
import os
from importlib import resources
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from clockfall.app.main import run
from clockfall.effects.loading import load_host
from clockfall.files.faults import BadFile, Fault
from clockfall.files.system_file import parse_system, read_system

CARDS = load_host().cards
DEMO = resources.files("clockfall.files").joinpath("demo.toml").read_text()


def faults(text: str) -> tuple[Fault, ...]:
    """Return the faults of a system file's text."""
    with pytest.raises(BadFile) as caught:
        parse_system(text, CARDS, name="bad.toml")
    return caught.value.faults


def edited(old: str, new: str) -> str:
    """Return the demo with one piece replaced, which must be there."""
    assert DEMO.count(old) == 1, old
    return DEMO.replace(old, new)


PERIOD = '"0.218540913377(21) d"'

ONE_FAULT: dict[str, tuple[str, str, str, str]] = {
    # name: (text, path, what is found, a piece of the hint or of what was expected)
    "misspelt key": (
        edited("orbital_period  ", "orbital_perod  "),
        "[orbit] orbital_perod",
        "orbital_perod",
        "did you mean orbital_period",
    ),
    "hyphenated key": (
        edited("orbital_period  ", "orbital-period  "),
        "[orbit] orbital-period",
        "orbital-period",
        "did you mean orbital_period",
    ),
    "wrong table": (edited("[sky]", '[sky]\nmass_1 = "1.4 Msun"'), "[sky] mass_1", "mass_1", "belongs in [masses]"),
    "measured in the orbit": (
        edited("[orbit]", '[orbit]\neinstein_delay_amplitude = "2 ms"'),
        "[orbit] einstein_delay_amplitude",
        "einstein_delay_amplitude",
        "belongs in [measured]",
    ),
    "unknown table": (DEMO + '\n[sky_position]\nx = "1"\n', "[sky_position]", "'sky_position'", "a table: system"),
    "missing unit": (edited(PERIOD, '"0.2185"'), "[orbit] orbital_period", "a number without a unit", "0.3230(1) d"),
    "number for a text": (
        edited(PERIOD, "0.2185"),
        "[orbit] orbital_period",
        "the number 0.2185 without a unit",
        'write "0.2185 s"',
    ),
    "wrong unit": (edited(PERIOD, '"0.2185 kg"'), "[orbit] orbital_period", "the unit 'kg'", "converts to 's'"),
    "unknown unit": (edited(PERIOD, '"0.2185 days"'), "[orbit] orbital_period", "the unit 'days'", "a known unit"),
    "unit where none belongs": (
        edited('"0.41730(2)"', '"0.41730(2) d"'),
        "[orbit] eccentricity",
        "the unit 'd'",
        "without a unit",
    ),
    "nan": (edited(PERIOD, "nan"), "[orbit] orbital_period", "the number nan", "quantity"),
    "nan as text": (edited(PERIOD, '"nan d"'), "[orbit] orbital_period", "'nan d'", "leave out what is not known"),
    "infinite": (edited(PERIOD, '"1e400 d"'), "[orbit] orbital_period", "'1e400 d'", "power of ten"),
    "unbound": (edited('"0.41730(2)"', '"1.0(1)"'), "[orbit] eccentricity", "'1.0(1)'", "0 <= eccentricity < 1"),
    "negative period": (edited(PERIOD, '"-0.2 d"'), "[orbit] orbital_period", "'-0.2 d'", "0 < orbital_period"),
    "negative mass": (DEMO + '\n[masses]\nmass_1 = "-1.4 Msun"\n', "[masses] mass_1", "'-1.4 Msun'", "0 < mass_1"),
    "zero distance": (edited('"1.9(2) kpc"', '"0 kpc"'), "[sky] distance", "'0 kpc'", "0 < distance"),
    "decimal comma": (edited(PERIOD, '"0,2185 d"'), "[orbit] orbital_period", "'0,2185 d'", "decimal point"),
    "half a bracket": (edited(PERIOD, '"0.2185(21 d"'), "[orbit] orbital_period", "'0.2185(21 d'", "bracket"),
    "list": (edited(PERIOD, '["0.2185 d"]'), "[orbit] orbital_period", "a list", "quantity"),
    "boolean": (edited(PERIOD, "true"), "[orbit] orbital_period", "the boolean true", "quantity"),
    "date": (edited(PERIOD, "2026-01-01"), "[orbit] orbital_period", "a date or time", "quantity"),
    "table for a value": (edited(PERIOD, "{ value = 1 }"), "[orbit] orbital_period", "a table", "quantity"),
    "value for a table": ("spin = 3\n" + DEMO.split("[spin]")[0], "[spin]", "the number 3", "a table"),
    "epoch as a number": (
        edited('"57241.118205(2)"', "57241.118205"),
        "[orbit] periastron_epoch",
        "the number 57241.118205",
        "loses digits",
    ),
    "epoch as a julian date": (
        edited('"57241.118205(2)"', '"2457241.618205"'),
        "[orbit] periastron_epoch",
        "'2457241.618205'",
        "subtract 2400000.5",
    ),
    "epoch with a unit": (edited('"57241.118205(2)"', '"57241 d"'), "[orbit] periastron_epoch", "the unit 'd'", "MJD"),
    "unknown measurement": (
        edited("einstein_delay_amplitude", "einstein_amplitude"),
        "[measured] einstein_amplitude",
        "einstein_amplitude",
        "did you mean einstein_delay_amplitude",
    ),
    "apparent part of no rate": (
        edited("[apparent]   ", '[apparent]\nshapiro_range = "1 us"\n#'),
        "[apparent] shapiro_range",
        "shapiro_range",
        "<field>_rate",
    ),
    "no name": (edited('name = "Halden 7"', ""), "[system]", "no name", "printed beside every number"),
    "name that is no text": (
        edited('name = "Halden 7"', "name = 7"),
        "[system] name",
        "the number 7",
        "text in quotes",
    ),
    "unknown effect": (
        DEMO + '\n[effects]\nonly = ["quadrupol-decay"]\n',
        "[effects] only",
        "quadrupol-decay",
        "did you mean quadrupole-decay",
    ),
    "effects as a text": (
        DEMO + '\n[effects]\nwithout = "shapiro-delay"\n',
        "[effects] without",
        "the text 'shapiro-delay'",
        "a list of effects",
    ),
    "settings of no effect": (
        DEMO + '\n[effects.shapiro_delay]\nx = "1"\n',
        "[effects] shapiro_delay",
        "shapiro_delay",
        "did you mean shapiro-delay",
    ),
    "settings it does not have": (
        DEMO + '\n[effects.shapiro-delay]\nx = "1"\n',
        "[effects.shapiro-delay] x",
        "x",
        "it has none",
    ),
    "correlation of the unknown": (
        DEMO + '\n[[correlation]]\nbetween = ["eccentricity", "mass_1"]\nvalue = 0.5\n',
        "[correlation.0] between",
        "mass_1",
        "given in this file",
    ),
    "correlation beyond one": (
        DEMO + '\n[[correlation]]\nbetween = ["eccentricity", "distance"]\nvalue = 1.5\n',
        "[correlation.0] value",
        "the number 1.5",
        "from -1 to 1",
    ),
    "correlation of the exact": (
        DEMO + '\n[[correlation]]\nbetween = ["eccentricity", "spin_period_1"]\nvalue = 0.5\n',
        "[correlation.0] between",
        "spin_period_1, which is given as exact",
        "uncertainty",
    ),
    "correlation with itself": (
        DEMO + '\n[[correlation]]\nbetween = ["distance", "distance"]\nvalue = 0.5\n',
        "[correlation.0] between",
        "distance",
        "two different keys",
    ),
    "correlation of two meanings": (
        DEMO + '\n[[correlation]]\nbetween = ["orbital_period_rate", "distance"]\nvalue = 0.5\n',
        "[correlation.0] between",
        "given 2 times",
        "apparent.orbital_period_rate or measured.orbital_period_rate",
    ),
    "single brackets": (
        DEMO + '\n[correlation]\nbetween = ["distance", "eccentricity"]\nvalue = 0.5\n',
        "[correlation]",
        "a table",
        "double brackets",
    ),
    "not toml": (edited("[orbit]", "[orbit"), "", "'[orbit'", "TOML"),
    "quantity without quotes": (edited(PERIOD, "0.218540913377(21) d"), "", "0.218540913377(21) d", "text in quotes"),
    "key given twice": (edited("[orbit]", '[orbit]\neccentricity = "0.4"'), "", "eccentricity", "TOML"),
    "sexagesimal in the wrong place": (
        edited(PERIOD, '"00:12:30"'),
        "[orbit] orbital_period",
        "'00:12:30'",
        "right_ascension and declination alone",
    ),
    "minutes beyond sixty": (
        edited('"08:41:12.30"', '"08:61:12.30"'),
        "[sky] right_ascension",
        "'08:61:12.30'",
        "below 60",
    ),
    "declination beyond the pole": (
        edited('"-17:02:44.1"', '"-97:02:44.1"'),
        "[sky] declination",
        "'-97:02:44.1'",
        "declination <=",
    ),
    "eccentricities that differ": (
        edited("[orbit]", '[orbit]\none_minus_eccentricity = "0.5"'),
        "[orbit] one_minus_eccentricity",
        "0.5",
        "give one of the two",
    ),
}


@pytest.mark.parametrize("name", ONE_FAULT)
def test_one_slip_is_one_fault(name: str) -> None:
    """A slip gives exactly one fault, with its path, its line, what was found, and what was wanted or a hint."""
    text, path, found, said = ONE_FAULT[name]
    (fault,) = faults(text)
    assert fault.path == path
    assert found in fault.found
    assert said in f"{fault.expected} {fault.hint}"
    assert fault.line is not None
    key = path.split(" ")[-1].strip("[]").split(".")[0] or found.strip("'")
    assert key in text.splitlines()[fault.line - 1]


def test_all_faults_come_at_once_in_the_order_of_lines() -> None:
    """A file with many slips gives them all, sorted by line, the whole fitting 80 columns."""
    text = (Path(__file__).parents[2] / "fixtures" / "halden-7-misspelt.toml").read_text()
    with pytest.raises(BadFile) as caught:
        parse_system(text, CARDS, name="halden.toml")
    lines = [fault.line or 0 for fault in caught.value.faults]
    assert len(lines) == 8
    assert lines == sorted(lines)
    assert str(caught.value).startswith("halden.toml: 8 faults\n  line 7, [orbit] orbital_perod\n")
    assert max(len(line) for line in str(caught.value).splitlines()) <= 80


def test_contradicting_correlations_are_named() -> None:
    """Correlations that no three quantities can have together are a fault that names them."""
    pairs = [("eccentricity", "distance"), ("distance", "proper_motion_ra"), ("eccentricity", "proper_motion_ra")]
    text = DEMO + "".join(f'\n[[correlation]]\nbetween = ["{a}", "{b}"]\nvalue = -0.9\n' for a, b in pairs)
    (fault,) = faults(text)
    assert "eccentricity" in fault.found
    assert "contradict" in fault.found


def test_a_pair_correlated_twice_is_a_fault() -> None:
    """A pair may have one correlation only, in either order."""
    entry = '\n[[correlation]]\nbetween = ["{}", "{}"]\nvalue = 0.5\n'
    text = DEMO + entry.format("distance", "eccentricity") + entry.format("eccentricity", "distance")
    (fault,) = faults(text)
    assert fault.path == "[correlation] 1"
    assert "the pair of [[correlation]] 1 again" in fault.found


def write(path: Path, content: bytes) -> Path:
    """Write a file and return its path."""
    path.write_bytes(content)
    return path


def said_of(path: Path, capsys: pytest.CaptureFixture[str]) -> str:
    """Return what the command line says of a bad file, which ends with exit code 2 and no traceback."""
    capsys.readouterr()
    assert run(["decay", str(path)]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert "Traceback" not in captured.err
    assert captured.err.startswith(f"clockfall: {path}: ")
    return captured.err


def test_what_is_no_text_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Binary, empty, missing, directory, huge, deep: each is refused by name with the reason."""
    deep = b"x = " + b"[" * 1000 + b"]" * 1000
    braces = b"x = " + b"{a=" * 1000 + b"1" + b"}" * 1000
    for name, content, expected in (
        ("binary.toml", bytes(range(256)), "not UTF-8"),
        ("empty.toml", b"", "an empty file"),
        ("blank.toml", b" \n\n", "an empty file"),
        ("result.toml", b"\x89HDF\r\n\x1a\n", "an HDF5 file"),
        ("deep.toml", deep, "nested more than 50 deep"),
        ("braces.toml", braces, "nested more than 50 deep"),
        ("keys.toml", b".".join([b"a"] * 5000) + b" = 1", "line 1"),
        ("long.toml", b"x = " + b"9" * 5000, "fault"),
        ("huge.toml", b"#" * 2_000_000, "2000000 bytes"),
        ("zero.toml", b'[system]\nname = "a\x00b"', "TOML"),
        ("windows.toml", b"[system]\r\nname = 3\r\n", "text in quotes"),
    ):
        assert expected in said_of(write(tmp_path / name, content), capsys), name
    assert "a directory" in said_of(tmp_path, capsys)
    assert "no such file" in said_of(tmp_path / "none.toml", capsys)
    assert "did you mean empty.toml?" in said_of(tmp_path / "emtpy.toml", capsys)


def test_a_long_name_or_a_null_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A path that no file system takes is refused like any other."""
    said_of(tmp_path / ("x" * 5000), capsys)
    with pytest.raises(BadFile, match="null"):
        read_system(tmp_path / "a\x00b", CARDS)


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="needs a system with named pipes")
def test_a_pipe_does_not_hang(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A named pipe, which would wait for ever, is refused at once; so is a device."""
    os.mkfifo(tmp_path / "pipe.toml")
    assert "not a regular file" in said_of(tmp_path / "pipe.toml", capsys)
    assert "not a regular file" in said_of(Path("/dev/zero"), capsys)


@pytest.mark.skipif(os.name != "posix", reason="needs POSIX permissions")
def test_no_permission_is_said(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A file that may not be read is refused with the system's reason."""
    path = write(tmp_path / "secret.toml", DEMO.encode())
    path.chmod(0)
    we_are_root = os.geteuid() == 0
    if we_are_root:  # to whom nothing is forbidden
        os.seteuid(65534)
    try:
        assert "Permission denied" in said_of(path, capsys)
    finally:
        if we_are_root:
            os.seteuid(0)


@settings(max_examples=300, deadline=None)
@given(st.data())
def test_any_mutation_gives_faults_or_a_system(data: st.DataObject) -> None:
    """Whatever is cut from, put into or changed in a good file, the answer is a system or faults, nothing else."""
    text = list(DEMO)
    for _ in range(data.draw(st.integers(1, 5))):
        at = data.draw(st.integers(0, len(text) - 1))
        piece = data.draw(st.text(alphabet='0123456789.()+-eE/ dMskpc"=[]{}\n#,±\u2212\x00ä', max_size=6))
        text[at : at + data.draw(st.integers(0, 12))] = piece
    with contextlib.suppress(BadFile):
        parse_system("".join(text), CARDS)


@settings(max_examples=200, deadline=None)
@given(st.binary(max_size=400))
def test_any_bytes_give_faults(tmp_path_factory: pytest.TempPathFactory, content: bytes) -> None:
    """Any bytes at all give faults: no chance text is a whole system."""
    path = write(tmp_path_factory.getbasetemp() / "any.toml", content)
    with pytest.raises(BadFile):
        read_system(path, CARDS)
