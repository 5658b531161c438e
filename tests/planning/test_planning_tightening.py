"""Tightening any rule never makes the first objective that it touches better, whatever the rule.

Each kind makes of a small problem one that is looser in this rule and one that is tighter; both are solved to
optimality, objective by objective.
"""

from __future__ import annotations

import random
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from craft_cases import on_air_of
from need_cases import ordered_problem
from planning_cases import STEP_S, some_of

from passplan.planning.battery import PowerNeed
from passplan.planning.days import Day
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Antennas, CommandNeed, Conflict, Crowd, Limits, Problem, RequestNeed
from passplan.planning.rules.backhaul import BackhaulNeed
from passplan.planning.rules.budget import BudgetNeed
from passplan.planning.rules.contact_counts import CountNeed
from passplan.planning.rules.contact_gaps import GapNeed
from passplan.planning.rules.decisions import DecidedContact, ForbiddenWindow
from passplan.planning.rules.guarantees import GuaranteeNeed
from passplan.planning.rules.handovers import HandoverNeed
from passplan.planning.rules.sending_time import OrbitSendingNeed, SpanSendingNeed
from passplan.planning.rules.shared_equipment import SharedNeed

EXACT = Limits(gap=0.0)
# How close values are to be for the next objective to count; solvers keep rows to about a millionth.
SAME = 1e-5
Pair = tuple[Problem, Problem]


def adds(*loose: object, tight: tuple[object, ...] = ()) -> Callable[[Problem], Pair]:
    """The needs of the looser problem, and of the tighter one."""
    return lambda p: (replace(p, needs=(*p.needs, *loose)), replace(p, needs=(*p.needs, *tight)))


def _setup(p: Problem, rng: random.Random) -> Pair:
    more = np.array([rng.choice([0, 60, 120]) for _ in range(len(p.options))])
    return p, replace(p, options=replace(
        p.options, prepare_s=p.options.prepare_s + more, release_s=p.options.release_s + 60))


def _beams(p: Problem, _: random.Random) -> Pair:
    return replace(p, antennas=Antennas(p.antennas.names, np.full(len(p.antennas), 2, dtype=np.int64))), p


def _slew(p: Problem, _: random.Random) -> Pair:
    o = p.options
    tight = [(a, b) for a in range(len(o)) for b in range(len(o))
             if o.antenna[a] == o.antenna[b] and o.end_s[a] <= o.start_s[b] < o.end_s[a] + 6 * STEP_S]
    return replace(p, too_tight=np.zeros((0, 2), dtype=np.int64)), replace(
        p, too_tight=np.array(tight, dtype=np.int64).reshape(-1, 2))


def _closed(p: Problem, rng: random.Random) -> Pair:
    """Closures, declined bookings, nobody there, imaging slots, schedules aboard, contacts that are too long."""
    out = np.flatnonzero([rng.random() < 0.3 for _ in range(len(p.options))])
    return adds(tight=(ForbiddenWindow(out, "closed"),))(p)


def _shared(p: Problem, rng: random.Random) -> Pair:
    mine = np.flatnonzero([rng.random() < 0.8 for _ in range(len(p.options))])
    need = SharedNeed("staff", "staff_busy", mine, p.options.start_s[mine], p.options.end_s[mine], 2)
    return adds(need, tight=(replace(need, at_once=rng.choice([0, 1])),))(p)


def _backhaul(p: Problem, rng: random.Random) -> Pair:
    dishes, day = np.arange(len(p.antennas)), Day("day", 0, p.horizon_s)
    loose = BackhaulNeed("here", dishes, ((day, 900.0),), 4.0)
    tight = replace(loose, day_mb=((day, 300.0),)) if rng.random() < 0.5 else replace(loose, rate_mb_per_s=1.0)
    return adds(loose, tight=(tight,))(p)


def _budget(p: Problem, _: random.Random) -> Pair:
    days = (Day("day", 0, p.horizon_s),)
    return adds(BudgetNeed(80.0, days), tight=(BudgetNeed(20.0, days),))(p)


def _price(p: Problem, _: random.Random) -> Pair:
    """Money is the last but one objective; a higher price lowers it, and touches none before."""
    return p, replace(p, options=replace(p.options, cost=2.0 * p.options.cost))


def _gap(p: Problem, _: random.Random) -> Pair:
    crafts = range(len(p.fleet))
    return adds(*(GapNeed(k, 60, 60) for k in crafts), tight=tuple(GapNeed(k, 300, 480) for k in crafts))(p)


def _counts(p: Problem, rng: random.Random) -> Pair:
    edges, kind = (0.4 * p.horizon_s,), rng.choice(["orbit", "day"])
    return adds(CountNeed(0, kind, edges, 3), tight=(CountNeed(0, kind, edges, 1),))(p)


def _orbit_sending(p: Problem, _: random.Random) -> Pair:
    need = OrbitSendingNeed(0, (0.5 * p.horizon_s,), 900.0)
    return adds(on_air_of(p), need, tight=(on_air_of(p), replace(need, most_s=200.0)))(p)


def _span_sending(p: Problem, _: random.Random) -> Pair:
    need = SpanSendingNeed(0, 1_500.0, 700.0)
    return adds(on_air_of(p), need, tight=(on_air_of(p), replace(need, most_s=250.0)))(p)


def _battery(p: Problem, _: random.Random) -> Pair:
    edges = np.array([0.0, 0.4 * p.horizon_s, 0.7 * p.horizon_s, p.horizon_s])
    need = PowerNeed(0, 20.0, 2.0, 18.0, edges, np.array([-10.0, 40.0, -10.0]))
    return adds(on_air_of(p), need, tight=(on_air_of(p), replace(need, floor_wh=14.0)))(p)


def _storage(p: Problem, _: random.Random) -> Pair:
    return replace(p, fleet=replace(p.fleet, capacity_mb=p.fleet.capacity_mb + 200.0)), p


def _command(p: Problem, _: random.Random) -> Pair:
    craft = len(p.fleet) - 1
    loose, tight = CommandNeed(craft, 40 * STEP_S, 0), CommandNeed(craft, 15 * STEP_S, 0)
    return replace(p, commands=(loose,)), replace(p, commands=(tight,))


def _request(p: Problem, _: random.Random) -> Pair:
    anywhere = frozenset(range(len(p.antennas)))
    loose = RequestNeed("more", "any", 0, anywhere, "downlink", 0, p.horizon_s, 2 * STEP_S, points=2.0)
    tight = replace(loose, latest_s=p.horizon_s // 2, min_duration_s=4 * STEP_S)
    return replace(p, requests=(*p.requests, loose)), replace(p, requests=(*p.requests, tight))


def _decided(p: Problem, rng: random.Random) -> Pair:
    kind = rng.choice(["pin", "frozen", "emergency", "loaded"])
    mine = np.flatnonzero(p.options.spacecraft == p.options.spacecraft[0])
    loose = DecidedContact(kind, "decided", "any", mine, "")
    return adds(loose, tight=(replace(loose, options=mine[:1]),))(p)


def _guarantee(p: Problem, rng: random.Random) -> Pair:
    unit, crew = rng.choice(["contacts", "MB"]), frozenset(range(len(p.fleet)))
    need = GuaranteeNeed("guarantee", "all", crew, unit, 2.0 if unit == "contacts" else 200.0, 0, p.horizon_s)
    return adds(need, tight=(replace(need, need=3.0 * need.need),))(p)


def _handover(p: Problem, _: random.Random) -> Pair:
    asked = RequestNeed("follow", p.fleet.names[0], 0, frozenset(range(len(p.antennas))), "downlink", 0,
                        p.horizon_s // 2, 2 * STEP_S)
    return adds(HandoverNeed(asked, STEP_S), tight=(HandoverNeed(asked, 3 * STEP_S),))(p)


def _conflict(p: Problem, _: random.Random) -> Pair:
    pairs = tuple(Conflict(f"{a} {b}", a, d, b, 0, p.horizon_s) for a in range(len(p.fleet))
                  for b in range(len(p.fleet)) if a != b for d in range(len(p.antennas)))
    return p, replace(p, conflicts=pairs)


def _crowd(p: Problem, _: random.Random) -> Pair:
    def crowds(share: float) -> tuple[Crowd, ...]:
        return tuple(Crowd("crowd", a, d, others, (share,) * len(others), 0, p.horizon_s)
                     for a in range(len(p.fleet)) for d in range(len(p.antennas))
                     for others in [tuple(b for b in range(len(p.fleet)) if b != a)] if others)
    return replace(p, crowds=crowds(0.6)), replace(p, crowds=crowds(1.1))


def _changes(p: Problem, _: random.Random) -> Pair:
    """Each change costs more: value falls, and nothing before it."""
    return p, replace(p, extra_price=p.extra_price + 40.0 if len(p.extra_price) else np.full(len(p.options), 40.0))


KINDS = (
    _setup, _beams, _slew, _closed, _shared, _backhaul, _budget, _price, _gap, _counts, _orbit_sending, _span_sending,
    _battery, _storage, _command, _request, _decided, _guarantee, _handover, _conflict, _crowd, _changes)


def better_by(loose: Problem, tight: Problem) -> float:
    """By how much the tighter problem is better in the first objective in which the two differ."""
    before, after = find_plan(loose, EXACT), find_plan(tight, EXACT)
    tiers = {tier.name: tier for tier in after.tiers}
    first = [sum(s.points for s in result.shortfalls) for result in (before, after)]
    if abs(first[1] - first[0]) > 1e-6:
        return first[0] - first[1]
    for tier in before.tiers:
        gain = (tiers[tier.name].value - tier.value if tier.name in tiers else 0.0)
        if abs(gain) > SAME * max(1.0, abs(tier.value)):
            return gain if tier.sense == "most" else -gain
    return 0.0


@pytest.mark.parametrize("seed", some_of(range(20), 2))
@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.__name__[1:])
def test_a_tighter_rule_is_never_better_in_the_first_objective_that_it_touches(
    kind: Callable[[Problem, random.Random], Pair], seed: int,
) -> None:
    loose, tight = kind(ordered_problem(640 + seed), random.Random(seed))
    assert better_by(loose, tight) <= 0.0


@pytest.mark.slow
@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.__name__[1:])
def test_each_rule_touches_something_in_some_of_those_cases(
    kind: Callable[[Problem, random.Random], Pair],
) -> None:
    worse = (better_by(*kind(ordered_problem(640 + seed), random.Random(seed))) < 0.0 for seed in range(20))
    assert any(worse)
