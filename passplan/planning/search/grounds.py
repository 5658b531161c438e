"""What each of several rebuilds side by side may touch: parts of a fleet, and of what is shared, that do not meet."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Integers
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.rebuild import Ground

# Free cliques are dealt out in runs of neighbours, as a contact needs several of them.
_RUN = 64


class Grounds:
    """Deals a fleet out, of which the spacecraft ``movable`` (n,) may be touched.

    ``own`` says of each clique, row and due (c + r + d,) whether it is a row of one spacecraft alone.
    """

    def __init__(self, arrays: FleetArrays, movable: Flags) -> None:
        self.movable, self.cliques, self.rows = movable, arrays.cliques, len(arrays.limit)
        self.row_craft = _only_craft(arrays, arrays.load_at, arrays.load_row, len(arrays.limit))
        shared = np.zeros(arrays.cliques, dtype=bool), np.zeros(len(arrays.dues.points), dtype=bool)
        self.own: Flags = np.concatenate([shared[0], self.row_craft >= 0, shared[1]])
        self.due_craft = _only_craft(arrays, arrays.dues.at, arrays.dues.to, len(arrays.dues.points))

    def whole(self) -> Ground:
        """All of it."""
        counts = self.cliques, self.rows, len(self.due_craft)
        return Ground(self.movable, *(np.ones(n, dtype=bool) for n in counts))

    def dealt_out(self, workers: int, seed: tuple[int, ...]) -> list[Ground]:
        """The fleet, the free cliques, the rows and the dues dealt out at random, one part to each worker.

        What is a matter of one spacecraft goes with it.
        """
        rng = np.random.default_rng(seed)
        counts = len(self.movable), self.cliques // _RUN + 1, self.rows, len(self.due_craft)
        crafts, runs, rows, dues = (rng.integers(0, workers, n) for n in counts)
        cliques = np.repeat(runs, _RUN)[: self.cliques]
        for owner, mine in ((rows, self.row_craft), (dues, self.due_craft)):
            owner[mine >= 0] = crafts[mine[mine >= 0]]
        return [Ground((crafts == k) & self.movable, cliques == k, rows == k, dues == k) for k in range(workers)]


def _only_craft(arrays: FleetArrays, at: Integers, group: Integers, groups: int) -> Integers:
    """The spacecraft of all options of each group, shape (groups,), -1 where they are of several.

    Option o is in the groups ``group[at[o] : at[o + 1]]``.
    """
    option = np.repeat(np.arange(len(at) - 1), np.diff(at))
    craft = np.searchsorted(arrays.first, option, side="right") - 1
    low, high = np.full(groups, len(arrays.craft)), np.full(groups, -1)
    np.minimum.at(low, group, craft)
    np.maximum.at(high, group, craft)
    return np.where(low == high, low, -1)
