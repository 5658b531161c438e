"""What a set of contacts is worth: storage followed event by event, in continuous time.

This is the one definition of the objective. It is plain Python over the exact events, and nothing that
looks for a plan (model, greedy, search) uses it to find one: they are judged by it.

Between events a spacecraft generates g and may send at one rate r. Over a stretch of dt seconds that
starts with f aboard it sends ``min(f + g dt, r dt)``: with r >= g the storage runs down and then sends
as it generates; with r < g it sends all the time. What would stand above the capacity is lost at once:
``max(0, f + g dt - sent - capacity)``. Both hold exactly, as within a stretch the fill is monotonic.
Sending as early as possible is optimal for a single class of data, so that a plan is its contacts and
nothing more. (Own derivation.) A spacecraft with several classes, or whose generation changes, is followed by
``classes.py``.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.classes import Aboard, follow
from passplan.planning.joint_sending import joint_sending
from passplan.planning.option_table import Options
from passplan.planning.problem import Problem
from passplan.planning.streams import Keeping, Stream


@dataclass(frozen=True)
class ClassBalance:
    """Where one class of data of one spacecraft went [MB], and what a MB of it is worth while fresh.

    ``missed_mb``, data dropped at its deadline, is a part of ``lost_mb``.
    """

    name: str
    weight: float
    start_mb: float
    generated_mb: float
    delivered_mb: float
    lost_mb: float
    missed_mb: float
    left_mb: float


@dataclass(frozen=True, eq=False)
class Account:
    """Where the data went. Per spacecraft, shape (n,), in MB: start, generated, delivered, lost, left.

    ``chosen`` are the options in time order, ``contact_mb`` (k,) what each brings down; ``piece`` indexes
    their pieces and ``piece_mb`` says what each brings down. ``contact_worth`` (k,) is what that is worth. ``cost``
    is money, ``value`` the objective. For spacecraft with classes of their own ``classes`` has a balance for each
    class, ``class_mb`` what each piece brings down of each, and ``aboard`` the fill through time; keys of the last
    two are pieces and spacecraft.
    """

    start_mb: Floats
    generated_mb: Floats
    delivered_mb: Floats
    lost_mb: Floats
    left_mb: Floats
    chosen: Integers
    contact_mb: Floats
    contact_worth: Floats
    piece: Integers
    piece_mb: Floats
    cost: float
    value: float
    classes: tuple[tuple[ClassBalance, ...], ...]
    class_mb: dict[int, Floats]
    aboard: dict[int, Aboard]


def account(problem: Problem, chosen: Iterable[int]) -> Account:
    """Follow every spacecraft's storage through the chosen options and add up the objective.

    ``chosen`` are option indices in any order. Contacts of a spacecraft with several links may overlap: at any instant
    their rates add up, and what is sent is divided among them as the rates are. Raises ``ValueError`` if sending
    pieces of one with a single link overlap.
    """
    options, fleet = problem.options, problem.fleet
    order = sorted((int(o) for o in chosen), key=lambda o: (int(options.start_s[o]), int(options.antenna[o]), o))
    by_craft: list[list[int]] = [[] for _ in range(len(fleet))]
    for o in order:
        by_craft[int(options.spacecraft[o])].append(o)
    sent: dict[int, float] = {}
    worth: dict[int, float] = {}
    class_mb: dict[int, Floats] = {}
    aboard: dict[int, Aboard] = {}
    lost = np.zeros(len(fleet))
    left = np.zeros(len(fleet))
    earned = []
    for i, mine in enumerate(by_craft):
        pieces = [p for o in mine for p in options.pieces(o)]
        streams = fleet.streams_of(i)
        if streams:
            aboard[i] = run = follow_contacts(problem, i, mine)
            volumes, lost[i], left[i] = run.sent_mb.sum(axis=1).tolist(), run.lost_mb.sum(), run.left_mb.sum()
            worth.update(zip(pieces, run.sent_worth.sum(axis=1).tolist(), strict=True))
            class_mb.update(zip(pieces, run.sent_mb, strict=True))
            weights = np.array([one.weight for one in streams])
            earned.append(float(run.sent_worth.sum()) + problem.left_worth_share * float(weights @ run.left_mb))
        else:
            volumes, lost[i], left[i] = _follow_plain(problem, i, pieces)
            weight = float(fleet.weight[i])
            worth.update((p, weight * mb) for p, mb in zip(pieces, volumes, strict=True))
            earned.append(weight * (math.fsum(volumes) + problem.left_worth_share * left[i]))
        sent.update(zip(pieces, volumes, strict=True))
    chosen_array = np.array(order, dtype=np.int64)
    cost = math.fsum(options.cost[chosen_array])
    piece = np.array([p for o in order for p in options.pieces(o)], dtype=np.int64)
    return Account(
        start_mb=fleet.start_fill_mb, generated_mb=fleet.generation_mb_per_s * problem.horizon_s,
        delivered_mb=np.array([_over(sent, options, mine) for mine in by_craft]).reshape(len(fleet)), lost_mb=lost,
        left_mb=left, chosen=chosen_array, contact_mb=np.array([_over(sent, options, [o]) for o in order], dtype=float),
        contact_worth=np.array([_over(worth, options, [o]) for o in order], dtype=float), piece=piece,
        piece_mb=np.array([sent[int(p)] for p in piece], dtype=float), cost=cost,
        value=math.fsum([
            *earned, *(-problem.spill_cost_per_mb * lost), *(-problem.price[chosen_array]), problem.base_worth]),
        classes=tuple(_balances(fleet.streams_of(i), aboard.get(i)) for i in range(len(fleet))), class_mb=class_mb,
        aboard=aboard)


def follow_contacts(problem: Problem, craft: int, mine: Sequence[int]) -> Aboard:
    """The classes of one spacecraft through the options ``mine``, in time order (with one link: apart)."""
    options, fleet = problem.options, problem.fleet
    pieces = _sending(options, [p for o in mine for p in options.pieces(o)])
    keeping = fleet.keeping_of(craft)
    freed_s: list[float] = []
    if keeping.acknowledged:
        freed_s = [_freed_s(options, mine, o, keeping) for o in mine for _ in options.pieces(o)]
    streams, capacity_mb = fleet.streams_of(craft), float(fleet.capacity_mb[craft])
    if fleet.links[craft] == 1:
        return follow(streams, capacity_mb, problem.horizon_s, pieces, keeping, freed_s)
    joint = joint_sending(pieces)
    # What several contacts send at once is freed with the last of them.
    freed_s = [max(freed_s[k] for k, _ in shares) for shares in joint.shares] if freed_s else []
    run = follow(streams, capacity_mb, problem.horizon_s, joint.pieces, keeping, freed_s)
    return replace(run, sent_mb=joint.dealt_out(run.sent_mb), sent_worth=joint.dealt_out(run.sent_worth))


def _follow_plain(problem: Problem, craft: int, pieces: Sequence[int]) -> tuple[list[float], float, float]:
    """One class at a steady rate through pieces of sending: MB sent in each, MB lost, and MB left."""
    fleet, sending = problem.fleet, _sending(problem.options, pieces)
    store = (problem.horizon_s, float(fleet.start_fill_mb[craft]), float(fleet.generation_mb_per_s[craft]),
             float(fleet.capacity_mb[craft]))
    if fleet.links[craft] == 1:
        return follow_storage(*store, sending)
    joint = joint_sending(sending)
    volumes, lost, left = follow_storage(*store, joint.pieces)
    return joint.dealt_out(np.array(volumes)).tolist(), lost, left


def _sending(options: Options, pieces: Iterable[int]) -> list[tuple[float, float, float]]:
    return [(float(options.piece_start_s[p]), float(options.piece_end_s[p]), float(options.piece_rate_mb_per_s[p]))
            for p in pieces]


def _freed_s(options: Options, mine: Sequence[int], contact: int, keeping: Keeping) -> float:
    """When the storage of what a contact sends is freed: at its end, or at that of the next with commands."""
    end_s = float(options.end_s[contact])
    if keeping.acknowledged == "contact":
        return end_s
    return min((float(options.end_s[o]) for o in mine if options.start_s[o] >= end_s and options.command[o]),
               default=math.inf)


def worth_followed(problem: Problem, craft: int, mine: Sequence[int]) -> float:
    """The part of the objective of one spacecraft with classes and the contacts ``mine``, in time order."""
    run = follow_contacts(problem, craft, mine)
    cost = math.fsum(float(problem.price[o]) for o in mine)
    left = problem.left_worth_share * math.fsum(
        one.weight * mb for one, mb in zip(problem.fleet.streams_of(craft), run.left_mb.tolist(), strict=True))
    return float(run.sent_worth.sum()) + left - problem.spill_cost_per_mb * float(run.lost_mb.sum()) - cost


def _over(amounts: dict[int, float], options: Options, chosen: Iterable[int]) -> float:
    return math.fsum(amounts[p] for o in chosen for p in options.pieces(o))


def _balances(streams: Sequence[Stream], run: Aboard | None) -> tuple[ClassBalance, ...]:
    if run is None:
        return ()
    return tuple(
        ClassBalance(one.name, one.weight, one.start_mb, float(one.made_mb[-1]), float(run.delivered_mb[k]),
                     float(run.lost_mb[k]), float(run.missed_mb[k]), float(run.left_mb[k]))
        for k, one in enumerate(streams))


def follow_storage(
    horizon_s: int, fill_mb: float, generation_mb_per_s: float, capacity_mb: float,
    pieces: Sequence[tuple[float, float, float]],
) -> tuple[list[float], float, float]:
    """Follow one storage through sending pieces (start_s, end_s, rate_mb_per_s) in time order.

    Returns the MB sent in each piece, the MB lost over the horizon, and the MB left at its end.
    """
    volumes: list[float] = []
    lost: list[float] = []
    clock = 0.0

    def stretch(until_s: float, rate_mb_per_s: float) -> float:
        nonlocal fill_mb, clock
        aboard = fill_mb + generation_mb_per_s * (until_s - clock)
        sent = min(aboard, rate_mb_per_s * (until_s - clock))
        over = aboard - sent - capacity_mb
        if over > 0.0:
            lost.append(over)
            fill_mb = capacity_mb
        else:
            fill_mb = aboard - sent
        clock = until_s
        return sent

    for start_s, end_s, rate_mb_per_s in pieces:
        if start_s < clock:
            raise ValueError(f"sending from {start_s} s overlaps the piece before it, which ends at {clock} s")
        stretch(start_s, 0.0)
        volumes.append(stretch(end_s, rate_mb_per_s))
    stretch(horizon_s, 0.0)
    return volumes, math.fsum(lost), fill_mb
