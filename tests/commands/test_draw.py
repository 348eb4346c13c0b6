"""Pictures from the command line."""

from __future__ import annotations

from pathlib import Path

import pytest

from .conftest import PUBLISHED, Command

SYSTEM = PUBLISHED / "psr-b1913+16.toml"


@pytest.fixture
def result(clockfall: Command, tmp_path: Path) -> Path:
    """Return a result of the main job."""
    path = tmp_path / "decay.h5"
    assert clockfall("decay", SYSTEM, "--out", path, "--draws", 256, "-q").code == 0
    return path


@pytest.mark.parametrize(
    "options",
    [(), ("--picture", "masses"), ("--picture", "shift", "--years", 1975, 2035)],
    ids=["budget", "masses", "shift"],
)
def test_every_picture_is_drawn_from_a_result(clockfall: Command, result: Path, options: tuple[object, ...]) -> None:
    """Each picture of a decay is drawn as SVG from its file alone, and nothing is overwritten unasked."""
    out = result.with_suffix(".svg")
    said = clockfall("draw", result, "--out", out, *options)
    assert (said.code, said.err) == (0, "")
    assert out.read_text().lstrip().startswith("<?xml")
    again = clockfall("draw", result, "--out", out, *options)
    assert (again.code, "--overwrite" in again.err) == (1, True)


def test_measured_shifts_are_drawn(clockfall: Command, result: Path) -> None:
    """Points are read from a text table; a table of another shape is refused with what was expected."""
    table = result.with_name("shifts.txt")
    table.write_text("# year shift uncertainty\n1980 -5.0 0.3\n2000 -0.1 0.1\n2020 -4.0 0.1\n")
    shift = ("--picture", "shift", "--years", 1975, 2025, "--shifts", table)
    assert clockfall("draw", result, "--out", result.with_suffix(".png"), *shift).code == 0
    table.write_text("1980 -5.0\n")
    said = clockfall("draw", result, "--out", result.with_suffix(".pdf"), *shift)
    assert (said.code, "expected three columns" in said.err) == (2, True)


@pytest.mark.parametrize(
    ("name", "options", "code", "expected"),
    [
        ("x.jpg", (), 2, ".svg"),
        ("x.svg", ("--picture", "shift"), 2, "--years FROM TO"),
        ("no/such/x.svg", (), 1, "no directory"),
    ],
)
def test_what_cannot_be_drawn_is_said(
    clockfall: Command, result: Path, name: str, options: tuple[str, ...], code: int, expected: str
) -> None:
    """A format that is not known, a shift without years, a place that is not there: each is named."""
    said = clockfall("draw", result, "--out", result.parent / name, *options)
    assert (said.code, expected in said.err) == (code, True), said.err


@pytest.mark.parametrize("analysis", ["decay", "weigh"])
def test_a_picture_beside_the_numbers(clockfall: Command, tmp_path: Path, analysis: str) -> None:
    """`--draw` draws what was computed, the same picture as `draw` makes from the result; nothing is overwritten."""
    beside, out = tmp_path / "beside.svg", tmp_path / "result.h5"
    said = clockfall(analysis, SYSTEM, "--draws", 256, "--draw", beside, "--out", out)
    assert (said.code, said.err) == (0, "")
    assert f"Drawn to {beside}" in said.out
    assert clockfall("draw", out, "--out", tmp_path / "after.svg").code == 0
    assert beside.read_bytes() == (tmp_path / "after.svg").read_bytes()
    again = clockfall(analysis, SYSTEM, "--draws", 256, "--draw", beside)
    assert (again.code, "--overwrite" in again.err) == (1, True)


def test_the_draws_of_a_bent_posterior_are_no_ellipse(clockfall: Command, tmp_path: Path) -> None:
    """Advance and decay allow a bent strip of masses: it is shown by its draws, and no ellipse is claimed."""
    pair = ("--use", "longitude_of_periastron_rate", "--use", "orbital_period_rate")
    bent, plain = tmp_path / "bent.svg", tmp_path / "plain.svg"
    assert clockfall("weigh", SYSTEM, *pair, "--draw", bent, "-q").code == 0
    assert clockfall("weigh", SYSTEM, "--draw", plain, "-q").code == 0
    assert "ellipse" in plain.read_text()
    assert "ellipse" not in bent.read_text()
