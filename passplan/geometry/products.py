"""Matrix products in pieces small enough that the linear algebra library stays on one thread.

OpenBLAS, which NumPy ships with, starts its threads from 2^18 multiplications on. Products as thin as
ours gain nothing from them, and on a busy machine they wait for each other: three times slower was seen.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from passplan.geometry.timescale import Floats

_MULTIPLICATIONS = 2**18


def product(left: Floats, right: Floats) -> Floats:
    """``left @ right`` for a small (m, k) and a wide (k, n) array."""
    result = np.empty((left.shape[0], right.shape[1]))
    for piece in pieces(left.shape, right.shape[1]):
        np.matmul(left, right[:, piece], out=result[:, piece])
    return result


def pieces(small: tuple[int, ...], width: int) -> Iterator[slice]:
    """Columns of a wide array, ``width`` in all, so many at a time as a ``small`` (m, k) array may be multiplied by."""
    step = max(1, _MULTIPLICATIONS // math.prod(small))
    return (slice(at, at + step) for at in range(0, width, step))
