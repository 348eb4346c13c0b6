"""clockfall: how a relativistic binary's orbit, and its signals, change with time, effect by effect.

The public door. Names are loaded on first use, so that importing clockfall costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from clockfall.analysis.budget import decay
    from clockfall.analysis.inspiral import inspiral
    from clockfall.analysis.outcome import Outcome
    from clockfall.analysis.rates import rates
    from clockfall.analysis.study import Choices
    from clockfall.analysis.system import System, Uncertain
    from clockfall.analysis.weigh import weigh
    from clockfall.binary.epoch import Epoch
    from clockfall.binary.state import BinaryState
    from clockfall.effects.host import Host
    from clockfall.effects.loading import load_host
    from clockfall.errors import BadInput, ClockfallError
    from clockfall.files.results import read_result
    from clockfall.files.system_file import read_system

__version__ = "0.1.0"

__all__ = [
    "BadInput",
    "BinaryState",
    "Choices",
    "ClockfallError",
    "Epoch",
    "Host",
    "Outcome",
    "System",
    "Uncertain",
    "__version__",
    "decay",
    "inspiral",
    "load_host",
    "rates",
    "read_result",
    "read_system",
    "weigh",
]

_HOME = {
    "BadInput": "clockfall.errors",
    "BinaryState": "clockfall.binary.state",
    "Choices": "clockfall.analysis.study",
    "ClockfallError": "clockfall.errors",
    "Epoch": "clockfall.binary.epoch",
    "Host": "clockfall.effects.host",
    "Outcome": "clockfall.analysis.outcome",
    "System": "clockfall.analysis.system",
    "Uncertain": "clockfall.analysis.system",
    "decay": "clockfall.analysis.budget",
    "inspiral": "clockfall.analysis.inspiral",
    "load_host": "clockfall.effects.loading",
    "rates": "clockfall.analysis.rates",
    "read_result": "clockfall.files.results",
    "read_system": "clockfall.files.system_file",
    "weigh": "clockfall.analysis.weigh",
}


def __getattr__(name: str) -> Any:
    if name in _HOME:
        return getattr(import_module(_HOME[name]), name)
    raise AttributeError(f"module 'clockfall' has no attribute {name!r}; it offers {', '.join(__all__)}")


def __dir__() -> list[str]:
    return __all__
