"""Names of windows that stay the same from one run to the next.

``{spacecraft}.{antenna}.{yymmdd}-{slot}``: the slot is the 80-minute slot of UTC (18 a day) whose centre is
nearest to the culmination of the pass, so the slots are centred on 00:00, 01:20, 02:40 ... and midnight
is never an edge. A pass is the time above the true horizon (or above the lowest mask, if that is lower)
without a break; it is followed beyond the planning horizon, so a cut window has the name of its pass.

Windows that go on for two days are named ``always``, whatever part of them the horizon shows. Where an
object is above the horizon for days but dips below the mask, each window goes by its own culmination.

No rule without memory can be perfect. Let an orbit's phase go round once: pass k has then become pass
k + 1 and must have changed its name on the way, whatever the rule, so every rule has an edge somewhere.
Ours lies 40 minutes from the centres of the slots. :func:`inherit_ids` adds the memory: made against an
earlier plan, a window takes over the name it had there.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.regimes import ALWAYS_S
from passplan.geometry.timescale import Floats

SLOT_S = 4_800
_SLOTS_A_DAY = 18
_EPOCH = np.datetime64("2000-01-01", "D")
# Stands for the slot of a window that has no end within days.
ALWAYS = np.iinfo(np.int64).min


def slots(culmination_s: Floats, duration_s: Floats) -> NDArray[np.int64]:
    """Number of the 80-minute slot (since 2000-01-01) nearest to each culmination (``utc_s``), rounding half up.

    A window that goes on for two days has no useful culmination; it gets ``ALWAYS``.
    """
    nearest = np.floor((culmination_s + SLOT_S / 2) / SLOT_S).astype(np.int64)
    return np.where(duration_s >= ALWAYS_S, ALWAYS, nearest)


def prefixes(spacecraft: Sequence[str], antennas: Sequence[str]) -> list[list[str]]:
    """``spacecraft.antenna.`` for each antenna (outer) and spacecraft (inner), blanks as underscores, all different."""
    heads, tails = ([name.replace(" ", "_") for name in names] for names in (spacecraft, antennas))
    table = [[f"{head}.{tail}." for head in heads] for tail in tails]
    if len({prefix for row in table for prefix in row}) < len(heads) * len(tails):
        seen: dict[str, int] = {}
        for row in table:
            for i, prefix in enumerate(row):
                seen[prefix] = count = seen.get(prefix, 0) + 1
                row[i] = prefix if count == 1 else f"{prefix[:-1]}~{count}."
    return table


def window_ids(
    pair_prefix: Sequence[str], pair: NDArray[np.int64], slot: NDArray[np.int64], start_s: Floats
) -> pd.api.extensions.ExtensionArray:
    """One id per window (a text array); windows of a pair in one slot are lettered in time order from the second on.

    All windows of a pass must be given, those outside the planning horizon too.
    """
    which, kinds = pd.factorize(slot)
    labels = [_slot_label(int(kind)) for kind in kinds]
    # Text arrays are joined much faster than objects one by one.
    heads, tails = (pd.array(words, dtype="str") for words in (list(pair_prefix), labels))
    ids = pd.Series(heads.take(pair)) + pd.Series(tails.take(which))
    key = pair * len(kinds) + which
    shared = np.flatnonzero(pd.Series(key).duplicated(keep=False))
    order = shared[np.lexsort((start_s[shared], key[shared]))]
    rank, lettered = 0, {}
    for before, i in pairwise(order.tolist()):
        rank = rank + 1 if key[i] == key[before] else 0
        if rank:
            lettered[i] = f"{ids[i]}{_letter(rank)}"
    if lettered:
        ids[list(lettered)] = list(lettered.values())
    return ids.array


def inherit_ids(windows: pd.DataFrame, earlier_windows: pd.DataFrame, tolerance_s: float = 1_200.0) -> pd.DataFrame:
    """``windows`` with the ids of an earlier table where it has the same window; all ids stay different.

    The same window is one of the same spacecraft and antenna that overlaps the earlier one, or peaks
    within ``tolerance_s`` of it; of several, overlap and then the nearest peak decides.
    """
    matches: list[tuple[bool, float, int, str]] = []
    groups = dict(iter(earlier_windows.groupby(["spacecraft", "antenna"], sort=False)))
    second = np.timedelta64(1, "s")
    for i, (name, antenna, aos, los, peak) in enumerate(
        zip(*(windows[c] for c in ("spacecraft", "antenna", "aos_utc", "los_utc", "peak_utc")), strict=True)
    ):
        part = groups.get((name, antenna))
        if part is None:
            continue
        apart = np.abs((part["peak_utc"] - peak) / second).to_numpy()
        overlaps = ((part["aos_utc"] < los) & (part["los_utc"] > aos)).to_numpy()
        for k in np.flatnonzero(overlaps | (apart <= tolerance_s)):
            matches.append((not overlaps[k], float(apart[k]), i, str(part["window_id"].iloc[k])))
    given: dict[int, str] = {}
    taken: set[str] = set()
    for _, _, i, old in sorted(matches):
        if i not in given and old not in taken:
            given[i] = old
            taken.add(old)
    ids = []
    for i, own in enumerate(windows["window_id"]):
        ids.append(given[i] if i in given else _free(str(own), taken))
    result = windows.copy()
    result["window_id"] = ids
    return result


def _free(own: str, taken: set[str]) -> str:
    """``own``, or its first lettered form that nobody has."""
    name, rank = own, 1
    while name in taken:
        name = own + _letter(rank)
        rank += 1
    taken.add(name)
    return name


def _slot_label(slot: int) -> str:
    if slot == ALWAYS:
        return "always"
    day, part = divmod(slot, _SLOTS_A_DAY)
    date = str(_EPOCH + np.timedelta64(day, "D"))
    return f"{date[2:4]}{date[5:7]}{date[8:10]}-{part:02d}"


def _letter(rank: int) -> str:
    """b, c, ... z, then z26, z27 ..."""
    return chr(ord("a") + rank) if rank < 26 else f"z{rank}"
