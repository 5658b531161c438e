"""Where a mount can point at all: its elevation or axis limits, or the cone of a fixed aperture.

Unlike a mask, a limit may lie above the object: a pass over a mount that stops at 85 deg becomes two windows.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.axes import axis_angles_deg, cone_angle_deg
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.roots import Flags, Indices
from passplan.geometry.sky import Sky
from passplan.geometry.timescale import Floats
from passplan.inputs.mounts import Mount

# Nodes per grid step, and the fewest of a window; directions bend little between them.
_NODES_PER_STEP = 16
_LEAST_NODES = 8
# Halvings of a sixteenth of a grid step; a step lasts half an hour at most, so the rest is below a microsecond.
_HALVINGS = 36


@dataclass(frozen=True)
class Reach:
    """What a mount reaches; ``height_km`` is that of the site where refraction counts, None where it does not."""

    mount: Mount
    height_km: float | None = None

    def clearance_deg(self, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
        """How far [deg] inside its limits the mount is, at geometric directions; negative outside."""
        height = elevation_deg if self.height_km is None else apparent_deg(elevation_deg, self.height_km)
        if self.mount.kind == "fixed":
            return np.asarray((self.mount.cone_deg or 0.0) - cone_angle_deg(self.mount, azimuth_deg, height))
        inside = np.full(np.shape(height), np.inf)
        limits = [(self.mount.upper_from_deg, self.mount.upper_to_deg)]
        # The travel in azimuth is a matter of turns, not of directions.
        if self.mount.kind == "x_y":
            limits.append((self.mount.lower_from_deg, self.mount.lower_to_deg))
        angles = axis_angles_deg(self.mount, azimuth_deg, height)[::-1]
        for angle, (low, high) in zip(angles, limits, strict=False):
            if low is not None and high is not None:
                inside = np.minimum(inside, np.minimum(angle - low, high - angle))
        return inside


def reach_of(mount: Mount | None, height_km: float | None) -> Reach | None:
    """The reach of a mount, None where it can point anywhere."""
    if mount is None:
        return None
    free = mount.upper_from_deg is None and (mount.kind == "az_el" or mount.lower_from_deg is None)
    return None if mount.kind != "fixed" and free else Reach(mount, height_km)


def cut_to_reach(sky: Sky, reach: Reach, start: Floats, end: Floats, peak: Floats) -> tuple[Indices, Floats, Floats]:
    """Pieces of the windows [start, end] (grid steps) within ``reach``: window number, start and end of each.

    ``sky`` holds the windows; ``peak`` is their highest moment. All (n,).
    """
    window, at = _nodes(start, end, np.clip(peak, start, end))
    over = _inside(reach, sky.at(sky.number(window, at), at))
    same = window[1:] == window[:-1]
    left, right, owner = at[:-1][same], at[1:][same], window[:-1][same]
    first, last = over[:-1][same], over[1:][same]
    begin, finish = left.copy(), right.copy()
    turns = np.flatnonzero(first != last)
    number = sky.number(owner[turns], left[turns])
    local, zero = sky.local(number), sky.zero[number]
    low, high = left[turns], right[turns]
    for _ in range(_HALVINGS if turns.size else 0):
        middle = 0.5 * (low + high)
        like_first = _inside(reach, stencil.value(local, middle - zero)) == first[turns]
        low, high = np.where(like_first, middle, low), np.where(like_first, high, middle)
    begin[turns[last[turns]]] = high[last[turns]]
    finish[turns[first[turns]]] = low[first[turns]]
    keep = first | last
    owner, begin, finish = owner[keep], begin[keep], finish[keep]
    if not owner.size:
        return owner, begin, finish
    fresh = np.ones(owner.size, bool)
    fresh[1:] = (owner[1:] != owner[:-1]) | (begin[1:] != finish[:-1])
    heads = np.flatnonzero(fresh)
    return owner[heads], begin[heads], finish[np.append(heads[1:] - 1, owner.size - 1)]


def _nodes(start: Floats, end: Floats, peak: Floats) -> tuple[Indices, Floats]:
    """Instants in each window in order of time: evenly spread ones, both edges and the peak among them."""
    count = np.maximum(np.ceil((end - start) * _NODES_PER_STEP).astype(np.int64), _LEAST_NODES)
    window = np.repeat(np.arange(start.size), count + 1)
    number = np.arange(window.size) - np.repeat(np.cumsum(count + 1) - count - 1, count + 1)
    at = start[window] + (end - start)[window] * (number / count[window])
    at[number == count[window]] = end
    window, at = np.concatenate([window, np.arange(start.size)]), np.concatenate([at, peak])
    order = np.lexsort((at, window))
    return window[order], at[order]


def _inside(reach: Reach, local: Floats) -> Flags:
    east, north, up = local
    azimuth = np.degrees(np.arctan2(east, north))
    return np.asarray(reach.clearance_deg(azimuth, np.degrees(np.arctan2(up, np.hypot(east, north)))) > 0.0)
