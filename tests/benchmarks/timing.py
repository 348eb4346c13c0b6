"""Ratios of times within one run, so that the machine's other work hits both sides alike."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import numpy as np


def seconds(work: Callable[[], Any], clock: Callable[[], float] = time.thread_time) -> float:
    """Return the time of one call; by default processor time, so that waiting for a processor does not count."""
    start = clock()
    work()
    return clock() - start


def median_ratio(
    work: Callable[[], Any],
    unit: Callable[[], Any],
    repeats: int,
    clock: Callable[[], float] = time.thread_time,
) -> float:
    """Return the median over interleaved repeats of the time of `work` in units of that of `unit`."""
    work()
    unit()
    return float(np.median([seconds(work, clock) / seconds(unit, clock) for _ in range(repeats)]))
