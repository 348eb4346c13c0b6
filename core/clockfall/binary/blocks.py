"""Large arrays worked through in blocks that stay in the processor's cache."""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np

from clockfall.binary.ranges import FloatArray

BLOCK: Final = 8192
"""Elements: 64 kB for each array, so that the dozen temporaries of a formula stay in the second-level cache, and below
the size at which the allocator asks the system for fresh pages each time."""


def in_blocks(function: Callable[..., FloatArray], *arrays: FloatArray) -> FloatArray:
    """Return ``function(*arrays)`` for an elementwise function, computed block by block.

    Parameters
    ----------
    function : callable
        Elementwise; from arrays of one shape to an array of that shape.
    *arrays : arrays, shapes that broadcast together
        A scalar batch is passed through whole.
    """
    shape = np.broadcast_shapes(*(array.shape for array in arrays))
    size = int(np.prod(shape))
    if size <= BLOCK:
        return function(*arrays)
    flat = [np.broadcast_to(array, shape).reshape(-1) for array in arrays]
    result = np.empty(size)
    for start in range(0, size, BLOCK):
        part = slice(start, start + BLOCK)
        result[part] = function(*(array[part] for array in flat))
    return result.reshape(shape)
