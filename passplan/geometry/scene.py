"""Samples of a block as seen from antennas: the two smooth scalars that carry the search.

For an object at r and an antenna at s with vertical u these are

    P = u . (r - s)   (km above the antenna's horizontal plane),   D = |r - s|^2   (km2).

The object is above elevation m while F = P - sin(m) sqrt(D) > 0. sqrt(D) itself is not smooth (it has
a sharp bottom in an overhead pass), so P and D are what gets interpolated.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.products import product
from passplan.geometry.roots import Indices
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block

# The last Newton step, s. Newton is quadratic, so less than a microsecond is left after it; in a grazing pass,
# where it is not, as much is left as the step.
_TOLERANCE_S = 2e-4


@dataclass(frozen=True)
class Scene:
    """P (km), D (km2) and F (km) as (pairs, times) for antennas x objects; pair = antenna * objects + object.

    ``both`` is P and D as one array (2, pairs, times). ``sines`` (pairs,) are those of the lowest elevation
    of each pair's mask; ``tolerance`` is in grid steps. ``step_km`` and ``bend_km`` (objects,) are the largest
    first and second difference of each object's positions.
    """

    both: Floats
    excess_km: Floats
    sines: Floats
    step_km: Floats
    bend_km: Floats
    tolerance: float

    @property
    def objects(self) -> int:
        """Objects, each of which makes a pair with every antenna."""
        return int(self.step_km.size)

    @property
    def length(self) -> int:
        """Samples per pair."""
        return int(self.excess_km.shape[1])

    @property
    def up_km(self) -> Floats:
        """P (pairs, times)."""
        return np.asarray(self.both[0])

    @property
    def range_km2(self) -> Floats:
        """D (pairs, times)."""
        return np.asarray(self.both[1])

    def polynomials(self, pair: Indices, sample: Indices) -> tuple[Floats, Floats]:
        """P and D as polynomials (14, 2, n) around ``sample``, and the x of that sample in them."""
        first, zero = stencil.place(sample, self.length)
        powers = stencil.polynomials(*self._rows(pair), np.concatenate([first, first]))
        return powers.reshape(len(powers), 2, -1), (sample - zero).astype(float)

    def near(self, pair: Indices, sample: Indices) -> Floats:
        """P and D as economized polynomials (11, 2, n) with x = 0 at ``sample``."""
        powers = stencil.near(*self._rows(pair), np.concatenate([sample, sample]))
        return powers.reshape(len(powers), 2, -1)

    def _rows(self, pair: Indices) -> tuple[Floats, Indices]:
        return self.both.reshape(-1, self.length), np.concatenate([pair, pair + self.sines.size])

    def at(self, pair: Indices, at: Floats) -> tuple[Floats, Floats]:
        """P and D (n,) at grid instants ``at``."""
        up, square = stencil.interpolate((self.both[0], self.both[1]), pair, np.floor(at).astype(np.int64), at[None])
        return up[0], square[0]


def view(block: Block, places: Stations, sines: Floats) -> Scene:
    """The scene of ``block`` from n antennas at ``places`` with the sines of their lowest elevations (n,).

    P and D are linear in (r, |r|^2, 1), so one matrix product gives both for every antenna.
    """
    _, objects, length = block.positions_km.shape
    flat = block.positions_km.reshape(3, -1)
    extended = np.empty((5, flat.shape[1]))
    extended[:3] = flat
    np.einsum("ij,ij->j", flat, flat, out=extended[3])
    extended[4] = 1.0
    count = sines.size
    linear = np.zeros((2 * count, 5))
    linear[:count, :3] = places.up
    linear[:count, 4] = -np.einsum("ij,ij->i", places.up, places.positions_km)
    linear[count:, :3] = -2.0 * places.positions_km
    linear[count:, 3] = 1.0
    linear[count:, 4] = np.einsum("ij,ij->i", places.positions_km, places.positions_km)
    both = product(linear, extended)
    excess = np.sqrt(both[count:])
    excess *= -sines[:, None]
    excess += both[:count]
    return Scene(
        both.reshape(2, -1, length),
        excess.reshape(-1, length),
        np.repeat(sines, objects),
        _largest(np.diff(block.positions_km, axis=2)),
        _largest(np.diff(block.positions_km, n=2, axis=2)),
        _TOLERANCE_S / block.step_s,
    )


def _largest(differences_km: Floats) -> Floats:
    """The longest vector of each object, of (3, objects, times)."""
    return np.asarray(np.sqrt(np.einsum("kij,kij->ij", differences_km, differences_km).max(axis=1)))
