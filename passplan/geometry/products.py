"""Matrix products in pieces small enough that the linear algebra library stays on one thread.

OpenBLAS, which NumPy ships with, starts its threads from 2^18 multiplications on. Products as thin as
ours gain nothing from them, and on a busy machine they wait for each other: three times slower was seen.
"""

from __future__ import annotations

import numpy as np

from passplan.geometry.timescale import Floats

_MULTIPLICATIONS = 2**18


def product(left: Floats, right: Floats) -> Floats:
    """``left @ right`` for a small (m, k) and a wide (k, n) array."""
    rows, inner = left.shape
    result = np.empty((rows, right.shape[1]))
    step = max(1, _MULTIPLICATIONS // (rows * inner))
    for at in range(0, right.shape[1], step):
        piece = slice(at, at + step)
        np.matmul(left, right[:, piece], out=result[:, piece])
    return result
