"""Interpolation on an even grid by a 14-point Lagrange stencil, as one polynomial per event.

A stencil holds 6 samples before the interval of interest and 7 from its end on. Its error in the
middle is 1.3e-5 (omega h)^14 of the amplitude of every harmonic: centimetres for low orbits at 300 s, where
the third harmonic (from the Earth's oblateness, kilometres strong) has omega h = 1.
Near the ends of a grid the stencil is shifted inwards, never beyond the samples.

Where a polynomial is asked for many times and only near its middle, its last terms are dear and do nothing: there
it is replaced by the one of degree 10 that agrees with it at the Chebyshev nodes of [-3, 3] ("economization",
Lanczos, Applied Analysis). For omega h = 1 and an amplitude of 2 km that is 1 cm off, 2 (3/2)^11 / 11! of it.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

import numpy as np
from numpy.lib.stride_tricks import as_strided
from numpy.typing import NDArray

from passplan.geometry.products import product
from passplan.geometry.timescale import Floats

POINTS = 14
_BEFORE = 6
# An economized polynomial: its terms, and how far from its 0 it may be asked.
_TERMS, NEAR = 11, 3
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


def _economized(powers: Floats) -> Floats:
    """Row k turns the 14 samples into the coefficient of x^k of the economized polynomial, given those of the full."""
    nodes = NEAR * np.cos(np.pi * (np.arange(_TERMS) + 0.5) / _TERMS)
    values = np.vander(nodes, POINTS, increasing=True) @ powers
    return np.asarray(np.linalg.solve(np.vander(nodes, _TERMS, increasing=True), values), float)


_POWERS = _samples_to_powers()
_NEAR_POWERS = _economized(_POWERS)


def is_whole(interval: NDArray[np.int64], length: int) -> NDArray[np.bool_]:
    """Whether the stencils around grid ``interval`` are not shifted, as those asked for by :func:`near` may not be."""
    return np.asarray((interval >= _BEFORE) & (interval <= length - POINTS + _BEFORE))


def place(interval: NDArray[np.int64], length: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """First sample of each stencil around grid ``interval``, and the sample where its x is 0."""
    first = np.minimum(np.maximum(interval - _BEFORE, 0), length - POINTS)
    return first, first + _BEFORE


def polynomials(rows: Floats, row: NDArray[np.int64], first: NDArray[np.int64]) -> Floats:
    """Coefficients (14, n) of the interpolant of ``rows[row[i]]`` (2-d array) on the stencil from ``first[i]``."""
    return product(_POWERS, _samples(rows, row, first).T)


def near(rows: Floats, row: NDArray[np.int64], interval: NDArray[np.int64]) -> Floats:
    """Coefficients (11, n) of economized polynomials, for x from -3 to 3 with 0 at the sample ``interval``."""
    return product(_NEAR_POWERS, _samples(rows, row, interval - _BEFORE).T)


def _samples(rows: Floats, row: NDArray[np.int64], first: NDArray[np.int64]) -> Floats:
    """The samples (n, 14) of ``rows[row[i]]``, a contiguous 2-d array, from ``first[i]`` on."""
    # Whole stencils are copied at a time: far kinder to the cache than gathering sample by sample.
    flat = rows.reshape(-1)
    shape = (max(flat.size - POINTS + 1, 0), POINTS)
    stencils = as_strided(flat, shape, (flat.strides[0], flat.strides[0]), writeable=False)
    return np.asarray(stencils[row * rows.shape[1] + first])


def value(powers: Floats, x: Floats) -> Floats:
    """Value of polynomials of any degree (terms, ..., n) at ``x`` (n,), in grid steps; other shapes are broadcast."""
    total: Floats = powers[-1] * x
    for k in range(len(powers) - 2, 0, -1):
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
    """Value, first and second derivative (per grid step), of polynomials of any degree."""
    if x.size <= _FEW:
        basis, orders = _basis(x, len(powers)), _ORDERS[:len(powers)]
        twice = basis[:-2] * (orders[2:] * orders[1:-1])
        return _sum(powers, basis), _sum(powers[1:], basis[:-1] * orders[1:]), _sum(powers[2:], twice)
    total = powers[-1] * x
    total += powers[-2]
    first = powers[-1].copy()
    half = np.zeros_like(first)
    for k in range(len(powers) - 3, -1, -1):
        half *= x
        half += first
        first *= x
        first += total
        total *= x
        total += powers[k]
    return total, first, 2.0 * half


def derivative(powers: Floats) -> Floats:
    """The derivatives of the polynomials (terms, n), per grid step: one term less."""
    return powers[1:] * _ORDERS[1:len(powers)]


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
    return _evaluate((polynomials(rows, row, first) for rows in parts), at - zero)


def interpolate_near(
    parts: Sequence[Floats], row: NDArray[np.int64], sample: NDArray[np.int64], at: Floats
) -> Floats:
    """As :func:`interpolate`, by economized polynomials: ``at`` is within 3 of ``sample``."""
    return _evaluate((near(rows, row, sample) for rows in parts), at - sample)


def _evaluate(lines: Iterable[Floats], x: Floats) -> Floats:
    return np.stack([np.stack([value(powers, row) for row in x]) for powers in lines])
