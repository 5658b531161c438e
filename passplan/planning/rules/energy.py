"""The state of charge of a battery never falls under its floor.

A battery that stops at full holds, at t, the least of what it would hold if it had been full at some earlier s
(full + net charge from s to t), over all s, and of start + net charge from 0 to t. So it never falls under the floor
exactly if for all s < t

    energy sent from s to t  <=  full - floor + base charge from s to t,

and with the start in the place of full for s = 0: linear in the options that are chosen. (Own derivation, the
reflection of a queue at its brim.) Where the base load alone takes the battery under the floor, what it then holds
stands in the place of the floor: sending may not make it worse.

Only few s and t matter. An s does not if an earlier one allows no more, as more is sent from there on; a t does not
if a later one allows no more. And where the sunlight carries base load and transmitter together, the charge does
not fall at all.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.battery import PowerNeed
from passplan.planning.on_air import OnAir
from passplan.planning.problem import Problem
from passplan.planning.rules.spans import within_spans
from passplan.planning.rules.terms import Rows, Terms


def energy(problem: Problem) -> Terms:
    """One row for each pair of instants between which the transmitter may take too much."""
    return Terms(rows=tuple(_rows(problem, need) for need in problem.needs_of(PowerNeed)))


def _rows(problem: Problem, need: PowerNeed) -> Rows:
    (on_air,) = problem.needs_of(OnAir)
    mine = np.flatnonzero(
        (problem.options.spacecraft == need.spacecraft) & (on_air.end_s > on_air.start_s) & (on_air.load_w > 0.0))
    begin_s, finish_s, load_w = on_air.start_s[mine], on_air.end_s[mine], on_air.load_w[mine]
    links = int(problem.fleet.links[need.spacecraft])
    highest_w = links * float(load_w.max(initial=0.0))
    low_s, taken_wh = _lows(need, _where_it_falls(need, begin_s, highest_w))
    high_s, spare_wh = _highs(need, _where_it_falls(need, finish_s, highest_w))
    allowed_wh = need.capacity_wh + spare_wh - taken_wh[:, None]
    pair = low_s[:, None] < high_s
    low, high = np.nonzero(pair)
    name = f"{problem.fleet.names[need.spacecraft]}'s energy above the floor of its battery"
    return within_spans(
        "battery", name, mine, begin_s, finish_s, load_w / 3600.0, low_s[low], high_s[high],
        np.maximum(allowed_wh[pair], 0.0), links)


def _where_it_falls(need: PowerNeed, edges_s: Integers, highest_w: float) -> Floats:
    """Edges of sending at which the charge may begin or cease to fall."""
    edges = np.unique(edges_s).astype(float)
    part = np.clip(np.searchsorted(need.edges_s, edges, side="right") - 1, 0, len(need.net_w) - 1)
    return np.asarray(edges[need.net_w[part] < highest_w])


def _lows(need: PowerNeed, starts_s: Floats) -> tuple[Floats, Floats]:
    """Instants s from which to count, and what full must have given by then: more than at any earlier one."""
    later = np.unique(np.concatenate([need.edges_s[1:-1], starts_s[starts_s > 0.0]]))
    low_s = np.concatenate([[0.0], later])
    taken_wh = np.concatenate([[need.capacity_wh - need.start_wh], need.gained_wh(later)])
    before = np.concatenate([[-np.inf], np.maximum.accumulate(taken_wh)[:-1]])
    kept = taken_wh > before
    return low_s[kept], taken_wh[kept]


def _highs(need: PowerNeed, ends_s: Floats) -> tuple[Floats, Floats]:
    """Instants t up to which to count, and the base charge less the floor by then: less than at any later one."""
    high_s = np.unique(np.concatenate([need.edges_s[1:], ends_s, _recoveries_s(need)]))
    spare_wh = need.gained_wh(high_s) - np.minimum(need.floor_wh, need.idle_at_wh(high_s))
    after = np.append(np.minimum.accumulate(spare_wh[::-1])[::-1][1:], np.inf)
    kept = spare_wh < after
    return high_s[kept], spare_wh[kept]


def _recoveries_s(need: PowerNeed) -> Floats:
    """Instants at which a battery that its base load alone took under the floor comes back to it."""
    times, levels = need.idle_wh()
    back = np.flatnonzero((levels[:-1] < need.floor_wh) & (levels[1:] >= need.floor_wh))
    share = (need.floor_wh - levels[back]) / need.net_w[back] * 3600.0
    return np.asarray(times[back] + share)
