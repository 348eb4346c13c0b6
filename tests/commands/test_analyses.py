"""decay, rates, weigh and inspiral, as people and programs use them."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest

from .conftest import PUBLISHED, Command

HULSE_TAYLOR = PUBLISHED / "psr-b1913+16.toml"


def is_number(found: Any) -> bool:
    """Whether JSON holds a number as the contract has it."""
    return isinstance(found, dict) and {"value", "uncertainty", "interval", "unit"} <= set(found)


@pytest.mark.parametrize("name", ["decay", "rates", "weigh", "inspiral", "delays"])
def test_every_analysis_runs_on_the_demo(clockfall: Command, name: str) -> None:
    """With no file an analysis runs on the demo, says so, and fits 80 columns without colour."""
    said = clockfall(name)
    assert said.code == 0
    assert said.err == ""
    assert "invented demo" in said.out
    assert "\x1b" not in said.out
    too_wide = [line for line in said.out.splitlines() if len(line) > 80]
    assert too_wide == []


def test_the_main_job_reads_as_a_budget(clockfall: Command) -> None:
    """`decay` names each effect, the sums, the ratio, the masses and the time to merger, with sources."""
    out = clockfall("decay", HULSE_TAYLOR).out
    for part in ("quadrupole-decay", "predicted", "measured", "measured/predicted", "sigma", "m_1 =", "Peters", "Myr"):
        assert part in out, part


def test_decay_json_keeps_the_contract(clockfall: Command) -> None:
    """The JSON of `decay` has the keys that other programs rely on, and full precision."""
    report = clockfall("decay", HULSE_TAYLOR, "--json").json
    assert report["system"] == "PSR B1913+16"
    assert report["epoch_mjd_tdb"] == pytest.approx(52144.90097849, abs=1e-8)  # as published
    budget = report["orbital_period_rate"]
    for key in ("predicted_intrinsic", "apparent", "observed", "intrinsic_observed", "ratio"):
        assert is_number(budget[key]), key
    assert isinstance(budget["tension_sigma"], float)
    for contribution in budget["contributions"]:
        assert is_number(contribution)
        assert {"effect", "nature", "sources"} <= set(contribution)
    values = [c["value"] for c in budget["contributions"] if c["nature"] == "intrinsic"]
    assert sum(values) == pytest.approx(
        budget["predicted_intrinsic"]["value"], rel=1e-15, abs=0.0
    )  # the budget is a sum
    assert is_number(report["masses"]["mass_1"])
    assert report["masses"]["from"] == "weighed"
    assert report["merger_time"]["unit"] == "yr"
    assert {"idle", "cautions", "draws", "seed"} <= set(report)


def test_rates_json_keeps_the_contract(clockfall: Command) -> None:
    """The JSON of `rates` has totals, contributions and predictions with their effects."""
    report = clockfall("rates", HULSE_TAYLOR, "--json").json
    advance = report["rates"]["longitude_of_periastron_rate"]
    assert advance["total"]["unit"] == "deg/yr"
    assert advance["contributions"][0]["effect"] == "periastron-advance"
    assert report["predicted"]["shapiro_range"]["effect"] == "shapiro-delay"
    assert report["predicted"]["shapiro_range"]["unit"] == "us"


def test_weigh_json_keeps_the_contract(clockfall: Command) -> None:
    """The JSON of `weigh` has masses, what was used, and a test of every other measured parameter."""
    report = clockfall("weigh", HULSE_TAYLOR, "--json").json
    for key in ("mass_1", "mass_2", "total_mass", "mass_ratio", "sin_inclination"):
        assert is_number(report[key]), key
    assert report["used"] == ["longitude_of_periastron_rate", "einstein_delay_amplitude"]
    assert -1.0 <= report["correlation"] <= 1.0
    assert {test["parameter"] for test in report["tests"]} == {
        "orbital_period_rate",
        "shapiro_range",
        "shapiro_shape",
        "angular_deformation",
    }
    for test in report["tests"]:
        assert {"observed", "predicted", "ratio", "tension_sigma"} <= set(test)


def test_weighing_by_another_pair(clockfall: Command) -> None:
    """Any two measured parameters that effects predict can weigh; a pair that cannot says why."""
    by_shape = clockfall(
        "weigh", HULSE_TAYLOR, "--use", "longitude_of_periastron_rate", "--use", "shapiro_range", "--json"
    )
    assert by_shape.json["used"] == ["longitude_of_periastron_rate", "shapiro_range"]
    same = clockfall("weigh", HULSE_TAYLOR, "--use", "shapiro_range", "--use", "shapiro_range")
    assert (same.code, "two different" in same.err) == (2, True)
    unknown = clockfall("weigh", HULSE_TAYLOR, "--use", "shapiro_rang", "--use", "shapiro_shape")
    assert (unknown.code, "did you mean 'shapiro_range'" in unknown.err) == (2, True)


def test_two_masses_that_cannot_be_told_apart_are_both_said(clockfall: Command) -> None:
    """Advance and decay fix the sum and the product of the masses, not which is which: both answers are given."""
    pair = ("--use", "longitude_of_periastron_rate", "--use", "orbital_period_rate")
    for analysis in ("decay", "weigh"):
        report = clockfall(analysis, HULSE_TAYLOR, *pair, "--json").json
        assert any("just as well" in caution["statement"] for caution in report["cautions"])


def test_effects_can_be_left_out(clockfall: Command) -> None:
    """`--without` and `--only` choose effects, say so among the idle ones, and hint at misspelt names."""
    report = clockfall("rates", HULSE_TAYLOR, "--without", "shapiro-delay", "--json").json
    assert "shapiro_range" not in report["predicted"]
    assert {"effect": "shapiro-delay", "reason": "left out on request"} in report["idle"]
    said = clockfall("decay", HULSE_TAYLOR, "--only", "quadrupol-decay")
    assert said.code == 2
    assert "did you mean 'quadrupole-decay'" in said.err


def test_no_effect_no_budget(clockfall: Command) -> None:
    """Without any effect on the period the output says that there is no budget, instead of a prediction of zero."""
    said = clockfall("decay", HULSE_TAYLOR, "--without", "quadrupole-decay")
    assert said.code == 0
    assert "no active effect contributes" in said.out
    assert "predicted" not in said.out.split("Cautions")[0]


def test_weighing_without_the_effect_that_predicts(clockfall: Command) -> None:
    """With the effect left out that predicts a parameter, others weigh; to weigh by it is refused with the reason."""
    without = ("decay", HULSE_TAYLOR, "--without", "einstein-delay")
    said = clockfall(*without)
    assert said.code == 0
    assert "weighed by longitude_of_periastron_rate and shapiro_" in " ".join(said.out.split())
    by_name = clockfall(*without, "--use", "longitude_of_periastron_rate", "--use", "einstein_delay_amplitude")
    assert by_name.code == 2
    assert "no active effect predicts einstein_delay_amplitude" in by_name.err


def test_seed_and_draws_are_the_users(clockfall: Command) -> None:
    """The same seed gives the same numbers bit for bit, another seed other draws around the same centre."""
    first, again, other = (clockfall("decay", HULSE_TAYLOR, "--json", "--draws", 512, "--seed", s) for s in (1, 1, 2))
    assert first.out == again.out
    one, two = (said.json["orbital_period_rate"]["predicted_intrinsic"] for said in (first, other))
    assert one["value"] == two["value"]
    assert one["uncertainty"] != two["uncertainty"]
    assert one["uncertainty"] == pytest.approx(two["uncertainty"], rel=0.05, abs=0.0)  # 512 Sobol draws give 1 % or so


def test_quiet_prints_the_number_alone(clockfall: Command) -> None:
    """`--quiet` prints one line: the ratio, the masses, the time."""
    assert re.fullmatch(r"0\.99\d+\(\d+\)\n", clockfall("decay", HULSE_TAYLOR, "--quiet").out)
    assert clockfall("weigh", HULSE_TAYLOR, "-q").out.startswith("mass_1 1.43")


def test_inspiral_needs_no_file(clockfall: Command) -> None:
    """A lab checks an inspiral in a line, by period, axis or wave frequency, and the three agree."""
    masses = ("--mass-1", "1.4 Msun", "--mass-2", "1.3 Msun")
    by_period = clockfall("inspiral", *masses, "--orbital-period", "8 h", "--eccentricity", "0.6", "--json").json
    axis = by_period["semi_major_axis"]
    assert axis["unit"] == "km"
    by_axis = clockfall(
        "inspiral", *masses, "--semi-major-axis", f"{axis['value']!r} km", "--eccentricity", "0.6", "--json"
    ).json
    assert by_axis["merger_time"]["value"] == pytest.approx(by_period["merger_time"]["value"], rel=1e-12, abs=0.0)
    by_wave = clockfall("inspiral", *masses, "--wave-frequency", f"{2 / 8 / 3600!r} Hz", "--json").json
    circular = clockfall("inspiral", *masses, "--orbital-period", "8 h", "--json").json
    assert by_wave["merger_time"]["value"] == pytest.approx(circular["merger_time"]["value"], rel=1e-12, abs=0.0)
    assert by_period["stages"][0]["eccentricity"]["value"] == pytest.approx(0.6, rel=1e-12, abs=0.0)
    assert by_period["stages"][-1]["eccentricity"]["value"] < 0.1


def test_inspiral_carries_uncertainties(clockfall: Command) -> None:
    """A mass with an uncertainty gives a time with one: T goes as M_c^(-5/3), so 1 % in both masses is 1.18 % each."""
    said = clockfall(
        "inspiral", "--mass-1", "1.400(14) Msun", "--mass-2", "1.4 Msun", "--orbital-period", "8 h", "--json"
    )
    merger = said.json["merger_time"]
    # d ln T/d ln m_1 = -(1 - 1/6) for equal masses: T goes as M^(1/3)/(m_1 m_2)
    assert merger["uncertainty"] / merger["value"] == pytest.approx(0.01 * 5 / 6, rel=0.01, abs=0.0)


@pytest.mark.parametrize(
    ("arguments", "expected"),
    [
        (["--mass-1", "1.4 Msun"], "--mass-2 is missing"),
        (["--mass-1", "1.4 Msun", "--mass-2", "1.4 Msun"], "give one of --orbital-period"),
        (["--mass-1", "1.4", "--mass-2", "1.4 Msun", "--orbital-period", "8 h"], "mass_1"),
        (["--mass-1", "1.4 Msun", "--mass-2", "1.4 Msun", "--orbital-period", "8 kg"], "orbital_period"),
        (
            ["--mass-1", "1.4 Msun", "--mass-2", "1.4 Msun", "--orbital-period", "8 h", "--eccentricity", "1"],
            "eccentricity",
        ),
        (["--mass-1", "1.4 Msun", "--mass-2", "1.4 Msun", "--semi-major-axis", "-8 km"], "positive"),
        (["--mass-1", "1.4 Msun", "--mass-2", "1.4 Msun", "--semi-major-axis", "8(1) km"], "uncertainty"),
        (["--mass-1", '1.4 Msun"\n[x]', "--mass-2", "1.4 Msun", "--orbital-period", "8 h"], "mass_1"),
    ],
)
def test_inspiral_refuses_nonsense(clockfall: Command, arguments: list[str], expected: str) -> None:
    """A missing, unitless or impossible value is refused by name, with exit code 2."""
    said = clockfall("inspiral", *arguments)
    assert said.code == 2
    assert expected in said.err


def test_effects_are_listed_and_read(clockfall: Command) -> None:
    """`effects` lists what is installed; `effects show` reads a card with formula and sources."""
    listed = clockfall("effects")
    assert listed.code == 0
    assert "quadrupole-decay" in listed.out
    shown = clockfall("effects", "show", "quadrupole-decay")
    assert shown.code == 0
    for part in ("formula", "source", "Peters", "valid", "needs", "orbital_period_rate", "closed_form_track"):
        assert part in shown.out, part
    assert clockfall("effects", "show", "quadrupole-decay", "--json").json["nature"] == "intrinsic"
    assert clockfall("effects", "--json").json["broken"] == []
    wrong = clockfall("effects", "show", "quadrupole-deca")
    assert (wrong.code, "did you mean 'quadrupole-decay'" in wrong.err) == (2, True)


@pytest.mark.parametrize("arguments", [["nonsense"], ["decay", "--draws", "0"], ["decay", "--draws", "x"], ["show"]])
def test_wrong_usage_is_exit_2(clockfall: Command, arguments: list[str]) -> None:
    """Wrong usage is told in a line or two, and ends with exit code 2."""
    assert clockfall(*arguments).code == 2


def test_a_missing_file_is_named(clockfall: Command, tmp_path: Path) -> None:
    """A system file that is not there is named; exit code 2."""
    said = clockfall("decay", tmp_path / "nothing.toml")
    assert said.code == 2
    assert "nothing.toml" in said.err
