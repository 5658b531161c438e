"""Requirements that contradict each other: for each one that is missed, a smallest set that cannot all be met.

"Smallest" means that without any one of the set the rest can be met. It is found by halving what is left to
suspect (Junker 2004), each step a small exact model of the requirements alone, under all hard rules. A plan with
the fewest points of shortfall cannot meet a missed requirement beside all that it meets, so a set is
always there to be found.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from passplan.inputs.errors import PassplanError
from passplan.planning.clock import Clock
from passplan.planning.occupancy import Occupancy
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.terms import AtLeast, Recurrence, Terms, Wanted
from passplan.planning.shortfalls import find_shortfalls, total_points
from passplan.planning.solve import least_shortfall

Demand = Wanted | Recurrence | AtLeast
_MET = 1e-6
# A step is a model of few options; one that takes longer than this says nothing.
_STEP_S = 5.0
# What stands between demands is shown by this many examples.
_MOST_BETWEEN = 3
_WORDS = {"request": "request {} for {}", "pin": "the pinned contact, {}", "frozen": "the frozen contact, {}",
          "loaded": "the contact loaded aboard, {}", "emergency": "the emergency contact, {}"}


@dataclass(frozen=True, eq=False)
class Contradiction:
    """``demands`` in words cannot all be met; ``between`` names what they would share, or why one alone cannot be.

    ``core`` are the demands themselves.
    """

    demands: tuple[str, ...]
    between: tuple[str, ...]
    core: tuple[Demand, ...]

    @property
    def sentence(self) -> str:
        """It in one sentence."""
        why = f" ({'; '.join(self.between)})" if self.between else ""
        if len(self.demands) == 1:
            return f"{_capital(self.demands[0])} cannot be met{why}."
        return f"{_capital(', and '.join(self.demands))} cannot all be met{why}."


class RulesConflictError(PassplanError):
    """The policy wants no plan where rules contradict each other."""

    exit_code = 4

    def __init__(self, sentences: Iterable[str]) -> None:
        lines = ["rules contradict each other, and the policy says to stop (when_rules_conflict)", *sentences]
        super().__init__("\n".join(lines))


def find_contradictions(
    problem: Problem, terms: Terms, chosen: Iterable[int], limits: Limits, seconds: float,
) -> tuple[Contradiction, ...]:
    """One for each requirement that a plan with the fewest points misses and that is in none so far.

    Takes ``seconds`` at most; what is not found by then is left out.
    """
    picked, clock, found = list(chosen), Clock(seconds), list[Contradiction]()
    demands: list[Demand] = [*terms.wanted, *terms.recurrences, *terms.guarantees]
    missed = [d for d in demands if find_shortfalls(only(terms, [d]), picked)]
    met = [d for d in demands if not any(d is other for other in missed)]
    explained: list[Demand] = []
    for demand in missed:
        if any(demand is other for other in explained):
            continue
        core = _Suspects(problem, terms, limits, clock).core(demand, met)
        if core is not None:
            explained += [demand, *core]
            found.append(_contradiction(problem, terms, [demand, *core]))
    return tuple(found)


class _Suspects:
    def __init__(self, problem: Problem, terms: Terms, limits: Limits, clock: Clock) -> None:
        self.problem, self.terms, self.limits, self.clock = problem, terms, limits, clock

    def core(self, demand: Demand, suspects: list[Demand]) -> list[Demand] | None:
        """The fewest of ``suspects`` that contradict ``demand``; None where nothing can be proven in time."""
        return self._narrow([demand], True, suspects) if self._contradict([demand, *suspects]) else None

    def _narrow(self, sure: list[Demand], new: bool, suspects: list[Demand]) -> list[Demand] | None:
        """The fewest of ``suspects`` that contradict ``sure``; ``new`` says that ``sure`` alone was not tried yet."""
        if self.clock.expired():
            return None
        if not suspects or (new and self._contradict(sure)):
            return []
        if len(suspects) == 1:
            return suspects
        half = len(suspects) // 2
        first, second = suspects[:half], suspects[half:]
        late = self._narrow([*sure, *first], bool(first), second)
        if late is None:
            return None
        early = self._narrow([*sure, *late], bool(late), first)
        return None if early is None else [*early, *late]

    def _contradict(self, demands: Sequence[Demand]) -> bool:
        """Whether it is proven that these cannot all be met."""
        terms = only(self.terms, demands)
        served = least_shortfall(self.problem, terms, self.limits, self.clock.part(_STEP_S))
        if served.chosen is not None and total_points(find_shortfalls(terms, served.chosen)) <= _MET:
            return False
        return served.bound > _MET


def only(terms: Terms, demands: Sequence[Demand]) -> Terms:
    """The same hard rules with these requirements only."""
    return replace(
        terms, wanted=tuple(d for d in demands if isinstance(d, Wanted)),
        recurrences=tuple(d for d in demands if isinstance(d, Recurrence)),
        guarantees=tuple(d for d in demands if isinstance(d, AtLeast)))


def _contradiction(problem: Problem, terms: Terms, core: Sequence[Demand]) -> Contradiction:
    between = _alone(terms, core[0]) if len(core) == 1 else _shared(problem, terms, core)
    return Contradiction(tuple(_in_words(demand) for demand in core), between, tuple(core))


def _in_words(demand: Demand) -> str:
    if isinstance(demand, Wanted):
        return _WORDS[demand.kind].format(demand.name, demand.owner)
    if isinstance(demand, Recurrence) and demand.request:
        return _WORDS["request"].format(demand.request, demand.name)
    if isinstance(demand, Recurrence):
        return f"a command contact of {demand.name} every {demand.every_s / 3600:g} h"
    return f"the {demand.need:.6g} {demand.name}"


def _alone(terms: Terms, demand: Demand) -> tuple[str, ...]:
    """Why a requirement cannot be met though nothing else is asked for."""
    if isinstance(demand, Recurrence):
        if demand.request:
            return (f"no choice of windows offers contacts that overlap by {demand.overlap_s} s all along",)
        return ("no choice of windows offers a command contact in time",)
    if isinstance(demand, AtLeast):
        return ("the windows offer no more",)
    removed = {int(o): removal.detail for removal in terms.removals for o in removal.options}
    details = dict.fromkeys(removed[int(o)] for o in demand.options if int(o) in removed)
    why = demand.reason or "; ".join(details) or "no window offers a contact that fits it"
    return (why,)


def _shared(problem: Problem, terms: Terms, core: Sequence[Demand]) -> tuple[str, ...]:
    """What the options of one requirement take that those of another would need."""
    said: dict[str, None] = {}
    occupancy = Occupancy(terms, len(problem.options))
    for k, one in enumerate(core):
        for other in core[k + 1:]:
            for a in one.options.tolist():
                if not occupancy.fits(a):
                    continue
                occupancy.add(a)
                for b in other.options.tolist():
                    said.update(dict.fromkeys(_place(blocker.kind, blocker.name) for blocker in occupancy.blockers(b)))
                occupancy.remove(a)
                if len(said) >= _MOST_BETWEEN:
                    return tuple(said)[:_MOST_BETWEEN]
    return tuple(said)


def _place(kind: str, name: str) -> str:
    return f"{kind.replace('_', ' ')}: {name}"


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
