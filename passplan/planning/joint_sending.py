"""Contacts of one spacecraft that send at the same time, as pieces of sending that lie apart.

A spacecraft with several links takes what it sends from one storage: at any instant their rates add up, and what is
sent is divided among them as their rates are. So pieces that overlap are cut where any of them starts or ends, and
each stretch is one piece of the joint rate. (Own derivation; it leaves pieces that lie apart as they are.)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from passplan.planning.arrays import Floats

Pieces = Sequence[tuple[float, float, float]]
"""Start [s], end [s] and rate [MB/s] each."""


@dataclass(frozen=True, eq=False)
class JointSending:
    """``pieces`` lie apart, in time order. ``shares`` says of which of the ``count`` given ones each consists.

    A share is the number of the given piece and its part of what is sent; the parts of a piece add up to 1.
    """

    pieces: list[tuple[float, float, float]]
    shares: list[list[tuple[int, float]]]
    count: int

    def dealt_out(self, amounts: Floats) -> Floats:
        """Amounts of the joint pieces, shape (k, ...), as those of the given ones, shape (``count``, ...)."""
        dealt = np.zeros((self.count, *amounts.shape[1:]))
        for amount, shares in zip(amounts, self.shares, strict=True):
            for k, share in shares:
                dealt[k] += share * amount
        return dealt


def joint_sending(given: Pieces) -> JointSending:
    """The pieces of one spacecraft, in any order, joined."""
    starts = sorted(range(len(given)), key=lambda k: given[k][0])
    edges = sorted({edge for piece in given for edge in piece[:2]})
    pieces, shares, active, following = [], [], list[int](), 0
    for from_s, until_s in pairwise(edges):
        active = [k for k in active if given[k][1] > from_s]
        while following < len(starts) and given[starts[following]][0] <= from_s:
            active.append(starts[following])
            following += 1
        rate = sum(given[k][2] for k in active)
        if active:
            pieces.append((from_s, until_s, rate))
            # A rate may be nothing at all.
            shares.append([(k, given[k][2] / rate if rate > 0.0 else 1.0 / len(active)) for k in active])
    return JointSending(pieces, shares, len(given))
