"""Matrix products in pieces small enough that the linear algebra library stays on one thread.

OpenBLAS, which NumPy ships with, starts its threads from 2^18 multiplications on. Products as thin as
ours gain nothing from them, and on a busy machine they wait for each other: three times slower was seen.
"""

from __future__ import annotations

import numpy as np

from passplan.geometry.timescale import Floats

_MULTIPLICATIONS = 2**18


def product(left: Floats, right: Floats) -> Floats:
    """``left @ right`` for a small (m, k) and a wide (k, n) array, or for a tall (n, k) and a small (k, m) one."""
    (rows, inner), columns = left.shape, right.shape[1]
    result = np.empty((rows, columns))
    step = max(1, _MULTIPLICATIONS // max(1, min(rows, columns) * inner))
    for at in range(0, max(rows, columns), step):
        piece = slice(at, at + step)
        if columns >= rows:
            np.matmul(left, right[:, piece], out=result[:, piece])
        else:
            np.matmul(left[piece], right, out=result[piece])
    return result
