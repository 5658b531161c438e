"""Windows as the antennas' mechanics, manoeuvres and the Sun leave them: cut at their ends, with losses inside."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.axes import axis_angles_deg
from passplan.geometry.keyhole import Axis, lost_stretches
from passplan.geometry.losses import Cause, Loss, Losses
from passplan.geometry.pointing import Samples, look, sample_windows
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.stations import stations
from passplan.geometry.sun import sun_separations_deg
from passplan.geometry.timescale import Floats, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.geometry.transmit import transmit_clearance
from passplan.geometry.travel import choose_branch, unwrapped_deg
from passplan.geometry.trim import trimmed
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

_STEP_S = 4.0
# A stretch that the axis cannot follow shows in the mean rate over a step at less than the limit itself: a pass
# 0.5 deg from the zenith turns by 60 deg or more within four seconds of its culmination.
_SUSPECT_SHARE, _SUSPECT_DEG_S = 0.5, 10.0
# Times of the closer look: coarse over the window, fine around the fastest moment.
_COARSE_S, _FINE_S, _FINE_REACH_S = 0.5, 0.02, 6.0


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


def cut_by_travel(windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground) -> pd.DataFrame:
    """``windows`` cut to what the azimuth travel of their antennas allows on the branch chosen before each pass."""
    limited = [name for name in ground.antennas if (m := ground.mount(name)) and _has_travel(m)]
    rows = np.flatnonzero(windows["antenna"].isin(limited).to_numpy())
    if not rows.size:
        return windows
    samples = _samples(windows.iloc[rows], orbits, ground)
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


def find_losses(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground, start_utc: np.datetime64,
    guard_sigmas: float = 0.0,
) -> Losses:
    """Every interval lost inside ``windows``, in seconds from ``start_utc``.

    *keyhole*: the mount is too slow (see :mod:`passplan.geometry.keyhole`); *guard*: within ``guard_sigmas``
    times the timing sigma of AOS or LOS, unless the horizon cuts there; *sun*: the beam is nearer to the Sun
    than the antenna allows; *transmit*: outside the limits for sending.
    """
    origin = float(utc_seconds(start_utc))
    found = list(_guards(windows, origin, guard_sigmas))
    watched = [name for name, antenna in ground.antennas.items() if _watched(antenna, ground.mount(name))]
    rows = np.flatnonzero(windows["antenna"].isin(watched).to_numpy())
    if rows.size:
        table = windows.iloc[rows]
        samples = _samples(table, orbits, ground)
        for number, start, end, cause in _found(table, samples, orbits, ground):
            found.append(Loss(int(rows[number]), start - origin, end - origin, cause))
    return Losses(tuple(sorted(found, key=lambda loss: (loss.window, loss.start_s, loss.cause))))


def _found(
    table: pd.DataFrame, samples: Samples, orbits: Mapping[str, OrbitSource], ground: Ground
) -> Iterator[tuple[int, float, float, Cause]]:
    """(row of ``table``, start and end in utc_s, cause), antenna by antenna."""
    antennas = table["antenna"].to_numpy()
    row_of = np.repeat(np.arange(len(table)), np.diff(samples.offsets))
    for name in pd.unique(table["antenna"]):
        antenna = ground.antennas[str(name)]
        site = ground.sites[antenna.site]
        pick = np.flatnonzero(antennas[row_of] == name)
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
        mount = ground.mount(str(name))
        if mount is not None and mount.moves:
            suspects = _suspects(mount, row, time, azimuth, elevation)
            for number, moments in suspects.items():
                one = table.iloc[[number]]
                for start, end in _keyhole(one, moments, orbits, ground, mount, ground.permitted_deg[str(name)]):
                    yield number, start, end, "keyhole"


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


def _suspects(
    mount: Mount, row: NDArray[np.int64], time: Floats, azimuth: Floats, elevation: Floats
) -> dict[int, list[float]]:
    """Windows that may ask too much of an axis, and the moments around which they do."""
    found: dict[int, list[float]] = {}
    same = np.flatnonzero(row[1:] == row[:-1])
    for angle, limit, strength in zip(axis_angles_deg(mount, azimuth, elevation), *_limits(mount), strict=True):
        if limit is None:
            continue
        step = (np.diff(angle)[same] + 180.0) % 360.0 - 180.0
        rate = np.abs(step) / np.maximum(np.diff(time)[same], 1e-3)
        over = rate > min(_SUSPECT_SHARE * limit, _SUSPECT_DEG_S)
        if strength is not None:
            signed = step / np.maximum(np.diff(time)[same], 1e-3)
            change = np.abs(np.diff(signed, prepend=signed[:1])) / _STEP_S
            over |= change > _SUSPECT_SHARE * strength
        for k in np.flatnonzero(over).tolist():
            found.setdefault(int(row[same[k]]), []).append(float(time[same[k]]) + 0.5 * _STEP_S)
    return found


def _keyhole(
    window: pd.DataFrame, moments: Sequence[float], orbits: Mapping[str, OrbitSource], ground: Ground, mount: Mount,
    permitted_deg: float,
) -> Iterator[tuple[float, float]]:
    """The stretches of one window that either axis loses, from a closer look around the suspect ``moments``."""
    aos, los = (float(utc_seconds(window[c].to_numpy())[0]) for c in ("aos_utc", "los_utc"))
    fine = [np.arange(at - _FINE_REACH_S, at + _FINE_REACH_S, _FINE_S) for at in _spread(moments)]
    times = np.unique(np.round(np.concatenate([np.arange(aos, los, _COARSE_S), [los], *fine]), 2))
    times = times[(times >= aos) & (times <= los)]
    lower, upper = axis_angles_deg(mount, *_pointing(window, times, orbits, ground))
    lower = unwrapped_deg(lower)
    rates, strengths = _limits(mount)
    for angle, carried, rate, strength in zip((lower, upper), (upper, None), rates, strengths, strict=True):
        if rate is not None:
            axis = Axis(rate, np.inf if strength is None else strength)
            yield from lost_stretches(times, angle, carried, axis, permitted_deg)


def _pointing(
    window: pd.DataFrame, times: Floats, orbits: Mapping[str, OrbitSource], ground: Ground
) -> tuple[Floats, Floats]:
    """Azimuth and elevation of a window's spacecraft at given times."""
    site = ground.sites[str(window["site"].iat[0])]
    here = stations([site]).subset(np.zeros(times.size, np.int64))
    found = look(*states_itrf(orbits[str(window["spacecraft"].iat[0])], times), here)
    elevation = apparent_deg(found.elevation_deg, site.height_m / 1e3) if ground.refraction else found.elevation_deg
    return found.azimuth_deg, elevation


def _spread(moments: Sequence[float]) -> list[float]:
    """The moments without those near one already taken."""
    taken: list[float] = []
    for at in sorted(moments):
        if not taken or at - taken[-1] > _FINE_REACH_S:
            taken.append(at)
    return taken


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


def _samples(table: pd.DataFrame, orbits: Mapping[str, OrbitSource], ground: Ground) -> Samples:
    """Samples with ``time_s`` as utc_s."""
    origin = np.datetime64("2000-01-01", "ms")
    return sample_windows(table, orbits, ground.sites, origin, _STEP_S, refraction=ground.refraction)


def _limits(mount: Mount) -> tuple[tuple[float | None, float | None], tuple[float | None, float | None]]:
    return (
        (mount.lower_rate_deg_s, mount.upper_rate_deg_s),
        (mount.lower_acceleration_deg_s2, mount.upper_acceleration_deg_s2),
    )


def _has_travel(mount: Mount) -> bool:
    return mount.kind == "az_el" and mount.lower_from_deg is not None


def _watched(antenna: Antenna, mount: Mount | None) -> bool:
    limits = (antenna.transmit_min_elevation_deg, antenna.transmit_arc_keep_out_deg, antenna.sun_keep_out_deg)
    tables = antenna.transmit_mask or antenna.transmit_keep_out
    return bool((mount is not None and mount.moves) or tables or any(limit is not None for limit in limits))
