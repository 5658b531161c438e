"""The functions whose zeros are sought, on polynomials (14, 2, n) of P and D at x (n,); see ``scene``. And guesses."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.geometry import stencil
from passplan.geometry.timescale import Floats


def excess(x: Floats, powers: Floats, sine: Floats) -> tuple[Floats, Floats]:
    """F and its slope."""
    (p, d), (dp, dd) = stencil.slope(powers, x)
    root = np.sqrt(d)
    dd /= root
    root *= sine
    p -= root
    dd *= sine
    dd *= 0.5
    dp -= dd
    return p, dp


def excess_slope(x: Floats, powers: Floats, sine: Floats) -> tuple[Floats, Floats]:
    """The slope of F and its bend."""
    (_, d), (dp, dd), (ddp, ddd) = stencil.bend(powers, x)
    root = np.sqrt(d)
    return dp - 0.5 * sine * dd / root, ddp - 0.5 * sine * (ddd / root - 0.5 * dd * dd / (d * root))


def toward_peak(x: Floats, powers: Floats) -> tuple[Floats, Floats]:
    """P' D - P D'/2, which is zero where the elevation peaks, and its slope."""
    (p, d), (dp, dd), (ddp, ddd) = stencil.bend(powers, x)
    return dp * d - 0.5 * p * dd, ddp * d + 0.5 * (dp * dd - p * ddd)


def toward_nearest(x: Floats, powers: Floats) -> tuple[Floats, Floats]:
    """D' and its slope, for polynomials of D' alone."""
    return stencil.slope(powers, x)


def vertex(values: Floats, at: NDArray[np.int64]) -> Floats:
    """Vertex of the parabola through each value and its neighbours, in steps from it and at most one away."""
    before, here, after = values.take(at - 1), values.take(at), values.take(at + 1)
    bend = before - 2.0 * here + after
    ratio = np.divide(before - after, 2.0 * bend, out=np.zeros(at.size), where=bend != 0.0)
    return np.asarray(np.minimum(np.maximum(ratio, -1.0), 1.0))
