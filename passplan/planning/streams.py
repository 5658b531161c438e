"""What a spacecraft generates, class by class, how its storage keeps that, and the storages that stand for it.

``classes.py`` says what the classes mean, ``layering.py`` how layers are made of them.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from passplan.planning.arrays import Floats, freeze

# Ages that differ by less are one.
_ONE_AGE_S = 1e-6


@dataclass(frozen=True)
class Keeping:
    """How a storage loses and frees data: the ``newest`` is lost when it overflows, else the oldest; what is sent is
    freed at once (``acknowledged`` empty), at the end of its ``contact``, or of the ``next_command`` contact."""

    newest: bool = False
    acknowledged: str = ""


@dataclass(frozen=True, eq=False)
class Stream:
    """One class of data aboard: ``made_mb`` is generated up to ``time_s``, in straight lines from 0 to the horizon.

    It is dropped ``deadline_s`` after it was acquired. Up to the age ``age_s`` (from 0, rising) it is worth
    ``share`` of its weight, in straight lines, two points at one age being a step; the last share holds on. The
    start fill was acquired evenly over ``start_age_s`` before the start. ``ranked`` is the weight by which it ranks
    among the others, where that is not ``weight``.
    """

    name: str
    weight: float
    start_mb: float
    time_s: Floats
    made_mb: Floats
    deadline_s: float = math.inf
    start_age_s: float = 0.0
    fresh_age_s: Floats = field(default_factory=lambda: np.zeros(1))
    fresh_share: Floats = field(default_factory=lambda: np.ones(1))
    ranked: float | None = None

    def __post_init__(self) -> None:
        freeze(self)

    @property
    def rank(self) -> float:
        """The weight by which it ranks among the others."""
        return self.weight if self.ranked is None else self.ranked

    @property
    def fades(self) -> bool:
        """Whether its worth depends on its age."""
        return bool(np.any(self.fresh_share != 1.0))

    def share(self, age_s: float, other_age_s: float) -> float:
        """The mean share of the weight over ages between two."""
        if not self.fades:
            return 1.0
        if abs(other_age_s - age_s) < _ONE_AGE_S:
            # At a step what is about to lose worth has lost it.
            return float(np.interp(age_s + _ONE_AGE_S, self.fresh_age_s, self.fresh_share))
        return (self._shares_up_to(other_age_s) - self._shares_up_to(age_s)) / (other_age_s - age_s)

    def _shares_up_to(self, age_s: float) -> float:
        ages, shares = self.fresh_age_s, self.fresh_share
        k = int(np.searchsorted(ages, age_s, side="right")) - 1
        whole = float(np.sum(0.5 * (shares[1:k + 1] + shares[:k]) * np.diff(ages[:k + 1])))
        here = float(np.interp(age_s, ages, shares))
        return whole + 0.5 * (float(shares[k]) + here) * (age_s - float(ages[k]))

    def fit_to_deliver(self, time_s: Floats) -> Floats:
        """MB acquired no longer ago than the deadline, at any times: no more of the class can be aboard.

        Without a deadline that is all there has been of it.
        """
        if not math.isfinite(self.deadline_s):
            return self.start_mb + self.made(time_s)
        oldest_s = time_s - self.deadline_s
        age_s = max(self.start_age_s, 1.0)
        started = self.start_mb * np.clip(-oldest_s / age_s, 0.0, 1.0)
        return np.asarray(self.made(time_s) - self.made(np.maximum(oldest_s, 0.0)) + started)

    def edges(self) -> Floats:
        """Instants at which generation, or what is fit to deliver, bends."""
        if not math.isfinite(self.deadline_s):
            return self.time_s
        later = np.concatenate([self.time_s, [-max(self.start_age_s, 1.0)]]) + self.deadline_s
        return np.unique(np.concatenate([self.time_s, later[(later > 0.0) & (later < self.time_s[-1])]]))

    def made(self, time_s: Floats | float) -> Floats:
        """MB generated up to any times within the horizon."""
        return np.asarray(np.interp(time_s, self.time_s, self.made_mb))


@dataclass(frozen=True, eq=False)
class Layer:
    """One storage of the model: worth of a MB sent, cost of a MB lost, start fill, generation and capacity.

    Up to ``time_s`` (from 0 to the horizon) ``made_mb`` is generated, and there ``room_mb`` is the most it can hold;
    both in straight lines between.
    """

    weight: float
    spill_cost: float
    start_mb: float
    time_s: Floats
    made_mb: Floats
    room_mb: Floats

    def __post_init__(self) -> None:
        freeze(self)

    def made(self, time_s: Floats | float) -> Floats:
        """MB generated up to any times within the horizon."""
        return np.asarray(np.interp(time_s, self.time_s, self.made_mb))

    def room(self, time_s: Floats | float) -> Floats:
        """The capacity [MB] at any times within the horizon."""
        return np.asarray(np.interp(time_s, self.time_s, self.room_mb))

    @cached_property
    def shrinks(self) -> bool:
        """Whether its capacity changes with time."""
        return bool(np.any(self.room_mb != self.room_mb[0]))

    @cached_property
    def even(self) -> bool:
        """Whether it generates at one rate, and holds the same, from the start to the end."""
        return len(self.time_s) == 2 and bool(self.room_mb[0] == self.room_mb[1])

    def inner_times(self) -> Floats:
        """Instants within the horizon at which a rate changes."""
        return self.time_s[1:-1]


def steady(name: str, weight: float, start_mb: float, mb_per_s: float, horizon_s: float) -> Stream:
    """A class that is generated at one rate."""
    return Stream(name, weight, start_mb, np.array([0.0, horizon_s]), np.array([0.0, mb_per_s * horizon_s]))


def is_loose(streams: Sequence[Stream], keeping: Keeping) -> bool:
    """Whether the layers of these classes may overrate them."""
    ages = any(math.isfinite(one.deadline_s) for one in streams)
    return (ages and (len(streams) > 1 or keeping.newest)) or any(one.fades for one in streams) or bool(
        keeping.acknowledged)
