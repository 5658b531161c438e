"""Where an antenna may send: above its transmit mask, outside sectors, and away from the geosynchronous arc."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from passplan.geometry.masks import table_mask
from passplan.geometry.pointing import azimuth_of
from passplan.geometry.stations import stations
from passplan.geometry.timescale import Floats
from passplan.inputs.ground import Antenna, Site

# Radius of the geostationary orbit: a period of one sidereal day, by Kepler's third law.
ARC_RADIUS_KM = 42_164.17
_ARC_STEP_DEG = 1.0
_BLOCK = 20_000

Clearance = Callable[[Floats, Floats], Floats]


def transmit_clearance(antenna: Antenna, site: Site) -> Clearance | None:
    """A function from azimuths and elevations (n,) [deg] to how far [deg] inside its limits the antenna sends.

    Negative where it must not. None where sending is limited by nothing but what limits receiving.
    """
    parts: list[Clearance] = []
    if antenna.transmit_mask or antenna.transmit_min_elevation_deg is not None:
        floor = antenna.transmit_min_elevation_deg
        mask = table_mask(antenna.transmit_mask, antenna.min_elevation_deg if floor is None else floor)
        parts.append(lambda azimuth, elevation: elevation - mask.elevation_deg(azimuth))
    parts += [_outside(sector) for sector in antenna.transmit_keep_out]
    width = antenna.transmit_arc_keep_out_deg
    if width is not None:
        arc = _arc(site)
        parts.append(lambda azimuth, elevation: _from_arc_deg(arc, azimuth, elevation) - width)
    if not parts:
        return None
    return lambda azimuth, elevation: np.asarray(np.min([part(azimuth, elevation) for part in parts], axis=0))


def arc_separation_deg(site: Site, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Least angle [deg] from directions (n,) to the part of the geostationary arc above the horizon of ``site``.

    Infinite where none of it is.
    """
    return _from_arc_deg(_arc(site), np.asarray(azimuth_deg, float), np.asarray(elevation_deg, float))


def _outside(sector: tuple[float, float, float, float]) -> Clearance:
    """How far outside a sector a direction is, in azimuth or elevation, whichever is further; negative inside."""
    first, last, low, high = sector
    half = 0.5 * ((last - first) % 360.0 or 360.0)
    centre = first + half

    def clearance(azimuth: Floats, elevation: Floats) -> Floats:
        beside = np.abs((azimuth - centre + 180.0) % 360.0 - 180.0) - half
        return np.asarray(np.maximum(np.maximum(low - elevation, elevation - high), beside))

    return clearance


def _arc(site: Site) -> Floats:
    """Unit vectors (m, 3) east, north, up to the points of the arc above the horizon, along it."""
    here = stations([site])
    longitude = np.radians(site.longitude_deg + np.arange(-90.0, 90.0 + _ARC_STEP_DEG, _ARC_STEP_DEG))
    points = ARC_RADIUS_KM * np.stack([np.cos(longitude), np.sin(longitude), np.zeros_like(longitude)], axis=-1)
    line = points - here.positions_km
    local = line @ np.concatenate([here.east, here.north, here.up]).T
    local /= np.linalg.norm(local, axis=1)[:, None]
    return np.asarray(local[local[:, 2] > 0.0])


def _from_arc_deg(arc: Floats, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Least angle to the great-circle pieces between the points of the arc, which follow it to 0.002 deg."""
    if not len(arc):
        return np.full(np.shape(azimuth_deg), np.inf)
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    beams = np.stack([np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)], -1)
    found = np.empty(len(beams))
    for at in range(0, len(beams), _BLOCK):
        block = beams[at : at + _BLOCK]
        nearest = np.argmax(block @ arc.T, axis=1)
        sides = np.maximum(nearest - 1, 0), np.minimum(nearest + 1, len(arc) - 1)
        pieces = [_to_piece(block, arc[nearest], arc[side]) for side in sides]
        found[at : at + _BLOCK] = np.minimum(*pieces)
    return np.degrees(found)


def _to_piece(beam: Floats, nearer: Floats, further: Floats) -> Floats:
    """Angle from beams (n, 3) to the pieces from ``nearer`` to ``further``, by the foot on the chord."""
    chord = further - nearer
    length2 = np.maximum(np.einsum("ij,ij->i", chord, chord), 1e-18)
    share = np.clip(np.einsum("ij,ij->i", beam - nearer, chord) / length2, 0.0, 1.0)
    foot = nearer + share[:, None] * chord
    apart = np.linalg.norm(beam - foot / np.linalg.norm(foot, axis=1)[:, None], axis=1)
    return np.asarray(2.0 * np.arcsin(np.clip(apart / 2.0, 0.0, 1.0)))


def arc_azimuths_elevations_deg(site: Site) -> tuple[Floats, Floats]:
    """Azimuths and elevations [deg] along the part of the arc above the horizon, every degree of longitude."""
    arc = _arc(site)
    return azimuth_of(arc[:, 0], arc[:, 1]), np.degrees(np.arcsin(arc[:, 2]))
