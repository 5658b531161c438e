"""A contact as a map of the storage, so that planning code never walks through its pieces.

Over a contact that starts with f MB aboard, however its rate steps, the fill at its end and the loss are

    end(f)  = min(max(f + shift, low), high)
    lost(f) = lost_at_empty + max(0, f - brim)

and what was sent follows from the balance: ``sent = f + generated - end - lost``. Both forms are closed
under one step of constant rate (fill -> min(max(fill + d, 0), capacity) with d = (g - r) dt, loss
max(0, fill + d - capacity)), because a MB more aboard is either sent (the storage runs empty first) or lost
(it runs full first) or kept, and once it is not kept all larger or smaller fills have merged. A capacity that
changes in a straight line over the step counts as it is at the end. (Own derivation; tests compare it with the
event by event accounts.)

There is one map for every option and layer (see ``layering.py``) of its spacecraft. Contacts of a spacecraft with
several links may overlap, and their maps do not follow one another: its layers are followed event by event instead.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Floats, Integers, offsets_of, ragged_ranges
from passplan.planning.joint_sending import joint_sending
from passplan.planning.problem import Problem
from passplan.planning.streams import Layer
from passplan.planning.value import worth_followed


@dataclass(frozen=True, eq=False)
class StorageMaps:
    """The five numbers of every map [MB], with what is generated up to the contact's start and end.

    Rows ``first_row[o] : first_row[o + 1]`` (m + 1) belong to option o, one for each layer; with a single layer for
    every spacecraft a row is an option.
    """

    first_row: Integers
    shift_mb: Floats
    low_mb: Floats
    high_mb: Floats
    lost_at_empty_mb: Floats
    brim_mb: Floats
    made_before_mb: Floats
    made_after_mb: Floats

    @property
    def generated_mb(self) -> Floats:
        """What is generated over the contact."""
        return self.made_after_mb - self.made_before_mb

    def apply(self, row: int, fill_mb: float) -> tuple[float, float, float]:
        """Fill at the end, MB sent and MB lost, for a contact that starts with ``fill_mb`` aboard."""
        end = min(max(fill_mb + self.shift_mb[row], self.low_mb[row]), self.high_mb[row])
        lost = self.lost_at_empty_mb[row] + max(0.0, fill_mb - self.brim_mb[row])
        generated = self.made_after_mb[row] - self.made_before_mb[row]
        return float(end), float(fill_mb + generated - end - lost), float(lost)


def worth_of(problem: Problem, maps: StorageMaps, craft: int, mine: Sequence[int]) -> float:
    """The part of the objective of one spacecraft with the contacts ``mine``, in time order.

    By its layers, or, where those may overrate it, by following its classes, which takes far longer.
    """
    if craft in problem.fleet.loose:
        return worth_followed(problem, craft, mine)
    return worth_by_layers(problem, maps, craft, mine)


def worth_by_layers(problem: Problem, maps: StorageMaps, craft: int, mine: Sequence[int]) -> float:
    """The same by its layers alone, which may be more than it is worth."""
    options = problem.options
    worth = -sum(float(problem.price[o]) for o in mine)
    if problem.fleet.links[craft] > 1:
        return worth + sum(_worth_of_layer(problem, layer, mine) for layer in problem.layers[craft])
    for k, layer in enumerate(problem.layers[craft]):
        fill, made, clock = layer.start_mb, 0.0, 0.0
        sent = lost = 0.0
        for o in mine:
            row = int(maps.first_row[o]) + k
            fill, over = _idle(layer, fill, clock, float(options.start_s[o]), float(maps.made_before_mb[row]) - made)
            fill, sent_now, lost_now = maps.apply(row, fill)
            sent, lost = sent + sent_now, lost + over + lost_now
            clock, made = float(options.end_s[o]), float(maps.made_after_mb[row])
        left, over = _idle(layer, fill, clock, problem.horizon_s, float(layer.made_mb[-1]) - made)
        worth += layer.weight * (sent + problem.left_worth_share * left) - layer.spill_cost * (lost + over)
    return worth


def _worth_of_layer(problem: Problem, layer: Layer, mine: Sequence[int]) -> float:
    """What one layer earns through contacts that may overlap, stretch by stretch."""
    options = problem.options
    joint = joint_sending([
        (float(options.piece_start_s[p]), float(options.piece_end_s[p]), float(options.piece_rate_mb_per_s[p]))
        for o in mine for p in options.pieces(o)])
    edges = np.unique(np.concatenate([layer.time_s, *(piece[:2] for piece in joint.pieces)]))
    rate = np.zeros(len(edges) - 1)
    for start_s, end_s, mb_per_s in joint.pieces:
        rate[slice(*np.searchsorted(edges, [start_s, end_s]))] = mb_per_s
    fill, sent, lost = layer.start_mb, 0.0, 0.0
    for made, room, most in zip(np.diff(layer.made(edges)).tolist(), layer.room(edges[1:]).tolist(),
                                (rate * np.diff(edges)).tolist(), strict=True):
        now = min(fill + made, most)
        over = max(0.0, fill + made - now - room)
        fill, sent, lost = fill + made - now - over, sent + now, lost + over
    return layer.weight * (sent + problem.left_worth_share * fill) - layer.spill_cost * lost


def _idle(layer: Layer, fill: float, from_s: float, until_s: float, made: float) -> tuple[float, float]:
    """Fill and loss after a span without a contact in which ``made`` MB are generated."""
    if not layer.shrinks:
        over = max(0.0, fill + made - float(layer.room_mb[-1]))
        return fill + made - over, over
    inside = layer.time_s[(layer.time_s > from_s) & (layer.time_s < until_s)]
    edges = np.concatenate([[from_s], inside, [until_s]])
    lost = 0.0
    for part, room in zip(np.diff(layer.made(edges)).tolist(), layer.room(edges[1:]).tolist(), strict=True):
        over = max(0.0, fill + part - room)
        fill, lost = fill + part - over, lost + over
    return fill, lost


def storage_maps(problem: Problem) -> StorageMaps:
    """Compose the steps of every option's pieces, all options and layers at once."""
    options = problem.options
    layers = [layer for mine in problem.layers for layer in mine]
    first_layer = offsets_of(np.array([len(mine) for mine in problem.layers], dtype=np.int64))
    per_option = np.diff(first_layer)[options.spacecraft]
    first_row = offsets_of(per_option)
    option = np.repeat(np.arange(len(options)), per_option)
    layer = ragged_ranges(first_layer[options.spacecraft], per_option)
    state = _Composition(np.array([one.room_mb[0] for one in layers], dtype=float)[layer])
    made_before, made_after = np.zeros(len(option)), np.zeros(len(option))
    even = np.array([one.even for one in layers], dtype=bool)[layer]
    rows = np.flatnonzero(even)
    slope = np.array([one.made_mb[-1] / problem.horizon_s for one in layers], dtype=float)[layer[rows]]
    made_before[rows] = slope * options.start_s[option[rows]]
    made_after[rows] = slope * options.end_s[option[rows]]
    _through_even(problem, state, rows, option[rows], slope)
    rows = np.flatnonzero(~even)
    made_before[rows], made_after[rows] = _through_events(problem, layers, state, rows, option[rows], layer[rows])
    return StorageMaps(
        first_row, state.shift, state.low, state.high, state.lost, state.brim, made_before, made_after)


def _through_even(
    problem: Problem, state: _Composition, rows: Integers, option: Integers, generation: Floats,
) -> None:
    """Rows whose layer generates at one rate and holds the same throughout: piece after piece, all rows abreast."""
    options = problem.options
    capacity = state.high[rows].copy()
    clock = options.start_s[option].astype(float)
    counts = np.diff(options.piece_offset)[option]
    for k in range(int(counts.max(initial=0))):
        live = np.flatnonzero(counts > k)
        piece = options.piece_offset[option[live]] + k
        start_s, end_s = options.piece_start_s[piece].astype(float), options.piece_end_s[piece].astype(float)
        if np.any(start_s > clock[live]):
            state.step(rows[live], generation[live] * (start_s - clock[live]), capacity[live])
        sent = options.piece_rate_mb_per_s[piece]
        state.step(rows[live], (generation[live] - sent) * (end_s - start_s), capacity[live])
        clock[live] = end_s
    rest = np.flatnonzero(options.end_s[option] > clock)
    state.step(rows[rest], generation[rest] * (options.end_s[option[rest]] - clock[rest]), capacity[rest])


def _through_events(
    problem: Problem, layers: Sequence[Layer], state: _Composition, rows: Integers, option: Integers, layer: Integers,
) -> tuple[Floats, Floats]:
    """The other rows, event by event. Returns what is generated up to each contact's start and end."""
    row, time_s, rate = _events(problem, layers, option, layer)
    made, room = np.zeros(len(row)), np.zeros(len(row))
    for k, where in _groups(layer[row], len(layers)):
        made[where], room[where] = layers[k].made(time_s[where]), layers[k].room(time_s[where])
    counts = np.bincount(row, minlength=len(option))
    first = offsets_of(counts)
    state.begin(rows, room[first[:-1]])
    for k in range(1, int(counts.max(initial=0))):
        live = np.flatnonzero(counts > k)
        at = first[live] + k
        change = made[at] - made[at - 1] - rate[at - 1] * (time_s[at] - time_s[at - 1])
        state.step(rows[live], change, room[at])
    return made[first[:-1]], made[first[1:] - 1]


def _events(
    problem: Problem, layers: Sequence[Layer], option: Integers, layer: Integers,
) -> tuple[Integers, Floats, Floats]:
    """Instants (row, time_s) of every row in order, and the rate [MB/s] from each instant on.

    They are the start and end of the contact and of its pieces, and what lies within of the layer's own.
    """
    options = problem.options
    rows = np.arange(len(option))
    start_s, end_s = options.start_s[option].astype(float), options.end_s[option].astype(float)
    pieces = np.diff(options.piece_offset)[option]
    piece = ragged_ranges(options.piece_offset[option], pieces)
    owner = np.repeat(rows, pieces)
    own_row, own_time = [np.zeros(0, dtype=np.int64)], [np.zeros(0)]
    for k, where in _groups(layer, len(layers)):
        inner = layers[k].inner_times()
        low = np.searchsorted(inner, start_s[where], side="right")
        count = np.maximum(np.searchsorted(inner, end_s[where], side="left") - low, 0)
        own_row.append(np.repeat(where, count))
        own_time.append(inner[ragged_ranges(low, count)])
    inner_row = np.concatenate(own_row)
    keep = np.full(len(inner_row), np.nan)
    # At one instant a piece ends before the next one starts, and the contact itself ends last.
    blocks = (
        (rows, start_s, np.zeros(len(rows)), 0), (owner, options.piece_end_s[piece], np.zeros(len(piece)), 1),
        (inner_row, np.concatenate(own_time), keep, 2),
        (owner, options.piece_start_s[piece], options.piece_rate_mb_per_s[piece], 3),
        (rows, end_s, np.zeros(len(rows)), 4))
    row, time_s, rate = (np.concatenate([block[k] for block in blocks]) for k in range(3))
    kind = np.concatenate([np.full(len(block[0]), block[3]) for block in blocks])
    order = np.lexsort((kind, time_s, row))
    row, time_s, rate = row[order], time_s[order].astype(float), rate[order]
    stated = np.maximum.accumulate(np.where(np.isnan(rate), 0, np.arange(len(rate))))
    return row, time_s, rate[stated]


def _groups(key: Integers, count: int) -> list[tuple[int, Integers]]:
    """Where each key from 0 to ``count`` stands, those that stand somewhere."""
    order = np.argsort(key, kind="stable")
    edges = np.searchsorted(key[order], np.arange(count + 1))
    return [(k, order[edges[k]:edges[k + 1]]) for k in range(count) if edges[k + 1] > edges[k]]


class _Composition:
    """The running composition of steps; starts as the identity on [0, capacity]."""

    def __init__(self, capacity_mb: Floats) -> None:
        self.shift, self.low, self.lost = (np.zeros(len(capacity_mb)) for _ in range(3))
        self.high, self.brim = capacity_mb.copy(), capacity_mb.copy()

    def begin(self, rows: Integers, capacity_mb: Floats) -> None:
        """Let ``rows`` start with another capacity."""
        self.high[rows] = self.brim[rows] = capacity_mb

    def step(self, rows: Integers, change_mb: Floats, capacity_mb: Floats) -> None:
        """Add ``change_mb`` to the fill of ``rows`` and hold it between empty and full."""
        low, high, shift = self.low[rows], self.high[rows], self.shift[rows]
        self.lost[rows] += np.maximum(0.0, low + change_mb - capacity_mb)
        fills = (high > low) & (high + change_mb > capacity_mb)
        brim = np.maximum(capacity_mb - change_mb, low) - shift
        self.brim[rows] = np.where(fills, np.minimum(self.brim[rows], brim), self.brim[rows])
        self.shift[rows] = shift + change_mb
        self.low[rows] = np.clip(low + change_mb, 0.0, capacity_mb)
        self.high[rows] = np.clip(high + change_mb, 0.0, capacity_mb)
