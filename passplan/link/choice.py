"""What a window's links offer to a contact: the modcod that brings down most, or the time for commands."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np

from passplan.link.chains import Chain, Rung
from passplan.link.steps import Step, rate_steps
from passplan.link.stretches import Floats, Ints

# Crossing times carry rounding noise; one that lies within a microsecond of a whole second is on it.
_NOISE_S = 1e-6


STEPPED = "stepped"
"""The modcod of a contact that uses several."""


@dataclass(frozen=True)
class SendPiece:
    """Whole seconds from the horizon's start in which one modcod is sent, and its net rate."""

    start_s: int
    end_s: int
    modcod: str
    rate_mbps: float


@dataclass(frozen=True)
class DownlinkChoice:
    """How one contact sends: whole seconds from the horizon's start, net user data, least margin [dB].

    ``modcod`` is ``stepped`` where the pieces use several; ``rate_mbps`` is the mean while sending. The first
    piece starts at ``send_start_s``, the last ends at ``send_end_s``. Without ``pieces`` it is sent in one.
    ``expectation`` is the mean over an average year as a multiple of ``volume_mb``, 1 where nobody asks for it.
    """

    radio: str
    receiver: str
    frequency_mhz: float
    polarisation: str
    modcod: str
    rate_mbps: float
    send_start_s: int
    send_end_s: int
    usable_s: int
    volume_mb: float
    min_margin_db: float
    pieces: tuple[SendPiece, ...] = ()
    expectation: float = 1.0

    def __post_init__(self) -> None:
        if not self.pieces:
            whole = SendPiece(self.send_start_s, self.send_end_s, self.modcod, self.rate_mbps)
            object.__setattr__(self, "pieces", (whole,))


@dataclass(frozen=True)
class CommandChoice:
    """When one contact can command: whole seconds from the horizon's start, least margin [dB]."""

    radio: str
    transmitter: str
    frequency_mhz: float
    polarisation: str
    send_start_s: int
    send_end_s: int
    usable_s: int
    min_margin_db: float


@dataclass(frozen=True, eq=False)
class Track:
    """One chain along one window: quality samples, and the stretches in which each rung holds its margin.

    ``time_s`` (from the horizon's start) and ``quality_db`` (Es/N0 or Eb/N0 after implementation loss)
    have one entry per sample; ``rung``, ``first_s`` and ``last_s`` one per stretch, in rising rung.
    ``margin_db`` is what a rung must hold; ``lost`` are intervals in which nothing passes, in time order.
    """

    chain: Chain
    time_s: Floats
    quality_db: Floats
    rung: Ints
    first_s: Floats
    last_s: Floats
    margin_db: float = 0.0
    lost: tuple[tuple[float, float], ...] = ()

    @cached_property
    def steps(self) -> tuple[Step, ...]:
        """The stepped rates of the whole window, in time order; a contact takes its part of them."""
        spans = list(zip(self.rung.tolist(), self.first_s.tolist(), self.last_s.tolist(), strict=True))
        found: list[Step] = []
        slowest = max((rung for rung, _, _ in spans), default=0)
        for lock_s, lost_s in sorted((a, b) for rung, a, b in spans if rung == slowest):
            begin, end = math.ceil(lock_s - _NOISE_S), math.floor(lost_s + _NOISE_S)
            if end > begin:
                holds, climbs = self._rungs_by_second(begin, end, spans)
                found += rate_steps(begin, holds, climbs, self.chain.control, lock_s)
        return tuple(found)

    def _rungs_by_second(
        self, begin_s: int, end_s: int, spans: list[tuple[int, float, float]]
    ) -> tuple[list[int], list[int]]:
        """The fastest rung that holds throughout each second, and the fastest that leaves the hysteresis."""
        holds = np.full(end_s - begin_s, len(self.chain.rungs), np.int64)
        for rung, first_s, last_s in sorted(spans, reverse=True):
            low = max(math.ceil(first_s - _NOISE_S) - begin_s, 0)
            holds[low : max(math.floor(last_s + _NOISE_S) - begin_s, low)] = rung
        if self.chain.control.hysteresis_db == 0.0:
            return holds.tolist(), holds.tolist()
        quality_db = np.interp(np.arange(begin_s, end_s), self.time_s, self.quality_db)
        needs_db = [rung.required_db + self.margin_db + self.chain.control.hysteresis_db for rung in self.chain.rungs]
        # Needs fall along the rungs: the first that is met is as far in as there are needs above the quality.
        climbs = np.searchsorted(-np.array(needs_db), -quality_db, "left")
        return holds.tolist(), np.maximum(climbs, holds).tolist()

    def stepped(self, start_s: int, end_s: int) -> list[Step]:
        """The steps of a contact [``start_s``, ``end_s``), after acquisition and without what is lost."""
        cut = [
            Step(max(step.start_s, begin), min(step.end_s, end), step.rung, step.lock_s)
            for step in self.steps
            for begin, end in self.spans(max(step.lock_s, start_s), end_s)
        ]
        return [step for step in cut if step.end_s > step.start_s]

    def spans(self, first_s: float, last_s: float) -> tuple[tuple[int, int], ...]:
        """Whole seconds of sending in a stretch, acquired at its start and again after each interval lost."""
        found = []
        for gap_s, resume_s in (*self.lost, (last_s, last_s)):
            begin = math.ceil(first_s + self.chain.acquisition_s - _NOISE_S)
            end = math.floor(min(gap_s, last_s) + _NOISE_S)
            if end > begin:
                found.append((begin, end))
            first_s = max(first_s, resume_s)
        return tuple(found)

    def least_quality_db(self, start_s: float, end_s: float) -> float:
        """The least quality from ``start_s`` to ``end_s``, along straight lines between samples [dB]."""
        begin = int(np.searchsorted(self.time_s, start_s, "right"))
        end = int(np.searchsorted(self.time_s, end_s, "left"))
        least = float(np.min(np.interp((start_s, end_s), self.time_s, self.quality_db)))
        return min(least, float(np.min(self.quality_db[begin:end]))) if end > begin else least


@dataclass(frozen=True)
class _Sending:
    track: Track
    rung: Rung
    pieces: tuple[tuple[int, int], ...]

    @property
    def start_s(self) -> int:
        return self.pieces[0][0]

    @property
    def end_s(self) -> int:
        return self.pieces[-1][1]

    @property
    def usable_s(self) -> int:
        return sum(end - start for start, end in self.pieces)

    @property
    def margin_db(self) -> float:
        return min(self.track.least_quality_db(*piece) for piece in self.pieces) - self.rung.required_db


@dataclass(frozen=True, eq=False)
class DownlinkProfile:
    """The downlink of one window, over every radio that the antenna can receive."""

    tracks: tuple[Track, ...]

    def best(self, start_s: int, end_s: int) -> DownlinkChoice | None:
        """The modcod that brings down most in a contact [``start_s``, ``end_s``), or None if none does.

        Seconds count from the horizon's start. Sending begins ``acquisition_s`` after both the contact
        and the signal have begun, and lasts while the margin holds without a break; it is rounded inward
        to whole seconds. Seconds that the track loses are left out, and the signal is acquired anew after
        them. Of equal volumes, the modcod with the lower requirement wins. A radio that adapts its rate sends
        the steps of the window that fall into the contact instead.
        """
        stepping = tuple(track for track in self.tracks if track.chain.control.kind == "adaptive")
        level = tuple(track for track in self.tracks if track.chain.control.kind != "adaptive")
        choices = [_stepped(track, start_s, end_s) for track in stepping]
        if level:
            choices.append(self._level(level, start_s, end_s))
        return max((c for c in choices if c is not None), key=lambda c: c.volume_mb, default=None)

    def _level(self, tracks: tuple[Track, ...], start_s: int, end_s: int) -> DownlinkChoice | None:
        found = _most(tracks, start_s, end_s)
        if found is None:
            return None
        chain, usable_s = found.track.chain, found.usable_s
        return DownlinkChoice(
            chain.radio, chain.partner, chain.frequency_mhz, chain.polarisation, found.rung.name,
            found.rung.rate_mbps, found.start_s, found.end_s, usable_s,
            found.rung.rate_mbps * usable_s / 8.0, found.margin_db,
            tuple(SendPiece(a, b, found.rung.name, found.rung.rate_mbps) for a, b in found.pieces),
        )


@dataclass(frozen=True, eq=False)
class CommandProfile:
    """The command uplink of one window."""

    tracks: tuple[Track, ...]

    def best(self, start_s: int, end_s: int) -> CommandChoice | None:
        """When a contact [``start_s``, ``end_s``) can command, or None if for less than a second.

        The rules are those of :meth:`DownlinkProfile.best`, but commands go in one piece, the longest.
        """
        found = _most(self.tracks, start_s, end_s, unbroken=True)
        if found is None:
            return None
        chain = found.track.chain
        return CommandChoice(
            chain.radio, chain.partner, chain.frequency_mhz, chain.polarisation,
            found.start_s, found.end_s, found.usable_s, found.margin_db,
        )


@dataclass(frozen=True, eq=False)
class WindowLink:
    """The links of one window; None where no chain serves that direction or none ever holds its margin."""

    downlink: DownlinkProfile | None = None
    command: CommandProfile | None = None


def _stepped(track: Track, start_s: int, end_s: int) -> DownlinkChoice | None:
    """The steps of one track that fall into a contact, as a choice."""
    steps, chain = track.stepped(start_s, end_s), track.chain
    if not steps:
        return None
    pieces: list[SendPiece] = []
    for step in steps:
        rung = chain.rungs[step.rung]
        pieces.append(SendPiece(step.start_s, step.end_s, rung.name, rung.rate_mbps))
    margin_db = min(track.least_quality_db(s.start_s, s.end_s) - chain.rungs[s.rung].required_db for s in steps)
    usable_s = sum(piece.end_s - piece.start_s for piece in pieces)
    volume_mb = math.fsum(piece.rate_mbps * (piece.end_s - piece.start_s) for piece in pieces) / 8.0
    several = any(a.modcod != b.modcod for a, b in pairwise(pieces))
    return DownlinkChoice(
        chain.radio, chain.partner, chain.frequency_mhz, chain.polarisation,
        STEPPED if several else pieces[0].modcod, 8.0 * volume_mb / usable_s, pieces[0].start_s, pieces[-1].end_s,
        usable_s, volume_mb, margin_db, tuple(pieces),
    )


def _most(tracks: tuple[Track, ...], start_s: int, end_s: int, *, unbroken: bool = False) -> _Sending | None:
    """The sending of greatest volume, over all tracks and rungs."""
    best: _Sending | None = None
    most = 0.0
    for track in tracks:
        rungs, acquisition_s = track.chain.rungs, track.chain.acquisition_s
        ceiling_s = end_s - start_s - acquisition_s
        stretches = zip(track.rung.tolist(), track.first_s.tolist(), track.last_s.tolist(), strict=True)
        for index, first_s, last_s in stretches:
            rung = rungs[index]
            # Rates only fall from here on, so nothing that follows can bring more.
            if rung.rate_mbps * ceiling_s < most:
                break
            pieces = track.spans(max(first_s, start_s), min(last_s, end_s))
            if unbroken:
                pieces = tuple(sorted(pieces, key=lambda piece: piece[0] - piece[1])[:1])
            volume = rung.rate_mbps * sum(end - begin for begin, end in pieces)
            if pieces and (best is None or volume > most or (volume == most and _surer(track, rung, best))):
                best, most = _Sending(track, rung, pieces), volume
    return best


def _surer(track: Track, rung: Rung, than: _Sending) -> bool:
    """Whether a rung of equal volume leaves more margin, as far as the constants tell."""
    return track.chain.merit_db - rung.required_db > than.track.chain.merit_db - than.rung.required_db
