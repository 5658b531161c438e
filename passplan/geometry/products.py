"""Matrix products in pieces small enough that the linear algebra library stays on one thread.

OpenBLAS, which NumPy ships with, starts its threads from 2^18 multiplications on. Products as thin as
ours gain nothing from them, and on a busy machine they wait for each other: three times slower was seen.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from passplan.geometry.timescale import Floats

_MULTIPLICATIONS = 2**18


def pieces(rows: int, inner: int, width: int) -> Iterator[slice]:
    """Column ranges of a (rows, inner) @ (inner, width) product that are each small enough."""
    step = max(1, _MULTIPLICATIONS // (rows * inner))
    for at in range(0, width, step):
        yield slice(at, at + step)


def product(left: Floats, right: Floats) -> Floats:
    """``left @ right`` for a small (m, k) and a wide (k, n) array."""
    result = np.empty((left.shape[0], right.shape[1]))
    for piece in pieces(left.shape[0], left.shape[1], right.shape[1]):
        np.matmul(left, right[:, piece], out=result[:, piece])
    return result
