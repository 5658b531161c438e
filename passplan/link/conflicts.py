"""When two, or several, spacecraft of the fleet must not send at once: looked at second by second.

The search in ``interference_scan`` says where to look. Each second gets the worst of its way: the least angle
between the two directions and the less favourable of its ends. What comes out of it is of two kinds:

    pair      this one alone is more than the one heard tolerates
    crowd     each one alone would do, but all of them together are more than it tolerates

A crowd says by how much each of them counts, so that the plan may use those that go together.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from passplan.geometry.pointing import LookAngles, look_angles
from passplan.geometry.sun import pointing_vectors
from passplan.inputs.run import Run
from passplan.link.budget import Floats
from passplan.link.interference import c_over_i_db
from passplan.link.interference_scan import SEGMENT_S, Ints, Listener, Suspects, find_suspects, least_share
from passplan.link.sun_noise import way_between

# Segments of one pair looked at together, so that memory stays flat.
_TOGETHER = 20_000


@dataclass(frozen=True)
class InterferencePair:
    """While ``victim`` is heard on ``antenna`` from ``start_s`` to ``end_s`` (whole seconds), ``interferer`` must
    not send; ``worst_db`` is the least C/I of that time."""

    victim: str
    antenna: str
    interferer: str
    start_s: int
    end_s: int
    worst_db: float


@dataclass(frozen=True)
class InterferenceCrowd:
    """While ``victim`` is heard on ``antenna``, the ``shares`` of those ``interferers`` that send must not exceed 1.

    A share is the power of one of them over what the victim tolerates, its greatest from ``start_s`` to ``end_s``
    (whole seconds, 10 s at most).
    """

    victim: str
    antenna: str
    interferers: tuple[str, ...]
    shares: tuple[float, ...]
    start_s: int
    end_s: int


@dataclass(frozen=True)
class Interference:
    """Everything that must not be sent at once, in order of time."""

    pairs: tuple[InterferencePair, ...] = ()
    crowds: tuple[InterferenceCrowd, ...] = ()


def find_interference(run: Run, windows: pd.DataFrame) -> Interference:
    """Pairs and crowds that would bring C/I below the policy's ``required_c_over_i_db``; none where that is not set.

    A receiver whose gain and beamwidth are not known is not judged. A spacecraft with several radios in the band
    is taken to send on all of them, one with a steered antenna to point here.
    """
    required_db = run.policy.required_c_over_i_db
    if required_db is None or windows.empty:
        return Interference()
    seconds: dict[tuple[str, str, str], list[tuple[int, float]]] = defaultdict(list)
    crowds: list[InterferenceCrowd] = []
    for suspects in find_suspects(run, windows, required_db):
        segments, names, shares = _shares(run, suspects, required_db)
        victim, antenna = suspects.listener.victim, suspects.listener.antenna
        for at, whom, second in np.argwhere(shares > 1.0).tolist():
            share = float(shares[at, whom, second])
            seconds[victim, antenna, names[whom]].append((int(segments[at]) * SEGMENT_S + second, share))
        crowds += _crowds(suspects.listener, segments, names, np.where(shares > 1.0, 0.0, shares), least_share(run))
    pairs = [
        InterferencePair(*key, start_s, end_s, required_db - 10.0 * float(np.log10(share)))
        for key, found in seconds.items() for start_s, end_s, share in _runs(found)
    ]
    return Interference(
        tuple(sorted(pairs, key=lambda p: (p.start_s, p.victim, p.antenna, p.interferer))),
        tuple(sorted(set(crowds), key=lambda c: (c.start_s, c.victim, c.antenna, c.interferers, c.shares))),
    )


def _shares(run: Run, suspects: Suspects, required_db: float) -> tuple[Ints, list[str], Floats]:
    """The segments, the interferers, and their shares in each second, (segments, interferers, seconds)."""
    listener = suspects.listener
    segments, at = np.unique(suspects.segment, return_inverse=True)
    names = sorted(set(suspects.interferer))
    whom = np.array([names.index(name) for name in suspects.interferer])
    shares = np.zeros((segments.size, len(names), SEGMENT_S))
    wanted = _looks(run, listener.victim, listener.site, segments)
    for k, name in enumerate(names):
        mine = np.unique(at[whom == k])
        for low in range(0, mine.size, _TOGETHER):
            part = mine[low : low + _TOGETHER]
            other = _looks(run, name, listener.site, segments[part])
            ratio_db = _worst_db(run, listener, name, _take(wanted, part), other)
            shares[part, k] = 10.0 ** ((required_db - ratio_db) / 10.0)
    return segments, names, shares


def _looks(run: Run, craft: str, site: str, segments: Ints) -> LookAngles:
    """Pointing at the ends of every second of the segments, each of shape (segments, seconds + 1)."""
    seconds = segments[:, None] * SEGMENT_S + np.arange(SEGMENT_S + 1)
    times, place = np.unique(seconds, return_inverse=True)
    instants = run.start_utc + times.astype("timedelta64[s]")
    found = look_angles(run.orbits[craft], run.sites[site], instants, refraction=run.policy.refraction != "off")
    return _take(found, place.reshape(seconds.shape))


def _worst_db(run: Run, listener: Listener, interferer: str, wanted: LookAngles, other: LookAngles) -> Floats:
    """Least C/I [dB] of each second, (segments, seconds)."""
    away = pointing_vectors(wanted.azimuth_deg.ravel(), wanted.elevation_deg.ravel()) - pointing_vectors(
        other.azimuth_deg.ravel(), other.elevation_deg.ravel()
    )
    away = away.reshape(*wanted.azimuth_deg.shape, 3)
    before, after = away[:, :-1].reshape(-1, 3), away[:, 1:].reshape(-1, 3)
    apart_deg = np.degrees(2.0 * np.arcsin(np.clip(way_between(before, after) / 2.0, 0.0, 1.0)))
    site = run.sites[listener.site]
    ends = []
    for end in (slice(0, -1), slice(1, None)):
        looks = tuple(_flat(entry, end) for entry in (wanted, other))
        ratio_db = c_over_i_db(run, listener.chain, interferer, site, (looks[0], looks[1]), apart_deg)
        # NaN: an orbit that has no answer there, so that nothing is sent.
        ends.append(np.nan_to_num(ratio_db, nan=np.inf, posinf=np.inf))
    return np.asarray(np.minimum(*ends)).reshape(-1, SEGMENT_S)


def _crowds(
    listener: Listener, segments: Ints, names: Sequence[str], shares: Floats, least: float
) -> Iterable[InterferenceCrowd]:
    """Runs of seconds of a segment in which the same ones are together too much."""
    for at in np.flatnonzero((shares.sum(axis=1) > 1.0).any(axis=1)).tolist():
        tight = shares[at].sum(axis=0) > 1.0
        counted = shares[at] >= least
        members = [tuple(np.flatnonzero(counted[:, s]).tolist()) if tight[s] else () for s in range(SEGMENT_S)]
        begin = 0
        for second in range(1, SEGMENT_S + 1):
            if second < SEGMENT_S and members[second] == members[begin]:
                continue
            who = members[begin]
            if who:
                worst = shares[at][list(who), begin:second].max(axis=1)
                start_s = int(segments[at]) * SEGMENT_S
                yield InterferenceCrowd(
                    listener.victim, listener.antenna, tuple(names[k] for k in who), tuple(worst.tolist()),
                    start_s + begin, start_s + second,
                )
            begin = second


def _runs(found: Iterable[tuple[int, float]]) -> Iterable[tuple[int, int, float]]:
    """Unbroken runs of seconds with their greatest share: (from, until, share)."""
    start_s, end_s, most = 0, -1, 0.0
    for second, share in sorted(found):
        if second > end_s:
            if end_s > start_s:
                yield start_s, end_s, most
            start_s, most = second, share
        end_s, most = second + 1, max(most, share)
    if end_s > start_s:
        yield start_s, end_s, most


def _take(look: LookAngles, index: Ints) -> LookAngles:
    return LookAngles(
        look.azimuth_deg[index], look.elevation_deg[index], look.range_km[index], look.range_rate_km_s[index]
    )


def _flat(look: LookAngles, end: slice) -> LookAngles:
    columns = (look.azimuth_deg, look.elevation_deg, look.range_km, look.range_rate_km_s)
    return LookAngles(*(column[:, end].ravel() for column in columns))
