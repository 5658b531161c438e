"""A contact as a map of the storage, so that planning code never walks through its pieces.

Over a contact that starts with f MB aboard, however its rate steps, the fill at its end and the loss are

    end(f)  = min(max(f + shift, low), high)
    lost(f) = lost_at_empty + max(0, f - brim)

and what was sent follows from the balance: ``sent = f + generated - end - lost``. Both forms are closed
under one step of constant rate (fill -> min(max(fill + d, 0), capacity) with d = (g - r) dt, loss
max(0, fill + d - capacity)), because a MB more aboard is either sent (the storage runs empty first) or lost
(it runs full first) or kept, and once it is not kept all larger or smaller fills have merged. (Own derivation;
tests compare it with the event by event accounts.)
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.planning.problem import Floats, Integers, Problem


@dataclass(frozen=True, eq=False)
class StorageMaps:
    """The five numbers of every option, shape (m,) each, in MB, with ``generated_mb`` over the contact."""

    shift_mb: Floats
    low_mb: Floats
    high_mb: Floats
    lost_at_empty_mb: Floats
    brim_mb: Floats
    generated_mb: Floats

    def apply(self, option: int, fill_mb: float) -> tuple[float, float, float]:
        """Fill at the end, MB sent and MB lost, for a contact that starts with ``fill_mb`` aboard."""
        end = min(max(fill_mb + self.shift_mb[option], self.low_mb[option]), self.high_mb[option])
        lost = self.lost_at_empty_mb[option] + max(0.0, fill_mb - self.brim_mb[option])
        return float(end), float(fill_mb + self.generated_mb[option] - end - lost), float(lost)


def storage_maps(problem: Problem) -> StorageMaps:
    """Compose the steps of every option's pieces, all options at once."""
    options, fleet = problem.options, problem.fleet
    craft = options.spacecraft
    generation, capacity = fleet.generation_mb_per_s[craft], fleet.capacity_mb[craft]
    state = _Composition(capacity)
    clock = options.start_s.astype(float)
    counts = np.diff(options.piece_offset)
    for k in range(int(counts.max()) if len(counts) else 0):
        live = np.flatnonzero(counts > k)
        piece = options.piece_offset[live] + k
        start_s, end_s = options.piece_start_s[piece].astype(float), options.piece_end_s[piece].astype(float)
        if np.any(start_s > clock[live]):
            state.step(live, generation[live] * (start_s - clock[live]))
        state.step(live, (generation[live] - options.piece_rate_mb_per_s[piece]) * (end_s - start_s))
        clock[live] = end_s
    rest = np.flatnonzero(options.end_s > clock)
    state.step(rest, generation[rest] * (options.end_s[rest] - clock[rest]))
    return StorageMaps(
        state.shift, state.low, state.high, state.lost, state.brim,
        generation * (options.end_s - options.start_s))


class _Composition:
    """The running composition of steps; starts as the identity on [0, capacity]."""

    def __init__(self, capacity_mb: Floats) -> None:
        self.capacity = capacity_mb
        self.shift, self.low, self.lost = (np.zeros(len(capacity_mb)) for _ in range(3))
        self.high, self.brim = capacity_mb.copy(), capacity_mb.copy()

    def step(self, rows: Integers, change_mb: Floats) -> None:
        """Add ``change_mb`` to the fill of ``rows`` and hold it between empty and full."""
        capacity, low, high, shift = self.capacity[rows], self.low[rows], self.high[rows], self.shift[rows]
        self.lost[rows] += np.maximum(0.0, low + change_mb - capacity)
        fills = (high > low) & (high + change_mb > capacity)
        brim = np.maximum(capacity - change_mb, low) - shift
        self.brim[rows] = np.where(fills, np.minimum(self.brim[rows], brim), self.brim[rows])
        self.shift[rows] = shift + change_mb
        self.low[rows] = np.clip(low + change_mb, 0.0, capacity)
        self.high[rows] = np.clip(high + change_mb, 0.0, capacity)
