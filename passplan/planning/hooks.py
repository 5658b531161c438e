"""What rules say before there are options: time that is not to be had, and instants that must be to be had.

A rule that closes time gives :class:`Block` records, and one that asks for a certain contact :class:`Wish`
records; the options are made with both in mind. A rule that needs more of the run than the problem's arrays
hold turns it into records of its own from a :class:`Draft`; they travel as ``Problem.needs``.
"""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from passplan.inputs.run import Run
from passplan.link.choice import CommandChoice, DownlinkChoice
from passplan.planning.problem import Problem, Service

DRIFT_S = 60
"""How far the edges of a window may have moved since somebody pinned, published or loaded a contact."""


@dataclass(frozen=True)
class Candidate:
    """One option with the link choices behind it.

    ``further`` are the contacts that stand by for it on other antennas; ``cost`` is without them.
    """

    window: int
    start_s: int
    end_s: int
    downlink: DownlinkChoice | None
    command: CommandChoice | None
    cost: float
    further: tuple[Candidate, ...] = ()

    @property
    def service(self) -> Service:
        """What the contact offers; raises ValueError where that is nothing."""
        if self.downlink is None and self.command is None:
            raise ValueError("a candidate offers no service")
        if self.downlink is None:
            return "command"
        return "downlink" if self.command is None else "both"

    @property
    def carriers_mhz(self) -> tuple[float, ...]:
        """The carriers of the contact, down and up [MHz]."""
        return tuple(link.frequency_mhz for link in (self.downlink, self.command) if link is not None)


@dataclass(frozen=True)
class Block:
    """No contact touches ``[start_s, end_s)``; None stands for every antenna, or every spacecraft.

    With ``setup`` neither do the antenna's times to prepare before a contact and to release after it.
    ``reason`` is a code of the ``unused`` table, ``detail`` a sentence on it.
    """

    antenna: str | None
    spacecraft: str | None
    start_s: int
    end_s: int
    reason: str
    detail: str
    setup: bool = True


@dataclass(frozen=True)
class Wish:
    """A contact of ``spacecraft`` (on ``antenna``, or on any) must be able to start and to end at these instants.

    With ``overlap_s`` contacts in between must be able to hand over to each other with no more than that.
    """

    spacecraft: str
    antenna: str | None
    start_s: int
    end_s: int
    overlap_s: int = 0


@dataclass(frozen=True)
class Standby:
    """A contact of ``spacecraft`` within the span must be to be had on one of ``antennas`` with a stand-by.

    That is another antenna, one of ``standbys``, which follows for as long and offers ``service`` too; without
    ``service`` it offers what the contact does.
    """

    spacecraft: str
    antennas: frozenset[str]
    standbys: frozenset[str]
    service: Service | None
    start_s: int
    end_s: int


@dataclass(frozen=True)
class Cap:
    """The transmitter of ``spacecraft`` is on for at most ``longest_s`` in one contact.

    ``reason`` and ``detail`` as of a :class:`Block`, where no contact is short enough.
    """

    spacecraft: str
    longest_s: int
    reason: str
    detail: str


@dataclass(frozen=True)
class Silence:
    """``spacecraft`` sends in no contact that starts before ``until_s``, but in those that are ``kept``.

    These are (antenna, start, end) in s; each is to be had as it stands, or as far as its window reaches. ``reason``
    and ``detail`` as of a :class:`Block`.
    """

    spacecraft: str
    until_s: int
    kept: tuple[tuple[str, int, int], ...]
    reason: str
    detail: str


@dataclass(frozen=True, eq=False)
class Draft:
    """A run on its way to a problem: ``problem`` has its options but no needs yet, ``candidates`` in their order.

    ``blocks`` is the time that was closed to them.
    """

    run: Run
    windows: pd.DataFrame
    problem: Problem
    candidates: tuple[Candidate, ...]
    blocks: tuple[Block, ...] = ()
