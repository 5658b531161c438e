"""Seconds inside windows in which nothing can be received, or nothing sent: what the link floor leaves out."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from passplan.geometry.timescale import Floats

Span = tuple[float, float]
Direction = Literal["downlink", "command"]
Cause = Literal["keyhole", "guard", "sun", "transmit"]

# What each cause takes away.
TAKES: Mapping[Cause, tuple[Direction, ...]] = {
    "keyhole": ("downlink", "command"),
    "guard": ("downlink", "command"),
    "sun": ("downlink",),
    "transmit": ("command",),
}


@dataclass(frozen=True)
class Loss:
    """One interval [s from the horizon's start] lost in the window of this number, and why."""

    window: int
    start_s: float
    end_s: float
    cause: Cause


@dataclass(frozen=True)
class Losses:
    """All losses of a windows table; numbers are those of its rows."""

    rows: tuple[Loss, ...] = ()
    _spans: dict[tuple[int, Direction], tuple[Span, ...]] = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        gathered: dict[tuple[int, Direction], list[Span]] = defaultdict(list)
        for row in self.rows:
            for direction in TAKES[row.cause]:
                gathered[row.window, direction].append((row.start_s, row.end_s))
        object.__setattr__(self, "_spans", {key: merged(spans) for key, spans in gathered.items()})

    def of(self, window: int, direction: Direction) -> tuple[Span, ...]:
        """The intervals lost to one direction of a window, in time order, none touching another."""
        return self._spans.get((window, direction), ())

    def lost_seconds(self, windows: int, direction: Direction = "downlink") -> Floats:
        """The sum for each of so many windows [s]."""
        return np.array([sum(end - start for start, end in self.of(k, direction)) for k in range(windows)], float)


def merged(spans: Iterable[Span]) -> tuple[Span, ...]:
    """The union of intervals, in time order."""
    found: list[Span] = []
    for start, end in sorted(spans):
        if found and start <= found[-1][1]:
            found[-1] = (found[-1][0], max(found[-1][1], end))
        else:
            found.append((start, end))
    return tuple(found)
