"""Which of several element sets of one object a run uses."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from sgp4.api import SGP4_ERRORS

from passplan.inputs.elements.model import ElementSet

ChoosingRule = Literal["nearest", "newest"]
Use = Literal["chosen", "listed", "too old", "unusable"]
# How often SGP4 is asked on the way; a decay lasts far longer than a 64th of the oldest set's age.
_LOOKS = 64
_LONG_AGO, _FAR_AHEAD = np.datetime64("1900-01-01", "ms"), np.datetime64("2300-01-01", "ms")


@dataclass(frozen=True)
class Candidate:
    """One element set that was looked at: its age at the horizon's start, the use made of it, and why not."""

    element_set: ElementSet
    age_days: float
    use: Use
    reason: str = ""


@dataclass(frozen=True)
class Choice:
    """The set to use (None if none is usable) and all candidates by epoch; ``reason`` says why there is none."""

    chosen: ElementSet | None
    candidates: tuple[Candidate, ...]
    reason: str = ""

    @property
    def predecessor(self) -> ElementSet | None:
        """The usable set with the newest epoch before that of the chosen one."""
        if self.chosen is None:
            return None
        usable = [c.element_set for c in self.candidates if c.use == "listed"]
        earlier = [one for one in usable if one.epoch_utc < self.chosen.epoch_utc]
        return max(earlier, key=lambda one: one.epoch_utc, default=None)


def choose(
    sets: Sequence[ElementSet],
    start_utc: np.datetime64,
    end_utc: np.datetime64,
    refuse_age_days: float,
    *,
    rule: ChoosingRule = "nearest",
    manoeuvres: Sequence[np.datetime64] = (),
) -> Choice:
    """Choose among the element sets of one object.

    A set is usable if SGP4 accepts it all the way from its epoch to the horizon's start, and its epoch lies within
    ``refuse_age_days`` of the start, before or after. ``nearest`` takes the usable set whose epoch is
    nearest to the start. ``newest``, the rule for a drop folder, takes the newest usable epoch that is
    not later than the horizon's end (and the nearest if all are later), so that a fresh upload wins even
    where its epoch lies a little ahead. A set from before one of the ``manoeuvres`` that precede the start
    is not usable; one from after a manoeuvre still to come is taken only if there is no other (see
    :func:`valid_span`). Of equal epochs the higher element set number wins, and then
    the set that was read first.
    """
    order = sorted(range(len(sets)), key=lambda i: (sets[i].epoch_utc, i))
    judged = {i: _judge(sets[i], start_utc, refuse_age_days, manoeuvres) for i in order}
    usable = [i for i in order if judged[i].use == "listed"]
    usable = [i for i in usable if valid_span(sets[i], manoeuvres)[0] <= start_utc] or usable
    best: int | None = None
    if usable:
        in_time = [i for i in usable if sets[i].epoch_utc <= end_utc] if rule == "newest" else []
        best = _first_of_equals(sets, _newest(sets, in_time) if in_time else _nearest(sets, usable, start_utc))
    candidates = tuple(Candidate(sets[i], judged[i].age_days, "chosen") if i == best else judged[i] for i in order)
    if best is not None:
        return Choice(sets[best], candidates)
    return Choice(None, candidates, _why_none(candidates, refuse_age_days))


def successive_jump_km(older: ElementSet, newer: ElementSet) -> float:
    """Distance between the positions that two sets give at the newer epoch (SGP4, TEME); NaN if one fails."""
    at = (newer.satrec.jdsatepoch, newer.satrec.jdsatepochF)
    old_fault, old_km, _ = older.satrec.sgp4(*at)
    new_fault, new_km, _ = newer.satrec.sgp4(*at)
    return math.nan if old_fault or new_fault else math.dist(old_km, new_km)


def valid_span(one: ElementSet, manoeuvres: Sequence[np.datetime64]) -> tuple[np.datetime64, np.datetime64]:
    """From the last manoeuvre before a set's epoch to the first one after it; far away where there is none."""
    before = [at for at in manoeuvres if at <= one.epoch_utc]
    after = [at for at in manoeuvres if at > one.epoch_utc]
    return max(before, default=_LONG_AGO), min(after, default=_FAR_AHEAD)


def _judge(
    one: ElementSet, start_utc: np.datetime64, refuse_age_days: float, manoeuvres: Sequence[np.datetime64]
) -> Candidate:
    age_days = one.age_days(start_utc)
    ends = valid_span(one, manoeuvres)[1]
    if ends <= start_utc:
        when = str(ends.astype("datetime64[s]")).replace("T", " ")
        return Candidate(one, age_days, "unusable", f"it is from before the manoeuvre of {when} UTC")
    in_time = abs(age_days) <= refuse_age_days
    fault = sgp4_fault(one, one.epoch_utc, start_utc if in_time else one.epoch_utc)
    if fault is not None:
        return Candidate(one, age_days, "unusable", f"SGP4 cannot use it: {fault}")
    if not in_time:
        return Candidate(one, age_days, "too old", f"{age_words(age_days)}, the limit is {refuse_age_days:g} days")
    return Candidate(one, age_days, "listed")


def sgp4_fault(one: ElementSet, from_utc: np.datetime64, to_utc: np.datetime64) -> str | None:
    """What SGP4 says against this set first on the way from one instant to another, or None.

    The way counts, not only its end: some days after an orbit has decayed, SGP4 answers again without an
    error, with positions that mean nothing.
    """
    if one.satrec.error:
        return _words(one.satrec.error)
    days = np.linspace(one.age_days(from_utc), one.age_days(to_utc), _LOOKS)
    faults, _, _ = one.satrec.sgp4_array(np.full(_LOOKS, one.satrec.jdsatepoch), one.satrec.jdsatepochF + days)
    found = np.flatnonzero(faults)
    return _words(int(faults[found[0]])) if found.size else None


def _words(fault: int) -> str:
    return str(SGP4_ERRORS.get(fault, f"error {fault}"))


def age_words(age_days: float) -> str:
    """An age at the horizon's start in words, for lines that a user reads."""
    when = "before" if age_days >= 0.0 else "after"
    return f"its epoch lies {abs(age_days):.1f} days {when} the start"


def _newest(sets: Sequence[ElementSet], among: list[int]) -> list[int]:
    newest = max(sets[i].epoch_utc for i in among)
    return [i for i in among if sets[i].epoch_utc == newest]


def _nearest(sets: Sequence[ElementSet], among: list[int], start_utc: np.datetime64) -> list[int]:
    least = min(abs(sets[i].epoch_utc - start_utc) for i in among)
    # One before and one after the start may be equally near: the later one.
    return _newest(sets, [i for i in among if abs(sets[i].epoch_utc - start_utc) == least])


def _first_of_equals(sets: Sequence[ElementSet], equals: list[int]) -> int:
    return min(equals, key=lambda i: (-sets[i].satrec.elnum, i))


def _why_none(candidates: tuple[Candidate, ...], refuse_age_days: float) -> str:
    if not candidates:
        return "no element set of it was found"
    # The set that came nearest to being used tells the user most.
    nearest = min(candidates, key=lambda c: (c.use != "too old", abs(c.age_days)))
    count = (
        "its only element set is"
        if len(candidates) == 1
        else f"none of its {len(candidates)} element sets is usable; the nearest is"
    )
    return f"{count} {nearest.use}: {nearest.reason}"
