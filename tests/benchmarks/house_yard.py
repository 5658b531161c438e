"""What the rules of the benchmark are made of: the instance, a plan made without any of them, and chance."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from passplan.planning.arrays import Flags, Integers
from passplan.planning.days import Day
from passplan.planning.problem import Problem
from passplan.planning.rules.decisions import DecidedContact, ForbiddenWindow
from passplan.planning.rules.guarantees import GuaranteeNeed
from passplan.planning.rules.shared_equipment import SharedNeed

ORBIT_S = 5_700
HOUR_S = 3_600
Put = Callable[[Problem], Problem]


@dataclass(frozen=True, eq=False)
class Yard:
    """An instance. ``free`` is a plan without rules; antennas and spacecraft take turns in having one."""

    base: Problem
    free: Integers
    rng: np.random.Generator

    def _needs(self, *needs: object) -> Put:
        return lambda p: replace(p, needs=(*p.needs, *needs))

    @cached_property
    def shut(self) -> Flags:
        """Options that some rule made so far takes out."""
        return np.zeros(len(self.base.options), dtype=bool)

    def _closed(self, options: Flags, detail: str) -> Put:
        self.shut[options] = True
        return self._needs(ForbiddenWindow(np.flatnonzero(options), detail))

    def _chosen(self, options: Integers) -> Flags:
        return np.isin(np.arange(len(self.base.options)), options)

    def _held(self, antennas: Flags, from_s: Integers, until_s: Integers) -> Flags:
        """Which options hold one of the antennas (a,), own or further, in the span that it has here, (a,) each."""
        holds = self.base.options.holds
        hit = antennas[holds.antenna] & (holds.start_s - holds.prepare_s < until_s[holds.antenna])
        hit &= holds.end_s + holds.release_s > from_s[holds.antenna]
        held = np.zeros(len(self.base.options), dtype=bool)
        held[holds.option[hit]] = True
        return held

    def _antennas(self) -> Integers:
        return np.arange(len(self.base.antennas))

    def _shared(self, reason: str, antennas: Sequence[int], at_once: int) -> Put:
        holds = self.base.options.holds
        holds = holds.take(np.isin(holds.antenna, antennas))
        return self._needs(SharedNeed(
            reason, reason, holds.option, holds.start_s - holds.prepare_s, holds.end_s, at_once))

    def _decided(self, kind: str, name: str, options: Sequence[int]) -> DecidedContact:
        owner = self.base.fleet.names[int(self.base.options.spacecraft[options[0]])]
        return DecidedContact(kind, name, owner, np.array(options, dtype=np.int64), "")  # type: ignore[arg-type]

    def _guarantee(self, unit: str, crew: Sequence[int], need: float) -> GuaranteeNeed:
        return GuaranteeNeed(
            "daily" if len(crew) == 1 else "guarantee", f"{unit} of {crew}", frozenset(crew), unit, need, 0,
            self.base.horizon_s)

    def _every(self, step: int, first: int) -> list[int]:
        return list(range(first, len(self.base.fleet), step))

    def _free_of(self, craft: int) -> Integers:
        return self.free[self.base.options.spacecraft[self.free] == craft]

    def _seams(self) -> list[tuple[int, int, int, int]]:
        """Where two antennas see a spacecraft one after the other, together between: how long, which, from, until."""
        w = self.base.windows
        return [
            (int(w.end_s[b] - w.start_s[a]), int(w.spacecraft[a]), int(w.start_s[a]), int(w.end_s[b]))
            for craft in range(len(self.base.fleet)) for mine in [np.flatnonzero(w.spacecraft == craft).tolist()]
            for a in mine for b in mine
            if w.start_s[a] + 120 < w.start_s[b] and w.start_s[b] + 120 < w.end_s[a] and w.end_s[a] + 120 < w.end_s[b]]

    def _day(self) -> Day:
        return Day("the day", 0, self.base.horizon_s)

    def _link_mb(self) -> np.ndarray:
        options = self.base.options
        carried = np.zeros(len(options))
        np.add.at(carried, np.repeat(np.arange(len(options)), np.diff(options.piece_offset)),
                  options.piece_rate_mb_per_s * (options.piece_end_s - options.piece_start_s))
        return carried

    def _together(self) -> list[tuple[int, int, int, int]]:
        """Pairs of contacts of the free plan that overlap, in time order, with the overlap."""
        options, free = self.base.options, self.free.tolist()
        found = [(a, b, max(int(options.start_s[a]), int(options.start_s[b])),
                  min(int(options.end_s[a]), int(options.end_s[b]))) for a in free for b in free if a != b]
        return sorted((row for row in found if row[2] < row[3]), key=lambda row: (row[2], row[0], row[1]))
