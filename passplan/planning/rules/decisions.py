"""Pinned, frozen and emergency contacts are wanted more than all that is merely asked for; forbids close time.

In points an emergency outweighs any frozen contact, that any pin, and that any request. What is pinned or frozen may
start later or end earlier than stated by up to a minute where its window does not reach further: fresh
element sets move windows by seconds.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.inputs.decisions import Decision, Published
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.arrays import Flags, Integers
from passplan.planning.hooks import DRIFT_S, Block, Draft, Standby, Wish
from passplan.planning.horizon import seconds_of
from passplan.planning.problem import Problem
from passplan.planning.rules.standby import NO_STANDBY, backed, one_standby
from passplan.planning.rules.terms import Removal, Terms, Wanted, WantedKind

POINTS: dict[WantedKind, float] = {"pin": 20.0, "frozen": 100.0, "loaded": 100.0, "emergency": 1000.0}


@dataclass(frozen=True, eq=False)
class DecidedContact:
    """A contact that was decided on: the options that are it, or why there are none."""

    kind: WantedKind
    name: str
    owner: str
    options: Integers
    reason: str
    standby: bool = False


@dataclass(frozen=True, eq=False)
class ForbiddenWindow:
    """Options of a window that must not be used."""

    options: Integers
    detail: str


def decisions(problem: Problem) -> Terms:
    """One wanted term for each contact that was decided on, one removal for each forbidden window."""
    wanted = tuple(Wanted(need.name, need.owner, need.options, POINTS[need.kind], need.reason, need.kind)
                   for need in problem.needs_of(DecidedContact))
    rows = tuple(one_standby(need.name, need.options) for need in problem.needs_of(DecidedContact) if need.standby)
    removals = tuple(Removal(need.options, "forbidden", need.detail) for need in problem.needs_of(ForbiddenWindow))
    return Terms(removals=removals, wanted=wanted, rows=rows)


def forbid_blocks(run: Run) -> Iterator[Block]:
    """One block per forbid of an antenna or a spacecraft; setup of other contacts may reach into it."""
    for item in run.decisions:
        if item.kind == "forbid" and item.window is None:
            low, high = decided_span(run, item)
            yield Block(item.antenna, item.spacecraft, low, high, "forbidden", _forbidden(item), setup=False)


def decision_wishes(run: Run) -> Iterator[Wish]:
    """What is pinned, frozen or an emergency must be to be had as stated."""
    for item in run.decisions:
        if item.kind == "forbid":
            continue
        craft = item.spacecraft or next((n for n in run.orbits if _owns(n, item.window or "")), None)
        if craft is not None:
            yield Wish(craft, item.antenna, *decided_span(run, item))
    for contact in frozen_contacts(run):
        yield Wish(contact.spacecraft, contact.antenna, *decided_span(run, contact))


def decision_standbys(run: Run) -> Iterator[Standby]:
    """What a pin or an emergency with a stand-by must have to choose from."""
    for item in run.decisions:
        if item.standby:
            where = frozenset(run.antennas) if item.antenna is None else frozenset({item.antenna})
            service = item.service if item.kind == "emergency" else None
            yield Standby(
                item.spacecraft or "", where, frozenset(run.antennas), service, *decided_span(run, item))


def frozen_contacts(run: Run) -> list[Published]:
    """Contacts of the published plan that start before the freeze instant."""
    until = run.frozen_until_utc
    return [] if until is None else [p for p in run.published if datetime64(p.start_utc) < until]


def decision_needs(draft: Draft) -> Iterator[DecidedContact | ForbiddenWindow]:
    """The decisions of a run over the options of its problem."""
    run, problem = draft.run, draft.problem
    for item in run.decisions:
        if item.kind == "forbid":
            if item.window in problem.windows.names:
                holds = problem.options.holds
                mine = holds.option[holds.window == problem.windows.names.index(item.window)]
                yield ForbiddenWindow(mine, _forbidden(item))
        else:
            yield decided_contact(draft, item.kind, item)
    for contact in frozen_contacts(run):
        yield decided_contact(draft, "frozen", contact)


def decided_contact(draft: Draft, kind: WantedKind, item: Decision | Published) -> DecidedContact:
    problem, options = draft.problem, draft.problem.options
    window = item.window if isinstance(item, Decision) else None
    if window is not None:
        at = problem.windows.names.index(window) if window in problem.windows.names else -1
        owner = problem.fleet.names[int(problem.windows.spacecraft[at])] if at >= 0 else ""
        found = np.flatnonzero(options.window == at)
        reason = "" if at >= 0 else "the run has no window of that name"
        reason = reason or ("" if len(found) else "no contact is possible in it; unused.csv says why")
        return DecidedContact(kind, item.name, owner, found, reason)
    owner = item.spacecraft or ""
    craft = problem.fleet.names.index(owner) if owner in problem.fleet.names else -1
    served = options.spacecraft == craft
    if item.antenna is not None:
        served &= options.antenna == problem.antennas.names.index(item.antenna)
    low, high = decided_span(draft.run, item)
    if isinstance(item, Decision) and kind == "emergency":
        served &= (options.start_s >= low) & (options.end_s <= high)
        served &= options.end_s - options.start_s >= math.ceil(item.min_duration_s)
        served &= options.downlink | (item.service == "command")
        served &= options.command | (item.service == "downlink")
    else:
        served &= same_contact(problem, low, high, longer=kind == "pin")
    standby = isinstance(item, Decision) and item.standby
    if isinstance(item, Decision) and standby and served.any():
        served &= backed(options, item.service if kind == "emergency" else None)
        reason = NO_STANDBY
    else:
        reason = _why(draft, item, craft, low, high)
    found = np.flatnonzero(served)
    return DecidedContact(kind, item.name, owner, found, "" if len(found) else reason, standby)


def same_contact(problem: Problem, low: int, high: int, *, longer: bool = False) -> Flags:
    """Options that run from ``low`` to ``high`` [s], or as far as their window reaches; ``longer`` ones on request."""
    options, windows = problem.options, problem.windows
    start_s = np.maximum(windows.start_s[options.window], low)
    end_s = np.minimum(windows.end_s[options.window], high)
    near = (start_s <= max(low, 0) + DRIFT_S) & (end_s >= min(high, problem.horizon_s) - DRIFT_S)
    if longer:
        return np.asarray(near & (options.start_s <= start_s) & (options.end_s >= end_s), dtype=bool)
    return np.asarray(near & (options.start_s == start_s) & (options.end_s == end_s), dtype=bool)


def _why(draft: Draft, item: Decision | Published, craft: int, low: int, high: int) -> str:
    """Why no option is the contact that was decided on."""
    problem, windows = draft.problem, draft.problem.windows
    if craft < 0:
        return "the spacecraft takes no part in this run"
    where = item.antenna or "any antenna"
    seen = (windows.spacecraft == craft) & (windows.start_s < high) & (windows.end_s > low)
    if item.antenna is not None:
        seen &= windows.antenna == problem.antennas.names.index(item.antenna)
    if not seen.any():
        return f"{item.spacecraft} is not in view of {where} then"
    for block in draft.blocks:
        inside = block.start_s < high and block.end_s > low
        if inside and block.antenna in (None, item.antenna) and block.spacecraft in (None, item.spacecraft):
            return block.detail
    return "its window is no longer open for all of that time, or offers no such contact"


def decided_span(run: Run, item: Decision | Published) -> tuple[int, int]:
    """The span of a decision in whole seconds within it; all of the horizon where none is stated."""
    if item.start_utc is None or item.end_utc is None:
        return 0, run.horizon_s
    return math.ceil(seconds_of(run, item.start_utc)), math.floor(seconds_of(run, item.end_utc))


def _forbidden(item: Decision) -> str:
    return f"forbidden: {item.note or item.name}"


def _owns(craft: str, window: str) -> bool:
    """Whether a window's name starts with the spacecraft's."""
    return window.startswith(craft.replace(" ", "_") + ".")
