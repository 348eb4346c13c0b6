"""How long it takes to start, in units of Python's own start."""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

import pytest

from .timing import median_ratio

pytestmark = pytest.mark.benchmark_ratio


def process(*arguments: str | Path) -> str:
    """Run a process to its end and return what it printed."""
    return subprocess.run(arguments, check=True, capture_output=True, text=True).stdout


def test_help_comes_at_once() -> None:
    """`clockfall --help` takes at most 8 times a Python that does nothing."""
    script = Path(sys.executable).with_name("clockfall")
    assert "decay" in process(script, "--help")
    ratio = median_ratio(
        lambda: process(script, "--help"), lambda: process(sys.executable, "-c", "pass"), 21, time.perf_counter
    )
    print(f"\nclockfall --help: {ratio:.1f} times a bare Python")  # noqa: T201
    assert ratio <= 8.0


def test_importing_costs_no_more_than_numpy() -> None:
    """`import clockfall` takes at most 1.3 times `import numpy`."""
    assert process(sys.executable, "-c", "import clockfall; print(clockfall.__version__)").strip()
    ratio = median_ratio(
        lambda: process(sys.executable, "-c", "import clockfall"),
        lambda: process(sys.executable, "-c", "import numpy"),
        21,
        time.perf_counter,
    )
    print(f"\nimport clockfall: {ratio:.2f} times import numpy")  # noqa: T201
    assert ratio <= 1.3
