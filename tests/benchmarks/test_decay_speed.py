"""What a budget with uncertainties costs beside its formulas, and how its memory grows."""

from __future__ import annotations

import subprocess
import sys
import tracemalloc
from pathlib import Path

import numpy as np
import pytest

from clockfall.analysis.budget import decay
from clockfall.analysis.draws import draw
from clockfall.analysis.study import Choices, applied_to
from clockfall.effects.loading import load_host
from clockfall.files.system_file import read_system

from .timing import median_ratio

pytestmark = pytest.mark.benchmark_ratio

SYSTEM = Path(__file__).parents[2] / "fixtures" / "published" / "psr-j0737-3039a.toml"
DRAWS = 65_536
LARGEST_RATIO_TO_FORMULAS = 3.0
HOOKS = ("secular_rates", "predicted_parameters", "closed_form_track")


def test_a_budget_costs_three_times_its_formulas() -> None:
    """`decay` with every effect and 65,536 draws takes at most 3 times what the effects' formulas take in numpy.

    The formulas are the effects' own functions, called one after the other on the same arrays without the host: no
    draws, no checks, no sums, no quantiles. Quantities that they share are computed once, as a script would.
    """
    host = load_host(strict=True)
    system = read_system(SYSTEM, host.cards).system
    choices = Choices(draws=DRAWS).with_system(system)
    sample = draw(system, host.cards, draws=DRAWS)
    applied = applied_to(host, sample, choices)
    calls = [
        (getattr(effect.plugin, hook), applied.settings_of(effect))
        for effect in applied.active
        for hook in HOOKS
        if hook in host.hooks_of(effect)
    ]

    def formulas() -> None:
        state = sample.state.replace()  # so that nothing is known beforehand
        for function, settings in calls:
            arguments = {"state": state, "settings": settings, "times": np.empty(0)}
            names = function.__code__.co_varnames[: function.__code__.co_argcount]
            function(*(arguments[name] for name in names))

    def budget() -> None:
        for finding in decay(host, system, Choices(draws=DRAWS)).findings:
            assert finding.drawn.interval is not None or not finding.drawn.draws.size

    ratio = median_ratio(budget, formulas, repeats=21)
    print(f"budget over formulas: {ratio:.2f}")  # noqa: T201  the measurement is the point
    assert ratio <= LARGEST_RATIO_TO_FORMULAS


def test_memory_is_linear_in_the_draws() -> None:
    """Four times the draws take at most 4.2 times the memory at the peak."""
    host = load_host(strict=True)
    system = read_system(SYSTEM, host.cards).system

    def peak(draws: int) -> int:
        tracemalloc.start()
        decay(host, system, Choices(draws=draws))
        _, most = tracemalloc.get_traced_memory()
        tracemalloc.stop()
        return most

    peak(1024)  # imports
    small, large = peak(2**16), peak(2**18)
    print(f"peak {small / 2**20:.0f} MiB, then {large / 2**20:.0f} MiB")  # noqa: T201
    assert large <= 4.2 * small


def test_the_whole_command() -> None:
    """`clockfall decay` with 65,536 draws takes at most 1.6 times what the imports take that it cannot do without.

    On two quiet cores that is some 2 s; an absolute time would measure the machine's other work.
    """
    command = ["decay", str(SYSTEM), "--draws", str(DRAWS), "-q"]
    entry = "import sys; from clockfall.app.main import main; sys.argv[0] = 'clockfall'; main()"

    def run(*arguments: str) -> None:
        subprocess.run([sys.executable, *arguments], check=True, capture_output=True)

    imports = "import numpy, scipy.special, astropy.units, click, rich.table"
    ratio = median_ratio(lambda: run("-c", entry, *command), lambda: run("-c", imports), repeats=7)
    print(f"whole command over its imports: {ratio:.2f}")  # noqa: T201
    assert ratio <= 1.6
