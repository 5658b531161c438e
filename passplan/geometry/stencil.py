"""Interpolation on an even grid by a 14-point Lagrange stencil, as one polynomial per event.

A stencil holds 6 samples before the interval of interest and 7 from its end on. Its error in the
middle is 1.3e-5 (omega h)^14 of the amplitude of every harmonic: centimetres for low orbits at 300 s, where
the third harmonic (from the Earth's oblateness, kilometres strong) has omega h = 1.
Near the ends of a grid the stencil is shifted inwards, never beyond the samples.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.lib.stride_tricks import as_strided
from numpy.typing import NDArray

from passplan.geometry.products import product
from passplan.geometry.timescale import Floats

POINTS = 14
_BEFORE = 6
_NODES = np.arange(POINTS) - _BEFORE
_ORDERS = np.arange(float(POINTS))[:, None]
# So few polynomials are summed up in three calls; Horner's fifty, each on little, would take three times as long.
_FEW = 150


def _samples_to_powers() -> Floats:
    """Row k turns the 14 samples into the coefficient of x^k.

    Each column is a Lagrange basis polynomial, multiplied out in whole numbers: inverting the Vandermonde
    matrix in floating point would lose four digits.
    """
    columns = []
    for node in _NODES.tolist():
        others = [other for other in _NODES.tolist() if other != node]
        powers = [1]
        for other in others:
            powers = [a - other * b for a, b in zip([0, *powers], [*powers, 0], strict=True)]
        scale = math.prod(node - other for other in others)
        columns.append([power / scale for power in powers])
    return np.array(columns).T


_POWERS = _samples_to_powers()


def place(interval: NDArray[np.int64], length: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """First sample of each stencil around grid ``interval``, and the sample where its x is 0."""
    first = np.minimum(np.maximum(interval - _BEFORE, 0), length - POINTS)
    return first, first + _BEFORE


def polynomials(rows: Floats, row: NDArray[np.int64], first: NDArray[np.int64]) -> Floats:
    """Coefficients (14, n) of the interpolant of ``rows[row[i]]`` (2-d array) on the stencil from ``first[i]``."""
    return powers_of(samples(rows, row, first))


def powers_of(stencils: Floats) -> Floats:
    """Coefficients (14, n) of the polynomials through ``stencils`` (n, 14)."""
    return product(_POWERS, stencils.T)


def samples(rows: Floats, row: NDArray[np.int64], first: NDArray[np.int64]) -> Floats:
    """The samples (n, 14) of ``rows[row[i]]``, a contiguous 2-d array, from ``first[i]`` on."""
    # Whole stencils are copied at a time: far kinder to the cache than gathering sample by sample.
    flat = rows.reshape(-1)
    shape = (max(flat.size - POINTS + 1, 0), POINTS)
    stencils = as_strided(flat, shape, (flat.strides[0], flat.strides[0]), writeable=False)
    return np.asarray(stencils[row * rows.shape[1] + first])


def value(powers: Floats, x: Floats) -> Floats:
    """Value of the polynomials (14, ..., n) at ``x`` (n,), in steps of the grid; other shapes are broadcast."""
    total: Floats = powers[-1] * x
    for k in range(POINTS - 2, 0, -1):
        total += powers[k]
        total *= x
    total += powers[0]
    return total


def slope(powers: Floats, x: Floats) -> tuple[Floats, Floats]:
    """Value and first derivative (per grid step), of polynomials of any degree (terms, ..., n)."""
    if x.size <= _FEW:
        basis = _basis(x, len(powers))
        return _sum(powers, basis), _sum(powers[1:], basis[:-1] * _ORDERS[1:len(powers)])
    total = powers[-1] * x
    total += powers[-2]
    first = powers[-1].copy()
    for k in range(len(powers) - 3, -1, -1):
        first *= x
        first += total
        total *= x
        total += powers[k]
    return total, first


def bend(powers: Floats, x: Floats) -> tuple[Floats, Floats, Floats]:
    """Value, first and second derivative (per grid step)."""
    if x.size <= _FEW:
        basis = _basis(x, POINTS)
        twice = basis[:-2] * (_ORDERS[2:] * _ORDERS[1:-1])
        return _sum(powers, basis), _sum(powers[1:], basis[:-1] * _ORDERS[1:]), _sum(powers[2:], twice)
    total = powers[-1] * x
    total += powers[-2]
    first = powers[-1].copy()
    half = np.zeros_like(first)
    for k in range(POINTS - 3, -1, -1):
        half *= x
        half += first
        first *= x
        first += total
        total *= x
        total += powers[k]
    return total, first, 2.0 * half


def derivative(powers: Floats) -> Floats:
    """The derivatives (13, n) of the polynomials (14, n), per grid step."""
    return powers[1:] * _ORDERS[1:]


def _basis(x: Floats, terms: int) -> Floats:
    """The first ``terms`` powers of ``x``, from 0 on, (terms, n)."""
    basis = np.empty((terms, x.size))
    basis[0] = 1.0
    basis[1:] = x
    return np.multiply.accumulate(basis, axis=0, out=basis)


def _sum(powers: Floats, basis: Floats) -> Floats:
    return np.asarray(np.einsum("k...n,kn->...n", powers, basis))


def interpolate(parts: Sequence[Floats], row: NDArray[np.int64], sample: NDArray[np.int64], at: Floats) -> Floats:
    """Values (parts, k, n) of each part's ``rows[row[i]]`` (2-d arrays of one shape) at grid instants ``at`` (k, n).

    The k instants of a column share the stencil around grid interval ``sample`` (n,).
    """
    first, zero = place(sample, parts[0].shape[1])
    x = at - zero
    return np.stack([value(polynomials(rows, row, first)[:, None], x) for rows in parts])
