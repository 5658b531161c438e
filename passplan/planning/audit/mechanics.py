"""Can the antenna do it: its mount's limits and rates, where it may send, the Sun, and the turns between contacts.

By other means than the plan's. A mount that is too slow is found by the condition under which a function of
limited slope exists within a band (Lipschitz extension): between any two instants of following the band must
not drift by more than the axis can turn. Directions come from the audit's own sky, the Sun from a short
almanac formula, and distances on the sky from unit vectors.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import pairwise
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ground import Antenna
from passplan.inputs.mounts import Mount
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Floats, Sight, lifted_deg, mask_deg, sight

# The plan joins samples by straight lines and rounds inward to whole seconds.
_TOLERANCE_DEG = 0.02
_TOLERANCE_SUN_DEG = 0.05
_TOLERANCE_SHARE = 0.05
_TOLERANCE_S = 0.5


def has_losses(run: Run, antenna: Antenna, direction: Literal["downlink", "command"]) -> bool:
    """Whether seconds may be lost inside the windows of an antenna to one direction."""
    mount = None if antenna.mount is None else run.mounts[antenna.mount]
    limits = _limits_sending(antenna) if direction == "command" else antenna.sun_keep_out_deg is not None
    return bool(limits or run.policy.guard_sigmas > 0.0 or (mount is not None and mount.moves))


def check_mechanics(run: Run, contact: Contact, seen: Sight) -> Iterator[Fault]:
    """Faults of reach, rate, Sun and manoeuvre of one contact."""
    antenna = run.antennas[contact.antenna]
    yield from _check_manoeuvres(run, contact)
    mount = None if antenna.mount is None else run.mounts[antenna.mount]
    if mount is not None:
        yield from _check_reach(run, contact, mount, seen)
    fine = _while_sending(run, contact)
    if mount is not None and mount.moves and fine is not None:
        yield from _check_rates(run, contact, mount, fine)
    if antenna.sun_keep_out_deg is not None and fine is not None:
        yield from _check_sun(run, contact, antenna.sun_keep_out_deg, fine)


def _limits_sending(antenna: Antenna) -> bool:
    angles = (antenna.transmit_min_elevation_deg, antenna.transmit_arc_keep_out_deg)
    tables = antenna.transmit_mask or antenna.transmit_keep_out
    return bool(tables or any(angle is not None for angle in angles))


def sends_freely(run: Run, contact: Contact, times: Floats) -> NDArray[np.bool_] | None:
    """Whether the antenna of a contact may send at each of ``times`` (n,), or None where nothing limits it."""
    antenna, site = run.antennas[contact.antenna], run.sites[run.antennas[contact.antenna].site]
    if not _limits_sending(antenna):
        return None
    seen = sight(run.orbits[contact.spacecraft], site, run.start_utc, times)
    height = lifted_deg(run, contact.antenna, seen.elevation_deg)
    free = np.ones(times.size, bool)
    if antenna.transmit_mask or antenna.transmit_min_elevation_deg is not None:
        floor = antenna.transmit_min_elevation_deg
        least = antenna.min_elevation_deg if floor is None else floor
        own = antenna.model_copy(update={"mask": antenna.transmit_mask, "min_elevation_deg": least})
        free &= height >= mask_deg(own, seen.azimuth_deg) - _TOLERANCE_DEG
    for first, last, low, high in antenna.transmit_keep_out:
        turn = (seen.azimuth_deg - first) % 360.0
        across = (turn > _TOLERANCE_DEG) & (turn < ((last - first) % 360.0 or 360.0) - _TOLERANCE_DEG)
        free &= ~(across & (height > low + _TOLERANCE_DEG) & (height < high - _TOLERANCE_DEG))
    if antenna.transmit_arc_keep_out_deg is not None:
        free &= _arc_angle_deg(site.latitude_deg, seen.azimuth_deg, height) >= antenna.transmit_arc_keep_out_deg - 0.1
    return free


def check_turnarounds(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Each antenna has time to turn between its contacts, the shorter way round at the least."""
    for name, antenna in run.antennas.items():
        mount = None if antenna.mount is None else run.mounts[antenna.mount]
        if mount is None or not mount.moves:
            continue
        own = sorted((c for c in contacts if c.antenna == name), key=lambda c: c.start_s)
        for before, after in pairwise(own):
            left, right = (
                _axes(mount, *_direction(run, contact, np.array([at])))
                for contact, at in ((before, before.end_s), (after, after.start_s))
            )
            needed_s = 0.0
            limits = (
                (mount.lower_rate_deg_s, mount.lower_acceleration_deg_s2),
                (mount.upper_rate_deg_s, mount.upper_acceleration_deg_s2),
            )
            for axis, (rate, strength) in enumerate(limits):
                apart = abs(float(left[axis][0] - right[axis][0]))
                if mount.kind == "az_el" and axis == 0:
                    apart = min(apart % 360.0, -apart % 360.0)
                if rate is not None and np.isfinite(apart):
                    ramp_s = 0.0 if strength is None else min(rate / strength, (apart / strength) ** 0.5)
                    needed_s = max(needed_s, apart / rate + ramp_s if ramp_s * rate <= apart else 2.0 * ramp_s)
            gap_s = after.start_s - before.end_s
            if gap_s < needed_s - _TOLERANCE_S:
                sentence = f"{gap_s:g} s lie between contacts {before.contact_id} and {after.contact_id}"
                yield Fault("turnaround", f"antenna {name}", f"{sentence}, it needs {needed_s:.1f} s to turn")


def _check_manoeuvres(run: Run, contact: Contact) -> Iterator[Fault]:
    source = run.orbits[contact.spacecraft]
    if not isinstance(source, ElementSet):
        return
    epoch_s = float((source.epoch_utc - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
    for instant in run.spacecraft[contact.spacecraft].manoeuvres_utc:
        at_s = float((datetime64(instant) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
        if (epoch_s < at_s < contact.end_s - 1e-3) or (contact.start_s + 1e-3 < at_s <= epoch_s):
            sentence = f"a manoeuvre at {instant:%Y-%m-%d %H:%M:%S} UTC lies between it and the element set"
            yield Fault("manoeuvre", contact.place, sentence)


def _check_reach(run: Run, contact: Contact, mount: Mount, seen: Sight) -> Iterator[Fault]:
    height = lifted_deg(run, contact.antenna, seen.elevation_deg)
    if mount.kind == "fixed":
        boresight = 90.0 if mount.boresight_elevation_deg is None else mount.boresight_elevation_deg
        axis = _unit(np.array([mount.boresight_azimuth_deg or 0.0]), np.array([boresight]))[0]
        apart = np.degrees(np.arccos(np.clip(_unit(seen.azimuth_deg, height) @ axis, -1.0, 1.0)))
        if np.any(apart > (mount.cone_deg or 0.0) + _TOLERANCE_DEG):
            yield Fault("reach", contact.place, f"{apart.max():.2f} deg from the boresight of {mount.name}")
        return
    lower, upper = _axes(mount, seen.azimuth_deg, height)
    limits = [("upper", upper, mount.upper_from_deg, mount.upper_to_deg)]
    if mount.kind == "x_y":
        limits.append(("lower", lower, mount.lower_from_deg, mount.lower_to_deg))
    for name, angle, low, high in limits:
        if low is None or high is None:
            continue
        if np.any(angle < low - _TOLERANCE_DEG) or np.any(angle > high + _TOLERANCE_DEG):
            sentence = f"the {name} axis of {mount.name} would pass its limits of {low:g} and {high:g} deg"
            yield Fault("reach", contact.place, sentence)
    if mount.kind == "az_el" and mount.lower_from_deg is not None and mount.lower_to_deg is not None:
        swing = float(np.ptp(np.unwrap(lower, period=360.0)))
        if swing > mount.lower_to_deg - mount.lower_from_deg + _TOLERANCE_DEG:
            yield Fault("reach", contact.place, f"it turns by {swing:.1f} deg, the cables of {mount.name} allow less")


def _check_rates(run: Run, contact: Contact, mount: Mount, fine: tuple[Floats, Floats, Floats]) -> Iterator[Fault]:
    times, azimuth, height = fine
    beam = run.antennas[contact.antenna].beamwidth_deg or 360.0
    permitted = run.policy.off_pointing_beamwidths * beam * (1.0 + _TOLERANCE_SHARE) + _TOLERANCE_DEG
    lower, upper = _axes(mount, azimuth, height)
    # On the sky the lower axis is off by 2 arcsin(cos(upper) sin(apart / 2)).
    chord = np.sin(np.radians(permitted) / 2.0) / np.maximum(np.cos(np.radians(upper)), 1e-12)
    widths = (np.degrees(2.0 * np.arcsin(np.minimum(chord, 1.0))), np.full(times.size, permitted))
    rates = (mount.lower_rate_deg_s, mount.upper_rate_deg_s)
    for axis, angle, width, rate in zip(("lower", "upper"), (lower, upper), widths, rates, strict=True):
        if rate is None:
            continue
        track = np.unwrap(angle, period=360.0)
        for way in (1.0, -1.0):
            # Behind at t1 by the width, ahead at t2 by the width: what must be covered beyond the rate.
            left_behind = np.minimum.accumulate(way * track + width - rate * times)
            short = (way * track - width - rate * times) - left_behind
            worst = int(np.argmax(short))
            if short[worst] > _TOLERANCE_DEG + rate * _TOLERANCE_S:
                sentence = f"the {axis} axis of {mount.name} cannot follow at {rate:g} deg/s while sending"
                yield Fault("rate", contact.place, sentence)
                return


def _check_sun(run: Run, contact: Contact, keep_out_deg: float, fine: tuple[Floats, Floats, Floats]) -> Iterator[Fault]:
    times, azimuth, height = fine
    site = run.sites[run.antennas[contact.antenna].site]
    north, east, up = _sun(run, times, site.latitude_deg, site.longitude_deg).T
    # Where refraction is counted, the Sun too stands where it appears.
    seen = lifted_deg(run, contact.antenna, np.degrees(np.arcsin(np.clip(up, -1.0, 1.0))))
    sun = _unit(np.degrees(np.arctan2(east, north)), seen)
    apart = np.degrees(np.arccos(np.clip(np.einsum("ij,ij->i", _unit(azimuth, height), sun), -1.0, 1.0)))
    if np.any(apart < keep_out_deg - _TOLERANCE_SUN_DEG):
        sentence = f"it receives {apart.min():.2f} deg from the Sun, {keep_out_deg:g} deg are required"
        yield Fault("sun", contact.place, sentence)


def _while_sending(run: Run, contact: Contact) -> tuple[Floats, Floats, Floats] | None:
    """Times, azimuths and elevations, half a second apart, inside the contact's segments."""
    grids = [np.arange(piece.start_s, piece.end_s + 0.01, 0.5) for piece in contact.pieces]
    if not grids:
        return None
    times = np.unique(np.concatenate(grids))
    azimuth, height = _direction(run, contact, times)
    return times, azimuth, height


def _direction(run: Run, contact: Contact, times: Floats) -> tuple[Floats, Floats]:
    site = run.sites[run.antennas[contact.antenna].site]
    seen = sight(run.orbits[contact.spacecraft], site, run.start_utc, times)
    return seen.azimuth_deg, lifted_deg(run, contact.antenna, seen.elevation_deg)


def _unit(azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """North, east, up."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    return np.stack([np.cos(elevation) * np.cos(azimuth), np.cos(elevation) * np.sin(azimuth), np.sin(elevation)], -1)


def _axes(mount: Mount, azimuth_deg: Floats, elevation_deg: Floats) -> tuple[Floats, Floats]:
    if mount.kind != "x_y":
        return azimuth_deg, elevation_deg
    north, east, up = _unit(azimuth_deg - (mount.lower_axis_azimuth_deg or 0.0), elevation_deg).T
    return np.degrees(np.arctan2(east, up)), np.degrees(np.arcsin(np.clip(north, -1.0, 1.0)))


def _sun(run: Run, times: Floats, latitude_deg: float, longitude_deg: float) -> Floats:
    """North, east, up of the Sun, by the low-precision formulas of the Astronomical Almanac (0.01 deg; from memory)."""
    days = float((run.start_utc - np.datetime64("2000-01-01T12:00:00", "ms")) / np.timedelta64(1, "ms")) / 86_400_000.0
    n = days + times / 86_400.0
    anomaly = np.radians(357.528 + 0.9856003 * n)
    longitude = np.radians(280.460 + 0.9856474 * n + 1.915 * np.sin(anomaly) + 0.020 * np.sin(2.0 * anomaly))
    tilt = np.radians(23.439 - 4e-7 * n)
    right = np.arctan2(np.cos(tilt) * np.sin(longitude), np.cos(longitude))
    declination = np.arcsin(np.sin(tilt) * np.sin(longitude))
    hour = np.radians(280.46062 + 360.98564737 * n + longitude_deg) - right
    latitude = np.radians(latitude_deg)
    east = -np.cos(declination) * np.sin(hour)
    north = np.sin(declination) * np.cos(latitude) - np.cos(declination) * np.cos(hour) * np.sin(latitude)
    up = np.sin(declination) * np.sin(latitude) + np.cos(declination) * np.cos(hour) * np.cos(latitude)
    return np.stack([north, east, up], -1)


def _arc_angle_deg(latitude_deg: float, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Least angle to the geostationary arc, over its points every tenth of a degree, on a spherical Earth."""
    latitude, apart = np.radians(latitude_deg), np.radians(np.arange(-85.0, 85.05, 0.1))
    ratio = 6_378.137 / 42_164.17
    north, east = -np.sin(latitude) * np.cos(apart), np.sin(apart)
    up = np.cos(latitude) * np.cos(apart) - ratio
    line = np.stack([north, east, up], -1)
    line = line[up > 0.0] / np.linalg.norm(line[up > 0.0], axis=1)[:, None]
    if not len(line):
        return np.full(azimuth_deg.shape, np.inf)
    nearest = (_unit(azimuth_deg, elevation_deg) @ line.T).max(axis=1)
    return np.asarray(np.degrees(np.arccos(np.clip(nearest, -1.0, 1.0))))
