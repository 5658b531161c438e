"""What came out of planning, and how good it is known to be."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

from passplan.planning.certificate import Certificate
from passplan.planning.parts import Part
from passplan.planning.shortfalls import Shortfall
from passplan.planning.value import Account

Status = Literal["optimal", "within_gap", "stopped_by_limit", "greedy", "empty"]
# Below this relative gap a plan is called optimal: solvers work to such tolerances themselves.
OPTIMAL_GAP = 1e-5
# Worth of less than a byte of weight one: values that should be nothing are off by rounding.
_NOTHING = 1e-9


@dataclass(frozen=True)
class Tier:
    """One objective in the order they are solved. ``sense`` says which way is better."""

    name: str
    sense: Literal["least", "most"]
    value: float
    bound: float
    gap: float


@dataclass(frozen=True, eq=False)
class Proof:
    """Why the bound of an independent part of the problem holds; the bounds of the parts add up."""

    part: Part
    certificate: Certificate


@dataclass(frozen=True, eq=False)
class PlanResult:
    """A plan over a :class:`~passplan.planning.problem.Problem`.

    ``chosen`` are option indices, sorted. ``value`` is recomputed by ``value.account``; ``bound`` is a
    ceiling that no plan over the same options with as few shortfalls can exceed. ``path`` names the way the
    plan was found: ``exact``, ``search`` or ``greedy``, several joined by ``+`` where independent parts went
    different ways. ``proofs`` is empty where the bound is only that all data comes down. ``seconds`` are by stage.
    """

    chosen: tuple[int, ...]
    status: Status
    value: float
    bound: float
    gap: float
    tiers: tuple[Tier, ...]
    shortfalls: tuple[Shortfall, ...]
    account: Account
    path: str
    seconds: dict[str, float] = field(default_factory=dict)
    proofs: tuple[Proof, ...] = ()
    stopped_by_hand: bool = False


def relative_gap(value: float, bound: float) -> float:
    """(bound - value) / |bound|, as the gap is stated everywhere; 0 when both are 0, capped at 1e9."""
    if bound - value <= _NOTHING:
        return 0.0
    if bound == float("inf") or bound == 0.0:
        return 1e9
    return min(1e9, (bound - value) / abs(bound))


def status_of(gap: float, allowed_gap: float, path: str, contacts: int) -> Status:
    """The status word of a plan."""
    if contacts == 0 and gap <= OPTIMAL_GAP:
        return "empty"
    if gap <= OPTIMAL_GAP:
        return "optimal"
    if gap <= allowed_gap:
        return "within_gap"
    return "greedy" if path == "greedy" else "stopped_by_limit"
