"""Does the data add up: every spacecraft's storage followed afresh, and the worth of the plan.

Between events the fill moves in a straight line, so the only instants of interest are those at which a
segment starts or ends, the storage runs dry, or it is full. Own derivation.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from passplan.inputs.fleet import Spacecraft
from passplan.inputs.run import Run
from passplan.planning.audit.changes import departures
from passplan.planning.audit.faults import Fault, differs
from passplan.planning.audit.rows import Contact, Piece

_A_BYTE_IN_A_GIGABYTE = 1e-9
# Tables may be rounded to a byte in every row.
_BYTE_MB = 1e-6
_VALUE_RELATIVE = 1e-6


@dataclass(frozen=True)
class Balance:
    """Where one spacecraft's data went [MB], with what each piece of sending brought down."""

    start_mb: float
    generated_mb: float
    delivered_mb: float
    lost_mb: float
    left_mb: float
    sent_mb: tuple[float, ...] = ()


def follow(craft: Spacecraft, pieces: Sequence[Piece], horizon_s: float) -> Balance:
    """Follow the storage through pieces of sending, in time order and apart from each other."""
    fill_mb, clock_s = craft.start_fill_mb, 0.0
    sent: list[float] = []
    lost: list[float] = []
    for piece in pieces:
        fill_mb, spilled_mb, _ = _drift(fill_mb, craft, piece.start_s - clock_s, 0.0)
        lost.append(spilled_mb)
        fill_mb, spilled_mb, sent_mb = _drift(fill_mb, craft, piece.end_s - piece.start_s, piece.rate_mbps / 8.0)
        lost.append(spilled_mb)
        sent.append(sent_mb)
        clock_s = piece.end_s
    fill_mb, spilled_mb, _ = _drift(fill_mb, craft, horizon_s - clock_s, 0.0)
    generated_mb = craft.generation_mb_per_s * horizon_s
    return Balance(
        craft.start_fill_mb, generated_mb, math.fsum(sent), math.fsum([*lost, spilled_mb]), fill_mb, tuple(sent)
    )


def _drift(fill_mb: float, craft: Spacecraft, seconds: float, rate_mb_per_s: float) -> tuple[float, float, float]:
    """Fill at the end of a stretch of constant sending, what spilled, and what was sent [MB]."""
    growth = craft.generation_mb_per_s - rate_mb_per_s
    if growth >= 0.0:
        until_full_s = (craft.storage_mb - fill_mb) / growth if growth > 0.0 else math.inf
        if seconds <= until_full_s:
            return fill_mb + growth * seconds, 0.0, rate_mb_per_s * seconds
        return craft.storage_mb, growth * (seconds - until_full_s), rate_mb_per_s * seconds
    until_dry_s = fill_mb / -growth
    if seconds <= until_dry_s:
        return fill_mb + growth * seconds, 0.0, rate_mb_per_s * seconds
    # Once dry, what is generated goes down at once.
    return 0.0, 0.0, rate_mb_per_s * until_dry_s + craft.generation_mb_per_s * (seconds - until_dry_s)


def check_storage(run: Run, contacts: Sequence[Contact], summary: Mapping[str, Any]) -> Iterator[Fault]:
    """Volumes, storage and value of the plan against a simulation of its own."""
    by_craft: dict[str, list[tuple[Contact, Piece]]] = defaultdict(list)
    for contact in contacts:
        by_craft[contact.spacecraft].extend((contact, piece) for piece in contact.pieces)
    stated = summary.get("storage", {})
    # Taken in order, what is lost and what is paid are objectives of their own.
    apart = run.policy.tiers == "in_order"
    spill_cost = 0.0 if apart else run.policy.spill_cost_per_mb
    worth_per_money = 0.0 if apart else run.policy.worth_per_money
    earned: list[float] = []
    delivered: list[float] = []
    # A spacecraft that was left out of the run is no part of the plan, and its data no part of the value.
    for name in run.orbits:
        craft = run.spacecraft[name]
        sending = sorted(by_craft[name], key=lambda pair: pair[1].start_s)
        if any(later.start_s < earlier.end_s for (_, earlier), (_, later) in pairwise(sending)):
            yield Fault("storage", f"spacecraft {name}", "it would send two segments at once; nothing adds up then")
            return
        balance = follow(craft, [piece for _, piece in sending], run.horizon_s)
        tolerance_mb = _A_BYTE_IN_A_GIGABYTE * (balance.start_mb + balance.generated_mb) + _BYTE_MB * (len(sending) + 1)
        for (contact, piece), sent_mb in zip(sending, balance.sent_mb, strict=True):
            if differs(piece.volume_mb, sent_mb, tolerance_mb):
                sentence = f"it brings down {sent_mb:.6f} MB of what is aboard, not {piece.volume_mb:.6f} MB"
                yield Fault("volume", contact.place, sentence)
        yield from _check_entry(name, stated.get(name), balance, tolerance_mb)
        kept_mb = run.policy.left_worth_share * balance.left_mb
        earned.append(craft.weight * (balance.delivered_mb + kept_mb) - spill_cost * balance.lost_mb)
        delivered.append(balance.delivered_mb)
    for contact in contacts:
        yield from _check_money(run, contact)
        earned.append(-worth_per_money * _cost(run, contact))
    earned.append(-departures(run, contacts)[0])
    for name in sorted(set(stated) - set(run.orbits)):
        yield Fault("storage", f"spacecraft {name}", "it takes no part in the plan, yet the summary has figures for it")
    value = math.fsum(earned)
    yield from _check_total("value", summary.get("value"), value)
    yield from _check_total("volume_mb", summary.get("volume_mb"), math.fsum(delivered))


def _check_entry(name: str, entry: Any, balance: Balance, tolerance_mb: float) -> Iterator[Fault]:
    place = f"spacecraft {name}"
    if not isinstance(entry, Mapping):
        yield Fault("storage", place, "the summary has no storage figures for it")
        return
    keys = ("start_mb", "generated_mb", "delivered_mb", "lost_mb", "left_mb")
    figures = {key: _number(entry.get(key)) for key in keys}
    for key, figure in figures.items():
        expected = getattr(balance, key)
        if differs(figure, expected, tolerance_mb):
            sentence = f"storage figure {key} is {figure:.6f}, the simulation gives {expected:.6f}"
            yield Fault("storage", place, sentence)
    into_mb = figures["start_mb"] + figures["generated_mb"]
    out_mb = math.fsum(figures[key] for key in ("delivered_mb", "lost_mb", "left_mb"))
    if differs(into_mb, out_mb, tolerance_mb):
        sentence = f"start and generated make {into_mb:.6f} MB, delivered, lost and left {out_mb:.6f} MB"
        yield Fault("storage", place, sentence)


def _cost(run: Run, contact: Contact) -> float:
    return run.antennas[contact.antenna].price_per_minute * (contact.end_s - contact.start_s) / 60.0


def _check_money(run: Run, contact: Contact) -> Iterator[Fault]:
    """Weight, value and cost of one contact."""
    weight = run.spacecraft[contact.spacecraft].weight
    for key, figure, expected in (
        ("weight", contact.weight, weight),
        ("value", contact.value, weight * contact.volume_mb),
        ("cost", contact.cost, _cost(run, contact)),
    ):
        if differs(figure, expected, _VALUE_RELATIVE * max(abs(expected), 1.0)):
            yield Fault("value", contact.place, f"its {key} is {figure:.6g}, it should be {expected:.6g}")


def _check_total(key: str, stated: Any, expected: float) -> Iterator[Fault]:
    if differs(_number(stated), expected, _VALUE_RELATIVE * max(abs(expected), 1.0)):
        yield Fault("value", "plan", f"its {key} is stated as {stated}, the audit finds {expected:.6f}")


def _number(value: Any) -> float:
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else math.nan
