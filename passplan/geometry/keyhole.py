r"""Seconds in which a mount is too slow: the keyhole at the zenith (azimuth-elevation) or at the horizon (X-Y).

An axis that is asked for more than its rate leaves the target early, slews at full rate, and meets the
target again later (a lead slew)::

    axis angle            ____----  target
                      _.'/
                     / .'           slew: a straight line, bent at its ends where acceleration is limited
              ____.-'/
         ----    ta tb

Where it leaves is the one thing to choose. Starts all along the approach are tried, and the one that loses the
fewest seconds is kept; of equals the earliest, so that the beam waits ahead of the target rather than behind it.
The seconds lost are those in which the angle on the sky between beam and target exceeds the permitted error.
On a symmetric pass over the zenith the best start is a full lead, which meets the target again as soon as the
mount can follow: it loses less than the slew centred on the culmination, by the time that one loses afterwards.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry.axes import off_axis_deg
from passplan.geometry.timescale import Floats

# Starts that are tried along the approach, and again around the best of them.
_STARTS, _FINE_STARTS = 40, 20


@dataclass(frozen=True)
class Axis:
    """Limits of one axis; an acceleration of infinity means that it turns at any rate at once."""

    rate_deg_s: float
    acceleration_deg_s2: float = np.inf


def fast_stretches(time_s: Floats, angle_deg: Floats, axis: Axis) -> list[tuple[int, int]]:
    """Index ranges [a, b] of samples between which the unwrapped angles (n,) ask for more than the axis has."""
    rate = np.diff(angle_deg) / np.diff(time_s)
    fast = np.abs(rate) > axis.rate_deg_s
    if np.isfinite(axis.acceleration_deg_s2) and rate.size > 1:
        change = np.abs(np.diff(rate)) / (0.5 * (time_s[2:] - time_s[:-2]))
        strong = change > axis.acceleration_deg_s2
        fast[:-1] |= strong
        fast[1:] |= strong
    edges = np.flatnonzero(np.diff(np.concatenate(([False], fast, [False])).astype(np.int8)))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]


def lost_stretches(
    time_s: Floats, angle_deg: Floats, upper_deg: Floats | None, axis: Axis, permitted_deg: float
) -> list[tuple[float, float]]:
    """Intervals [s] in which one axis is off by more than ``permitted_deg`` on the sky, with the best lead slews.

    ``angle_deg`` (n,) is unwrapped; ``upper_deg`` (n,) is the angle of the upper axis where the axis is the
    lower one, None where it is the upper one itself. Samples must be fine enough that straight lines join
    them: a tenth of the time that the fastest stretch takes. Fast stretches that one slew spans are one.
    """
    lost: list[tuple[float, float]] = []
    done = -1
    for first, last in fast_stretches(time_s, angle_deg, axis):
        if last <= done:
            continue
        found, done = _best_slew(time_s, angle_deg, upper_deg, axis, permitted_deg, first, last, done)
        lost += found
    return lost


def _best_slew(
    time_s: Floats, angle: Floats, upper: Floats | None, axis: Axis, permitted: float, first: int, last: int, done: int
) -> tuple[list[tuple[float, float]], int]:
    """The intervals lost by the best slew over the fast stretch [first, last], and the sample it is over at."""
    way = 1.0 if angle[last] >= angle[first] else -1.0
    target, rate = way * angle, way * np.gradient(angle, time_s)
    # What one slew at full rate from the stretch's far end can need at the most, either way.
    reach_s = abs(target[last] - target[first]) / axis.rate_deg_s + 2.0 * axis.rate_deg_s / axis.acceleration_deg_s2
    earliest = max(done, 0, int(np.searchsorted(time_s, time_s[first] - reach_s)))
    starts = np.unique(np.linspace(earliest, first, _STARTS).astype(int)).tolist()

    def tried(start: int) -> _Slew:
        path, end = _path(time_s, target, rate, axis, start, last)
        span = slice(start, end + 1)
        apart = target[span] - path
        off = np.abs(apart) if upper is None else off_axis_deg(apart, upper[span])
        stretches = _above(time_s[span], off, permitted)
        return _Slew(start, end, stretches, round(sum(b - a for a, b in stretches), 3))

    coarse = [tried(start) for start in starts]
    best = min(range(len(starts)), key=lambda k: coarse[k].total_s)
    near = (starts[max(best - 1, 0)], starts[min(best + 1, len(starts) - 1)])
    fine = [tried(start) for start in np.unique(np.linspace(*near, _FINE_STARTS).astype(int)).tolist()]
    found = min([*coarse, *fine], key=lambda slew: (slew.total_s, slew.start))
    return found.lost, found.end


@dataclass(frozen=True)
class _Slew:
    """A slew between two samples, the intervals it loses, and their sum."""

    start: int
    end: int
    lost: list[tuple[float, float]]
    total_s: float


def _path(time_s: Floats, target: Floats, rate: Floats, axis: Axis, start: int, last: int) -> tuple[Floats, int]:
    """The slew that leaves the target at ``start``, up to the first sample from ``last`` at which it is back on it.

    With rates v0 and v1 at its ends, full rate V and acceleration A, it covers in time T at most
    (v^2 - v0^2)/2A + (v^2 - v1^2)/2A + v (T - (2 v - v0 - v1)/A) with v = min(V, (v0 + v1 + A T)/2)
    (textbook kinematics).
    """
    top, strength = axis.rate_deg_s, axis.acceleration_deg_s2
    v0 = float(np.clip(rate[start], -top, top))
    later = np.arange(max(last, start + 1), target.size)
    if not later.size:
        return np.array([target[start]]), start
    length = time_s[later] - time_s[start]
    v1 = np.clip(rate[later], -top, top)
    if np.isinf(strength):
        most = top * length
    else:
        peak = np.minimum(top, 0.5 * (v0 + v1 + strength * length))
        most = (2.0 * peak**2 - v0**2 - v1**2) / (2.0 * strength) + peak * (length - (2.0 * peak - v0 - v1) / strength)
        most = np.where(peak >= np.maximum(v0, v1), most, -np.inf)
    back = np.flatnonzero(most >= target[later] - target[start])
    # A pass that ends first is left wherever the slew has got to.
    end = int(later[back[0]]) if back.size else target.size - 1
    since = time_s[start : end + 1] - time_s[start]
    if np.isinf(strength):
        path = target[start] + top * since
        return (np.minimum(path, target[end]) if back.size else path), end
    vend = float(np.clip(rate[end], -top, top))
    up_s = (min(top, 0.5 * (v0 + vend + strength * since[-1])) - v0) / strength
    rising = np.minimum(since, up_s)
    path = target[start] + v0 * rising + 0.5 * strength * rising**2 + (v0 + strength * up_s) * (since - rising)
    if back.size:
        left = since[-1] - since
        down_s = max((v0 + strength * up_s - vend) / strength, 0.0)
        braking = left < down_s
        path[braking] = target[end] - vend * left[braking] - 0.5 * strength * left[braking] ** 2
    return path, end


def _above(time_s: Floats, off_deg: Floats, permitted: float) -> list[tuple[float, float]]:
    """Where a polyline lies above ``permitted``."""
    over = off_deg > permitted
    edges = np.flatnonzero(np.diff(np.concatenate(([False], over, [False])).astype(np.int8)))
    found = []
    for begin, end in zip(edges[::2], edges[1::2] - 1, strict=True):
        ends = [float(time_s[begin]), float(time_s[end])]
        for k, (inner, outer) in enumerate(((begin, begin - 1), (end, end + 1))):
            if 0 <= outer < time_s.size:
                share = (off_deg[inner] - permitted) / (off_deg[inner] - off_deg[outer])
                ends[k] = float(time_s[inner] + share * (time_s[outer] - time_s[inner]))
        found.append((ends[0], ends[1]))
    return found
