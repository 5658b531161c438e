"""Pieces of sending that may overlap, where a spacecraft has several links, cut into stretches of steady sending."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from itertools import pairwise

from passplan.planning.audit.rows import Piece


def stretches_of(pieces: Sequence[Piece]) -> Iterator[tuple[float, float, list[int]]]:
    """Time with sending, cut wherever a piece starts or ends: (from, until, the pieces that are sent)."""
    for low_s, high_s in pairwise(sorted({t for piece in pieces for t in (piece.start_s, piece.end_s)})):
        active = [k for k, piece in enumerate(pieces) if piece.start_s <= low_s and piece.end_s >= high_s]
        if active:
            yield low_s, high_s, active


def apportioned(
    amounts: Sequence[float], pieces: Sequence[Piece], stretches: Sequence[tuple[float, float, list[int]]],
) -> tuple[float, ...]:
    """Amounts of the stretches given to their pieces, in proportion to the rates."""
    given: list[list[float]] = [[] for _ in pieces]
    for amount, (_, _, active) in zip(amounts, stretches, strict=True):
        whole = math.fsum(pieces[k].rate_mbps for k in active)
        for k in active:
            given[k].append(amount * pieces[k].rate_mbps / whole if whole > 0.0 else 0.0)
    return tuple(map(math.fsum, given))
