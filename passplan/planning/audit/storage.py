"""Does the data add up: every spacecraft's storage followed afresh, and the worth of the plan.

Between events the fill moves in a straight line, so the only instants of interest are those at which a
segment starts or ends, the storage runs dry, or it is full. Own derivation.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import accumulate, pairwise
from typing import Any

from passplan.inputs.fleet import Spacecraft
from passplan.inputs.run import Run
from passplan.planning.audit.ageing import ages, follow_aged
from passplan.planning.audit.changes import departures
from passplan.planning.audit.faults import Fault, differs
from passplan.planning.audit.making import Rates, added, rates_of
from passplan.planning.audit.money import cost_of
from passplan.planning.audit.rows import Contact, Piece

_A_BYTE_IN_A_GIGABYTE = 1e-9
# Tables may be rounded to a byte in every row.
_BYTE_MB = 1e-6
_VALUE_RELATIVE = 1e-6
_FIGURES = ("start_mb", "generated_mb", "delivered_mb", "lost_mb", "left_mb")


@dataclass(frozen=True)
class Balance:
    """Where one spacecraft's data went [MB], with what each piece of sending brought down.

    ``missed_mb``, dropped at a deadline, is a part of what was lost. ``worth`` of each piece is stated where the
    age of data matters to it.
    """

    start_mb: float
    generated_mb: float
    delivered_mb: float
    lost_mb: float
    left_mb: float
    sent_mb: tuple[float, ...] = ()
    missed_mb: float = 0.0
    worth: tuple[float, ...] | None = None


def follow(craft: Spacecraft, pieces: Sequence[Piece], horizon_s: float) -> Balance:
    """Follow the storage through pieces of sending, in time order, at a steady generation."""
    return follow_rates(craft.start_fill_mb, craft.storage_mb, [(0.0, horizon_s, craft.generation_mb_per_s)], pieces)


def follow_rates(start_mb: float, capacity_mb: float, rates: Rates, pieces: Sequence[Piece]) -> Balance:
    """The same for any generation: between two instants of either kind all rates are steady.

    Pieces that overlap draw on the storage together, each in proportion to its rate.
    """
    fill_mb = start_mb
    sent: dict[int, list[float]] = {k: [] for k in range(len(pieces))}
    lost: list[float] = []
    edges = sorted({t for start_s, end_s, _ in rates for t in (start_s, end_s)}
                   | {t for piece in pieces for t in (piece.start_s, piece.end_s)})
    at = following = 0
    active: list[int] = []
    for from_s, until_s in pairwise(edges):
        while rates[at][1] <= from_s and at < len(rates) - 1:
            at += 1
        active = [k for k in active if pieces[k].end_s > from_s]
        while following < len(pieces) and pieces[following].start_s <= from_s:
            active.append(following)
            following += 1
        link = math.fsum(pieces[k].rate_mbps for k in active) / 8.0
        fill_mb, spilled_mb, sent_mb = _drift(fill_mb, rates[at][2], capacity_mb, until_s - from_s, link)
        lost.append(spilled_mb)
        for k in active if link > 0.0 else ():
            sent[k].append(sent_mb * pieces[k].rate_mbps / 8.0 / link)
    volumes = tuple(math.fsum(parts) for parts in sent.values())
    generated_mb = math.fsum((end_s - start_s) * rate for start_s, end_s, rate in rates)
    return Balance(start_mb, generated_mb, math.fsum(volumes), math.fsum(lost), fill_mb, volumes)


def _drift(
    fill_mb: float, generation: float, capacity_mb: float, seconds: float, rate_mb_per_s: float
) -> tuple[float, float, float]:
    """Fill at the end of a stretch of constant sending, what spilled, and what was sent [MB]."""
    growth = generation - rate_mb_per_s
    if growth >= 0.0:
        until_full_s = (capacity_mb - fill_mb) / growth if growth > 0.0 else math.inf
        if seconds <= until_full_s:
            return fill_mb + growth * seconds, 0.0, rate_mb_per_s * seconds
        return capacity_mb, growth * (seconds - until_full_s), rate_mb_per_s * seconds
    until_dry_s = fill_mb / -growth
    if seconds <= until_dry_s:
        return fill_mb + growth * seconds, 0.0, rate_mb_per_s * seconds
    # Once dry, what is generated goes down at once.
    return 0.0, 0.0, rate_mb_per_s * until_dry_s + generation * (seconds - until_dry_s)


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
    worths: dict[str, float] = {}
    # A spacecraft that was left out of the run is no part of the plan, and its data no part of the value.
    for name in run.orbits:
        sending = sorted(by_craft[name], key=lambda pair: pair[1].start_s)
        if _most_at_once([piece for _, piece in sending]) > run.spacecraft[name].links:
            sentence = "it would send more segments at once than it has links; nothing adds up then"
            yield Fault("storage", f"spacecraft {name}", sentence)
            return
        balances = class_balances(run, name, sending, contacts)
        balance = joint(list(balances.values()))
        tolerance_mb = _A_BYTE_IN_A_GIGABYTE * (balance.start_mb + balance.generated_mb) + _BYTE_MB * (len(sending) + 1)
        for k, (contact, piece) in enumerate(sending):
            if differs(piece.volume_mb, balance.sent_mb[k], tolerance_mb):
                sentence = f"it brings down {balance.sent_mb[k]:.6f} MB of what is aboard, not {piece.volume_mb:.6f} MB"
                yield Fault("volume", contact.place, sentence)
            yield from _check_classes(contact, piece, {c: one.sent_mb[k] for c, one in balances.items()}, tolerance_mb)
        yield from _check_entry(f"spacecraft {name}", stated.get(name), balance, tolerance_mb)
        if name in run.data:
            entries = stated[name].get("classes", {}) if isinstance(stated.get(name), Mapping) else {}
            for item in run.data_of(name):
                place = f"spacecraft {name}, class {item.name}"
                yield from _check_entry(place, entries.get(item.name), balances[item.name], tolerance_mb)
                told_mb, missed_mb = _number(entries.get(item.name, {}).get("missed_mb")), balances[item.name].missed_mb
                if differs(told_mb, missed_mb, tolerance_mb):
                    sentence = f"{missed_mb:.6f} MB missed the deadline, not {told_mb:.6f} MB"
                    yield Fault("storage", place, sentence)
        for item in run.data_of(name):
            balance_of = balances[item.name]
            worth = balance_of.worth or tuple(item.weight * mb for mb in balance_of.sent_mb)
            earned.extend(worth)
            earned.append(run.policy.left_worth_share * item.weight * balance_of.left_mb)
            for (contact, _), share in zip(sending, worth, strict=True):
                worths[contact.contact_id] = worths.get(contact.contact_id, 0.0) + share
        earned.append(-spill_cost * balance.lost_mb)
        delivered.append(balance.delivered_mb)
    for contact in contacts:
        yield from _check_money(run, contact, worths.get(contact.contact_id, 0.0))
        earned.append(-worth_per_money * cost_of(run, contact))
    earned.append(-departures(run, contacts)[0])
    for name in sorted(set(stated) - set(run.orbits)):
        yield Fault("storage", f"spacecraft {name}", "it takes no part in the plan, yet the summary has figures for it")
    value = math.fsum(earned)
    yield from _check_total("value", summary.get("value"), value)
    yield from _check_total("volume_mb", summary.get("volume_mb"), math.fsum(delivered))


def _most_at_once(pieces: Sequence[Piece]) -> int:
    """The most pieces that are sent at the same time; one that ends makes room for one that starts."""
    changes = sorted((t, step) for piece in pieces for t, step in ((piece.start_s, 1), (piece.end_s, -1)))
    return max(accumulate(step for _, step in changes), default=0)


def class_balances(
    run: Run, name: str, sending: Sequence[tuple[Contact, Piece]], contacts: Sequence[Contact]
) -> dict[str, Balance]:
    """Where the data of each class of a spacecraft went, by name, what is worth most first.

    The best classes together neither notice the others nor care which of them a MB is of, as the link takes the
    best first and a full storage gives up the least. So each such group is followed as if it were alone, and a class
    is the difference of two groups. Where age matters the classes are followed one beside the other (``ageing.py``).
    """
    if ages(run, name):
        return {
            item.name: Balance(
                item.start_fill_mb, math.fsum((b - a) * rate for a, b, rate in rates_of(run, name, item)),
                aged.delivered_mb, aged.lost_mb, aged.left_mb, aged.sent_mb, aged.missed_mb, aged.worth)
            for item, aged in zip(run.data_of(name), follow_aged(run, name, sending, contacts), strict=True)
        }
    pieces = [piece for _, piece in sending]
    capacity_mb = run.spacecraft[name].storage_mb
    found: dict[str, Balance] = {}
    rates: Rates = []
    start_mb, above = 0.0, Balance(0.0, 0.0, 0.0, 0.0, 0.0, (0.0,) * len(pieces))
    for item in run.data_of(name):
        rates = added(rates, rates_of(run, name, item))
        start_mb += item.start_fill_mb
        group = follow_rates(start_mb, capacity_mb, rates, pieces)
        start, made, down, lost, left = (getattr(group, key) - getattr(above, key) for key in _FIGURES)
        sent_mb = tuple(a - b for a, b in zip(group.sent_mb, above.sent_mb, strict=True))
        found[item.name] = Balance(start, made, down, lost, left, sent_mb)
        above = group
    return found


def joint(balances: Sequence[Balance]) -> Balance:
    """All classes together."""
    sent_mb = tuple(map(math.fsum, zip(*(one.sent_mb for one in balances), strict=True)))
    start, made, down, lost, left = (math.fsum(getattr(one, key) for one in balances) for key in _FIGURES)
    return Balance(start, made, down, lost, left, sent_mb)


def _check_classes(contact: Contact, piece: Piece, sent: Mapping[str, float], tolerance_mb: float) -> Iterator[Fault]:
    for name in sorted(set(piece.class_mb) - set(sent)):
        yield Fault("volume", contact.place, f"{contact.spacecraft} has no class of data {name!r}")
    if len(sent) == 1:
        return
    for name, sent_mb in sent.items():
        stated_mb = piece.class_mb.get(name, 0.0)
        if differs(stated_mb, sent_mb, tolerance_mb):
            sentence = f"it brings down {sent_mb:.6f} MB of {name}, not {stated_mb:.6f} MB"
            yield Fault("volume", contact.place, sentence)


def _check_entry(place: str, entry: Any, balance: Balance, tolerance_mb: float) -> Iterator[Fault]:
    if not isinstance(entry, Mapping):
        yield Fault("storage", place, "the summary has no storage figures for it")
        return
    figures = {key: _number(entry.get(key)) for key in _FIGURES}
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


def _check_money(run: Run, contact: Contact, followed: float) -> Iterator[Fault]:
    """Weight, value and cost of one contact."""
    weights = {item.name: item.weight for item in run.data_of(contact.spacecraft)}
    worth = math.fsum(weights.get(name, 0.0) * mb for piece in contact.pieces for name, mb in piece.class_mb.items())
    aged = ages(run, contact.spacecraft)
    worth = followed if aged else worth
    mixed = (aged or len(weights) > 1) and contact.volume_mb > 0.0
    for key, figure, expected in (
        ("weight", contact.weight, worth / contact.volume_mb if mixed else max(weights.values())),
        ("value", contact.value, worth),
        ("cost", contact.cost, cost_of(run, contact)),
    ):
        if differs(figure, expected, _VALUE_RELATIVE * max(abs(expected), 1.0)):
            yield Fault("value", contact.place, f"its {key} is {figure:.6g}, it should be {expected:.6g}")


def _check_total(key: str, stated: Any, expected: float) -> Iterator[Fault]:
    if differs(_number(stated), expected, _VALUE_RELATIVE * max(abs(expected), 1.0)):
        yield Fault("value", "plan", f"its {key} is stated as {stated}, the audit finds {expected:.6f}")


def _number(value: Any) -> float:
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else math.nan
