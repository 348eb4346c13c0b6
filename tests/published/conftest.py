"""Published systems and what their papers derived."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest

from clockfall.analysis.budget import decay
from clockfall.analysis.outcome import Outcome
from clockfall.analysis.rates import rates
from clockfall.analysis.system import System
from clockfall.analysis.weigh import weigh
from clockfall.effects.loading import load_host
from clockfall.files.quantity import Quantity, parse_quantity
from clockfall.files.system_file import read_system

PUBLISHED = Path(__file__).parents[2] / "fixtures" / "published"

Published = Callable[[str, str], Quantity]


@pytest.fixture(scope="session")
def published() -> Published:
    """Return a published number by system and name; its source and mark stand beside it in expected.toml."""
    expected = tomllib.loads((PUBLISHED / "expected.toml").read_text())

    def find(system: str, name: str) -> Quantity:
        entry = expected[system][name]
        assert entry["mark"] in ("seen", "transcription", "memory")
        assert entry["source"]
        return parse_quantity(entry["value"])

    return find


class Analysed:
    """One published system, analysed by whatever a test asks for."""

    def __init__(self, name: str) -> None:
        self.host = load_host(strict=True)
        self.system: System = read_system(PUBLISHED / f"{name}.toml", self.host.cards).system

    def decay(self) -> Outcome:
        """Return the budget of the decay."""
        return decay(self.host, self.system)

    def rates(self) -> Outcome:
        """Return all rates and predictions."""
        return rates(self.host, self.system)

    def weigh(self) -> Outcome:
        """Return the masses and the tests."""
        return weigh(self.host, self.system)


@pytest.fixture(scope="session")
def analysed() -> Callable[[str], Analysed]:
    """Return a published system by the name of its file."""
    return Analysed
