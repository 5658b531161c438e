"""Day ribbons: along the time axis, as high as the rate that the link allows, filled where it is used.

A ribbon is drawn in its own units, ten seconds across and a hundredth of the full height up, so that the
page can stretch it to any width and every number is a whole one.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from passplan.report.page.scale import RateScale
from passplan.report.tracks import WindowTrack

UNIT_S = 10.0
# Time in view without any data rate still shows, as a rim at the foot of the ribbon.
_RIM = 4


@dataclass(frozen=True)
class Share:
    """The part of a ribbon's height that a contact fills: row ``row`` from the foot of ``rows`` equal ones."""

    row: int = 0
    rows: int = 1


@dataclass(frozen=True)
class Mark:
    """A contact on a ribbon: its number in the contacts table, and where it lies in per cent of the width."""

    contact: int
    left: float
    width: float
    key: str
    level: int
    label: str
    origin: str
    change: str
    share: Share


@dataclass(frozen=True)
class Span:
    """A span of a ribbon in per cent of the width: a closure, or frozen time."""

    left: float
    width: float
    kind: str
    label: str


@dataclass
class Ribbon:
    """What one antenna or spacecraft shows: outlines and fills by the other partner's number, marks, spans."""

    scale: RateScale
    sky: dict[int, str] = field(default_factory=dict)
    used: dict[int, str] = field(default_factory=dict)
    marks: list[Mark] = field(default_factory=list)
    spans: list[Span] = field(default_factory=list)


def outline(
    track: WindowTrack, scale: RateScale, first_s: float = -np.inf, last_s: float = np.inf, share: Share | None = None
) -> str:
    """The steps of the allowed rate between two instants as the ``d`` of a closed SVG path, within its share."""
    share = share or Share()
    time_s = np.clip(track.time_s, first_s, last_s)
    x = np.rint(time_s / UNIT_S).astype(np.int64)
    x[-1] = max(x[-1], x[0] + 1)
    height = np.maximum(scale.height(track.rate_mbps), _RIM)
    # A step lasts from its sample to the next; steps of no length and repeats are left out.
    lasting = np.flatnonzero(x[1:] > x[:-1])
    keep = lasting[np.flatnonzero(np.diff(height[lasting], prepend=-1))]
    if not keep.size:
        return ""
    foot = 100 - round(100 * share.row / share.rows)
    height = np.maximum(height // share.rows, _RIM)
    steps = [f"M{x[keep[0]]} {foot}"]
    for i, k in enumerate(keep.tolist()):
        until = x[keep[i + 1]] if i + 1 < keep.size else x[-1]
        steps.append(f"V{foot - height[k]}H{until}")
    return "".join(steps) + f"V{foot}Z"


def joined(paths: Iterable[tuple[int, str]]) -> dict[int, str]:
    """Outlines put together by partner: one SVG path for each, however many windows."""
    found: Mapping[int, list[str]] = defaultdict(list)
    for partner, path in paths:
        found[partner].append(path)
    return {partner: "".join(parts) for partner, parts in sorted(found.items())}


def levels(lefts: Iterable[float], apart: float, count: int = 3) -> list[int]:
    """A level for each label from the left, so that labels of one level lie at least ``apart`` from each other."""
    reached = [-np.inf] * count
    chosen = []
    for left in lefts:
        free = next((i for i, end in enumerate(reached) if left - end >= apart), int(np.argmin(reached)))
        reached[free] = left
        chosen.append(free)
    return chosen


def shared_heights(spans: Sequence[tuple[float, float]]) -> list[Share]:
    """A share of the height for each span (start, end), in time order: spans that overlap stand above one another.

    Spans that hang together by overlaps share the height alike; those that stand alone have all of it.
    """
    shares: list[Share] = []
    ends: list[float] = []
    first, reached = 0, -np.inf
    chosen: list[int] = []
    for k, (start, end) in enumerate(spans):
        if start >= reached:
            shares += [Share(row, len(ends)) for row in chosen[first:]]
            first, ends = k, []
        row = next((i for i, until in enumerate(ends) if until <= start), len(ends))
        ends[row : row + 1] = [end]
        chosen.append(row)
        reached = max(reached, end)
    return shares + [Share(row, len(ends)) for row in chosen[first:]]
