"""What there is to plan, as plain immutable arrays: no run, no tables, no solver.

Times are whole seconds from the start of the horizon. Arrays are made read-only, so that a problem can
be shared by the model, the search and the accounts without a thought.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, fields, replace
from functools import cached_property
from typing import Any, Literal, TypeVar

import numpy as np
from numpy.typing import ArrayLike, NDArray

from passplan.planning.streams import Keeping, Layer, Stream, is_loose, layers_of, steady

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Flags = NDArray[np.bool_]
N = TypeVar("N")
Service = Literal["downlink", "command", "both"]


@dataclass(frozen=True, eq=False)
class Fleet:
    """Spacecraft, shape (n,): the worth of a MB, the generation rate [MB/s], and the storage [MB].

    ``streams`` are the classes of data of each spacecraft by falling weight, none for one with a single class at a
    steady rate. Where there are some the arrays sum them up: the highest weight, the mean rate, the whole fill; and
    ``keeping`` says how each storage loses and frees data (absent: as :class:`Keeping` has it by default).
    """

    names: tuple[str, ...]
    weight: Floats
    generation_mb_per_s: Floats
    capacity_mb: Floats
    start_fill_mb: Floats
    streams: tuple[tuple[Stream, ...], ...] = ()
    keeping: tuple[Keeping, ...] = ()

    def __post_init__(self) -> None:
        _freeze(self)

    def weighed(self, parts: Sequence[tuple[Fleet, float]]) -> Fleet:
        """The same spacecraft with the weighted sum of the weights of ``parts``, which differ in weights alone."""
        streams = tuple(
            tuple(replace(one, weight=sum(share * part.streams[i][k].weight for part, share in parts))
                  for k, one in enumerate(own))
            for i, own in enumerate(self.streams))
        return replace(
            self, weight=sum((share * part.weight for part, share in parts), np.zeros(len(self))), streams=streams)

    def streams_of(self, craft: int) -> tuple[Stream, ...]:
        """The classes of one spacecraft, none where the arrays say all."""
        return self.streams[craft] if self.streams else ()

    def keeping_of(self, craft: int) -> Keeping:
        """How the storage of one spacecraft loses and frees data."""
        return self.keeping[craft] if self.keeping else Keeping()

    @cached_property
    def loose(self) -> frozenset[int]:
        """Spacecraft of which layers tell no more than a ceiling; see :mod:`passplan.planning.streams`."""
        return frozenset(
            k for k in range(len(self)) if self.streams_of(k) and is_loose(self.streams_of(k), self.keeping_of(k)))

    def __len__(self) -> int:
        return len(self.names)


@dataclass(frozen=True, eq=False)
class Antennas:
    """Antennas, shape (a,); ``beams`` is how many contacts each serves at once, without it one each."""

    names: tuple[str, ...]
    beams: Integers = field(default_factory=lambda: np.zeros(0, dtype=np.int64))

    def __post_init__(self) -> None:
        if not len(self.beams):
            object.__setattr__(self, "beams", np.ones(len(self.names), dtype=np.int64))
        _freeze(self)

    def __len__(self) -> int:
        return len(self.names)


@dataclass(frozen=True, eq=False)
class Windows:
    """Windows, shape (w,): identifiers, and indices of the spacecraft and the antenna."""

    names: tuple[str, ...]
    spacecraft: Integers
    antenna: Integers
    start_s: Integers
    end_s: Integers

    def __post_init__(self) -> None:
        _freeze(self)

    def __len__(self) -> int:
        return len(self.names)


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
        _freeze(self)

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
        _freeze(self)
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


@dataclass(frozen=True)
class RequestNeed:
    """A requested contact: any option of the spacecraft on one of ``antennas`` that fits span and length.

    ``spacecraft`` is -1 for one that takes no part in the run: the request is then a shortfall. A ``fixed`` one
    is met by a contact from ``earliest_s`` to ``latest_s`` only. ``points`` is what missing it weighs. With
    ``standbys`` the contact must also hold one of these antennas as a stand-by that offers the service.
    """

    name: str
    craft_name: str
    spacecraft: int
    antennas: frozenset[int]
    service: Service
    earliest_s: int
    latest_s: int
    min_duration_s: int
    fixed: bool = False
    points: float = 1.0
    standbys: frozenset[int] | None = None


@dataclass(frozen=True)
class CommandNeed:
    """A command contact at least every ``every_s``, counted from ``last_s`` (0 or negative: before the start)."""

    spacecraft: int
    every_s: int
    last_s: int


@dataclass(frozen=True)
class Conflict:
    """From ``start_s`` to ``end_s`` the victim on its antenna would be disturbed by the other one's sending."""

    name: str
    victim: int
    antenna: int
    interferer: int
    start_s: int
    end_s: int


@dataclass(frozen=True)
class Crowd:
    """From ``start_s`` to ``end_s``, while the victim is heard on its antenna, the ``shares`` of those of the
    ``interferers`` that send must not add up to more than 1."""

    name: str
    victim: int
    antenna: int
    interferers: tuple[int, ...]
    shares: tuple[float, ...]
    start_s: int
    end_s: int


@dataclass(frozen=True, eq=False)
class Problem:
    """Everything that the plan depends on. ``horizon_s`` is the length of the horizon.

    The objective is the sum over spacecraft of weight x (delivered MB + ``left_worth_share`` x MB left at the end),
    less ``spill_cost_per_mb`` x lost MB, less ``worth_per_money`` x cost, less the ``extra_price`` (m,) of options
    (none where it is empty), plus ``base_worth``; requirements come before it (see ``rules``). With ``in_order`` it is
    one of several objectives that are taken one after the other (see ``tiers.py``). ``too_tight`` (k, 2)
    are pairs of options of one antenna, the earlier first, between which it cannot turn in time. ``needs`` are
    records that rules made for themselves; each rule asks for its own with :meth:`needs_of`.
    """

    horizon_s: int
    fleet: Fleet
    antennas: Antennas
    windows: Windows
    options: Options
    requests: tuple[RequestNeed, ...] = ()
    commands: tuple[CommandNeed, ...] = ()
    conflicts: tuple[Conflict, ...] = ()
    crowds: tuple[Crowd, ...] = ()
    spill_cost_per_mb: float = 0.0
    worth_per_money: float = 0.0
    left_worth_share: float = 0.0
    extra_price: Floats = field(default_factory=lambda: np.zeros(0))
    base_worth: float = 0.0
    in_order: bool = False
    too_tight: Integers = field(default_factory=lambda: np.zeros((0, 2), dtype=np.int64))
    needs: tuple[object, ...] = ()

    @cached_property
    def layers(self) -> tuple[tuple[Layer, ...], ...]:
        """The storages that stand for each spacecraft (see :mod:`passplan.planning.streams`)."""
        fleet = self.fleet
        return tuple(
            layers_of(
                fleet.streams_of(k) or (steady("", float(fleet.weight[k]), float(fleet.start_fill_mb[k]),
                                               float(fleet.generation_mb_per_s[k]), self.horizon_s),),
                float(fleet.capacity_mb[k]), self.spill_cost_per_mb)
            for k in range(len(fleet)))

    @cached_property
    def price(self) -> Floats:
        """What it costs in worth to use each option, shape (m,), apart from what it sends; may be negative."""
        price: Floats = self.worth_per_money * self.options.cost
        return price + self.extra_price if len(self.extra_price) else price

    def needs_of(self, kind: type[N]) -> list[N]:
        """The records of one kind, in their order."""
        return [need for need in self.needs if isinstance(need, kind)]

    def with_options(self, options: Options) -> Problem:
        """The same problem over other options; raises ValueError where pairs of the old ones are named."""
        if len(self.too_tight) or len(self.extra_price):
            raise ValueError("too_tight and extra_price go by the number of an option; make the problem anew")
        return replace(self, options=options)


@dataclass(frozen=True)
class Limits:
    """How long and how hard to look. The search ends by ``gap`` or by ``time_limit_s``, whichever is first."""

    gap: float = 0.005
    time_limit_s: float = 60.0
    threads: int = 2
    seed: int = 1
    # Rounds of the search at most: the one limit besides the gap that ends at the same plan every time.
    search_rounds: int = 1_000_000
    # Up to this many options the exact model is tried first (see portfolio.py).
    exact_options: int = field(default=8_000)


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


def offsets_of(counts: Integers) -> Integers:
    """Where each group starts when groups of ``counts`` lie end to end; one entry more than groups."""
    return np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)


def ragged_ranges(first: Integers, counts: Integers) -> Integers:
    """``first[k], first[k] + 1, ...`` for ``counts[k]`` entries, for every k, end to end."""
    ends = np.cumsum(counts)
    return np.arange(int(ends[-1]) if len(ends) else 0, dtype=np.int64) + np.repeat(first - ends + counts, counts)


def _freeze(record: object) -> None:
    """Give every array of a frozen record its dtype, its own copy if needed, and take write access away."""
    for f in fields(record):  # type: ignore[arg-type]
        value = getattr(record, f.name)
        if isinstance(value, np.ndarray):
            kind = {"Floats": np.float64, "Integers": np.int64, "Flags": np.bool_}[str(f.type)]
            array: NDArray[Any] = np.ascontiguousarray(value, dtype=kind).copy()
            array.flags.writeable = False
            object.__setattr__(record, f.name, array)
