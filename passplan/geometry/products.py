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
    width = right.shape[1]
    piece = max(1, _MULTIPLICATIONS // (rows * inner))
    result = np.empty((rows, width))
    for at in range(0, width, piece):
        np.matmul(left, right[:, at : at + piece], out=result[:, at : at + piece])
    return result
