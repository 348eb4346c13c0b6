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
    "infinite": (edited(PERIOD, '"1e400 d"'), "[orbit] orbital_period", "'1e400 d'", "largest double"),
    "infinite in seconds": (edited(PERIOD, '"1e307 d"'), "[orbit] orbital_period", "beyond the largest double", "d"),
    "integer without end": (
        edited(PERIOD, "0x" + "f" * 5000),
        "[orbit] orbital_period",
        "the number beyond 1.8e308 without a unit",
        "quantity",
    ),
    "integer without end, no unit": (
        edited('"0.41730(2)"', "0x" + "f" * 5000),
        "[orbit] eccentricity",
        "beyond 1.8e308",
        "quantity",
    ),
    "epoch without end": (
        edited('"57241.118205(2)"', '"1e200"'),
        "[orbit] periastron_epoch",
        "more than 27000 years",
        "MJD",
    ),
    "power on one side": (
        edited('"-1.086(9)e-12"', '"-1.086 +/- 0.009e-12"'),
        "[measured] orbital_period_rate",
        "'-1.086 +/- 0.009e-12'",
        "bracket the numbers",
    ),
    "eccentricity that a double rounds to 1": (
        edited('"0.41730(2)"', '"0.99999999999999999999"'),
        "[orbit] eccentricity",
        "0.99999999999999999999",
        "give one_minus_eccentricity",
    ),
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
    "key of the system before its table": (
        'notes = "none"\n' + DEMO,
        "[notes]",
        "'notes'",
        "notes belongs in [system]",
    ),
    "table within another": (
        edited("[orbit]", "[orbit]\nsky.distance = 1"),
        "[orbit] sky",
        "sky",
        "[sky] is a table of its own",
    ),
    "quoted key": (
        edited("[orbit]", '[orbit]\n"one_minus_eccentrcity" = "0.5"'),
        "[orbit] one_minus_eccentrcity",
        "one_minus_eccentrcity",
        "did you mean one_minus_eccentricity",
    ),
    "name that is empty": (edited('"Halden 7"', '" "'), "[system] name", "' '", "one line"),
    "name that acts on a terminal": (
        edited('"Halden 7"', '"\\u001b[31mHalden"'),
        "[system] name",
        "\\x1b[31mHalden",
        "printable",
    ),
    "name without end": (edited('"Halden 7"', f'"{"7" * 300}"'), "[system] name", "777", "at most 200"),
    "system that is no table": (
        "system = 3\n" + DEMO.partition("[orbit]")[2].partition("[measured]")[2].join(["[measured]", ""]),
        "[system]",
        "the number 3",
        "a table",
    ),
    "effects that are no table": ("effects = 3\n" + DEMO, "[effects]", "the number 3", "a table"),
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
        "[[correlation]] 1, between",
        "mass_1",
        "given in this file",
    ),
    "correlation beyond one": (
        DEMO + '\n[[correlation]]\nbetween = ["eccentricity", "distance"]\nvalue = 1.5\n',
        "[[correlation]] 1, value",
        "the number 1.5",
        "from -1 to 1",
    ),
    "correlation of the exact": (
        DEMO + '\n[[correlation]]\nbetween = ["eccentricity", "spin_period_1"]\nvalue = 0.5\n',
        "[[correlation]] 1, between",
        "spin_period_1, which is given as exact",
        "uncertainty",
    ),
    "correlation with itself": (
        DEMO + '\n[[correlation]]\nbetween = ["distance", "distance"]\nvalue = 0.5\n',
        "[[correlation]] 1, between",
        "distance",
        "two different keys",
    ),
    "correlation of two meanings": (
        DEMO + '\n[[correlation]]\nbetween = ["orbital_period_rate", "distance"]\nvalue = 0.5\n',
        "[[correlation]] 1, between",
        "given 2 times",
        "apparent.orbital_period_rate or measured.orbital_period_rate",
    ),
    "single brackets": (
        DEMO + '\n[correlation]\nbetween = ["distance", "eccentricity"]\nvalue = 0.5\n',
        "[correlation]",
        "a table",
        "double brackets",
    ),
    "correlation of what is wrong itself": (
        edited('"1.9(2) kpc"', '"1.9(2) kcp"')
        + '\n[[correlation]]\nbetween = ["eccentricity", "distance"]\nvalue = 0.5\n',
        "[sky] distance",
        "'kcp'",
        "did you mean kpc",
    ),
    "list of effects with a number": (
        DEMO + '\n[effects]\nonly = ["shapiro-delay", 3]\n',
        "[effects] only",
        "the number 3 in the list",
        "a list of effects",
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
    "angle without seconds": (
        edited('"08:41:12.30"', '"08:41"'),
        "[sky] right_ascension",
        "'08:41'",
        "08:41:12.30",
    ),
    "angle with a unit": (
        edited('"-17:02:44.1"', '"-17:02:44.1 deg"'),
        "[sky] declination",
        "'-17:02:44.1 deg'",
        "-17:02:44.1",
    ),
    "angle without quotes": (edited('"08:41:12.30"', "08:41:12.30"), "[sky] right_ascension", "time", "in quotes"),
    "hour beyond the day": (
        edited('"08:41:12.30"', '"24:00:00"'),
        "[sky] right_ascension",
        "'24:00:00'",
        "hours from 0 to 24",
    ),
    "negative hours": (
        edited('"08:41:12.30"', '"-00:41:12.30"'),
        "[sky] right_ascension",
        "'-00:41:12.30'",
        "hours from 0 to 24",
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
    """Correlations that no three quantities can have together are a fault that names those three and no other."""
    pairs = [("orbital_period", "periastron_epoch"), ("periastron_epoch", "distance")]
    pairs += [("eccentricity", "distance"), ("distance", "proper_motion_ra"), ("eccentricity", "proper_motion_ra")]
    values = [0.5, 0.1, -0.9, -0.9, -0.9]
    entries = [
        f'\n[[correlation]]\nbetween = ["{a}", "{b}"]\nvalue = {v}\n' for (a, b), v in zip(pairs, values, strict=True)
    ]
    (fault,) = faults(DEMO + "".join(entries))
    assert fault.found == "correlations of distance, eccentricity, proper_motion_ra that contradict each other"
    assert fault.path == "[[correlation]] 3"
    # the same three with signs that can be
    parse_system(DEMO + "".join(entries).replace("-0.9", "0.9"), CARDS)


def test_a_pair_correlated_twice_is_a_fault() -> None:
    """A pair may have one correlation only, in either order."""
    entry = '\n[[correlation]]\nbetween = ["{}", "{}"]\nvalue = 0.5\n'
    text = DEMO + entry.format("distance", "eccentricity") + entry.format("eccentricity", "distance")
    (fault,) = faults(text)
    assert fault.path == "[[correlation]] 2"
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
        ("keys.toml", b".".join([b"a"] * 50000) + b" = 1", "nested more than 50 deep"),
        ("quoted.toml", b" . ".join([b'"a"'] * 5000) + b" = 1", "nested more than 50 deep"),
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


def test_a_mark_before_the_text_is_no_fault(tmp_path: Path) -> None:
    """A byte order mark, which some editors write, does no harm; it stays in the text that is kept."""
    file = read_system(write(tmp_path / "mark.toml", b"\xef\xbb\xbf" + DEMO.encode()), CARDS)
    assert file.system.name == "Halden 7"
    assert file.text == "\ufeff" + DEMO


def test_prose_is_neither_nested_nor_a_key() -> None:
    """Brackets, full stops and lines like keys in strings and comments count for nothing."""
    prose = f'notes = """\n[orbit]\neccentricity = 3\n{"[" * 99} {"a." * 99}"""\n# {"{" * 99}{"x.y" * 99}\n'
    text = edited('name = "Halden 7"\n', f'name = "Halden 7"\n{prose}').replace('"0.41730(2)"', '"1.41730(2)"')
    (fault,) = faults(text)
    assert fault.line is not None
    assert text.split("\n")[fault.line - 1].endswith('"1.41730(2)"')


def test_a_key_cannot_act_on_the_terminal() -> None:
    """Control characters of keys are printed as what they are, and no line is wider than 80 columns."""
    with pytest.raises(BadFile) as caught:
        parse_system(edited("[orbit]", '[orbit]\n"\\u001b[31mred\\n' + "k" * 200 + '" = 1'), CARDS, name="a\x1b.toml")
    said = str(caught.value)
    assert "[orbit] \\x1b[31mred\\x0ak" in said
    assert "\x1b" not in said
    assert max(len(line) for line in said.splitlines()) <= 80


def test_a_wrong_file_is_told_in_good_time() -> None:
    """Twenty thousand faults are all told; looking for the nearest name of each would take half a minute."""
    keys = [f"orbital_perod_{i}" for i in range(20_000)]
    found = faults('[system]\nname = "x"\n[orbit]\n' + "\n".join(f"{key} = 1" for key in keys))
    assert [fault.found for fault in found] == keys
    assert sum(bool(fault.hint) for fault in found) == 100


@pytest.mark.parametrize("text", ['[system]\nname = "\ud800"\n', "\ud800"])
def test_half_a_character_is_a_fault(text: str) -> None:
    """Text from within Python that no file can hold is a fault too."""
    assert "surrogate" in faults(text)[0].found


NAMES = ["system", "orbit", "masses", "sky", "measured", "apparent", "effects", "correlation", "name", "eccentricity"]
NAMES += ["mass_1", "declination", "right_ascension", "periastron_epoch", "orbital_period_rate", "between", "value"]
NAMES += ["galactic-acceleration", "sun_distance", "only", "without", "parallax", "distance_prior", "inclination", "x"]
key = st.lists(st.sampled_from(NAMES), min_size=1, max_size=3).map(".".join)
scalar = st.one_of(
    st.sampled_from(
        ['"1.4(1) Msun"', '"08:41:12"', '"-00:00:01(2)"', '"57241.1"', '"0.1 kpc"', '"1e-400"', '"3 d2"', '""']
    ),
    st.sampled_from(
        ["true", "nan", "-inf", "1e400", "2026-01-01", "08:41:12", "2026-01-01T00:00:00Z", f"0x{'f' * 4000}"]
    ),
    st.floats().map(repr),
    st.integers().map(str),
    st.sampled_from([f'"{name}"' for name in NAMES]),
)
some_value = st.recursive(
    scalar,
    lambda inner: st.one_of(
        st.lists(inner, max_size=3).map(lambda items: f"[{', '.join(items)}]"),
        st.tuples(st.sampled_from(NAMES), inner).map(lambda pair: f"{{{pair[0]} = {pair[1]}}}"),
    ),
    max_leaves=4,
)
line = st.one_of(
    key.map(lambda k: f"[{k}]"),
    key.map(lambda k: f"[[{k}]]"),
    st.tuples(key, some_value).map(" = ".join),
)


@settings(max_examples=400, deadline=None)
@given(st.lists(line, max_size=8))
def test_any_toml_of_our_words_gives_faults_or_a_system(lines: list[str]) -> None:
    """Our own words in any order, with values of every type, give a system or faults, nothing else."""
    with contextlib.suppress(BadFile):
        parse_system("\n".join(lines), CARDS)


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
