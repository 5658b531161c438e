"""Requirements that a plan does not meet: how much is missing, and said in a sentence."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from passplan.planning.rules.terms import AtLeast, Recurrence, Terms


@dataclass(frozen=True)
class Shortfall:
    """A requirement that is missed. ``points`` is its part of tier 1.

    ``kind`` is that of the wanted contact or ``command``; ``name`` is the request's or the spacecraft's. For a command
    interval ``spans_s`` are the half-open spans of time in which the last command contact is too old, for contacts that
    hand over those in which none is followed up.
    ``possible`` says whether some single option could have helped.
    """

    kind: str
    name: str
    spacecraft: str
    points: float
    sentence: str
    possible: bool
    spans_s: tuple[tuple[int, int], ...] = ()


# Amounts are sums of decimals; a need reached to within this part of it is met.
_ROUNDING = 1e-9
_WANTED = {
    "request": "Request {name} for {owner} is not met",
    "pin": "The pinned contact is not in the plan",
    "frozen": "The frozen contact is not in the plan as it was published",
    "loaded": "The contact loaded aboard is not in the plan as it was loaded",
    "emergency": "The emergency contact is not in the plan",
}


def find_shortfalls(terms: Terms, chosen: Iterable[int]) -> tuple[Shortfall, ...]:
    """Every requirement in ``terms`` that the chosen options do not meet, in the order of the terms."""
    picked = {int(o) for o in chosen}
    found = []
    for want in terms.wanted:
        if picked.isdisjoint(want.options.tolist()):
            why = want.reason or (
                "no window of the spacecraft offers a contact that fits its span, antenna, service and length"
                if len(want.options) == 0 else "every contact that would fit it collides with other requirements")
            found.append(Shortfall(
                want.kind, want.name, want.owner, want.points,
                f"{_WANTED[want.kind].format(name=want.name, owner=want.owner)}: {why}.", len(want.options) > 0))
    for need in terms.recurrences:
        spans = overdue_spans(need, picked)
        if spans:
            found.append(_overdue(need, spans))
    for promise in terms.guarantees:
        missing = missing_amount(promise, picked)
        if missing > 0.0:
            most = promise.need - missing_amount(promise, set(promise.options.tolist()))
            got = promise.need - missing
            why = ("no more fits together, beside the other requirements" if most > got
                   else "the windows offer no more")
            found.append(Shortfall(
                promise.kind, promise.name, "", promise.points * missing / promise.need,
                f"The plan has {got:.6g} of the {promise.need:.6g} that are due: {why}.",
                most > got))
    return tuple(found)


def _overdue(need: Recurrence, spans: tuple[tuple[int, int], ...]) -> Shortfall:
    seconds = sum(b - a for a, b in spans)
    best = overdue_spans(need, set(need.options.tolist()))
    avoidable = seconds > sum(b - a for a, b in best)
    what = "contacts" if need.request else "command contacts"
    why = f"the {what} that could help collide with other requirements" if avoidable else (
        f"no windows offer contacts that overlap by {need.overlap_s} s there" if need.request
        else "no window offers a command contact in time")
    sentence = (f"Spacecraft {need.name} is without a command contact for longer than {need.every_s / 3600:g} h "
                f"during {seconds / 3600:.2f} h of the horizon")
    if need.request:
        sentence = (f"Request {need.request} for {need.name}, contacts that hand over to each other, is not met during "
                    f"{seconds} s of {need.every_s} s")
    return Shortfall(
        "request" if need.request else "command", need.request or need.name, need.name,
        need.points * seconds / need.every_s, f"{sentence}: {why}.", avoidable, spans)


def missing_amount(promise: AtLeast, picked: set[int]) -> float:
    """What the chosen options lack of a guarantee, in its own unit; nothing where it is a matter of rounding."""
    got = sum(amount for o, amount in zip(promise.options.tolist(), promise.amounts.tolist(), strict=True)
              if o in picked)
    missing = promise.need - got
    return missing if missing > _ROUNDING * promise.need else 0.0


def overdue_spans(need: Recurrence, picked: set[int]) -> tuple[tuple[int, int], ...]:
    """The half-open spans [s] in which the last chosen command contact is too old, or no contact follows up."""
    covered = sorted((int(a), int(b) + need.reach_s)
                     for o, a, b in zip(need.options, need.start_s, need.end_s, strict=True) if int(o) in picked)
    spans, reached = [], need.from_s
    for start_s, until_s in covered:
        if start_s > reached:
            spans.append((reached, min(start_s, need.until_s)))
        reached = max(reached, until_s)
        if reached >= need.until_s:
            break
    if reached < need.until_s:
        spans.append((reached, need.until_s))
    return tuple((a, b) for a, b in spans if b > a)


def least_points(terms: Terms) -> float:
    """Points that no plan can avoid, were every option usable at once that no rule takes out: a floor of tier 1."""
    removed = {int(o) for removal in terms.removals for o in removal.options}
    points = sum(want.points for want in terms.wanted if removed.issuperset(want.options.tolist()))
    for need in terms.recurrences:
        spans = overdue_spans(need, set(need.options.tolist()) - removed)
        points += sum(need.points * (b - a) / need.every_s for a, b in spans)
    for promise in terms.guarantees:
        points += promise.points * missing_amount(promise, set(promise.options.tolist()) - removed) / promise.need
    return points


def total_points(shortfalls: Iterable[Shortfall]) -> float:
    """Tier 1 of a plan."""
    return sum(s.points for s in shortfalls)
