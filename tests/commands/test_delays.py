"""`clockfall delays` as people and programs use it."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pytest

from .conftest import PUBLISHED, Command

SYSTEM = PUBLISHED / "psr-b1913+16.toml"


def test_one_orbit_of_the_demo(clockfall: Command) -> None:
    """Without times the delays of one orbit are printed, phase by phase, within 80 columns."""
    said = clockfall("delays", "--phases", 8)
    assert (said.code, said.err) == (0, "")
    assert all(len(line) <= 80 for line in said.out.splitlines())
    for part in ("roemer-delay", "einstein-delay", "shapiro-delay", "orbit-deformation", "phase", "0.12500", "Sources"):
        assert part in said.out, part


def test_json_keeps_the_contract(clockfall: Command) -> None:
    """The JSON has times as text with all digits, a list for each effect, their sum, and the unit."""
    report = clockfall("delays", SYSTEM, "--at", "57300.123456789012345", "--at", "2016-01-01T06:00:00", "--json").json
    assert report["times_mjd_tdb"] == ["57300.123456789012345", "57388.250000000000000"]
    assert report["unit"] == "s"
    total = np.array(report["total"])
    assert total.shape == (2,)
    assert np.sum(list(report["delays"].values()), axis=0) == pytest.approx(total, abs=1e-15)
    assert {"roemer-delay", "einstein-delay", "shapiro-delay"} <= set(report["delays"])


def test_times_in_every_way_are_the_same(clockfall: Command, tmp_path: Path) -> None:
    """A list, a range, a text file and an HDF5 file of the same times give the same delays."""
    text, binary = tmp_path / "times.txt", tmp_path / "times.h5"
    days = [57300, 57310, 57320]
    text.write_text("# MJD, TDB\n" + "\n".join(str(day) for day in days))
    with h5py.File(binary, "w") as file:
        file["time_day"], file["time_fraction"] = np.array(days), np.zeros(3)
    ways = [
        [part for day in days for part in ("--at", day)],
        ["--from", 57300, "--to", 57320, "--number", 3],
        ["--times", text],
        ["--times", binary],
    ]
    found = [clockfall("delays", SYSTEM, *way, "--quiet").out for way in ways]
    assert len(found[0].splitlines()) == 3
    assert all(other == found[0] for other in found[1:])


def test_a_result_is_kept_read_drawn_and_repeated(clockfall: Command, tmp_path: Path) -> None:
    """Times and delays are columns of the result; it is shown, drawn and repeated from its file alone."""
    out = tmp_path / "delays.h5"
    said = clockfall("delays", SYSTEM, "--from", 57300, "--to", 57301, "--number", 50, "--out", out)
    assert said.code == 0
    with h5py.File(out) as file:
        assert file["delay_roemer_delay"].shape == (50,)
        assert file["delay_roemer_delay"].attrs["units"] == "s"
    assert "agree, bit for bit" in clockfall("rerun", out).out
    assert (
        clockfall("show", out, "--json").json
        == clockfall("delays", SYSTEM, "--from", 57300, "--to", 57301, "--number", 50, "--json").json
    )
    assert clockfall("draw", out, "--out", tmp_path / "time.svg").code == 0
    assert clockfall("delays", "--draw", tmp_path / "phase.png", "-q").code == 0


def test_a_table_reads_in_xarray(clockfall: Command, tmp_path: Path) -> None:
    """The columns share one dimension, and xarray opens the file as it is."""
    xarray = pytest.importorskip("xarray")
    out = tmp_path / "delays.h5"
    assert clockfall("delays", "--out", out, "-q").code == 0
    with xarray.open_dataset(out, engine="h5netcdf") as data:
        assert data["delay_total"].dims == ("row",)
        assert data["delay_total"].attrs["units"] == "s"


@pytest.mark.parametrize(
    ("arguments", "expected"),
    [
        (("--at", "2457300.5"), "looks like a Julian Date"),
        (("--at", "2016-01-01T06:00:00Z"), "TDB"),
        (("--at", "nan"), "it is not finite"),
        (("--at", "yesterday"), "expected a time"),
        (("--at", "2016-13-01"), "month"),
        (("--from", "57300", "--to", "57299", "--number", "3"), "after --from"),
        (("--from", "57300"), "belong together"),
        (("--from", "57300", "--to", "57301", "--number", "3", "--at", "57300"), "in one way"),
        (("--phases", "0"), "expected 1 to"),
        (("--times", "no-such-file"), "cannot be read"),
    ],
)
def test_times_that_are_none_are_told(clockfall: Command, arguments: tuple[str, ...], expected: str) -> None:
    """A date of another kind or scale, a reversed range, a missing file: each is refused with what was expected."""
    said = clockfall("delays", SYSTEM, *arguments)
    assert (said.code, expected in said.err) == (2, True), said.err
    assert "Traceback" not in said.err


def test_faults_of_a_file_of_times_come_with_their_lines(clockfall: Command, tmp_path: Path) -> None:
    """Every bad line is counted, the first five with number and reason; an empty file says that it holds no times."""
    path = tmp_path / "times.txt"
    path.write_text("57300\nx\n57301 57302\n2457300.5\n")
    said = clockfall("delays", SYSTEM, "--times", path)
    assert said.code == 2
    assert "3 faults" in said.err
    assert "line 2" in said.err
    path.write_text("# nothing\n")
    assert "no times are given" in clockfall("delays", SYSTEM, "--times", path).err
    path.write_bytes(b"\xff\xfe\x00")
    assert clockfall("delays", SYSTEM, "--times", path).code == 2


def test_times_out_of_reach(clockfall: Command) -> None:
    """The year 9999 is in reach of a slow decay, with a word where the period has changed much; not beyond."""
    near = clockfall("delays", SYSTEM, "--at", "9999-01-01")
    assert near.code == 0
    far = clockfall("delays", SYSTEM, "--at", "-690000")
    assert far.code == 0


def test_a_system_without_the_orbit_is_told(clockfall: Command, tmp_path: Path) -> None:
    """What delays need and the file lacks is named."""
    path = tmp_path / "bare.toml"
    masses = '[masses]\nmass_1 = "1.4 Msun"\nmass_2 = "1.3 Msun"\n'
    path.write_text(f'[system]\nname = "bare"\n{masses}[orbit]\norbital_period = "0.3 d"\neccentricity = "0.1"\n')
    said = clockfall("delays", path)
    assert said.code == 2
    assert "delays need longitude_of_periastron, projected_semi_major_axis, periastron_epoch" in said.err
