"""The links of all windows at once: samples of the path become qualities, stretches and profiles."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from passplan.geometry.losses import Losses
from passplan.geometry.pointing import Samples
from passplan.inputs.run import Run
from passplan.link.atmosphere import SkyPath, skies
from passplan.link.budget import free_space_loss_db, off_nadir_deg
from passplan.link.chains import Chain, chains_between
from passplan.link.choice import CommandProfile, DownlinkProfile, Track, WindowLink
from passplan.link.noise import dish_of
from passplan.link.slant import SlantTable, look_up, sky_path, slant_table
from passplan.link.stretches import Floats, Ints, find_stretches
from passplan.link.sun_noise import nearest_approach_deg, sun_loss_db

__all__ = ["CommandProfile", "DownlinkProfile", "WindowLink", "link_profiles"]

# Memory stays flat: this many samples, and tables, are worked on at a time.
_BLOCK_SAMPLES = 400_000
_BLOCK_TABLES = 200


@dataclass(frozen=True)
class _Job:
    """One chain of one window, to be evaluated; ``table`` is the number of its slant table."""

    window: int
    chain: Chain
    table: int


@dataclass(frozen=True)
class _Slants:
    """What each distinct slant table is made from: the chain and the path of its sky."""

    chains: list[Chain]
    paths: list[SkyPath]

    def build(self, numbers: Sequence[int]) -> list[SlantTable]:
        found = skies(self.paths[k] for k in numbers)
        return [slant_table(self.chains[k], self.paths[k], found[self.paths[k]]) for k in numbers]


def link_profiles(
    run: Run, windows: pd.DataFrame, samples: Samples, losses: Losses | None = None
) -> list[WindowLink]:
    """The links of each window, in the order of ``windows``.

    ``samples`` are those of the same windows in the same order. The quality of a sample is the chain's
    merit less free-space loss (P.525), what depends on elevation (air, radome, noise), a fixed antenna's
    pattern, and the Sun where the policy counts it; a rung is usable where the quality exceeds its
    requirement by the policy's ``required_margin_db``. Nothing is sent in the ``losses``.
    """
    lost = losses or Losses()
    tracks: dict[int, list[Track]] = defaultdict(list)
    every, slants = _jobs(run, windows)
    for needs_db, jobs in _by_ladder(every).items():
        thresholds_db = np.array(needs_db) + run.policy.required_margin_db
        for block in _blocks(jobs, samples.offsets):
            for job, track in zip(block, _evaluate(run, block, slants, thresholds_db, samples), strict=True):
                if track.rung.size:
                    tracks[job.window].append(replace(track, lost=lost.of(job.window, job.chain.direction)))
    return [_window_link(tracks.get(i, ())) for i in range(len(windows))]


def _jobs(run: Run, windows: pd.DataFrame) -> tuple[list[_Job], _Slants]:
    of_pair: dict[tuple[str, str], list[tuple[Chain, int]]] = {}
    numbers: dict[object, int] = {}
    slants = _Slants([], [])
    pairs = list(zip(windows["spacecraft"], windows["antenna"], strict=True))
    for pair in dict.fromkeys(pairs):
        of_pair[pair] = []
        for chain in chains_between(run, *pair):
            path = sky_path(run, pair[1], chain)
            key = (path, None if chain.receiver is None else chain.receiver.name, chain.wet_radome_loss_db)
            if key not in numbers:
                numbers[key] = len(numbers)
                slants.chains.append(chain)
                slants.paths.append(path)
            of_pair[pair].append((chain, numbers[key]))
    # All at once, so that the cache of gas is read once.
    skies(slants.paths)
    return [_Job(i, *entry) for i, pair in enumerate(pairs) for entry in of_pair[pair]], slants


def _by_ladder(jobs: Sequence[_Job]) -> Mapping[tuple[float, ...], list[_Job]]:
    """Jobs whose rungs have the same requirements are searched together, those of one table side by side."""
    groups: dict[tuple[float, ...], list[_Job]] = defaultdict(list)
    for job in sorted(jobs, key=lambda job: (job.table, job.chain.radio)):
        groups[job.chain.needs_db].append(job)
    return groups


def _blocks(jobs: Sequence[_Job], offsets: Ints) -> Iterator[Sequence[_Job]]:
    sizes = np.array([offsets[job.window + 1] - offsets[job.window] for job in jobs], np.int64)
    tables = np.cumsum(np.diff([job.table for job in jobs], prepend=jobs[0].table) != 0)
    block_of = np.maximum(np.cumsum(sizes) // _BLOCK_SAMPLES, tables // _BLOCK_TABLES)
    edges = np.flatnonzero(np.diff(block_of, prepend=-1)).tolist()
    for begin, end in zip(edges, [*edges[1:], len(jobs)], strict=True):
        yield jobs[begin:end]


def _evaluate(
    run: Run, jobs: Sequence[_Job], slants: _Slants, thresholds_db: Floats, samples: Samples
) -> Iterator[Track]:
    """The track of each job, all of them in one sweep over their samples."""
    begins = np.array([samples.offsets[job.window] for job in jobs], np.int64)
    sizes = np.array([samples.offsets[job.window + 1] for job in jobs], np.int64) - begins
    offsets = np.concatenate(([0], np.cumsum(sizes)))
    pick = np.arange(offsets[-1]) + np.repeat(begins - offsets[:-1], sizes)
    numbers, row = np.unique([job.table for job in jobs], return_inverse=True)
    tables = slants.build(numbers.tolist())
    elevation_deg = samples.elevation_deg[pick]
    merit_db = np.repeat([job.chain.merit_db for job in jobs], sizes)
    frequency_mhz = np.repeat([job.chain.frequency_mhz for job in jobs], sizes)
    slant_db = look_up(np.stack([table.loss_db for table in tables]), np.repeat(row, sizes), elevation_deg)
    quality_db = merit_db - free_space_loss_db(frequency_mhz, samples.range_km[pick]) - slant_db
    sampled = Samples(samples.time_s[pick], samples.azimuth_deg[pick], elevation_deg, samples.range_km[pick],
                      samples.range_rate_km_s[pick], offsets)
    for same in _alike(jobs):
        chain = jobs[same.start].chain
        if chain.pattern or run.policy.sun_noise:
            path, table = slants.paths[jobs[same.start].table], tables[row[same.start]]
            part = slice(offsets[same.start], offsets[same.stop])
            quality_db[part] -= _moving_loss_db(run, path, chain, table, sampled, same)
    time_s = sampled.time_s
    found = find_stretches(time_s, quality_db, offsets, thresholds_db)
    for k, job in enumerate(jobs):
        own = slice(offsets[k], offsets[k + 1])
        yield Track(job.chain, time_s[own], quality_db[own], *found.of(k), run.policy.required_margin_db)


def _alike(jobs: Sequence[_Job]) -> Iterator[range]:
    """Runs of jobs of one slant table and one radio, whose chains differ in nothing that moves."""
    first = 0
    for k in range(1, len(jobs) + 1):
        if k == len(jobs) or (jobs[k].table, jobs[k].chain.radio) != (jobs[first].table, jobs[first].chain.radio):
            yield range(first, k)
            first = k


def _moving_loss_db(
    run: Run, path: SkyPath, chain: Chain, table: SlantTable, samples: Samples, same: range
) -> Floats | float:
    """Loss of some tracks that depends on more than elevation: the pattern aboard, and the Sun."""
    own = slice(samples.offsets[same.start], samples.offsets[same.stop])
    loss_db: Floats | float = 0.0
    if chain.pattern:
        site = path.site
        angle = off_nadir_deg(samples.elevation_deg[own], samples.range_km[own], site.latitude_deg, site.height_m)
        loss_db = loss_db + pattern_loss_db(chain.pattern, angle)
    if run.policy.sun_noise and chain.receiver is not None and table.noise_k is not None:
        width_deg = dish_of(chain.receiver, chain.frequency_mhz)[1]
        if width_deg is not None:
            times = run.start_utc + np.rint(samples.time_s[own] * 1e3).astype("timedelta64[ms]")
            opens = np.zeros(times.size, bool)
            opens[samples.offsets[same.start : same.stop] - samples.offsets[same.start]] = True
            separation = nearest_approach_deg(
                path.site, times, samples.azimuth_deg[own], samples.elevation_deg[own],
                refraction=run.policy.refraction != "off", opens=opens,
            )
            first = np.zeros(separation.size, np.int64)
            noise_k = look_up(table.noise_k[None, :], first, samples.elevation_deg[own])
            feeder_db = chain.receiver.feeder_loss_db
            loss_db = loss_db + sun_loss_db(chain.frequency_mhz, width_deg, separation, noise_k, feeder_db)
    return loss_db


def pattern_loss_db(pattern: Sequence[tuple[float, float]], angle_deg: Floats) -> Floats:
    """Loss [dB] of a fixed antenna at angles off its boresight [deg], by straight lines between its points."""
    angles, losses = np.array(pattern, np.float64).T
    return np.asarray(np.interp(angle_deg, angles, losses))


def _window_link(tracks: Sequence[Track]) -> WindowLink:
    # Ladders are worked through in no order of their own; sort, so that ties end the same way every time.
    ordered = sorted(tracks, key=lambda track: (track.chain.radio, track.chain.partner))
    down = tuple(track for track in ordered if track.chain.direction == "downlink")
    up = tuple(track for track in ordered if track.chain.direction == "command")
    return WindowLink(DownlinkProfile(down) if down else None, CommandProfile(up) if up else None)
