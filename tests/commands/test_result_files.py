"""Result files: written whole, read by us and by others, repeated from themselves alone."""

from __future__ import annotations

import json
import shutil
import subprocess
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray as xr

from clockfall.files.results import FORMAT_VERSION, read_result

from .conftest import PUBLISHED, Command

HULSE_TAYLOR = PUBLISHED / "psr-b1913+16.toml"


@pytest.fixture
def result(clockfall: Command, tmp_path: Path) -> Path:
    """Return a result of the main job."""
    path = tmp_path / "decay.h5"
    assert clockfall("decay", HULSE_TAYLOR, "--out", path, "--draws", 256).code == 0
    return path


@pytest.mark.parametrize("name", ["decay", "rates", "weigh", "inspiral"])
def test_show_prints_what_the_analysis_printed(clockfall: Command, tmp_path: Path, name: str) -> None:
    """A result read back gives the same JSON, character for character, and the same tables."""
    path = tmp_path / "result.h5"
    first = clockfall(name, "--json", "--draws", 64, "--out", path)
    assert first.code == 0
    assert clockfall("show", path, "--json").out == first.out
    tables = clockfall(name, "--draws", 64).out.split("\n\nThis is the invented demo")[0]
    assert clockfall("show", path).out.startswith(tables)


@pytest.mark.parametrize("name", ["decay", "rates", "weigh", "inspiral"])
def test_rerun_agrees_bit_for_bit(clockfall: Command, tmp_path: Path, name: str) -> None:
    """A result repeated from its file alone, in the same place, agrees to the last bit."""
    path = tmp_path / "result.h5"
    assert clockfall(name, "--draws", 64, "--out", path, "--quiet").code == 0
    said = clockfall("rerun", path)
    assert said.code == 0
    assert "bit for bit" in said.out
    assert clockfall("rerun", path, "--json").json == {
        "agrees": True,
        "largest_relative_difference": 0.0,
        "changed_effects": [],
    }


def test_rerun_remembers_the_choices(clockfall: Command, tmp_path: Path) -> None:
    """What the user chose on the command line is part of the result."""
    path = tmp_path / "result.h5"
    pair = ("--use", "longitude_of_periastron_rate", "--use", "shapiro_range")
    chosen = ("--without", "einstein-delay", "--seed", 7, "--draws", 32)
    assert clockfall("decay", HULSE_TAYLOR, *pair, *chosen, "--out", path, "-q").code == 0
    assert clockfall("rerun", path, "-q").code == 0


def test_rerun_notices_a_changed_number(clockfall: Command, result: Path) -> None:
    """A number that was changed in the file is found and named; exit code 1."""
    with h5py.File(result, "a") as file:
        file["merger_time"][3] *= 1.0 + 1e-9
    said = clockfall("rerun", result)
    assert said.code == 1
    assert "merger_time: 1.0e-09" in said.out.replace("9.9e-10", "1.0e-09")


def test_xarray_reads_it(result: Path) -> None:
    """The file opens in xarray as it is: dimensions, units, draws whose median is the central value."""
    with xr.open_dataset(result, engine="h5netcdf") as dataset:
        rate = dataset["orbital_period_rate_by_quadrupole_decay"]
        assert rate.dims == ("draw",)
        assert rate.attrs["units"] == "1"
        assert "Peters" in rate.attrs["sources"]
        assert dataset.sizes["draw"] == 256
        # the median of 256 Sobol draws lies within a tenth of their spread of the centre
        assert abs(float(rate.median()) - rate.attrs["central_value"]) < 0.1 * float(rate.std())
        assert dataset["mass_1"].attrs["long_name"] == "mass of body 1, the timed one"
        assert dataset.attrs["Conventions"].startswith("CF-")
        assert str(dataset["system_text"].values) == HULSE_TAYLOR.read_text()


@pytest.mark.skipif(shutil.which("h5dump") is None, reason="h5dump is not installed")
def test_h5dump_reads_it(result: Path) -> None:
    """h5dump prints the header without complaint."""
    ended = subprocess.run(["h5dump", "-A", result], capture_output=True, text=True, check=True)
    assert "orbital_period_rate_ratio" in ended.stdout


def test_provenance_is_complete(result: Path) -> None:
    """The file says what it was computed from, by what, and with which effects."""
    found = read_result(result)
    assert found.system_text == HULSE_TAYLOR.read_text()
    assert found.choices.draws == 256
    assert {"clockfall", "numpy", "scipy", "python"} <= set(found.versions)
    assert "quadrupole-decay" in {effect.name for effect in found.outcome.used}
    with h5py.File(result) as file:
        assert file.attrs["format_version"] == FORMAT_VERSION
        assert file["constant_nominal_solar_mass_parameter"][()] == 1.3271244e20
        assert json.loads(file.attrs["choices"])["seed"] == found.choices.seed


def test_the_same_work_writes_the_same_bytes(clockfall: Command, tmp_path: Path) -> None:
    """Two runs of the same work write files that are equal byte for byte: no date, no path, no chance."""
    paths = [tmp_path / "one.h5", tmp_path / "two.h5"]
    for path in paths:
        clockfall("decay", "--draws", 64, "--out", path, "-q")
    assert paths[0].read_bytes() == paths[1].read_bytes()


def test_nothing_is_overwritten_unasked(clockfall: Command, result: Path) -> None:
    """An existing file stays as it is without --overwrite, and is replaced with it."""
    before = result.read_bytes()
    said = clockfall("decay", HULSE_TAYLOR, "--out", result)
    assert (said.code, "--overwrite" in said.err) == (1, True)
    assert result.read_bytes() == before
    assert clockfall("decay", HULSE_TAYLOR, "--out", result, "--overwrite", "-q").code == 0
    assert result.read_bytes() != before


@pytest.mark.parametrize(("target", "expected"), [("", "is a directory"), ("no/such/place.h5", "no directory")])
def test_a_target_that_cannot_be_is_told_before_the_work(
    clockfall: Command, tmp_path: Path, target: str, expected: str
) -> None:
    """A directory, or a place that is not there, is named; nothing is left behind."""
    said = clockfall("decay", "--out", tmp_path / target)
    assert (said.code, expected in said.err) == (1, True)
    assert list(tmp_path.iterdir()) == []


def test_a_failed_write_leaves_nothing(clockfall: Command, result: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """When the disk fails in the middle, the old file is whole, no half file is left, and the error says so."""

    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    before = result.read_bytes()
    monkeypatch.setattr("os.fsync", full)
    said = clockfall("decay", HULSE_TAYLOR, "--out", result, "--overwrite")
    assert (said.code, "No space left on device" in said.err) == (1, True)
    assert result.read_bytes() == before
    assert [path.name for path in result.parent.iterdir()] == [result.name]


def refused(clockfall: Command, path: Path) -> str:
    """Return what is said of a result file that must be refused by every reader."""
    for name in ("show", "rerun"):
        said = clockfall(name, path)
        assert said.code == 2, said.out
        assert said.err.startswith(f"clockfall: {path}: ")
    return said.err


def test_a_file_cut_short_is_refused(clockfall: Command, result: Path) -> None:
    """A file cut anywhere is refused by name, never read in part."""
    whole = result.read_bytes()
    for length in (1, 8, 100, 1000, len(whole) // 2, len(whole) - 1):
        result.write_bytes(whole[:length])
        text = refused(clockfall, result)
        assert "cut short" in text or "not an HDF5 file" in text


def test_a_newer_format_is_refused(clockfall: Command, result: Path) -> None:
    """A format newer than ours is refused by its number."""
    with h5py.File(result, "a") as file:
        file.attrs["format_version"] = FORMAT_VERSION + 1
    assert f"format version {FORMAT_VERSION + 1}, newer than" in refused(clockfall, result)


def test_links_out_of_the_file_are_refused(clockfall: Command, result: Path, tmp_path: Path) -> None:
    """External and soft links, groups, external and virtual storage, and packed data are refused by name."""
    secret = tmp_path / "secret.h5"
    with h5py.File(secret, "w") as file:
        file["data"] = np.arange(256.0)
    raw = tmp_path / "raw.bin"
    raw.write_bytes(bytes(2048))
    whole = result.read_bytes()

    def external(file: h5py.File) -> None:
        file["stranger"] = h5py.ExternalLink(str(secret), "/data")

    def soft(file: h5py.File) -> None:
        file["stranger"] = h5py.SoftLink("/merger_time")

    def group(file: h5py.File) -> None:
        file.create_group("stranger")

    def stored_elsewhere(file: h5py.File) -> None:
        file.create_dataset("stranger", (256,), "f8", external=[(str(raw), 0, 2048)])

    def virtual(file: h5py.File) -> None:
        layout = h5py.VirtualLayout((256,), "f8")
        layout[:] = h5py.VirtualSource(str(secret), "data", (256,))
        file.create_virtual_dataset("stranger", layout)

    def packed(file: h5py.File) -> None:
        file.create_dataset("stranger", (2**20,), "f8", chunks=(1024,), compression="gzip")

    def vast(file: h5py.File) -> None:
        file.create_dataset("stranger", (2**40,), "f8", chunks=(1024,))

    for spoil, expected in (
        (external, "link (ExternalLink)"),
        (soft, "link (SoftLink)"),
        (group, "a group"),
        (stored_elsewhere, "outside itself"),
        (virtual, "outside itself"),
        (packed, "by a filter"),
        (vast, "elements, more than"),
    ):
        result.write_bytes(whole)
        with h5py.File(result, "a") as file:
            spoil(file)
        text = refused(clockfall, result)
        assert expected in text, spoil.__name__
        assert "'stranger'" in text


def test_damaged_contents_are_refused(clockfall: Command, result: Path) -> None:
    """Missing or wrong attributes, other shapes, a changed system file: each is refused, never a traceback."""
    whole = result.read_bytes()

    def without_command(file: h5py.File) -> None:
        del file.attrs["command"]

    def strange_choices(file: h5py.File) -> None:
        file.attrs["choices"] = "[1, 2"

    def other_draws(file: h5py.File) -> None:
        file.attrs["draws"] = 3

    def other_text(file: h5py.File) -> None:
        file["system_text"][()] = "[system]\nname = 'other'\n"

    def other_program(file: h5py.File) -> None:
        file.attrs["format_name"] = "something else"

    def unknown_analysis(file: h5py.File) -> None:
        file.attrs["command"] = "os"

    for spoil in (without_command, strange_choices, other_draws, other_text, other_program):
        result.write_bytes(whole)
        with h5py.File(result, "a") as file:
            spoil(file)
        refused(clockfall, result)
    result.write_bytes(whole)
    with h5py.File(result, "a") as file:
        unknown_analysis(file)
    assert clockfall("show", result).code == 2


def test_what_is_no_result_is_refused(clockfall: Command, tmp_path: Path) -> None:
    """A missing file, a directory, an empty file, text, and other HDF5 are refused, each with its reason."""
    (tmp_path / "empty.h5").touch()
    (tmp_path / "text.h5").write_text("hello")
    with h5py.File(tmp_path / "other.h5", "w") as file:
        file["x"] = 1.0
    for name, expected in (
        ("nothing.h5", "no such file"),
        ("", "not a regular file"),
        ("empty.h5", "is empty"),
        ("text.h5", "not an HDF5 file"),
        ("other.h5", "not a clockfall result"),
    ):
        assert expected in refused(clockfall, tmp_path / name)
