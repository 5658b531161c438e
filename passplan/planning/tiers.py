"""The objectives of a plan in their order, each as a problem over the same options.

After the requirements (points of shortfall, see ``shortfalls.py``) come, in this order: the MB lost aboard; the
value delivered, less what changes to the published plan cost; money; the number of changes. Each is a
problem with other weights, so that whatever plans for one objective plans for each of them. So is a sum of
them in which an earlier one weighs much more than a later one (``staged``).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from passplan.planning.change_cost import ChangeNeed
from passplan.planning.problem import Problem
from passplan.planning.value import account


@dataclass(frozen=True, eq=False)
class Objective:
    """One objective: ``problem`` is to be made the most of, and says minus what is to be made the least of.

    ``ceiling`` is a worth that no plan can exceed, known beforehand.
    """

    name: str
    sense: Literal["least", "most"]
    problem: Problem
    ceiling: float


def objectives(problem: Problem) -> tuple[Objective, ...]:
    """All objectives after the requirements; that of changes only where there is a published plan."""
    fleet, none = problem.fleet, np.zeros(0)
    nothing = replace(
        problem, fleet=fleet.weighed([]), spill_cost_per_mb=0.0, worth_per_money=0.0,
        extra_price=none, base_worth=0.0)
    found = [
        Objective("lost data", "least", replace(nothing, spill_cost_per_mb=1.0), 0.0),
        Objective("value", "most", problem, _most_value(problem)),
        Objective("cost", "least", replace(nothing, worth_per_money=1.0),
                  -float(np.minimum(problem.options.cost, 0.0).sum())),
    ]
    for need in problem.needs_of(ChangeNeed):
        change = np.where(need.keeps >= 0, -1.0, 1.0)
        found.append(Objective(
            "changes", "least", replace(nothing, extra_price=change, base_worth=-float(len(need.cost))), 0.0))
    return tuple(found)


def reached_by(aims: Sequence[Objective], chosen: Sequence[int]) -> tuple[float, ...]:
    """What a plan comes to in each objective, more being better. Storage is followed once for all of them."""
    whole = account(next(aim.problem for aim in aims if aim.sense == "most"), chosen)
    return tuple(
        whole.value if aim.sense == "most" else float(
            aim.problem.base_worth - aim.problem.spill_cost_per_mb * math.fsum(whole.lost_mb)
            - math.fsum(aim.problem.price[whole.chosen]))
        for aim in aims)


def staged(parts: Sequence[tuple[Problem, float]]) -> Problem:
    """One problem whose objective is the weighted sum of those of ``parts``, all over the same options."""
    first = parts[0][0]
    price = sum((share * part.price for part, share in parts), np.zeros(len(first.options)))
    fleet = first.fleet.weighed([(part.fleet, share) for part, share in parts])
    return replace(
        first, fleet=fleet, worth_per_money=0.0, extra_price=price,
        spill_cost_per_mb=sum(share * part.spill_cost_per_mb for part, share in parts),
        base_worth=sum(share * part.base_worth for part, share in parts))


def most_of_a_contact(problem: Problem) -> float:
    """The most that one contact can do for the objective, by what its link carries and by its price."""
    options = problem.options
    carried_mb = np.zeros(len(options))
    np.add.at(carried_mb, np.repeat(np.arange(len(options)), np.diff(options.piece_offset)),
              options.piece_rate_mb_per_s * (options.piece_end_s - options.piece_start_s))
    worth = (problem.fleet.weight[options.spacecraft] + problem.spill_cost_per_mb) * carried_mb
    return float((worth + np.abs(problem.price)).max(initial=0.0))


def _most_value(problem: Problem) -> float:
    """All data aboard and generated is delivered, and every option that has a bonus brings it."""
    data = sum(layer.weight * (layer.start_mb + float(layer.made_mb[-1])) for mine in problem.layers for layer in mine)
    return data + problem.base_worth - float(np.minimum(problem.price, 0.0).sum())
