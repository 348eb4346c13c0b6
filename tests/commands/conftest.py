"""What the tests of the command line share."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from clockfall.app.main import run

PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"


@dataclass(frozen=True)
class Said:
    """What one command said."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """Standard output read as JSON."""
        assert self.code == 0, self.err
        return json.loads(self.out)


Command = Callable[..., Said]


@pytest.fixture
def clockfall(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Command:
    """Run one command line in this process, as in a pipe 80 columns wide."""
    monkeypatch.setenv("COLUMNS", "80")

    def command(*arguments: object) -> Said:
        capsys.readouterr()
        code = run([str(argument) for argument in arguments])
        captured = capsys.readouterr()
        assert "Traceback" not in captured.err
        return Said(code, captured.out, captured.err)

    return command


@pytest.fixture
def fresh_clockfall() -> Command:
    """Run one command line in a fresh process, as a user does."""
    script = Path(sys.executable).with_name("clockfall")

    def command(*arguments: object, environment: dict[str, str] | None = None, **more: Any) -> Said:
        ended = subprocess.run(
            [script, *(str(argument) for argument in arguments)],
            capture_output=True,
            text=True,
            check=False,
            timeout=120,
            env={**os.environ, **(environment or {})},
            **more,
        )
        return Said(ended.returncode, ended.stdout, ended.stderr)

    return command
