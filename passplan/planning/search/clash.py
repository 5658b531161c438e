"""Contacts of one spacecraft that exclude each other although they do not overlap.

Two of them on one antenna need the time to set it up between them; a schedule of a spacecraft alone, which only
knows that contacts follow one another, has to look.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Integers
from passplan.planning.search.compiled import compiled, inlined


@compiled
def find_clashes(
    first: Integers, start_s: Integers, end_s: Integers, use_at: Integers, use_first: Integers, use_last: Integers,
    within_s: int, clash: Integers,
) -> None:
    """Fill the column ``clash`` of the fleet's arrays.

    ``within_s`` is the longest time that two contacts on one lane can need between them.
    """
    for i in range(len(first) - 1):
        for o in range(first[i], first[i + 1]):
            low = o + np.searchsorted(start_s[o:first[i + 1]], end_s[o])
            for p in range(low, first[i + 1]):
                if start_s[p] >= end_s[o] + within_s:
                    break
                if share_clique(use_at, use_first, use_last, o, p):
                    clash[o] = start_s[p]


@inlined
def share_clique(use_at: Integers, use_first: Integers, use_last: Integers, o: int, p: int) -> bool:
    """Whether two options share a clique, so that not both can be used."""
    for x in range(use_at[o], use_at[o + 1]):
        for y in range(use_at[p], use_at[p + 1]):
            if max(use_first[x], use_first[y]) < min(use_last[x], use_last[y]):
                return True
    return False
