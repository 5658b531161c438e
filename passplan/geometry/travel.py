"""Azimuth travel: the turn of the cables on which a pass starts, chosen before it, and what it leaves of the pass."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import Floats
from passplan.inputs.mounts import Mount


@dataclass(frozen=True)
class Branch:
    """``turn_deg`` is added to the unwrapped azimuth; [``start_s``, ``end_s``] is the part of the pass within travel.

    ``whole`` where that is all of it. ``start_s`` = ``end_s`` where no part is.
    """

    turn_deg: float
    start_s: float
    end_s: float
    whole: bool


def unwrapped_deg(azimuth_deg: Floats) -> Floats:
    """Azimuths (n,) of one pass without jumps at north; the first stays in [0, 360)."""
    return np.asarray(np.unwrap(azimuth_deg, period=360.0))


def runs_unwrapped_deg(azimuth_deg: Floats, offsets: NDArray[np.int64]) -> Floats:
    """Azimuths (n,) of many passes without jumps at north; pass i is ``offsets[i]`` to before ``offsets[i + 1]``."""
    step = np.diff(azimuth_deg, prepend=azimuth_deg[:1])
    turns = -np.rint(step / 360.0)
    turns[offsets[:-1]] = 0.0
    total = np.cumsum(turns)
    return np.asarray(azimuth_deg + 360.0 * (total - np.repeat(total[offsets[:-1]], np.diff(offsets))))


def roomiest_turns_deg(mount: Mount, lowest_deg: Floats, highest_deg: Floats) -> tuple[Floats, Floats]:
    """For passes between unwrapped azimuths (n,): the whole turn that stays furthest from both ends of the travel.

    Of equals the lower one, and how far it stays [deg]; negative where no turn keeps the whole pass. Without travel
    limits no turn, and infinity.
    """
    if mount.kind != "az_el" or mount.lower_from_deg is None or mount.lower_to_deg is None:
        return np.zeros_like(lowest_deg), np.full_like(lowest_deg, np.inf)
    middle = 0.5 * (mount.lower_from_deg + mount.lower_to_deg)
    turn = 360.0 * np.ceil((middle - 0.5 * (lowest_deg + highest_deg)) / 360.0 - 0.5)
    spare = np.minimum(lowest_deg + turn - mount.lower_from_deg, mount.lower_to_deg - highest_deg - turn)
    return turn, spare


def choose_branch(mount: Mount, time_s: Floats, unwrapped: Floats) -> Branch:
    """The branch for a pass with unwrapped azimuths (n,) at ``time_s`` (n,), joined by straight lines.

    Of all whole turns the one that keeps the longest unbroken part of the pass within the travel; of equals
    the one that stays furthest from both ends of the travel, and then the lower one. A mount without travel
    limits keeps everything, without a turn.
    """
    if mount.kind != "az_el" or mount.lower_from_deg is None or mount.lower_to_deg is None:
        return Branch(0.0, float(time_s[0]), float(time_s[-1]), True)
    low, high = mount.lower_from_deg, mount.lower_to_deg
    first = math.floor((low - float(unwrapped.max())) / 360.0)
    last = math.ceil((high - float(unwrapped.min())) / 360.0)
    best: tuple[float, float, float] | None = None
    found = Branch(0.0, float(time_s[0]), float(time_s[0]), False)
    for turn in (360.0 * k for k in range(first, last + 1)):
        track = unwrapped + turn
        start, end = _longest_within(time_s, track, low, high)
        spare = min(float(track.min()) - low, high - float(track.max()))
        rank = (round(end - start, 6), spare, -turn)
        if end > start and (best is None or rank > best):
            best = rank
            found = Branch(turn, start, end, bool(start == time_s[0] and end == time_s[-1]))
    return found


def _longest_within(time_s: Floats, track: Floats, low: float, high: float) -> tuple[float, float]:
    """The longest unbroken stretch in which the polyline lies in [low, high]."""
    inside = (track >= low) & (track <= high)
    edges = np.flatnonzero(np.diff(np.concatenate(([False], inside, [False])).astype(np.int8)))
    best = (float(time_s[0]), float(time_s[0]))
    for begin, end in zip(edges[::2], edges[1::2] - 1, strict=True):
        start, stop = float(time_s[begin]), float(time_s[end])
        if begin > 0:
            start = _crossing(time_s, track, begin, begin - 1, low, high)
        if end < track.size - 1:
            stop = _crossing(time_s, track, end, end + 1, low, high)
        if stop - start > best[1] - best[0]:
            best = (start, stop)
    return best


def _crossing(time_s: Floats, track: Floats, inside: int, outside: int, low: float, high: float) -> float:
    limit = low if track[outside] < low else high
    share = (limit - track[inside]) / (track[outside] - track[inside])
    return float(time_s[inside] + share * (time_s[outside] - time_s[inside]))
