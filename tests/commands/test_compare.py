"""Two results compared."""

from __future__ import annotations

from pathlib import Path

import pytest

from .conftest import PUBLISHED, Command

PULSAR = PUBLISHED / "psr-j0737-3039a.toml"


def results(clockfall: Command, folder: Path, *change: object, name: str = "decay") -> tuple[Path, Path]:
    """Return two results of the double pulsar, the second with a changed option."""
    first, second = folder / "first.h5", folder / "second.h5"
    assert clockfall("decay", PULSAR, "--draws", 512, "--out", first, "-q").code == 0
    assert clockfall(name, PULSAR, "--draws", 512, "--out", second, "-q", *change).code == 0
    return first, second


def test_a_change_is_named_by_effect_in_sigma(clockfall: Command, tmp_path: Path) -> None:
    """Without one effect its row is absent, and the ratio moves by that effect's part over its uncertainty."""
    first, second = results(clockfall, tmp_path, "--without", "radiation-next-order")
    found = {c["name"]: c for c in clockfall("compare", first, second, "--json").json["changes"]}
    gone = found["orbital_period_rate_by_radiation_next_order"]
    assert gone["after"] is None
    ratio = found["orbital_period_rate_ratio"]
    moved = ratio["after"]["value"] - ratio["before"]["value"]
    # leaving out -1.75e-17 of -1.2478e-12 raises the ratio by 1.40e-5
    assert moved == pytest.approx(1.40e-5, rel=0.01, abs=0.0)
    assert ratio["sigma"] == pytest.approx(
        moved / max(ratio[k]["uncertainty"] for k in ("before", "after")), rel=1e-9, abs=0.0
    )
    assert "orbital_period_rate_by_quadrupole_decay" not in found
    said = clockfall("compare", first, second)
    assert "absent" in said.out
    assert max(len(line) for line in said.out.splitlines()) <= 80 + len(str(tmp_path)) * 2


def test_the_same_result_has_no_changes(clockfall: Command, tmp_path: Path) -> None:
    """Two runs of the same work differ in nothing."""
    first, second = results(clockfall, tmp_path)
    assert clockfall("compare", first, second, "--json").json == {"changes": []}
    assert "nothing changed" in clockfall("compare", first, second).out


def test_different_analyses_are_not_compared(clockfall: Command, tmp_path: Path) -> None:
    """A budget is not compared with a weighing."""
    said = clockfall("compare", *results(clockfall, tmp_path, name="rates"))
    assert (said.code, "cannot be compared" in said.err) == (2, True)


def test_inverse_questions_go_into_the_result(clockfall: Command, tmp_path: Path) -> None:
    """What was solved for and limited is printed, kept in the file, and repeated by rerun."""
    path = tmp_path / "inverse.h5"
    questions = ("--solve-for", "moment_of_inertia_1", "--limit", "dipole-radiation.charge_1")
    report = clockfall("decay", PULSAR, "--draws", 256, *questions, "--out", path, "--json").json
    assert report["inverse"]["moment_of_inertia_1"]["unit"] == "g cm2"
    assert report["inverse"]["dipole-radiation.charge_1"]["value"] > 0.0
    assert clockfall("show", path, "--json").json["inverse"] == report["inverse"]
    assert clockfall("rerun", path, "-q").code == 0
    assert "moment_of_inertia_1" in clockfall("show", path).out
