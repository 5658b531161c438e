"""Elevation masks: constant, or a polyline over azimuth that wraps at north."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.refraction import geometric_deg
from passplan.geometry.timescale import Floats
from passplan.inputs.ground import Antenna

# Keeps the azimuths of different antennas apart in one sorted list.
_APART_DEG = 1_000.0
# Points closer than this in azimuth make a step.
_STEP_DEG = 1e-9
_BENT_PIECE_DEG = 0.2


@dataclass(frozen=True)
class Mask:
    """Straight pieces over azimuth: from (``begin_deg``, ``first_deg``) to (``finish_deg``, ``last_deg``).

    The pieces cover [0, 360] in order without a gap; none crosses north. A constant mask is one piece.
    """

    begin_deg: Floats
    finish_deg: Floats
    first_deg: Floats
    last_deg: Floats

    @cached_property
    def lowest_deg(self) -> float:
        """The least elevation of the mask anywhere."""
        return float(min(self.first_deg.min(), self.last_deg.min()))

    @cached_property
    def constant(self) -> bool:
        """Whether the mask is the same all round."""
        return bool(np.all(self.first_deg == self.lowest_deg) and np.all(self.last_deg == self.lowest_deg))

    @cached_property
    def slope(self) -> Floats:
        """Degrees of elevation per degree of azimuth, for each piece."""
        return np.asarray((self.last_deg - self.first_deg) / (self.finish_deg - self.begin_deg))

    def piece(self, azimuth_deg: Floats) -> np.ndarray:
        """Number of the piece that holds each azimuth in [0, 360)."""
        return np.clip(np.searchsorted(self.begin_deg, azimuth_deg, side="right") - 1, 0, self.begin_deg.size - 1)

    def elevation_deg(self, azimuth_deg: Floats) -> Floats:
        """The mask at azimuths of any shape, wrapped into [0, 360)."""
        azimuth = np.asarray(azimuth_deg, float) % 360.0
        piece = self.piece(azimuth)
        return np.asarray(self.first_deg[piece] + self.slope[piece] * (azimuth - self.begin_deg[piece]))


def mask_of(antenna: Antenna) -> Mask:
    """The higher of the antenna's table and its ``min_elevation_deg``, as straight pieces.

    The table is joined by straight lines and wraps at north; two points of one azimuth make a step.
    """
    return table_mask(antenna.mask, antenna.min_elevation_deg)


def table_mask(table: Sequence[tuple[float, float]], floor: float) -> Mask:
    """The higher of a table of (azimuth, elevation) points and ``floor``, in degrees."""
    if not table:
        return Mask(np.array([0.0]), np.array([360.0]), np.array([floor]), np.array([floor]))
    points = _wrapped(sorted(table, key=lambda point: point[0]))
    pieces: list[tuple[float, float, float, float]] = []
    for (a, x), (b, y) in pairwise(points):
        if b - a < _STEP_DEG:
            continue
        if (x - floor) * (y - floor) < 0.0:
            turn = a + (b - a) * (floor - x) / (y - x)
            if a < turn < b:
                pieces += [(a, turn, max(x, floor), floor), (turn, b, floor, max(y, floor))]
                continue
        pieces.append((a, b, max(x, floor), max(y, floor)))
    return Mask(*(np.array(column, float) for column in zip(*pieces, strict=True)))


def unbent(mask: Mask, height_km: float) -> Mask:
    """The mask for geometric elevations that holds where the refracted ones, at ``height_km``, pass ``mask``.

    Sloping pieces are divided, so that the straight lines stay within 0.0002 deg of the bent ones.
    """
    parts = np.maximum(np.ceil(np.abs(mask.last_deg - mask.first_deg) / _BENT_PIECE_DEG).astype(int), 1)
    owner = np.repeat(np.arange(parts.size), parts)
    number = np.arange(owner.size) - np.repeat(np.cumsum(parts) - parts, parts)
    low, high = number / parts[owner], (number + 1) / parts[owner]

    def between(first: Floats, last: Floats, share: Floats) -> Floats:
        return np.asarray(np.where(share == 1.0, last[owner], first[owner] + share * (last - first)[owner]))

    edges = [between(mask.begin_deg, mask.finish_deg, share) for share in (low, high)]
    heights = [geometric_deg(between(mask.first_deg, mask.last_deg, share), height_km) for share in (low, high)]
    return Mask(edges[0], edges[1], heights[0], heights[1])


def _wrapped(points: list[tuple[float, float]]) -> list[tuple[float, float]]:
    """The table with points at exactly 0 and 360 deg, where the line across north passes them."""
    (first, low), (last, high) = points[0], points[-1]
    span = first + 360.0 - last
    at_north = high if span <= 0.0 else high + (low - high) * (360.0 - last) / span
    head = [] if first == 0.0 else [(0.0, at_north)]
    tail = [] if last == 360.0 else [(360.0, at_north)]
    return head + points + tail


@dataclass(frozen=True)
class Masks:
    """The pieces of several antennas' masks, one after the other; a piece has one number among them all.

    ``centre_deg``, ``level_deg`` and ``slope`` (pieces,) describe the line of each piece, ``corner_deg`` the azimuth
    where it begins; ``base``, ``count`` and ``highest_deg`` (antennas,) belong to the antennas.
    """

    centre_deg: Floats
    level_deg: Floats
    slope: Floats
    corner_deg: Floats
    base: NDArray[np.int64]
    count: NDArray[np.int64]
    highest_deg: Floats

    @cached_property
    def _keys(self) -> Floats:
        return self.corner_deg + _APART_DEG * np.repeat(np.arange(self.base.size), self.count)

    def piece(self, antenna: NDArray[np.int64], azimuth_deg: Floats) -> NDArray[np.int64]:
        """Number of the piece that holds an azimuth in [0, 360) of an antenna."""
        return np.searchsorted(self._keys, azimuth_deg + _APART_DEG * antenna, side="right") - 1

    def beside(
        self, piece: NDArray[np.int64], antenna: NDArray[np.int64], steps: NDArray[np.int64]
    ) -> NDArray[np.int64]:
        """Number of the piece so many steps clockwise from ``piece``, around north if need be."""
        base = self.base[antenna]
        return base + (piece - base + steps) % self.count[antenna]


def joined_masks(masks: Sequence[Mask]) -> Masks:
    """The pieces of ``masks`` with one numbering."""
    count = np.array([mask.begin_deg.size for mask in masks])
    columns = ("begin_deg", "finish_deg", "first_deg", "last_deg", "slope")
    begin, finish, first, last, slope = (np.concatenate([getattr(mask, name) for mask in masks]) for name in columns)
    highest = np.array([max(mask.first_deg.max(), mask.last_deg.max()) for mask in masks])
    return Masks(0.5 * (begin + finish), 0.5 * (first + last), slope, begin, np.cumsum(count) - count, count, highest)
