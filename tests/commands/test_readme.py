"""The README does what it says."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import pytest

from .conftest import Command

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()
SESSIONS = [
    (match[1], match[2])
    for match in re.finditer(r"^```console\n\$ (.*?)\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
]


@pytest.mark.parametrize(("command", "printed"), SESSIONS, ids=[command for command, _ in SESSIONS])
def test_the_tour_is_real(clockfall: Command, monkeypatch: pytest.MonkeyPatch, command: str, printed: str) -> None:
    """Each command of the tour prints what the README shows, to the letter."""
    monkeypatch.chdir(ROOT)
    said = clockfall(*shlex.split(command)[1:])
    shown, cut, _ = printed.partition("[...]\n")
    found = said.out + said.err
    assert found.startswith(shown) if cut else found == shown


def test_the_two_commands_are_the_first() -> None:
    """The README has exactly two sh blocks: install and run, install and test."""
    blocks = re.findall(r"^```sh\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    assert len(blocks) == 2
    assert blocks[0].rstrip().endswith("clockfall decay")
    assert blocks[1].rstrip().endswith("pytest")
    assert all(block.startswith("python3 -m venv") for block in blocks)


def test_the_python_example_runs(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    """The Python of the tour runs as it stands and prints the ratio."""
    monkeypatch.chdir(ROOT)
    code = re.findall(r"^```python\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)[0]
    exec(compile(code, "README.md", "exec"), {})
    assert capsys.readouterr().out.startswith("0.998")
