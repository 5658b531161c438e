"""Windows' objects in their antennas' local skies, as polynomials that cover the windows from end to end."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.roots import Indices
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block


@dataclass(frozen=True)
class Sky:
    """East, north and up (km) of n windows as polynomials (14, 3, polynomials).

    A window whose ``centre`` is known has one polynomial; a longer one has one for each grid interval.
    ``base`` (n,) numbers the first polynomial of each window, ``origin`` is the grid interval it stands for,
    ``zero`` (polynomials,) the grid instant where x is 0.
    """

    powers: Floats
    zero: Floats
    base: Indices
    origin: Indices
    last: Indices

    def number(self, window: Indices, at: Floats) -> Indices:
        """Number of the polynomial that serves ``window`` at grid instant ``at``."""
        interval = np.floor(at).astype(np.int64) - self.origin[window]
        return np.asarray(self.base[window] + np.minimum(np.maximum(interval, 0), self.last[window]))

    def at(self, number: Indices, at: Floats) -> Floats:
        """East, north and up (3, n) at grid instants ``at``."""
        return stencil.value(self.local(number), at - self.zero[number])

    def local(self, number: Indices) -> Floats:
        """The polynomials (14, 3, n)."""
        return self.powers.take(number, axis=-1)


def sky(block: Block, here: Stations, own: Indices, centre: Indices, start: Floats, end: Floats) -> Sky:
    """The skies of windows [start, end] (grid steps) of objects ``own`` from ``here``, n stations."""
    origin = np.where(centre >= 0, 0, np.floor(start).astype(np.int64))
    last = np.where(centre >= 0, 0, np.floor(end).astype(np.int64) - origin)
    base = np.cumsum(last + 1) - (last + 1)
    window = np.repeat(np.arange(own.size), last + 1)
    interval = np.where(centre[window] >= 0, centre[window], origin[window] + np.arange(window.size) - base[window])
    first, zero = stencil.place(interval, block.positions_km.shape[2])
    powers = np.empty((stencil.POINTS, 3, window.size))
    lines = [stencil.polynomials(part, own[window], first) for part in block.positions_km]
    for row, axis in enumerate((here.east, here.north, here.up)):
        along = sum(axis[window, k] * line for k, line in enumerate(lines))
        along[0] -= np.einsum("ij,ij->i", axis, here.positions_km)[window]
        powers[:, row] = along
    return Sky(powers, zero.astype(float), base, origin, last)
