"""Who of the fleet could be heard too well beside whom: a coarse search that misses nothing.

Everything stands on one grid of 10 s over the horizon, so that each position is worked out once for all sites:

    for a block of time      positions of all spacecraft
      for each site          directions, and who is up
        for ten minutes      angles between everyone heard there and everyone up, at once
          what is near       an upper bound of its power, over what the one heard tolerates

A segment of 10 s is kept where these bounds add up to more than is tolerated. It is then looked at second by
second, in ``conflicts``. Memory is that of one block.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.stations import stations
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.run import Run
from passplan.link.budget import Floats, dish_gain_dbi, free_space_loss_db, off_nadir_deg
from passplan.link.chains import Chain, chains_between, radiated_dbw
from passplan.link.interference import beam_of, downlinks_of, spectrum_share
from passplan.link.profiles import pattern_loss_db
from passplan.link.sun_noise import way_between

Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

SEGMENT_S = 10
NEGLECTED = 0.02
"""What is left out adds up to less than this share of what is tolerated: 0.09 dB."""

_BLOCK_S = 3_600
_STRETCH = 60
_ANGLES_DEG = np.concatenate([np.arange(0.0, 5.0, 0.002), np.arange(5.0, 180.5, 0.05)])
# Ranges at the ends of a segment miss the nearest point between them by up to 0.02 dB in power at 500 km.
_RANGE_SLACK = 1.02
# Refraction lifts the lower of two more; at the horizon it takes up to a sixth off the angle between them.
_LIFTED_SHARE = 0.8
# Directions run along arcs, not along straight lines between samples: so far from them at most.
_BENT = 0.01


@dataclass(frozen=True)
class Listener:
    """One downlink chain of one spacecraft on one antenna, with its peak gain [dBi] and beamwidth [deg]."""

    victim: str
    antenna: str
    site: str
    chain: Chain
    peak_dbi: float
    width_deg: float


@dataclass(frozen=True, eq=False)
class Suspects:
    """For one listener: the segments of 10 s (counted from the horizon's start) and the spacecraft to look at."""

    listener: Listener
    segment: Ints
    interferer: tuple[str, ...]


def listeners_of(run: Run, windows: pd.DataFrame) -> list[Listener]:
    """Every chain of the windows that can be judged: its beam is known, and another one shares its spectrum."""
    found = []
    for victim, antenna in sorted(set(zip(windows["spacecraft"], windows["antenna"], strict=True))):
        for chain in chains_between(run, victim, antenna):
            beam = None if chain.receiver is None else beam_of(chain.receiver, chain.frequency_mhz)
            if beam is not None:
                found.append(Listener(victim, antenna, run.antennas[antenna].site, chain, *beam))
    return found


def least_share(run: Run) -> float:
    """Who disturbs by less than this share of what is tolerated is left out: as many send as there are antennas."""
    return NEGLECTED / len(run.antennas)


def find_suspects(run: Run, windows: pd.DataFrame, required_db: float) -> Iterator[Suspects]:
    """Every segment in which the interference to somebody heard could be more than ``required_db`` permits."""
    names = list(run.orbits)
    listeners = listeners_of(run, windows)
    power = _powers(run, listeners, names, required_db)
    heard = np.flatnonzero(power.any(axis=1))
    listeners, power = [listeners[k] for k in heard.tolist()], power[heard]
    if not listeners:
        return
    involved = np.flatnonzero(power.any(axis=0) | np.isin(names, [entry.victim for entry in listeners]))
    names, power = [names[k] for k in involved.tolist()], power[:, involved]
    least = least_share(run)
    spans = _spans(run, windows, listeners)
    places = np.array([entry.site for entry in listeners])
    by_site = {site: np.flatnonzero(places == site) for site in run.sites}
    origin_s = float(utc_seconds(run.start_utc))
    for begin_s in range(0, run.horizon_s, _BLOCK_S):
        steps = np.arange(begin_s // SEGMENT_S, -(-min(begin_s + _BLOCK_S, run.horizon_s) // SEGMENT_S) + 1)
        times_s = origin_s + float(SEGMENT_S) * steps.astype(np.float64)
        positions_km = np.stack([states_itrf(run.orbits[name], times_s)[0] for name in names], axis=1)
        active = _active(spans, len(listeners), steps[:-1])
        for site, mine in by_site.items():
            here = mine[active[mine].any(axis=1)]
            if here.size:
                known = [listeners[k] for k in here.tolist()]
                scene = _Scene(run, site, known, names, power[here], positions_km, least)
                yield from scene.suspects(int(steps[0]), active[here])


class _Scene:
    """One site for one block of time: who is heard there, and everybody that is up."""

    def __init__(
        self, run: Run, site: str, listeners: Sequence[Listener], names: Sequence[str], power: Floats,
        positions_km: Floats, least: float,
    ) -> None:
        self.listeners, self.names = listeners, names
        here = stations([run.sites[site]])
        refraction = run.policy.refraction != "off"
        self.squeeze = _LIFTED_SHARE if refraction else 1.0
        line_km = positions_km - here.positions_km
        self.range_km = np.linalg.norm(line_km, axis=2)
        self.direction = line_km / self.range_km[:, :, None]
        # Refraction shows what is up to 1 deg below the horizon. NaN, where an orbit has no answer, is not up.
        self.up = self.direction @ here.up[0] > (-0.02 if refraction else 0.0)
        column = {name: k for k, name in enumerate(names)}
        self.craft = np.array([column[entry.victim] for entry in listeners])
        self.beam = np.array([(entry.peak_dbi, entry.width_deg) for entry in listeners])
        # Times ``power`` and over the other's range squared: its power over what is tolerated, both amid the beam.
        self.power, self.least = power, least
        self.own = self.range_km[:, self.craft] ** 2
        place = run.sites[site]
        for k, entry in enumerate(listeners):
            if entry.chain.pattern:
                own_km, up = self.range_km[:, self.craft[k]], self.direction[:, self.craft[k]] @ here.up[0]
                elevation = np.degrees(np.arcsin(np.clip(up, -1.0, 1.0)))
                angle = off_nadir_deg(elevation, own_km, place.latitude_deg, place.height_m)
                self.own[:, k] *= 10.0 ** (pattern_loss_db(entry.chain.pattern, angle) / 10.0)

    def suspects(self, first: int, active: Flags) -> Iterator[Suspects]:
        """What there is from segment ``first`` on; ``active`` (listeners, segments) is where each is heard."""
        segments = active.shape[1]
        for low in range(0, segments, _STRETCH):
            high = min(low + _STRETCH, segments)
            heard = np.flatnonzero(active[:, low:high].any(axis=1))
            seen = np.flatnonzero(self.up[low : high + 1].any(axis=0) & (self.power[heard] > 0.0).any(axis=0))
            if heard.size and seen.size:
                yield from self._stretch(first, low, high, heard, seen, active)

    def _stretch(self, first: int, low: int, high: int, heard: Ints, seen: Ints, active: Flags) -> Iterator[Suspects]:
        part = slice(low, high + 1)
        there = self.direction[part]
        wanted, other = there[:, self.craft[heard]], there[:, seen]
        near_km = np.where(self.up[part][:, seen], self.range_km[part][:, seen], np.inf)
        nearest_km = np.min(near_km, axis=0)
        power, own = self.power[np.ix_(heard, seen)], self.own[part][:, heard]
        most = power * np.fmax.reduce(own, axis=0)[:, None] / nearest_km**2
        reach = self._reach_chord(heard, most)
        chord = np.sqrt(np.maximum(2.0 - 2.0 * (wanted @ other.transpose(0, 2, 1)), 0.0))
        own_step = np.linalg.norm(np.diff(wanted, axis=0), axis=2)
        other_step = np.linalg.norm(np.diff(other, axis=0), axis=2)
        # Between two samples the distance cannot fall below half of what both and the way between them leave.
        near = chord[:-1] + chord[1:] <= 2.0 * reach + own_step[:, :, None] + other_step[:, None, :]
        up = self.up[part][:, seen]
        near &= (up[:-1] | up[1:])[:, None, :] & active[heard, low:high].T[:, :, None]
        at, who, whom = np.nonzero(near)
        away = wanted[at, who] - other[at, whom], wanted[at + 1, who] - other[at + 1, whom]
        bend = (own_step[at, who] ** 2 + other_step[at, whom] ** 2) / 4.0
        angle = np.degrees(2.0 * np.arcsin(np.clip(way_between(*away) / 2.0, 0.0, 1.0)))
        angle = np.maximum(angle * self.squeeze - np.degrees(bend), 0.0)
        entry = [self.listeners[k] for k in heard.tolist()]
        peak, width = self.beam[heard][who].T
        aside = 10.0 ** ((dish_gain_dbi(angle, peak, width) - peak) / 10.0)
        strength = [own[at + k, who] / self.range_km[part][at + k, seen[whom]] ** 2 for k in (0, 1)]
        share = _RANGE_SLACK * power[who, whom] * aside * np.fmax(*strength)
        key = at * heard.size + who
        total = np.bincount(key, share, minlength=(high - low) * heard.size)
        keep = (total[key] > 1.0) & (share >= self.least)
        for k in np.unique(who[keep]).tolist():
            mine = keep & (who == k)
            yield Suspects(entry[k], first + low + at[mine], tuple(self.names[j] for j in seen[whom[mine]].tolist()))

    def _reach_chord(self, heard: Ints, most: Floats) -> Floats:
        """Beyond this distance of unit vectors, (listeners, others), nothing is heard that would count; else -1."""
        found = np.empty(most.shape)
        beam = self.beam[heard]
        for peak_dbi, width_deg in np.unique(beam, axis=0).tolist():
            mine = np.flatnonzero((beam == (peak_dbi, width_deg)).all(axis=1))
            count = np.searchsorted(_rise(peak_dbi, width_deg), -self.least / np.maximum(most[mine], 1e-30), "right")
            angle = _ANGLES_DEG[np.minimum(count, _ANGLES_DEG.size - 1)] / self.squeeze
            chord = 2.0 * np.sin(np.radians(np.minimum(angle, 180.0)) / 2.0) + _BENT
            found[mine] = np.where(count > 0, chord, -1.0)
        return found


@lru_cache(maxsize=256)
def _rise(peak_dbi: float, width_deg: float) -> Floats:
    """Minus the gain at ``_ANGLES_DEG`` over that on the axis: it rises, as a search wants it."""
    return np.asarray(-(10.0 ** ((dish_gain_dbi(_ANGLES_DEG, peak_dbi, width_deg) - peak_dbi) / 10.0)))


def _powers(run: Run, listeners: Sequence[Listener], names: Sequence[str], required_db: float) -> Floats:
    """What each spacecraft sends into the band of each listener, over what it tolerates, (listeners, names).

    Both amid the beam and 1 km away, without a pattern aboard, crossed polarisation or air. Nothing of its own.
    """
    column = {name: k for k, name in enumerate(names)}
    bands: dict[str, Floats] = {}
    power = np.zeros((len(listeners), len(names)))
    for row, entry in enumerate(listeners):
        chain = entry.chain
        if chain.radio not in bands:
            bands[chain.radio] = np.array([_in_band_w(run, chain, name) for name in names])
        carrier_dbw = chain.eirp_dbw - chain.pointing_loss_aboard_db - chain.polarisation_loss_db
        tolerated_dbw = carrier_dbw - float(free_space_loss_db(chain.frequency_mhz, 1.0)) - required_db
        power[row] = bands[chain.radio] / 10.0 ** (tolerated_dbw / 10.0)
        power[row, column[entry.victim]] = 0.0
    return power


def _in_band_w(run: Run, chain: Chain, name: str) -> float:
    """What a spacecraft sends into the band of a chain over all its links, 1 km away."""
    return run.spacecraft[name].links * math.fsum(
        spectrum_share(run, chain, radio)
        * 10.0 ** ((radiated_dbw(radio) - float(free_space_loss_db(radio.frequency_mhz, 1.0))) / 10.0)
        for radio in downlinks_of(run, name)
    )


def _spans(run: Run, windows: pd.DataFrame, listeners: Sequence[Listener]) -> tuple[Ints, Ints, Ints]:
    """Of every window of every listener: the listener, its first segment, and the one after its last."""
    start_s = float(utc_seconds(run.start_utc))
    first = np.floor((utc_seconds(windows["aos_utc"].to_numpy()) - start_s) / SEGMENT_S).astype(np.int64)
    after = np.ceil((utc_seconds(windows["los_utc"].to_numpy()) - start_s) / SEGMENT_S).astype(np.int64)
    rows = windows.groupby(["spacecraft", "antenna"], sort=False).indices
    own = [np.asarray(rows[entry.victim, entry.antenna]) for entry in listeners]
    row = np.concatenate(own)
    return np.repeat(np.arange(len(own)), [part.size for part in own]), first[row], after[row]


def _active(spans: tuple[Ints, Ints, Ints], count: int, segments: Ints) -> Flags:
    """In which of the (consecutive) segments each of ``count`` listeners has a window, (listeners, segments)."""
    origin, size = int(segments[0]), segments.size
    found = np.zeros((count, size), bool)
    who, first, after = spans
    near = (first < origin + size) & (after > origin)
    for row, low, high in zip(*(part[near].tolist() for part in (who, first - origin, after - origin)), strict=True):
        found[row, max(low, 0) : high] = True
    return found
