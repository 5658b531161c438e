"""What a window's links offer to a contact: the modcod that brings down most, or the time for commands."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from passplan.link.chains import Chain, Rung
from passplan.link.stretches import Floats, Ints

# Crossing times carry rounding noise; one that lies within a microsecond of a whole second is on it.
_NOISE_S = 1e-6


@dataclass(frozen=True)
class DownlinkChoice:
    """How one contact sends: whole seconds from the horizon's start, net user data, least margin [dB].

    It sends in ``pieces``, the first from ``send_start_s``, the last to ``send_end_s``; more than one where
    seconds are lost in between.
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
    pieces: tuple[tuple[int, int], ...]


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
    ``lost`` are intervals in which nothing passes, in time order.
    """

    chain: Chain
    time_s: Floats
    quality_db: Floats
    rung: Ints
    first_s: Floats
    last_s: Floats
    lost: tuple[tuple[float, float], ...] = ()

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
        return self.track.least_quality_db(self.start_s, self.end_s) - self.rung.required_db


@dataclass(frozen=True, eq=False)
class DownlinkProfile:
    """The downlink of one window, over every radio that the antenna can receive."""

    tracks: tuple[Track, ...]

    def best(self, start_s: int, end_s: int) -> DownlinkChoice | None:
        """The modcod that brings down most in a contact [``start_s``, ``end_s``), or None if none does.

        Seconds count from the horizon's start. Sending begins ``acquisition_s`` after both the contact
        and the signal have begun, and lasts while the margin holds without a break; it is rounded inward
        to whole seconds. Seconds that the track loses are left out, and the signal is acquired anew after
        them. Of equal volumes, the modcod with the lower requirement wins.
        """
        found = _most(self.tracks, start_s, end_s)
        if found is None:
            return None
        chain, usable_s = found.track.chain, found.usable_s
        return DownlinkChoice(
            chain.radio, chain.partner, chain.frequency_mhz, chain.polarisation, found.rung.name,
            found.rung.rate_mbps, found.start_s, found.end_s, usable_s,
            found.rung.rate_mbps * usable_s / 8.0, found.margin_db, found.pieces,
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
            pieces = _pieces(max(first_s, start_s), min(last_s, end_s), acquisition_s, track.lost)
            if unbroken:
                pieces = tuple(sorted(pieces, key=lambda piece: piece[0] - piece[1])[:1])
            volume = rung.rate_mbps * sum(end - begin for begin, end in pieces)
            if pieces and (best is None or volume > most or (volume == most and _surer(track, rung, best))):
                best, most = _Sending(track, rung, pieces), volume
    return best


def _pieces(
    first_s: float, last_s: float, acquisition_s: float, lost: tuple[tuple[float, float], ...]
) -> tuple[tuple[int, int], ...]:
    """Whole seconds of sending in a stretch, acquired at its start and again after each interval lost."""
    found = []
    for gap_s, resume_s in (*lost, (last_s, last_s)):
        begin = math.ceil(first_s + acquisition_s - _NOISE_S)
        end = math.floor(min(gap_s, last_s) + _NOISE_S)
        if end > begin:
            found.append((begin, end))
        first_s = max(first_s, resume_s)
    return tuple(found)


def _surer(track: Track, rung: Rung, than: _Sending) -> bool:
    """Whether a rung of equal volume leaves more margin, as far as the constants tell."""
    return track.chain.merit_db - rung.required_db > than.track.chain.merit_db - than.rung.required_db
