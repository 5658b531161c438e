"""Where mounts are too slow inside windows: a bound on what each window asks of them, then a closer look at few.

Between two samples a spacecraft flies nearly straight past the lower axis of a mount, at a speed v and never
nearer than d. Then the lower axis is never asked for more than v / d, the upper one for v / range, and of
accelerations for what :func:`_demand` says. Nearly all windows ask for less than the mount has and are done.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.axes import axis_angles_deg
from passplan.geometry.keyhole import Axis, lost_stretches
from passplan.geometry.pointing import azimuth_of, instants, local_states
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.timescale import Floats, utc_seconds
from passplan.geometry.travel import unwrapped_deg
from passplan.inputs.ground import Site
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

_STEP_S = 30.0
# Above the acceleration of anything in orbit seen from the turning Earth: mu / R^2 + 2 omega v + omega^2 r, km/s2.
_BEND_KM_S2 = 0.0115
# Times of the closer look: coarse all along, and around the closest approach steps of a twentieth of its duration.
_COARSE_S, _FINE_SHARE, _SHORTEST_S = 0.25, 0.05, 0.02
# More than the angle that one slew covers.
_LONGEST_SLEW_DEG = 240.0


@dataclass(frozen=True)
class Pursuers:
    """Mount, site and largest pointing error [deg] of antennas, by name; those whose mounts follow anything are absent.

    With ``refraction`` they point at apparent directions.
    """

    mounts: Mapping[str, Mount]
    sites: Mapping[str, Site]
    permitted_deg: Mapping[str, float]
    refraction: bool = False


def keyholes(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], sites: Mapping[str, Site], pursuers: Pursuers
) -> Iterator[tuple[int, float, float]]:
    """(row of ``windows``, start and end in utc_s) of every stretch that either axis of a mount loses."""
    rows = np.flatnonzero(windows["antenna"].isin(list(pursuers.mounts)).to_numpy())
    if not rows.size:
        return
    table = windows.iloc[rows]
    row, time, offsets = instants(table, _STEP_S)
    position, velocity = local_states(table, orbits, sites, row, time)
    codes, names = pd.factorize(table["antenna"])
    aos, los = (utc_seconds(table[c].to_numpy()) for c in ("aos_utc", "los_utc"))
    looks: list[_Look] = []
    for code, name in enumerate(names):
        mine = np.flatnonzero(codes[row] == code)
        found = _demand(pursuers.mounts[str(name)], position[:, mine], velocity[:, mine])
        looks += _looks(str(name), pursuers.mounts[str(name)], row[mine], time[mine], found, aos, los)
    if not looks:
        return
    which = np.concatenate([np.full(look.times.size, look.row) for look in looks])
    line = _between(position, velocity, time, offsets, which, np.concatenate([look.times for look in looks]))
    ends = np.cumsum([look.times.size for look in looks])
    for look, end in zip(looks, ends.tolist(), strict=True):
        for start, stop in _lost(look, line[:, end - look.times.size : end], pursuers):
            yield int(rows[look.row]), start, stop


def _between(
    position: Floats, velocity: Floats, time: Floats, offsets: NDArray[np.int64], row: NDArray[np.int64], at: Floats
) -> Floats:
    """Positions (3, m) at the instants ``at`` inside windows ``row``, by cubic Hermite interpolation of samples (3, n).

    Its error is at most step^4 / 384 times the fourth derivative (textbook), which near the Earth is 4e-8 km/s4: 10 cm.
    """
    left = offsets[row] + np.floor((at - time[offsets[row]]) / _STEP_S).astype(np.int64)
    left = np.clip(left, offsets[row], offsets[row + 1] - 2)
    step = time[left + 1] - time[left]
    x = (at - time[left]) / step
    rest = 1.0 - x
    return np.asarray(
        position[:, left] * ((1.0 + 2.0 * x) * rest**2) + position[:, left + 1] * (x**2 * (3.0 - 2.0 * x))
        + (velocity[:, left] * rest - velocity[:, left + 1] * x) * (x * rest * step)
    )


@dataclass(frozen=True)
class _Demand:
    """Upper bounds around samples (n,) [deg/s, deg/s2] for both axes, and how the lower one is passed.

    The closest approach is ``closest_s`` after the sample and takes about ``pass_s``.
    """

    rate: tuple[Floats, Floats]
    acceleration: tuple[Floats, Floats]
    closest_s: Floats
    pass_s: Floats


def _demand(mount: Mount, position_km: Floats, velocity_km_s: Floats) -> _Demand:
    """Bounds for half a step either side of samples (3, n), in east, north and up.

    Own derivation. In polar coordinates about the lower axis (distance d, speed w across it, acceleration a)
    the angle's rate is at most w / d and its change a / d + w^2 / d^2, as 2 d' angle' <= w^2 / d. In spherical
    ones the upper angle's rate is at most v / range, its change a / range + v^2 / range^2 and what the turn of
    the lower axis adds, lower'^2 sin(upper) cos(upper) <= v^2 / (range d).
    """
    half = 0.5 * _STEP_S
    turn = np.radians(mount.lower_axis_azimuth_deg or 0.0)
    axis = np.array([np.sin(turn), np.cos(turn), 0.0] if mount.kind == "x_y" else [0.0, 0.0, 1.0])[:, None]
    across = position_km - axis * (axis * position_km).sum(axis=0)
    drift = velocity_km_s - axis * (axis * velocity_km_s).sum(axis=0)
    closest, away = _closest(across, drift, half)
    _, distance = _closest(position_km, velocity_km_s, half)
    swiftness, speed = (np.linalg.norm(v, axis=0) + _BEND_KM_S2 * half for v in (drift, velocity_km_s))
    lower = swiftness / away, _BEND_KM_S2 / away + (swiftness / away) ** 2
    turning = (speed / distance) * (speed / away)
    upper = speed / distance, _BEND_KM_S2 / distance + (speed / distance) ** 2 + turning
    degrees = [np.degrees(part) for part in (*lower, *upper)]
    return _Demand((degrees[0], degrees[2]), (degrees[1], degrees[3]), closest, away / swiftness)


def _closest(position: Floats, velocity: Floats, half_s: float) -> tuple[Floats, Floats]:
    """When within half a step the straight line comes closest to the origin, and the least that the distance can be."""
    square = np.maximum((velocity**2).sum(axis=0), 1e-12)
    at = np.clip(-(position * velocity).sum(axis=0) / square, -half_s, half_s)
    least = np.linalg.norm(position + velocity * at, axis=0) - 0.5 * _BEND_KM_S2 * half_s**2
    return at, np.maximum(least, 1e-3)


@dataclass(frozen=True)
class _Look:
    """One window to look at closely: its row, its antenna, and the times."""

    row: int
    antenna: str
    times: Floats


def _looks(
    name: str, mount: Mount, row: NDArray[np.int64], time: Floats, demand: _Demand, aos: Floats, los: Floats
) -> Iterator[_Look]:
    """The windows of one antenna that may ask too much of its mount."""
    suspect, reach_s = np.zeros(row.size, bool), 0.0
    for axis, rate, strength in zip(_axes(mount), demand.rate, demand.acceleration, strict=True):
        if axis is not None:
            hard = (rate > axis.rate_deg_s) | (strength > axis.acceleration_deg_s2)
            suspect |= hard
            if hard.any():
                slew_s = _LONGEST_SLEW_DEG / axis.rate_deg_s + 2.0 * axis.rate_deg_s / axis.acceleration_deg_s2
                reach_s = max(reach_s, slew_s)
    some = np.flatnonzero(suspect)
    heads = np.flatnonzero(np.diff(row[some], prepend=-1))
    for head, tail in zip(heads.tolist(), np.append(heads, some.size)[1:].tolist(), strict=True):
        own = some[head:tail]
        k = int(row[own[0]])
        low = max(float(time[own[0]]) - _STEP_S - reach_s, float(aos[k]))
        high = min(float(time[own[-1]]) + _STEP_S + reach_s, float(los[k]))
        fine = [_around(time[i] + demand.closest_s[i], demand.pass_s[i]) for i in own.tolist()]
        times = np.unique(np.round(np.concatenate([np.arange(low, high, _COARSE_S), [low, high], *fine]), 3))
        yield _Look(k, name, times[(times >= low) & (times <= high)])


def _around(at: float, pass_s: float) -> Floats:
    """Times around a closest approach, evenly spread in angle: t = at + pass_s sinh(u)."""
    shortest = max(pass_s, _SHORTEST_S)
    reach = np.arcsinh(_COARSE_S / _FINE_SHARE / shortest)
    return np.asarray(at + shortest * np.sinh(np.arange(-reach, reach, _FINE_SHARE)))


def _lost(look: _Look, line_km: Floats, pursuers: Pursuers) -> Iterator[tuple[float, float]]:
    """The stretches that either axis loses of a window, seen along ``line_km`` (3, n) at its times."""
    mount = pursuers.mounts[look.antenna]
    east, north, up = line_km
    elevation = np.degrees(np.arctan2(up, np.hypot(east, north)))
    if pursuers.refraction:
        elevation = apparent_deg(elevation, pursuers.sites[look.antenna].height_m / 1e3)
    lower, upper = axis_angles_deg(mount, azimuth_of(east, north), elevation)
    for axis, angle, carried in zip(_axes(mount), (unwrapped_deg(lower), upper), (upper, None), strict=True):
        if axis is not None:
            yield from lost_stretches(look.times, angle, carried, axis, pursuers.permitted_deg[look.antenna])


def _axes(mount: Mount) -> tuple[Axis | None, Axis | None]:
    """Lower and upper axis, None where nothing limits."""
    pairs = (
        (mount.lower_rate_deg_s, mount.lower_acceleration_deg_s2),
        (mount.upper_rate_deg_s, mount.upper_acceleration_deg_s2),
    )
    lower, upper = (None if rate is None else Axis(rate, strength or np.inf) for rate, strength in pairs)
    return lower, upper
