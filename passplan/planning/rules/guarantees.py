"""At least so many contacts, or MB, on every day, for a spacecraft or for a mission, or over several days.

A contact counts where it starts. Its MB are what it can bring down at most: what its link carries, but no more than
a full storage and what is generated meanwhile. What really comes down depends on what is aboard, which no plan can
promise; so a guarantee is one of contact, and never met by contacts longer than the storage has use for.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.inputs.run import Run
from passplan.planning.arrays import Floats
from passplan.planning.hooks import Draft
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import AtLeast, Terms

_DAY_S = 86_400


@dataclass(frozen=True)
class GuaranteeNeed:
    """``need`` of ``unit`` (``contacts`` or ``MB``) for some spacecraft together, from ``start_s`` to ``end_s``."""

    kind: str
    name: str
    spacecraft: frozenset[int]
    unit: str
    need: float
    start_s: int
    end_s: int


def guarantees(problem: Problem) -> Terms:
    """One term per need: contacts count one each, or what each can bring down."""
    options, terms = problem.options, []
    carried_mb = carries_mb(problem)
    for need in problem.needs_of(GuaranteeNeed):
        mine = np.flatnonzero(np.isin(options.spacecraft, sorted(need.spacecraft))
                              & (options.start_s >= need.start_s) & (options.start_s < need.end_s))
        amounts = carried_mb[mine] if need.unit == "MB" else np.ones(len(mine))
        terms.append(AtLeast(need.kind, need.name, need.unit, mine, amounts, need.need))
    return Terms(guarantees=tuple(terms))


def carries_mb(problem: Problem) -> Floats:
    """What each option can bring down at most [MB], shape (m,)."""
    options, fleet = problem.options, problem.fleet
    link_mb = np.zeros(len(options))
    np.add.at(link_mb, np.repeat(np.arange(len(options)), np.diff(options.piece_offset)),
              options.piece_rate_mb_per_s * (options.piece_end_s - options.piece_start_s))
    # The last layer of a spacecraft holds all its data.
    made_mb = np.zeros(len(options))
    for craft, layers in enumerate(problem.layers):
        mine = np.flatnonzero(options.spacecraft == craft)
        before, after = (layers[-1].made(edge[mine].astype(float)) for edge in (options.start_s, options.end_s))
        made_mb[mine] = after - before
    return np.minimum(link_mb, fleet.capacity_mb[options.spacecraft] + made_mb)


def guarantee_needs(draft: Draft) -> Iterator[GuaranteeNeed]:
    """The needs of spacecraft by day and of missions by the policy, in proportion where a span is cut short."""
    run, names = draft.run, draft.problem.fleet.names
    for k, name in enumerate(names):
        craft = run.spacecraft[name]
        for unit, least in (("contacts", craft.least_contacts_per_day), ("MB", craft.least_mb_per_day)):
            yield from _needs(run, "daily", name, frozenset({k}), unit, least, 1)
    for item in run.policy.guarantee:
        crew = frozenset(k for k, name in enumerate(names) if run.spacecraft[name].mission == item.mission)
        for unit, least in (("contacts", item.contacts), ("MB", item.mb)):
            yield from _needs(run, "guarantee", f"mission {item.mission}", crew, unit, least, item.days)


def _needs(
    run: Run, kind: str, whose: str, crew: frozenset[int], unit: str, least: float | None, days: int,
) -> Iterator[GuaranteeNeed]:
    if least is None:
        return
    first = run.start_utc.astype("datetime64[D]")
    before_s = int((run.start_utc - first) / np.timedelta64(1, "s"))
    for start_s in range(-before_s, run.horizon_s, days * _DAY_S):
        low, high = max(start_s, 0), min(start_s + days * _DAY_S, run.horizon_s)
        need = least * (high - low) / (days * _DAY_S)
        need = float(np.floor(need + 1e-9)) if unit == "contacts" else need
        if need > 0.0:
            day = first + (start_s + before_s) // _DAY_S
            span = f"on {day}" if days == 1 else f"from {day} for {days} days"
            yield GuaranteeNeed(kind, f"{unit} of {whose} {span}", crew, unit, need, low, high)
