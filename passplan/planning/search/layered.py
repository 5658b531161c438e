"""The best schedule of one spacecraft with classes of data: the program of ``schedule.py`` over several storages.

A label is a fill in every layer (see ``layerarrays.py`` for how they are counted). As the layers are storages of their
own, a label makes another useless if it is ahead by what all their differences can be worth together, in each layer the
weight for every MB that it lacks or the spill cost for every MB that it holds too many; the rest is as in
``labels.py``. Such labels have no order in which one sweep could do. But a label of which worth and fills at
their full weight come to less cannot make another useless, so that in that order each is compared with those
before it alone.

Where another label is as good but for next to nothing, or where too many labels would be kept, a label is merged into
that which lacks least against it, and what it lacks is given to that one. So the worth that comes out is never less
than that of the best schedule, and next to nothing more where few labels were merged.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.search.clash import share_clique
from passplan.planning.search.compiled import compiled, inlined, inner, move_to
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.labels import Work, missing
from passplan.planning.search.walk import overfills, past_wants, those_at, trace

# More labels than this are not kept at one start.
_MOST_KEPT = 96
# All that merging gives away on the way is about this part of what the spacecraft's data could be worth.
_GIVEN = 2e-5
# Where there are too many labels, merging one of them may give away this part; it never settles a requirement.
_MOST_GIVEN = 1e-3
# Looking at so many fills of pairs of labels is as much work as making one.
_FILLS_TO_A_LABEL = 64


@inner
def best_layered(
    a: FleetArrays, i: int, price: Floats, point_worth: float, room: Floats, work: Work, taken: Integers,
) -> tuple[float, int]:
    """As ``best_schedule``, for a spacecraft with layers; the worth is a ceiling of that of the best schedule."""
    (aboard, worth, cover, bits, via, wait_aboard, wait_worth, wait_cover, wait_bits, record_option, record_before,
     run_low, run_high, run_next, champion, spent, slacks) = work
    end_of, node, arrival = a.first[i + 1], a.node, a.arrival
    layers = a.layers.layer[a.layers.first[i]:a.layers.first[i + 1]]
    gate, gate_first, map_first, maps = a.layers.gate, a.layers.gate_first[i], a.layers.map_first, a.layers.maps
    count = len(layers)
    base, nodes, start_s = a.start_first[i], a.start_first[i + 1] - a.start_first[i], a.start_s
    recur_until, per_second = a.recur[i, 1], point_worth * a.recur[i, 2]
    wants, wants_until = a.wants[i], a.wants_until[i]
    simple = recur_until <= 0.0 and wants.max() <= 0.0
    used, shut = np.zeros(len(room)), np.full(count, np.inf)
    head = np.full(nodes + 1, -1, dtype=np.int64)
    move_to(aboard[0], 0, layers[:, 3], 0, count)
    worth[0, 0], cover[0, 0], bits[0, 0], via[0, 0] = 0.0, a.recur[i, 0], 0, -1
    whole = (layers[:, 0] * (layers[:, 3] + layers[:, 4]) + layers[:, 1] * layers[:, 4]).sum()
    waiting = runs = side = 0
    here = 1
    option = a.first[i]
    for at in range(nodes + 1):
        shut = np.minimum(shut, gate[gate_first + at * count:gate_first + (at + 1) * count])
        follower, usable = those_at(node, price, option, end_of, at)
        if at < nodes and head[at] < 0 and not usable:
            # Nothing arrives and nothing can be taken.
            option = follower
            continue
        now = start_s[base + at] if at < nodes else a.horizon_s
        _idle(layers, shut, aboard, worth, side, here)
        shut.fill(np.inf)
        if head[at] >= 0:
            here = _gather(count, aboard, worth, cover, bits, via, side, here, wait_aboard, wait_worth, wait_cover,
                           wait_bits, run_low, run_high, run_next, head[at])
            if here < 0:
                return np.inf, -1
            if not simple:
                _pay(cover, bits, worth, side, here, min(float(now), recur_until), per_second, point_worth, wants,
                     past_wants(wants_until, now))
            here = _prune(
                layers, a.clash, now, simple, max(slacks[0], _GIVEN * whole / (nodes + 1)), _MOST_GIVEN * whole, aboard,
                worth, cover, bits, via, side, here, record_option, per_second, point_worth, wants, champion, spent)
            side = 1 - side
        for o in range(option, follower):
            if price[o] == np.inf:
                continue
            if (waiting + here) * count > len(wait_aboard) or waiting + here > len(wait_worth) or runs >= len(run_low):
                return np.inf, -1
            end = _take(
                a, o, price[o], now, layers, maps, map_first[o], per_second, min(float(now), recur_until), room, used,
                aboard, worth, cover, bits, via, side, here, wait_aboard, wait_worth, wait_cover, wait_bits,
                record_option, record_before, waiting)
            if end > waiting:
                run_low[runs], run_high[runs], run_next[runs] = waiting, end, head[arrival[o]]
                head[arrival[o]] = runs
                runs += 1
            waiting = end
        option = follower
    spent[0] += waiting + nodes
    _pay(cover, bits, worth, side, here, recur_until, per_second, point_worth, wants, ~np.int64(0))
    best, chosen = -np.inf, -1
    for k in range(here):
        left = aboard[side, k * count:(k + 1) * count] + layers[:, 4]
        ahead = worth[side, k] + (layers[:, 2] * left).sum()
        if ahead > best:
            best, chosen = ahead, via[side, k]
    return best, trace(record_option, record_before, chosen, taken)


@inlined
def _idle(layers: Floats, shut: Floats, aboard: Floats, worth: Floats, side: int, here: int) -> None:
    """Let the labels here wait: what is above the gates is lost."""
    count = len(layers)
    for k in range(here):
        for x in range(count):
            over = aboard[side, k * count + x] - shut[x]
            if over > 0.0:
                worth[side, k] -= layers[x, 1] * over
                aboard[side, k * count + x] = shut[x]


@inlined
def _gather(
    count: int, aboard: Floats, worth: Floats, cover: Floats, bits: Integers, via: Integers, side: int, here: int,
    wait_aboard: Floats, wait_worth: Floats, wait_cover: Floats, wait_bits: Integers, run_low: Integers,
    run_high: Integers, run_next: Integers, run: int,
) -> int:
    """Put the labels of all runs that arrive beside those here; returns how many are here, or -1 without room."""
    while run >= 0:
        if (here + run_high[run] - run_low[run]) * count > aboard.shape[1]:
            return -1
        for y in range(run_low[run], run_high[run]):
            for x in range(count):
                aboard[side, here * count + x] = wait_aboard[y * count + x]
            worth[side, here], cover[side, here] = wait_worth[y], wait_cover[y]
            bits[side, here], via[side, here] = wait_bits[y], y
            here += 1
        run = run_next[run]
    return here


@inlined
def _pay(
    cover: Floats, bits: Integers, worth: Floats, side: int, here: int, due: float, per_second: float,
    point_worth: float, wants: Floats, past: np.int64,
) -> None:
    """Pay what is overdue up to ``due``, and the wanted terms that are ``past``."""
    for k in range(here):
        if cover[side, k] < due:
            worth[side, k] -= per_second * (due - cover[side, k])
            cover[side, k] = due
        if bits[side, k] & past != past:
            worth[side, k] -= point_worth * missing(wants, ~past | bits[side, k])
            bits[side, k] |= past


@inlined
def _take(
    a: FleetArrays, option: int, price: float, now: int, layers: Floats, maps: Floats, row: int, per_second: float,
    from_s: float, room: Floats, used: Floats, aboard: Floats, worth: Floats, cover: Floats, bits: Integers,
    via: Integers, side: int, here: int, wait_aboard: Floats, wait_worth: Floats, wait_cover: Floats,
    wait_bits: Integers, record_option: Integers, record_before: Integers, end: int,
) -> int:
    """The labels that taking an option makes of those here that can; returns where they end."""
    count, clash = len(layers), a.clash
    for k in range(here):
        record = via[side, k]
        if record >= 0:
            last = record_option[record]
            if clash[last] >= now and share_clique(a.use_at, a.use_first, a.use_last, last, option):
                continue
            if len(room) > 0 and overfills(a.load_at, a.load_row, a.load_amount, a.load_own, option, room, used,
                                           record_option, record_before, record):
                continue
        ahead, covered = worth[side, k] - price, cover[side, k]
        for x in range(count):
            after, gain = _pass_layer(maps, row + x, layers, x, aboard[side, k * count + x])
            wait_aboard[end * count + x] = after
            ahead += gain
        if a.renews[option] >= 0:
            ahead -= per_second * max(0.0, from_s - covered)
            covered = max(covered, float(a.renews[option]))
        wait_worth[end], wait_cover[end], wait_bits[end] = ahead, covered, bits[side, k] | a.bits[option]
        record_option[end], record_before[end] = option, record
        end += 1
    return end


@compiled
def layered_worth(a: FleetArrays, i: int, taken: Integers, size: int) -> float:
    """What the layers of spacecraft ``i`` send, less what they lose, in worth; above the truth where they are loose."""
    low, high = a.layers.first[i], a.layers.first[i + 1]
    layers, count, maps = a.layers.layer[low:high], high - low, a.layers.maps
    nodes = a.start_first[i + 1] - a.start_first[i]
    worth = 0.0
    for x in range(count):
        fill, at = layers[x, 3], 0
        for k in range(size + 1):
            until = a.node[taken[k]] if k < size else nodes
            for passed in range(at, until + 1):
                shut = a.layers.gate[a.layers.gate_first[i] + passed * count + x]
                if fill > shut:
                    worth -= layers[x, 1] * (fill - shut)
                    fill = shut
            if k < size:
                fill, gain = _pass_layer(maps, a.layers.map_first[taken[k]] + x, layers, x, fill)
                worth += gain
                at = a.arrival[taken[k]] + 1
        worth += layers[x, 2] * (fill + layers[x, 4])
    return float(worth)


@inlined
def _pass_layer(maps: Floats, row: int, layers: Floats, x: int, aboard: float) -> tuple[float, float]:
    """Fill of a layer where a contact arrives, and what the contact and the time after it are worth there."""
    after = min(max(aboard + maps[row, 0], maps[row, 1]), maps[row, 2])
    lost = maps[row, 3] + max(0.0, aboard - maps[row, 4])
    sent = aboard - after - lost
    over = max(0.0, after - maps[row, 5])
    return after - over, layers[x, 0] * sent - layers[x, 1] * (lost + over)


@inlined
def _prune(
    layers: Floats, clash: Integers, now: int, simple: bool, slack: float, most: float, aboard: Floats, worth: Floats,
    cover: Floats, bits: Integers, via: Integers, side: int, here: int, record_option: Integers, per_second: float,
    point_worth: float, wants: Floats, champion: Integers, spent: Integers,
) -> int:
    """Bring the labels that are not useless to the other side; returns how many."""
    count, to = len(layers), 1 - side
    key = np.empty(here)
    for k in range(here):
        key[k] = worth[side, k]
        for x in range(count):
            key[k] += layers[x, 0] * aboard[side, k * count + x]
    order = np.argsort(-key)
    kept = champions = pairs = 0
    for turn in range(here):
        k = order[turn]
        least, nearest, looked = _nearest(
            layers, simple, aboard, worth, cover, bits, side, k, champion, champions, per_second, point_worth, wants)
        pairs += looked
        if least <= slack or (kept >= _MOST_KEPT and least <= most):
            worth[to, nearest] += max(0.0, least)
            continue
        move_to(aboard[to], kept * count, aboard[side], k * count, (k + 1) * count)
        worth[to, kept], cover[to, kept] = worth[side, k], cover[side, k]
        bits[to, kept], via[to, kept] = bits[side, k], via[side, k]
        if via[to, kept] < 0 or clash[record_option[via[to, kept]]] < now:
            champion[champions] = kept
            champions += 1
        kept += 1
    spent[0] += pairs * count // _FILLS_TO_A_LABEL
    return kept


@inlined
def _nearest(
    layers: Floats, simple: bool, aboard: Floats, worth: Floats, cover: Floats, bits: Integers, side: int, k: int,
    champion: Integers, champions: int, per_second: float, point_worth: float, wants: Floats,
) -> tuple[float, int, int]:
    """What the champions (on the other side) lack at least against label ``k``, less what they are ahead of it.

    Returns that, which of them lacks it (-1 if there is none), and at how many it has looked.
    """
    count, to = len(layers), 1 - side
    least, nearest = np.inf, -1
    for c in range(champions):
        j = champion[c]
        lacks = worth[side, k] - worth[to, j]
        for x in range(count):
            less = aboard[side, k * count + x] - aboard[to, j * count + x]
            lacks += layers[x, 0] * less if less > 0.0 else -layers[x, 1] * less
            if lacks >= least:
                break
        if not simple and lacks < least:
            unmet = bits[side, k] & ~bits[to, j]
            lacks += point_worth * missing(wants, ~unmet) if unmet != 0 else 0.0
            lacks += per_second * max(0.0, cover[side, k] - cover[to, j])
        if lacks < least:
            least, nearest = lacks, j
            if least <= 0.0:
                return least, nearest, c + 1
    return least, nearest, champions
