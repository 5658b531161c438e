"""What there is to plan, as plain immutable arrays: no run, no tables, no solver.

Times are whole seconds from the start of the horizon. Arrays are made read-only, so that a problem can
be shared by the model, the search and the accounts without a thought.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Literal, TypeVar

import numpy as np

from passplan.planning.arrays import Floats, Integers, freeze
from passplan.planning.layering import is_loose, layers_of
from passplan.planning.option_table import Options
from passplan.planning.streams import Keeping, Layer, Stream, steady

N = TypeVar("N")
Service = Literal["downlink", "command", "both"]


@dataclass(frozen=True, eq=False)
class Fleet:
    """Spacecraft, shape (n,): the worth of a MB, the generation rate [MB/s], and the storage [MB].

    ``streams`` are the classes of data of each spacecraft by falling weight, none for one with a single class at a
    steady rate. Where there are some the arrays sum them up: the highest weight, the mean rate, the whole fill; and
    ``keeping`` says how each storage loses and frees data (absent: as :class:`Keeping` has it by default). ``links`` is
    how many contacts each can be in at once, without it one.
    """

    names: tuple[str, ...]
    weight: Floats
    generation_mb_per_s: Floats
    capacity_mb: Floats
    start_fill_mb: Floats
    streams: tuple[tuple[Stream, ...], ...] = ()
    keeping: tuple[Keeping, ...] = ()
    links: Integers = field(default_factory=lambda: np.zeros(0, dtype=np.int64))

    def __post_init__(self) -> None:
        if not len(self.links):
            object.__setattr__(self, "links", np.ones(len(self.names), dtype=np.int64))
        freeze(self)

    def weighed(self, parts: Sequence[tuple[Fleet, float]]) -> Fleet:
        """The same spacecraft with the weighted sum of the weights of ``parts``: the same ones times a factor."""
        streams = tuple(
            tuple(replace(one, weight=sum(share * part.streams[i][k].weight for part, share in parts), ranked=one.rank)
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
        """Spacecraft of which layers tell no more than a ceiling; see :mod:`passplan.planning.layering`."""
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
        freeze(self)

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
        freeze(self)

    def __len__(self) -> int:
        return len(self.names)


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
        """The storages that stand for each spacecraft (see :mod:`passplan.planning.layering`).

        What is left at the end is valued as if fresh, so that then nothing is taken to fade.
        """
        fleet = self.fleet
        return tuple(
            layers_of(
                fleet.streams_of(k) or (steady("", float(fleet.weight[k]), float(fleet.start_fill_mb[k]),
                                               float(fleet.generation_mb_per_s[k]), self.horizon_s),),
                float(fleet.capacity_mb[k]), self.spill_cost_per_mb, by_level=self.left_worth_share == 0.0)
            for k in range(len(fleet)))

    @cached_property
    def price(self) -> Floats:
        """What it costs in worth to use each option, shape (m,), apart from what it sends; may be negative."""
        price: Floats = self.worth_per_money * self.options.cost
        return price + self.extra_price if len(self.extra_price) else price

    @cached_property
    def ceiling(self) -> float:
        """A worth that needs no search: all data aboard and generated is delivered, none lost, nothing paid."""
        worth = sum(layer.weight * (layer.start_mb + float(layer.made_mb[-1]))
                    for mine in self.layers for layer in mine)
        return worth + self.base_worth - float(np.minimum(self.price, 0.0).sum())

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


