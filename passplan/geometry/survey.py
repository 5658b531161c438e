"""Windows as the antennas' mechanics, manoeuvres and the Sun leave them: cut at their ends, with losses inside."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.losses import Cause, Loss, Losses
from passplan.geometry.pointing import Samples, sample_windows
from passplan.geometry.pursuit import Pursuers, keyholes
from passplan.geometry.sun import sun_separations_deg
from passplan.geometry.timescale import Floats, utc_seconds
from passplan.geometry.transmit import transmit_clearance
from passplan.geometry.travel import choose_branch, roomiest_turns_deg, runs_unwrapped_deg, unwrapped_deg
from passplan.geometry.trim import trimmed
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

_STEP_S, _WIDE_STEP_S = 4.0, 30.0
_STEEP_DEG, _SPARE_DEG = 85.0, 2.0


@dataclass(frozen=True)
class Ground:
    """What the survey needs to know of the antennas; ``permitted_deg`` is the largest pointing error, by antenna."""

    antennas: Mapping[str, Antenna]
    sites: Mapping[str, Site]
    mounts: Mapping[str, Mount]
    permitted_deg: Mapping[str, float]
    refraction: bool = False

    def mount(self, antenna: str) -> Mount | None:
        """The mount of an antenna."""
        return self.mounts.get(self.antennas[antenna].mount or "")

    def pursuers(self) -> Pursuers:
        """The antennas whose mounts may be too slow for a stated pointing error."""
        moving = {
            name: mount for name in self.antennas
            if (mount := self.mount(name)) and mount.moves and self.permitted_deg[name] < 180.0
        }
        places = {name: self.sites[self.antennas[name].site] for name in moving}
        return Pursuers(moving, places, self.permitted_deg, self.refraction)


def cut_by_travel(windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground) -> pd.DataFrame:
    """``windows`` cut to what the azimuth travel of their antennas allows on the branch chosen before each pass."""
    limited = [name for name in ground.antennas if (m := ground.mount(name)) and _has_travel(m)]
    rows = np.flatnonzero(windows["antenna"].isin(limited).to_numpy())
    if not rows.size:
        return windows
    rows = rows[_may_run_out(windows.iloc[rows], orbits, ground)]
    if not rows.size:
        return windows
    samples = _samples(windows.iloc[rows], orbits, ground, _STEP_S)
    starts = utc_seconds(windows["aos_utc"].to_numpy()).copy()
    ends = utc_seconds(windows["los_utc"].to_numpy()).copy()
    for k, row in enumerate(rows.tolist()):
        mount = ground.mount(str(windows["antenna"].iat[row]))
        own = slice(samples.offsets[k], samples.offsets[k + 1])
        if mount is not None:
            branch = choose_branch(mount, samples.time_s[own], unwrapped_deg(samples.azimuth_deg[own]))
            if not branch.whole:
                starts[row], ends[row] = branch.start_s, branch.end_s
    return trimmed(windows, starts, ends, orbits, ground.sites, refraction=ground.refraction)


def _may_run_out(table: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground) -> NDArray[np.int64]:
    """The rows of ``table`` that come near an end of the azimuth travel, or so near the zenith that it is not clear.

    Where the azimuth turns back between two samples it goes beyond them by half its change, a / h with the
    acceleration a seen from the Earth and the level distance h, times the square of half a step: less than
    2 deg at 50 km and more, which is everything but steep passes.
    """
    samples = _samples(table, orbits, ground, _WIDE_STEP_S)
    track = runs_unwrapped_deg(samples.azimuth_deg, samples.offsets)
    lowest = np.minimum.reduceat(track, samples.offsets[:-1])
    highest = np.maximum.reduceat(track, samples.offsets[:-1])
    doubtful = table["peak_elevation_deg"].to_numpy() > _STEEP_DEG
    codes, names = pd.factorize(table["antenna"])
    for code, name in enumerate(names):
        mine, mount = codes == code, ground.mount(str(name))
        if mount is not None:
            doubtful[mine] |= roomiest_turns_deg(mount, lowest[mine], highest[mine])[1] < _SPARE_DEG
    return np.flatnonzero(doubtful)


def find_losses(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground, start_utc: np.datetime64,
    guard_sigmas: float = 0.0,
) -> Losses:
    """Every interval lost inside ``windows``, in seconds from ``start_utc``.

    *keyhole*: the mount is too slow (see :mod:`passplan.geometry.pursuit`); *guard*: within ``guard_sigmas``
    times the timing sigma of AOS or LOS, unless the horizon cuts there; *sun*: the beam is nearer to the Sun
    than the antenna allows; *transmit*: outside the limits for sending.
    """
    origin = float(utc_seconds(start_utc))
    found = list(_guards(windows, origin, guard_sigmas))
    for row, start, end in keyholes(windows, orbits, ground.sites, ground.pursuers()):
        found.append(Loss(row, start - origin, end - origin, "keyhole"))
    watched = [name for name, antenna in ground.antennas.items() if _watched(antenna)]
    rows = np.flatnonzero(windows["antenna"].isin(watched).to_numpy())
    if rows.size:
        table = windows.iloc[rows]
        samples = _samples(table, orbits, ground, _STEP_S)
        for row, start, end, cause in _blocked(table, samples, ground):
            found.append(Loss(int(rows[row]), start - origin, end - origin, cause))
    return Losses(tuple(sorted(found, key=lambda loss: (loss.window, loss.start_s, loss.cause))))


def _blocked(
    table: pd.DataFrame, samples: Samples, ground: Ground
) -> Iterator[tuple[int, float, float, Cause]]:
    """(row of ``table``, start and end in utc_s, cause) of directions in which nothing may be sent or received."""
    codes, names = pd.factorize(table["antenna"])
    row_of = np.repeat(np.arange(len(table)), np.diff(samples.offsets))
    for code, name in enumerate(names):
        antenna = ground.antennas[str(name)]
        site = ground.sites[antenna.site]
        pick = np.flatnonzero(codes[row_of] == code)
        row, time = row_of[pick], samples.time_s[pick]
        azimuth, elevation = samples.azimuth_deg[pick], samples.elevation_deg[pick]
        clearance = transmit_clearance(antenna, site)
        if clearance is not None:
            yield from _below_zero(row, time, clearance(azimuth, elevation), "transmit")
        if antenna.sun_keep_out_deg is not None:
            sites = np.full(row.size, antenna.site)
            apart = sun_separations_deg(
                ground.sites, sites, time, azimuth, elevation, refraction=ground.refraction)
            yield from _below_zero(row, time, apart - antenna.sun_keep_out_deg, "sun")


def _below_zero(
    row: NDArray[np.int64], time: Floats, clearance: Floats, cause: Cause
) -> Iterator[tuple[int, float, float, Cause]]:
    """Intervals in which a sampled clearance is negative, joined by straight lines, window by window."""
    under = clearance < 0.0
    opens = np.concatenate(([True], row[1:] != row[:-1]))
    closes = np.concatenate((opens[1:], [True]))
    begins = np.flatnonzero(under & (opens | ~np.concatenate(([False], under[:-1]))))
    ends = np.flatnonzero(under & (closes | ~np.concatenate((under[1:], [False]))))
    for a, b in zip(begins.tolist(), ends.tolist(), strict=True):
        start, end = time[a], time[b]
        if not opens[a]:
            start -= (time[a] - time[a - 1]) * clearance[a] / (clearance[a] - clearance[a - 1])
        if not closes[b]:
            end += (time[b + 1] - time[b]) * clearance[b] / (clearance[b] - clearance[b + 1])
        yield int(row[a]), float(start), float(end), cause


def _guards(windows: pd.DataFrame, origin: float, sigmas: float) -> Iterator[Loss]:
    if sigmas <= 0.0:
        return
    aos, los = (utc_seconds(windows[c].to_numpy()) - origin for c in ("aos_utc", "los_utc"))
    guard = sigmas * windows["timing_sigma_s"].to_numpy()
    clipped = windows["clipped"].to_numpy()
    for k in range(len(windows)):
        if clipped[k] not in ("start", "both"):
            yield Loss(k, float(aos[k]), float(min(aos[k] + guard[k], los[k])), "guard")
        if clipped[k] not in ("end", "both"):
            yield Loss(k, float(max(los[k] - guard[k], aos[k])), float(los[k]), "guard")


def _samples(table: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground, step_s: float) -> Samples:
    """Samples with ``time_s`` as utc_s."""
    origin = np.datetime64("2000-01-01", "ms")
    return sample_windows(table, orbits, ground.sites, origin, step_s, refraction=ground.refraction)


def _has_travel(mount: Mount) -> bool:
    return mount.kind == "az_el" and mount.lower_from_deg is not None


def _watched(antenna: Antenna) -> bool:
    limits = (antenna.transmit_min_elevation_deg, antenna.transmit_arc_keep_out_deg, antenna.sun_keep_out_deg)
    return bool(antenna.transmit_mask or antenna.transmit_keep_out or any(limit is not None for limit in limits))
