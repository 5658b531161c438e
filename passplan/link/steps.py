"""Stepping the rate along a pass: which rung is sent in which second, with hysteresis, dwell and gaps.

    rung   ┌──────┐         The fastest rung that holds is followed down at once and up only when the
        ┌──┘      └──┐      quality exceeds the need by the hysteresis. No rung is left before it has
     ┌──┘            └──┐   been sent for the least dwell, so a step is taken only to a rung that will
                            hold that long; a pass is known ahead, so this needs no guessing.

After a step nothing is sent for the switching gap. (Own rules; the standards leave them to the modem.)
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol


@dataclass(frozen=True)
class Step:
    """Whole seconds [``start_s``, ``end_s``) in which one rung is sent; ``lock_s`` is when its signal began."""

    start_s: int
    end_s: int
    rung: int
    lock_s: float


class StepRules(Protocol):
    """What stepping needs to know of a radio."""

    @property
    def min_dwell_s(self) -> int:
        """Least time on a rung."""

    @property
    def switching_gap_s(self) -> int:
        """Time without data after a step."""


def rate_steps(first_s: int, holds: list[int], climbs: list[int], rules: StepRules, lock_s: float) -> list[Step]:
    """Steps over one unbroken stretch of signal.

    ``holds[k]`` is the fastest rung that holds throughout second ``first_s + k``, ``climbs[k]`` the fastest
    that exceeds its need by the hysteresis then; rungs count from 0, the fastest, up. ``lock_s`` is passed on.
    """
    count, dwell_s, gap_s = len(holds), max(rules.min_dwell_s, 1), rules.switching_gap_s

    def lasting(k: int, ahead_s: int) -> int:
        return max(holds[k : k + ahead_s])

    current, settled, began = lasting(0, dwell_s), dwell_s, 0
    steps: list[Step] = []
    for k in range(1, count):
        new = current
        if holds[k] > current:
            new = lasting(k, dwell_s + gap_s)
        elif climbs[k] < current and k >= settled:
            new = min(current, max(climbs[k], lasting(k, dwell_s + gap_s)))
        if new != current:
            if k > began:
                steps.append(Step(first_s + began, first_s + k, current, lock_s))
            current, settled, began = new, k + gap_s + dwell_s, min(k + gap_s, count)
    if count > began:
        steps.append(Step(first_s + began, first_s + count, current, lock_s))
    return steps
