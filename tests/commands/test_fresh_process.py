"""What holds only in a process of its own: start-up, pipes, colour, and installed third-party effects."""

from __future__ import annotations

import os
import subprocess
import sys
from importlib import resources
from pathlib import Path

import pytest

from .conftest import Command

FIXTURES = Path(__file__).parents[2] / "fixtures"


def test_importing_clockfall_loads_nothing_heavy() -> None:
    """`import clockfall` and the command line's --help import no library that computes, reads or draws."""
    code = (
        "import sys, clockfall, clockfall.app.main\n"
        "heavy = {'numpy', 'scipy', 'h5py', 'astropy', 'rich', 'pluggy', 'importlib.metadata'} & set(sys.modules)\n"
        "print(sorted(heavy))"
    )
    ended = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert ended.stdout.strip() == "[]"


def test_the_public_names_are_there() -> None:
    """Every name of the public door can be loaded, and a wrong one is told."""
    import clockfall

    for name in clockfall.__all__:
        assert getattr(clockfall, name) is not None
    assert dir(clockfall) == clockfall.__all__
    with pytest.raises(AttributeError, match="no attribute 'decays'; it offers"):
        _ = clockfall.decays  # type: ignore[attr-defined]  # the fault under test


def test_the_main_job_in_a_pipe(fresh_clockfall: Command) -> None:
    """`clockfall decay` in a pipe prints plain text within 80 columns; NO_COLOR is respected."""
    said = fresh_clockfall("decay", environment={"NO_COLOR": "1", "COLUMNS": "80"})
    assert said.code == 0
    assert said.err == ""
    assert "\x1b" not in said.out
    assert max(len(line) for line in said.out.splitlines()) <= 80


def test_a_reader_that_goes_away(fresh_clockfall: Command) -> None:
    """Output into a pipe that is closed early ends quietly."""
    del fresh_clockfall  # the shell runs it here
    script = Path(sys.executable).with_name("clockfall")
    ended = subprocess.run(
        ["bash", "-c", f"{script} rates --json | head -n 1"], capture_output=True, text=True, check=False, timeout=120
    )
    assert ended.stderr == ""
    assert ended.stdout == "{\n"


def install(package: Path, target: Path) -> dict[str, str]:
    """Install a package beside the rest, as a user would; return the environment that sees it."""
    subprocess.run(
        [
            sys.executable, "-m", "pip", "install", "--quiet", "--no-deps", "--no-build-isolation", "--no-index",
            "--target", target, package,
        ],
        check=True,
        capture_output=True,
        text=True,
        timeout=120,
    )  # fmt: skip
    return {"PYTHONPATH": os.pathsep.join([str(target), os.environ.get("PYTHONPATH", "")]).rstrip(os.pathsep)}


def test_a_third_partys_effect_takes_part(fresh_clockfall: Command, tmp_path: Path) -> None:
    """An installed package's effect is listed, reads its own parameters, and contributes beside the built-in ones."""
    environment = install(FIXTURES / "clockfall-ring-tide", tmp_path / "site")
    listed = fresh_clockfall("effects", environment=environment)
    assert "ring-tide" in listed.out
    said = fresh_clockfall("rates", FIXTURES / "halden-7-ring.toml", "--json", environment=environment)
    assert said.err == ""
    contributions = said.json["rates"]["longitude_of_periastron_rate"]["contributions"]
    by_effect = {c["effect"]: c for c in contributions}
    assert {"periastron-advance", "ring-tide"} <= set(by_effect)
    assert by_effect["ring-tide"]["uncertainty"] > 0.0
    idle = fresh_clockfall("rates", "--json", environment=environment).json["idle"]
    assert any(i["effect"] == "ring-tide" and "ring_mass" in i["reason"] for i in idle)


def broken_package(folder: Path, name: str, body: str) -> Path:
    """Write an installable package with one effect of the given code."""
    module = name.replace("-", "_")
    folder.mkdir()
    (folder / f"{module}.py").write_text(body)
    (folder / "pyproject.toml").write_text(
        f'[build-system]\nrequires = ["hatchling"]\nbuild-backend = "hatchling.build"\n'
        f'[project]\nname = "{name}-package"\nversion = "0.1"\n'
        f'[project.entry-points."clockfall.effects"]\n{name} = "{module}"\n'
        f'[tool.hatch.build.targets.wheel]\ninclude = ["{module}.py"]\n'
    )
    return folder


def test_a_broken_package_is_named_on_the_command_line(fresh_clockfall: Command, tmp_path: Path) -> None:
    """A package that fails on import is named with its distribution; the main job runs; --strict ends it."""
    package = broken_package(tmp_path / "package", "sunken-effect", 'raise RuntimeError("glug")\n')
    environment = install(package, tmp_path / "site")
    said = fresh_clockfall("decay", environment=environment)
    assert said.code == 0
    assert "quadrupole-decay" in said.out
    assert "effect 'sunken-effect' (sunken-effect-package) failed in import: RuntimeError: glug" in said.err
    strict = fresh_clockfall("decay", "--strict", environment=environment)
    assert (strict.code, strict.out) == (1, "")
    assert "Traceback" not in strict.err
    assert "sunken-effect" in strict.err


def test_the_manuals_effect_works_as_printed(fresh_clockfall: Command, tmp_path: Path) -> None:
    """The effect that DEVELOPERS.md prints can be installed as it stands, and takes part."""
    manual = (FIXTURES.parent / "DEVELOPERS.md").read_text()
    folder = tmp_path / "manual"
    folder.mkdir()
    for name, language in (("pyproject.toml", "toml"), ("clockfall_thin_gas.py", "python")):
        after = manual.split(f"`{name}`:", 1)[1]
        (folder / name).write_text(after.split(f"```{language}\n", 1)[1].split("```", 1)[0])
    setting = manual.split("[effects.thin-gas]", 1)[1].split("```", 1)[0]
    environment = install(folder, tmp_path / "site")
    demo = resources.files("clockfall.files").joinpath("demo.toml").read_text()
    system = tmp_path / "halden.toml"
    system.write_text(f"{demo}\n[effects.thin-gas]{setting}")
    report = fresh_clockfall("decay", system, "--json", environment=environment).json
    assert "thin-gas" in [c["effect"] for c in report["orbital_period_rate"]["contributions"]]
    assert any(
        "leaves out" in caution["statement"] and "thin-gas" in caution["statement"] for caution in report["cautions"]
    )
    shown = fresh_clockfall("effects", "show", "thin-gas", environment=environment)
    assert "drag_time" in shown.out
