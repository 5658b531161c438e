"""What the schedules of a plan hold: cliques, room in rows, and parts of dues."""

from __future__ import annotations

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.search.compiled import compiled, inlined, inner
from passplan.planning.search.dues import give
from passplan.planning.search.fleetarrays import FleetArrays


@inner
def release(a: FleetArrays, taken: Integers, size: int, holder: Integers, room: Floats, given: Floats) -> None:
    """Give up all that a schedule holds."""
    hold(a, taken, size, holder, -1)
    load(a, taken, size, room, 1.0)
    give(a.dues.at, a.dues.to, a.dues.share, taken, size, -1.0, given)


@inner
def claim(a: FleetArrays, taken: Integers, size: int, holder: Integers, room: Floats, given: Floats, who: int) -> None:
    """Note that ``who`` holds all that a schedule needs."""
    hold(a, taken, size, holder, who)
    load(a, taken, size, room, -1.0)
    give(a.dues.at, a.dues.to, a.dues.share, taken, size, 1.0, given)


@compiled
def enter(a: FleetArrays, taken: Integers, size: Integers, rows: Flags, holder: Integers, room: Floats) -> None:
    """Enter a plan into ``holder``, and into ``room`` where ``rows`` are free to be used."""
    for i in range(len(size)):
        hold(a, taken[i], size[i], holder, i)
        for k in range(size[i]):
            for e in range(a.load_at[taken[i, k]], a.load_at[taken[i, k] + 1]):
                if rows[a.load_row[e]]:
                    room[a.load_row[e]] -= a.load_amount[e]


@inlined
def hold(a: FleetArrays, taken: Integers, size: int, holder: Integers, who: int) -> None:
    """Note ``who`` holds the cliques of a schedule (-1: nobody)."""
    use_at, use_first, use_last = a.use_at, a.use_first, a.use_last
    for k in range(size):
        for u in range(use_at[taken[k]], use_at[taken[k] + 1]):
            for c in range(use_first[u], use_last[u]):
                holder[c] = who


@inlined
def load(a: FleetArrays, taken: Integers, size: int, room: Floats, sign: float) -> None:
    """Give the amounts of a schedule back to the rows (1), or take them (-1)."""
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    for k in range(size):
        for e in range(load_at[taken[k]], load_at[taken[k] + 1]):
            room[load_row[e]] += sign * load_amount[e]


@inlined
def is_free(
    use_at: Integers, use_first: Integers, use_last: Integers, load_at: Integers, load_row: Integers,
    load_amount: Floats, option: int, holder: Integers, room: Floats,
) -> bool:
    """Whether nobody holds a clique of an option, and the rows have room for it."""
    for u in range(use_at[option], use_at[option + 1]):
        for c in range(use_first[u], use_last[u]):
            if holder[c] >= 0:
                return False
    roomy = True
    for e in range(load_at[option], load_at[option + 1]):
        roomy = roomy and load_amount[e] <= room[load_row[e]]
    return roomy


@inner
def fits(a: FleetArrays, taken: Integers, size: int, room: Floats) -> bool:
    """Whether the rows have room for a whole schedule."""
    if len(room) == 0:
        return True
    roomy = True
    load(a, taken, size, room, -1.0)
    for k in range(size):
        for e in range(a.load_at[taken[k]], a.load_at[taken[k] + 1]):
            roomy = roomy and room[a.load_row[e]] >= 0.0
    load(a, taken, size, room, 1.0)
    return roomy
