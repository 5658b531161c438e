"""Interpolation on an even grid by a 12-point Lagrange stencil, as one polynomial per event.

A stencil holds 5 samples before the interval of interest and 6 from its end on. Its error in the
middle is 5.5e-5 (omega h)^12 of the amplitude, so 360 s is enough for low orbits (omega h = 0.4).
Near the ends of a grid the stencil is shifted inwards, never beyond the samples.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import Floats

POINTS = 12
_BEFORE = 5
_NODES = np.arange(POINTS) - _BEFORE


def _samples_to_powers() -> Floats:
    """Row k turns the 12 samples into the coefficient of x^k (inverse Vandermonde matrix)."""
    return np.asarray(np.linalg.inv(np.vander(_NODES.astype(float), increasing=True)), float)


_POWERS = _samples_to_powers()


def place(interval: NDArray[np.int64], length: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """First sample of each stencil around grid ``interval``, and the sample where its x is 0."""
    first = np.clip(interval - _BEFORE, 0, length - POINTS)
    return first, first + _BEFORE


def polynomials(rows: Floats, row: NDArray[np.int64], first: NDArray[np.int64]) -> Floats:
    """Coefficients (12, n) of the interpolant of ``rows[row[i]]`` (2-d array) on the stencil from ``first[i]``."""
    flat = rows.reshape(-1)
    samples = flat[(row * rows.shape[1] + first) + np.arange(POINTS)[:, None]]
    return np.asarray(_POWERS @ samples)


def value(powers: Floats, x: Floats) -> Floats:
    """Value of the polynomials at ``x`` (n,), in steps of the grid."""
    total = powers[-1].copy()
    for k in range(POINTS - 2, -1, -1):
        total *= x
        total += powers[k]
    return total


def slope(powers: Floats, x: Floats) -> tuple[Floats, Floats]:
    """Value and first derivative (per grid step)."""
    total, first = powers[-1].copy(), np.zeros_like(x)
    for k in range(POINTS - 2, -1, -1):
        first *= x
        first += total
        total *= x
        total += powers[k]
    return total, first


def bend(powers: Floats, x: Floats) -> tuple[Floats, Floats, Floats]:
    """Value, first and second derivative (per grid step)."""
    total, first, half = powers[-1].copy(), np.zeros_like(x), np.zeros_like(x)
    for k in range(POINTS - 2, -1, -1):
        half *= x
        half += first
        first *= x
        first += total
        total *= x
        total += powers[k]
    return total, first, 2.0 * half


def weights(x: Floats) -> Floats:
    """Weights (12, n) of the samples for a value at ``x`` (n,); exact at the nodes."""
    powers = np.empty((POINTS, x.size))
    powers[0] = 1.0
    for k in range(1, POINTS):
        np.multiply(powers[k - 1], x, out=powers[k])
    return np.asarray(_POWERS.T @ powers)
