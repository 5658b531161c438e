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
from numpy.typing import NDArray

from passplan.geometry.axes import lower_width_deg
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
    stretches = fast_stretches(time_s, angle_deg, axis)
    if not stretches:
        return lost
    width = np.full(time_s.size, permitted_deg) if upper_deg is None else lower_width_deg(permitted_deg, upper_deg)
    done = -1
    for first, last in stretches:
        if last <= done:
            continue
        found, done = _best_slew(time_s, angle_deg, width, axis, first, last, done)
        lost += found
    return lost


def _best_slew(
    time_s: Floats, angle: Floats, width: Floats, axis: Axis, first: int, last: int, done: int
) -> tuple[list[tuple[float, float]], int]:
    """The intervals lost by the best slew over the fast stretch [first, last], and the sample it is over at."""
    way = 1.0 if angle[last] >= angle[first] else -1.0
    target, rate = way * angle, way * np.gradient(angle, time_s)
    # What one slew at full rate from the stretch's far end can need at the most, either way.
    reach_s = abs(target[last] - target[first]) / axis.rate_deg_s + 2.0 * axis.rate_deg_s / axis.acceleration_deg_s2
    earliest_s = max(float(time_s[max(done, 0)]), float(time_s[first]) - reach_s)
    starts_s = np.linspace(earliest_s, float(time_s[first]), _STARTS)
    coarse = _tried(time_s, target, rate, width, axis, starts_s, last)
    best = int(np.argmin(coarse.total_s))
    near = starts_s[max(best - 1, 0)], starts_s[min(best + 1, starts_s.size - 1)]
    fine = _tried(time_s, target, rate, width, axis, np.linspace(*near, _FINE_STARTS), last)
    found = min((fine.best(), coarse.best()), key=lambda slew: (slew.total_s, slew.start_s))
    return _above(time_s[found.low : found.low + found.margin.size], found.margin), found.end


@dataclass(frozen=True)
class _Slew:
    """A slew that is over at the sample ``end``, the seconds it loses, and its margins at the samples from ``low``."""

    start_s: float
    end: int
    total_s: float
    low: int
    margin: Floats


@dataclass(frozen=True)
class _Slews:
    """Slews from ``start_s`` (k,) to the samples ``end``, the seconds each loses, and margins (k, n) from ``low`` on.

    A margin is how far [deg] the axis is off its target beyond what is permitted, negative inside.
    """

    start_s: Floats
    end: NDArray[np.int64]
    total_s: Floats
    low: int
    margin: Floats

    def best(self) -> _Slew:
        """The one that loses least, of equals the earliest."""
        k = int(np.argmin(self.total_s))
        return _Slew(float(self.start_s[k]), int(self.end[k]), float(self.total_s[k]), self.low, self.margin[k])


@dataclass(frozen=True)
class _Starts:
    """Where slews leave the target: instants (k, 1), and its angle and rate there."""

    time_s: Floats
    angle: Floats
    rate: Floats


def _tried(
    time_s: Floats, target: Floats, rate: Floats, width: Floats, axis: Axis, start_s: Floats, last: int
) -> _Slews:
    """What slews from ``start_s`` (k,), in order, over the fast stretch that ends at the sample ``last`` lose."""
    top = axis.rate_deg_s
    starts = _Starts(*(
        part[:, None] for part in (
            start_s, np.interp(start_s, time_s, target), np.clip(np.interp(start_s, time_s, rate), -top, top))))
    end, back = _meetings(time_s, target, rate, axis, starts, last)
    low, high = max(int(np.searchsorted(time_s, start_s[0], side="right")) - 1, 0), int(end.max()) + 1
    time, number, room = time_s[low:high], np.arange(low, high), width[low:high]
    path = _paths(axis, starts, time_s[end], target[end], rate[end], back, time)
    apart = target[low:high] - path
    apart -= 360.0 * np.rint(apart / 360.0)
    # Before and after it the axis is on its target.
    apart[(time < starts.time_s) | (number > end[:, None])] = 0.0
    margin = np.abs(apart) - room
    # Of a straight line from one sample's margin to the next, the share above zero.
    over, size = np.maximum(margin, 0.0), np.abs(margin)
    share = (over[:, 1:] + over[:, :-1]) / np.maximum(size[:, 1:] + size[:, :-1], 1e-12)
    return _Slews(start_s, end, np.round(share @ np.diff(time), 3), low, margin)


def _meetings(
    time_s: Floats, target: Floats, rate: Floats, axis: Axis, starts: _Starts, last: int
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """The first samples (k,) from ``last`` at which slews are back on the target, and whether they are at all.

    With rates v0 and v1 at its ends, full rate V and acceleration A, a slew covers in time T at most
    (v^2 - v0^2)/2A + (v^2 - v1^2)/2A + v (T - (2 v - v0 - v1)/A) with v = min(V, (v0 + v1 + A T)/2)
    (textbook kinematics). A pass that ends first is left wherever the slew has got to.
    """
    top, strength = axis.rate_deg_s, axis.acceleration_deg_s2
    length, v0 = time_s[last:] - starts.time_s, starts.rate
    v1 = np.clip(rate[last:], -top, top)
    if np.isinf(strength):
        most = top * length
    else:
        peak = np.minimum(top, 0.5 * (v0 + v1 + strength * length))
        most = (2.0 * peak**2 - v0**2 - v1**2) / (2.0 * strength) + peak * (length - (2.0 * peak - v0 - v1) / strength)
        most[peak < np.maximum(v0, v1)] = -np.inf
    met = (most >= target[last:] - starts.angle) & (length > 0.0)
    back = np.asarray(met.any(axis=1))
    return np.where(back, last + np.argmax(met, axis=1), time_s.size - 1), back


def _paths(
    axis: Axis, starts: _Starts, end_s: Floats, end_deg: Floats, end_rate: Floats, back: NDArray[np.bool_], time: Floats
) -> Floats:
    """Angles (k, n) at ``time`` (n,) of slews to the target at ``end_s`` (k,), which are ``back`` there or not.

    Full acceleration to the full rate, and where the slew meets the target again braking to the target's own rate.
    """
    top, strength = axis.rate_deg_s, axis.acceleration_deg_s2
    since, met = time - starts.time_s, end_deg[:, None]
    if np.isinf(strength):
        path = starts.angle + top * since
        return np.where(back[:, None], np.minimum(path, met), path)
    v0, v1 = starts.rate, np.clip(end_rate, -top, top)[:, None]
    length = end_s[:, None] - starts.time_s
    up_s = (np.minimum(top, 0.5 * (v0 + v1 + strength * length)) - v0) / strength
    rising = np.minimum(since, up_s)
    full = v0 + strength * up_s
    path = starts.angle + v0 * rising + 0.5 * strength * rising**2 + full * (since - rising)
    left = length - since
    braking = back[:, None] & (left < np.maximum((full - v1) / strength, 0.0))
    return np.where(braking, met - v1 * left - 0.5 * strength * left**2, path)


def _above(time_s: Floats, margin: Floats) -> list[tuple[float, float]]:
    """Where a polyline lies above zero."""
    over = margin > 0.0
    edges = np.flatnonzero(np.diff(np.concatenate(([False], over, [False])).astype(np.int8)))
    found = []
    for begin, end in zip(edges[::2], edges[1::2] - 1, strict=True):
        ends = [float(time_s[begin]), float(time_s[end])]
        for k, (inner, outer) in enumerate(((begin, begin - 1), (end, end + 1))):
            if 0 <= outer < time_s.size:
                share = margin[inner] / (margin[inner] - margin[outer])
                ends[k] = float(time_s[inner] + share * (time_s[outer] - time_s[inner]))
        found.append((ends[0], ends[1]))
    return found
