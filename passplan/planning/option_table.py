"""Candidate contacts as arrays, with what they send and which antennas they hold."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, fields, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from passplan.planning.arrays import Flags, Floats, Integers, freeze, offsets_of, ragged_ranges


@dataclass(frozen=True, eq=False)
class Holds:
    """Antennas that options hold, shape (h,): hold k of ``option[k]`` is a part of ``window[k]`` on ``antenna[k]``.

    The antenna is held as for a contact of ``downlink``, ``command`` or both that runs from ``start_s`` to ``end_s``.
    """

    option: Integers
    window: Integers
    antenna: Integers
    start_s: Integers
    end_s: Integers
    prepare_s: Integers
    release_s: Integers
    downlink: Flags
    command: Flags

    def __post_init__(self) -> None:
        freeze(self)

    def __len__(self) -> int:
        return len(self.option)

    def take(self, index: ArrayLike) -> Holds:
        """The holds at ``index`` (integers or flags), in that order."""
        return Holds(**{f.name: getattr(self, f.name)[index] for f in fields(self)})


def no_holds() -> Holds:
    """None at all."""
    none, never = np.zeros(0, dtype=np.int64), np.zeros(0, dtype=bool)
    return Holds(none, none, none, none, none, none, none, never, never)


@dataclass(frozen=True, eq=False)
class Options:
    """Candidate contacts, shape (m,), with their sending as ragged pieces.

    Option o may send in the pieces ``piece_offset[o] : piece_offset[o + 1]``, in time order, each at one
    rate [MB/s] (``piece_offset`` has m + 1 entries). ``downlink`` and ``command`` say which services the
    contact offers; ``cost`` is money. The antenna is held from ``prepare_s`` before the start to ``release_s``
    after the end. An option may hold more antennas than that: ``further``, by the number of the option.
    """

    window: Integers
    spacecraft: Integers
    antenna: Integers
    start_s: Integers
    end_s: Integers
    prepare_s: Integers
    release_s: Integers
    downlink: Flags
    command: Flags
    cost: Floats
    piece_offset: Integers
    piece_start_s: Integers
    piece_end_s: Integers
    piece_rate_mb_per_s: Floats
    further: Holds = field(default_factory=no_holds)

    def __post_init__(self) -> None:
        freeze(self)
        if len(self.piece_offset) != len(self) + 1:
            raise ValueError("piece_offset needs one entry more than there are options")
        if np.any(self.end_s <= self.start_s) or np.any(self.piece_end_s <= self.piece_start_s):
            raise ValueError("an option or a piece of one ends before it starts")

    def __len__(self) -> int:
        return len(self.window)

    def pieces(self, option: int) -> range:
        """Indices of the pieces of one option."""
        return range(int(self.piece_offset[option]), int(self.piece_offset[option + 1]))

    @cached_property
    def holds(self) -> Holds:
        """Every antenna that an option holds, by option: its own first, then its further ones."""
        own = {"option": np.arange(len(self), dtype=np.int64)}
        columns = {f.name: np.concatenate([own.get(f.name, getattr(self, f.name, None)), getattr(self.further, f.name)])
                   for f in fields(self.further)}
        return Holds(**columns).take(np.argsort(columns["option"], kind="stable"))

    def take(self, index: ArrayLike) -> Options:
        """The options at ``index`` (integers or flags), in that order, with their pieces."""
        rows = np.arange(len(self))[np.asarray(index)]
        counts = np.diff(self.piece_offset)[rows]
        pieces = ragged_ranges(self.piece_offset[rows], counts)
        ragged = {"piece_start_s", "piece_end_s", "piece_rate_mb_per_s"}
        kept = {f.name: getattr(self, f.name)[pieces if f.name in ragged else rows]
                for f in fields(self) if f.name not in ("piece_offset", "further")}
        order = np.argsort(self.further.option, kind="stable")
        low, high = (np.searchsorted(self.further.option[order], rows, side) for side in ("left", "right"))
        further = self.further.take(order[ragged_ranges(low, high - low)])
        further = replace(further, option=np.repeat(np.arange(len(rows)), high - low))
        return Options(piece_offset=offsets_of(counts), further=further, **kept)


def build_options(rows: Sequence[dict[str, Any]]) -> Options:
    """Options from one mapping each, with ``pieces`` a list of (start_s, end_s, rate_mb_per_s).

    ``downlink`` defaults to whether there are pieces, ``command`` to False, and ``cost``, ``prepare_s`` and
    ``release_s`` to 0. ``further`` is a list of mappings with the columns of :class:`Holds` but ``option``.
    """
    pieces = [piece for row in rows for piece in row.get("pieces", ())]
    columns = np.array(pieces, dtype=float).reshape(-1, 3)
    further = [{"option": o, **hold} for o, row in enumerate(rows) for hold in row.get("further", ())]
    whole = {name: np.array([row[name] for row in rows], dtype=np.int64)
             for name in ("window", "spacecraft", "antenna", "start_s", "end_s")}
    return Options(
        **whole,
        prepare_s=np.array([row.get("prepare_s", 0) for row in rows], dtype=np.int64),
        release_s=np.array([row.get("release_s", 0) for row in rows], dtype=np.int64),
        downlink=np.array([row.get("downlink", bool(row.get("pieces"))) for row in rows], dtype=bool),
        command=np.array([row.get("command", False) for row in rows], dtype=bool),
        cost=np.array([row.get("cost", 0.0) for row in rows], dtype=float),
        piece_offset=offsets_of(np.array([len(row.get("pieces", ())) for row in rows], dtype=np.int64)),
        piece_start_s=columns[:, 0].astype(np.int64),
        piece_end_s=columns[:, 1].astype(np.int64),
        piece_rate_mb_per_s=columns[:, 2].copy(),
        further=Holds(**{f.name: np.array([hold[f.name] for hold in further]) for f in fields(Holds)}),
    )
