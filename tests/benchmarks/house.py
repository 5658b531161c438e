"""Every rule of the house on a yardstick instance: one function each, which puts it on a problem.

All are seeded, and scaled by a plan made without any of them (``free``), so that each of them gets in its way. Options
keep their numbers, so that rules can be put on and left off in any combination.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from house_ends import DemandRules, FleetRules
from house_means import CraftRules, GroundRules
from house_yard import HOUR_S, Put

from passplan.planning.arrays import Integers
from passplan.planning.change_cost import ChangeNeed
from passplan.planning.on_air import OnAir
from passplan.planning.option_table import Holds
from passplan.planning.problem import Problem
from passplan.planning.rules.decisions import DecidedContact


class House(GroundRules, CraftRules, DemandRules, FleetRules):
    """Rules for one instance."""

    def rules(self) -> dict[str, Put]:
        """All of them by name, in the order in which they are put on and draw from the generator."""
        makers = (
            self.setup_by_antenna, self.beams, self.slew, self.closures, self.rented, self.staffing_hours, self.pool,
            self.staff, self.backhaul_day, self.backhaul_rate, self.contact_gap, self.cool_down, self.counts_per_orbit,
            self.counts_per_day, self.sending_per_contact, self.sending_per_orbit, self.sending_per_span, self.battery,
            self.slots, self.loaded, self.commands, self.requests, self.standby, self.forbids, self.pins,
            self.emergency, self.daily_contacts, self.daily_mb, self.mission, self.interference, self.crowd,
            self.budget, self.classes, self.fairness, *((self.links, self.handover) if self._seams() else ()))
        return {maker.__name__.replace("_", " "): maker() for maker in makers}


def backed(problem: Problem) -> Problem:
    """The problem with more options for some spacecraft: contacts that hold a second antenna at the ready.

    The two are no neighbours, which may share equipment.
    """
    options, w = problem.options, problem.windows
    copies, seconds = list[int](), list[int]()
    for craft, hour in ((k, h) for k in range(2, len(problem.fleet), 29) for h in (4, 10, 16)):
        mine = np.flatnonzero((w.spacecraft == craft) & (w.start_s > hour * HOUR_S)).tolist()
        for first, second in ((a, b) for a in mine for b in mine if w.antenna[a] + 1 < w.antenna[b]):
            low, high = max(w.start_s[first], w.start_s[second]), min(w.end_s[first], w.end_s[second])
            within = (options.window == first) & (options.start_s >= low) & (options.end_s <= high)
            copies += np.flatnonzero(within).tolist()
            seconds += [second] * int(within.sum())
            if np.any(within):
                break
    count, windows = len(options), np.array(seconds, dtype=np.int64)
    longer = options.take(np.concatenate([np.arange(count), np.array(copies, dtype=np.int64)]))
    own = slice(count, None)
    return replace(problem, options=replace(longer, further=Holds(
        np.arange(count, len(longer)), windows, w.antenna[windows], longer.start_s[own], longer.end_s[own],
        longer.prepare_s[own], longer.release_s[own], longer.downlink[own], longer.command[own])))


def priced(problem: Problem) -> Problem:
    """The problem with prices on every third antenna (2 a minute, 12 at least), and the time on air."""
    options, holds = problem.options, problem.options.holds
    paid = np.where(holds.antenna % 3 == 2, np.maximum(12.0, 2.0 * np.ceil((holds.end_s - holds.start_s) / 60.0)), 0.0)
    cost = np.bincount(holds.option, weights=paid, minlength=len(options))
    on_air = OnAir(options.start_s, options.end_s, np.full(len(options), 60.0))
    return replace(problem, options=replace(options, cost=cost), needs=(on_air,))


def published(problem: Problem, plan: Integers) -> Problem:
    """The problem in order, with ``plan`` as the published one: changes cost, the first two hours are frozen."""
    options, fleet = problem.options, problem.fleet
    keeps = np.full(len(options), -1, dtype=np.int64)
    for k, o in enumerate(plan.tolist()):
        same = (options.window == options.window[o]) & (np.abs(options.start_s - options.start_s[o]) <= 60)
        keeps[same & (np.abs(options.end_s - options.end_s[o]) <= 60)] = k
    cost = 200.0 * 0.5 ** (options.start_s[plan] / (6.0 * HOUR_S))
    frozen = tuple(DecidedContact(
        "frozen", f"frozen {o}", fleet.names[int(options.spacecraft[o])], np.array([o], dtype=np.int64), "")
        for o in plan[options.start_s[plan] < 2 * HOUR_S].tolist())
    return replace(
        problem, in_order=True, spill_cost_per_mb=0.0, worth_per_money=0.0, base_worth=-float(cost.sum()),
        extra_price=-np.where(keeps >= 0, cost[keeps], 0.0), needs=(*problem.needs, ChangeNeed(keeps, cost), *frozen))
