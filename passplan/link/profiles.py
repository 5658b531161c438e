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
from passplan.link.atmosphere import Quantity, ZenithGas, gas_attenuation_db, gas_tables
from passplan.link.budget import free_space_loss_db
from passplan.link.chains import Chain, chains_between
from passplan.link.choice import CommandProfile, DownlinkProfile, Track, WindowLink
from passplan.link.stretches import Floats, Ints, find_stretches

__all__ = ["CommandProfile", "DownlinkProfile", "WindowLink", "link_profiles"]

# Memory stays flat: this many samples are worked on at a time.
_BLOCK_SAMPLES = 400_000


@dataclass(frozen=True)
class _Job:
    """One chain of one window, to be evaluated."""

    window: int
    chain: Chain
    gas: ZenithGas


def link_profiles(
    run: Run, windows: pd.DataFrame, samples: Samples, losses: Losses | None = None
) -> list[WindowLink]:
    """The links of each window, in the order of ``windows``.

    ``samples`` are those of the same windows in the same order. The quality of a sample is the chain's
    merit less free-space loss (P.525) and gas attenuation (P.676); a rung is usable where the quality
    exceeds its requirement by the policy's ``required_margin_db``. Nothing is sent in the ``losses``.
    """
    lost = losses or Losses()
    tracks: dict[int, list[Track]] = defaultdict(list)
    for needs_db, jobs in _by_ladder(_jobs(run, windows)).items():
        thresholds_db = np.array(needs_db) + run.policy.required_margin_db
        for block in _blocks(jobs, samples.offsets):
            for job, track in zip(block, _evaluate(block, thresholds_db, samples), strict=True):
                if track.rung.size:
                    tracks[job.window].append(replace(track, lost=lost.of(job.window, job.chain.direction)))
    return [_window_link(tracks.get(i, ())) for i in range(len(windows))]


def _jobs(run: Run, windows: pd.DataFrame) -> list[_Job]:
    chains: dict[tuple[str, str], tuple[Chain, ...]] = {}
    pairs = list(zip(windows["spacecraft"], windows["antenna"], strict=True))
    for pair in pairs:
        if pair not in chains:
            chains[pair] = chains_between(run, *pair)
    site_of = {name: run.sites[antenna.site] for name, antenna in run.antennas.items()}
    gas = gas_tables((site_of[name], chain.frequency_mhz) for (_, name), pair in chains.items() for chain in pair)
    return [
        _Job(i, chain, gas[site_of[antenna].name, chain.frequency_mhz])
        for i, (craft, antenna) in enumerate(pairs)
        for chain in chains[craft, antenna]
    ]


def _by_ladder(jobs: Sequence[_Job]) -> Mapping[tuple[float, ...], list[_Job]]:
    """Jobs whose rungs have the same requirements are searched together."""
    groups: dict[tuple[float, ...], list[_Job]] = defaultdict(list)
    for job in jobs:
        groups[tuple(rung.required_db for rung in job.chain.rungs)].append(job)
    return groups


def _blocks(jobs: Sequence[_Job], offsets: Ints) -> Iterator[Sequence[_Job]]:
    sizes = np.array([offsets[job.window + 1] - offsets[job.window] for job in jobs], np.int64)
    block_of = np.cumsum(sizes) // _BLOCK_SAMPLES
    edges = np.flatnonzero(np.diff(block_of, prepend=-1)).tolist()
    for begin, end in zip(edges, [*edges[1:], len(jobs)], strict=True):
        yield jobs[begin:end]


def _evaluate(jobs: Sequence[_Job], thresholds_db: Floats, samples: Samples) -> Iterator[Track]:
    """The track of each job, all of them in one sweep over their samples."""
    begins = np.array([samples.offsets[job.window] for job in jobs], np.int64)
    sizes = np.array([samples.offsets[job.window + 1] for job in jobs], np.int64) - begins
    offsets = np.concatenate(([0], np.cumsum(sizes)))
    pick = np.arange(offsets[-1]) + np.repeat(begins - offsets[:-1], sizes)
    merit_db, frequency_mhz, oxygen_db, vapour_db, oxygen_km, vapour_km = np.repeat(
        np.array([_constants(job) for job in jobs]), sizes, axis=0
    ).T
    time_s = samples.time_s[pick]
    gas_db = gas_attenuation_db(
        ZenithGas(oxygen_db, vapour_db, oxygen_km, vapour_km), samples.elevation_deg[pick]
    )
    quality_db = merit_db - free_space_loss_db(frequency_mhz, samples.range_km[pick]) - gas_db
    found = find_stretches(time_s, quality_db, offsets, thresholds_db)
    for k, job in enumerate(jobs):
        own, some = slice(offsets[k], offsets[k + 1]), slice(found.offsets[k], found.offsets[k + 1])
        yield Track(
            job.chain, time_s[own], quality_db[own], found.rung[some], found.first_s[some], found.last_s[some]
        )


def _constants(job: _Job) -> tuple[Quantity, ...]:
    gas = job.gas
    return (
        job.chain.merit_db, job.chain.frequency_mhz,
        gas.oxygen_db, gas.vapour_db, gas.oxygen_height_km, gas.vapour_height_km,
    )


def _window_link(tracks: Sequence[Track]) -> WindowLink:
    # Ladders are worked through in no order of their own; sort, so that ties end the same way every time.
    ordered = sorted(tracks, key=lambda track: (track.chain.radio, track.chain.partner))
    down = tuple(track for track in ordered if track.chain.direction == "downlink")
    up = tuple(track for track in ordered if track.chain.direction == "command")
    return WindowLink(DownlinkProfile(down) if down else None, CommandProfile(up) if up else None)
