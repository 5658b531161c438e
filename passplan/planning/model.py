"""The plan as a mixed-integer program, built from arrays in a few large blocks.

Columns: one 0/1 per option; for each layer of a spacecraft's storage (see ``layering.py``), at every instant where
the sending of one of its options starts or ends, or generation changes meanwhile, the fill, and between two of them
what is sent and what is lost; slack for requirements.
Rows: "at most one" per maximal clique of every lane; the linear limits of rules; the storage balance between
instants; sending no more than the chosen options carry; requirements with slack. Fill, sent and lost are in units of
the spacecraft's storage, to keep the numbers near one.

Between two instants the rate of a chosen option is constant when an option has one piece, and then the
balance is exact. With stepped rates it is a relaxation: what an option carries between two instants is
kept, but not when within them. The bound stays valid and the value is taken from ``value.account``.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from ortools.math_opt import model_pb2

from passplan.planning.arrays import Floats, Integers, ragged_ranges
from passplan.planning.cliques import clique_spans
from passplan.planning.overrated import Overrated
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Recurrence, Rows, Terms
from passplan.planning.streams import Layer

_INFINITY = float("inf")


@dataclass(frozen=True, eq=False)
class PlanModel:
    """Arrays of the program: ``rows``, ``columns`` and ``coefficients`` are the matrix entry by entry.

    The first columns are the options. ``value`` is the objective of tier 2 (with ``offset``) and ``points``
    that of tier 1, both over all columns.
    """

    lower: Floats
    upper: Floats
    integer: Integers
    value: Floats
    points: Floats
    row_lower: Floats
    row_upper: Floats
    rows: Integers
    columns: Integers
    coefficients: Floats

    def proto(
        self, tier: int, points_limit: float | None = None, holds: Sequence[tuple[Floats, float]] = (),
    ) -> model_pb2.ModelProto:
        """The program that minimises points (tier 1), or maximises value with points limited (tier 2).

        ``holds`` are further objectives over the columns, each with the least it must come to.
        """
        rows, columns, coefficients = self.rows, self.columns, self.coefficients
        row_lower, row_upper = self.row_lower, self.row_upper
        if points_limit is not None:
            slack = np.flatnonzero(self.points)
            rows = np.concatenate([rows, np.full(len(slack), len(row_lower))])
            columns = np.concatenate([columns, slack])
            coefficients = np.concatenate([coefficients, self.points[slack]])
            row_lower, row_upper = np.append(row_lower, -_INFINITY), np.append(row_upper, points_limit)
        for objective, least in holds:
            used = np.flatnonzero(objective)
            unit = max(1.0, float(np.abs(objective).max(initial=0.0)))
            rows = np.concatenate([rows, np.full(len(used), len(row_lower))])
            columns = np.concatenate([columns, used])
            coefficients = np.concatenate([coefficients, objective[used] / unit])
            row_lower, row_upper = np.append(row_lower, least / unit), np.append(row_upper, _INFINITY)
        proto = model_pb2.ModelProto()
        proto.variables.ids.extend(range(len(self.lower)))
        proto.variables.lower_bounds.extend(self.lower.tolist())
        proto.variables.upper_bounds.extend(self.upper.tolist())
        proto.variables.integers.extend(self.integer.astype(bool).tolist())
        proto.linear_constraints.ids.extend(range(len(row_lower)))
        proto.linear_constraints.lower_bounds.extend(row_lower.tolist())
        proto.linear_constraints.upper_bounds.extend(row_upper.tolist())
        order = np.lexsort((columns, rows))
        proto.linear_constraint_matrix.row_ids.extend(rows[order].tolist())
        proto.linear_constraint_matrix.column_ids.extend(columns[order].tolist())
        proto.linear_constraint_matrix.coefficients.extend(coefficients[order].tolist())
        objective = self.points if tier == 1 else self.value
        used = np.flatnonzero(objective)
        proto.objective.maximize = tier != 1
        proto.objective.linear_coefficients.ids.extend(used.tolist())
        proto.objective.linear_coefficients.values.extend(objective[used].tolist())
        return proto


def build_model(
    problem: Problem, terms: Terms, *, storage: bool = True, overrated: Sequence[Overrated] = (),
) -> PlanModel:
    """The program of a problem under the terms of its rules, told which choices are ``overrated``.

    Without ``storage`` only requirements count, and options that serve none are left out: enough for tier 1.
    """
    count = len(problem.options)
    upper = np.ones(count)
    for removal in terms.removals:
        upper[removal.options] = 0.0
    if not storage:
        serving = np.zeros(count, dtype=bool)
        for served in [*(w.options for w in terms.wanted), *(r.options for r in terms.recurrences),
                       *(g.options for g in terms.guarantees)]:
            serving[served] = True
        upper[~serving] = 0.0
    block = _Blocks()
    block.add_columns(upper=upper, value=-problem.price, integer=True)
    for lane in terms.lanes:
        _add_lane(block, lane)
    for rows in terms.rows:
        _add_rows(block, rows)
    for craft, layers in enumerate(problem.layers if storage else ()):
        for layer in layers:
            _add_storage(block, problem, craft, layer)
    for one in overrated:
        _add_overrated(block, one)
    for want in terms.wanted:
        slack = block.add_columns(upper=np.ones(1), points=np.full(1, want.points))
        row = block.add_rows(lower=np.ones(1))
        block.add_entries(np.full(len(want.options), row[0]), want.options, np.ones(len(want.options)))
        block.add_entries(row, slack, np.ones(1))
    for need in terms.recurrences:
        _add_recurrence(block, need)
    for promise in terms.guarantees:
        slack = block.add_columns(upper=np.ones(1), points=np.full(1, promise.points))
        row = block.add_rows(lower=np.ones(1))
        block.add_entries(np.full(len(promise.options), row[0]), promise.options, promise.amounts / promise.need)
        block.add_entries(row, slack, np.ones(1))
    return block.finish()


def _add_lane(block: _Blocks, lane: Lane) -> None:
    first, last, cliques = clique_spans(lane.start_s, lane.end_s)
    member = np.repeat(lane.options, last - first)
    clique = ragged_ranges(first, last - first)
    sizes = np.bincount(clique, minlength=cliques)
    row_of = np.full(cliques, -1)
    binding = np.flatnonzero(sizes > 1)
    row_of[binding] = block.add_rows(upper=np.ones(len(binding)))
    kept = row_of[clique] >= 0
    block.add_entries(row_of[clique[kept]], member[kept], np.ones(int(kept.sum())))


def _add_rows(block: _Blocks, rows: Rows) -> None:
    # Limits near one keep the solver's tolerances meaningful; a limit of nothing is taken as it stands.
    unit = np.where(rows.limit > 0.0, rows.limit, 1.0)
    numbers = block.add_rows(upper=rows.limit / unit)
    row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
    block.add_entries(numbers[row], rows.options, rows.amounts / unit[row])


def _add_storage(block: _Blocks, problem: Problem, craft: int, layer: Layer) -> None:
    """Fill, sent and lost of one layer along the instants of a spacecraft. A fill column is at an instant's end."""
    options = problem.options
    mine = np.flatnonzero((options.spacecraft == craft) & (np.diff(options.piece_offset) > 0))
    instants = _instants(problem, mine, layer)
    room = layer.room(instants[1:])
    unit_mb = float(room.max(initial=0.0)) or float(layer.made_mb[-1]) or 1.0
    made = np.diff(layer.made(instants)) / unit_mb
    steps = len(made)
    left_worth = np.zeros(steps)
    left_worth[-1] = problem.left_worth_share * layer.weight * unit_mb
    fill = block.add_columns(upper=room / unit_mb, value=left_worth)
    spill_worth = np.full(steps, -layer.spill_cost * unit_mb)
    lost = block.add_columns(upper=np.full(steps, _INFINITY), value=spill_worth)
    balance_rhs = made.copy()
    balance_rhs[0] += layer.start_mb / unit_mb
    balance = block.add_rows(lower=balance_rhs, upper=balance_rhs)
    block.add_entries(balance, fill, np.ones(steps))
    block.add_entries(balance[1:], fill[:-1], -np.ones(steps - 1))
    block.add_entries(balance, lost, np.ones(steps))
    option, step, volume_mb = _carried(problem, mine, instants)
    active = np.unique(step)
    sent = block.add_columns(upper=np.full(len(active), _INFINITY), value=np.full(len(active), layer.weight * unit_mb))
    block.add_entries(balance[active], sent, np.ones(len(active)))
    carry = block.add_rows(upper=np.zeros(len(active)))
    block.add_entries(carry, sent, np.ones(len(active)))
    block.add_entries(carry[np.searchsorted(active, step)], option, -volume_mb / unit_mb)


def _add_overrated(block: _Blocks, one: Overrated) -> None:
    """A column that costs what exactly these contacts are overrated by, and must be 1 if they are chosen."""
    cost = block.add_columns(upper=np.ones(1), value=np.full(1, -one.worth))
    row = block.add_rows(lower=np.full(1, 1.0 - len(one.chosen)))
    block.add_entries(row, cost, np.ones(1))
    sign = np.where(np.isin(one.mine, one.chosen), -1.0, 1.0)
    block.add_entries(np.full(len(one.mine), row[0]), one.mine, sign)


def _instants(problem: Problem, mine: Integers, layer: Layer) -> Floats:
    """Where the sending of an option starts or ends, and where generation changes while one could send.

    A capacity that changes counts wherever it bends.
    """
    options = problem.options
    first_piece, last_piece = options.piece_offset[mine], options.piece_offset[mine + 1] - 1
    starts, ends = options.piece_start_s[first_piece], options.piece_end_s[last_piece]
    inner = layer.inner_times()
    if layer.shrinks:
        return np.unique(np.concatenate([[0.0, float(problem.horizon_s)], starts, ends, inner]))
    open_then = np.searchsorted(np.sort(starts), inner, side="right") > np.searchsorted(np.sort(ends), inner)
    return np.unique(np.concatenate([[0.0, float(problem.horizon_s)], starts, ends, inner[open_then]]))


def _carried(problem: Problem, mine: Integers, instants: Floats) -> tuple[Integers, Integers, Floats]:
    """What each option can carry [MB] in each step between instants: entries (option, step, volume)."""
    options = problem.options
    counts = options.piece_offset[mine + 1] - options.piece_offset[mine]
    piece = ragged_ranges(options.piece_offset[mine], counts)
    owner = np.repeat(mine, counts)
    start_s, end_s = options.piece_start_s[piece], options.piece_end_s[piece]
    first = np.searchsorted(instants, start_s, side="right") - 1
    spans = np.searchsorted(instants, end_s, side="left") - first
    step = ragged_ranges(first, spans)
    piece, owner = np.repeat(piece, spans), np.repeat(owner, spans)
    overlap_s = np.minimum(options.piece_end_s[piece], instants[step + 1]) - np.maximum(
        options.piece_start_s[piece], instants[step])
    volume = overlap_s * options.piece_rate_mb_per_s[piece]
    key, where = np.unique(owner * len(instants) + step, return_inverse=True)
    total: Floats = np.bincount(where, weights=volume, minlength=len(key)).astype(np.float64)
    return key // len(instants), key % len(instants), total


def _add_recurrence(block: _Blocks, need: Recurrence) -> None:
    """Count, along time, how many chosen options cover each stretch; a stretch that none covers has slack."""
    starts = np.clip(need.start_s, need.from_s, need.until_s)
    ends = np.clip(need.end_s + need.reach_s, need.from_s, need.until_s)
    instants = np.unique(np.concatenate([[need.from_s, need.until_s], starts, ends]))
    steps = len(instants) - 1
    count = block.add_columns(upper=np.full(steps, _INFINITY))
    slack = block.add_columns(upper=np.ones(steps), points=need.points * np.diff(instants) / need.every_s)
    chain = block.add_rows(lower=np.zeros(steps), upper=np.zeros(steps))
    block.add_entries(chain, count, np.ones(steps))
    block.add_entries(chain[1:], count[:-1], -np.ones(steps - 1))
    for at, sign in ((np.searchsorted(instants, starts), -1.0), (np.searchsorted(instants, ends), 1.0)):
        used = np.flatnonzero((starts < ends) & (at < steps))
        block.add_entries(chain[at[used]], need.options[used], np.full(len(used), sign))
    met = block.add_rows(lower=np.ones(steps))
    block.add_entries(met, count, np.ones(steps))
    block.add_entries(met, slack, np.ones(steps))


class _Blocks:
    """Collects columns, rows and entries block by block."""

    def __init__(self) -> None:
        self._columns: list[tuple[Floats, Floats, Floats, Floats]] = []
        self._rows: list[tuple[Floats, Floats]] = []
        self._entries: list[tuple[Integers, Integers, Floats]] = []
        self._column_count = self._row_count = 0

    def add_columns(
        self, *, upper: Floats, value: Floats | None = None, points: Floats | None = None, integer: bool = False,
    ) -> Integers:
        """Columns from 0 to ``upper``; returns their indices."""
        zero = np.zeros(len(upper))
        self._columns.append((
            upper, zero if value is None else value, zero if points is None else points, zero + integer))
        self._column_count += len(upper)
        return np.arange(self._column_count - len(upper), self._column_count)

    def add_rows(self, *, lower: Floats | None = None, upper: Floats | None = None) -> Integers:
        """Rows between ``lower`` and ``upper`` (open where absent); returns their indices."""
        size = len(lower) if lower is not None else len(upper) if upper is not None else 0
        self._rows.append((np.full(size, -_INFINITY) if lower is None else lower,
                           np.full(size, _INFINITY) if upper is None else upper))
        self._row_count += size
        return np.arange(self._row_count - size, self._row_count)

    def add_entries(self, rows: Integers, columns: Integers, coefficients: Floats) -> None:
        """Entries of the matrix; a (row, column) pair is given once."""
        self._entries.append((rows, columns, coefficients))

    def finish(self) -> PlanModel:
        """All blocks end to end."""
        upper, value, points, integer = (np.concatenate(parts) for parts in zip(*self._columns, strict=True))
        row_lower, row_upper = (np.concatenate(parts) for parts in zip(*self._rows, strict=True))
        rows, columns, coefficients = (np.concatenate(parts) for parts in zip(*self._entries, strict=True))
        return PlanModel(
            np.zeros(len(upper)), upper, integer.astype(np.int64), value, points, row_lower, row_upper,
            rows.astype(np.int64), columns.astype(np.int64), coefficients)
