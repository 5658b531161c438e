"""Where a spacecraft stands in an antenna's sky, by Skyfield alone: the audit's own path, apart from geometry."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray
from skyfield.api import EarthSatellite, load, wgs84
from skyfield.constants import AU_KM
from skyfield.framelib import itrs
from skyfield.nutationlib import iau2000b_radians
from skyfield.sgp4lib import TEME
from skyfield.timelib import Time
from skyfield.vectorlib import VectorFunction

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ephemeris import Ephemeris, EphemerisSegment
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.run import OrbitSource, Run

Floats = NDArray[np.float64]

_NODES = 8
_EARTH = 399


@dataclass(frozen=True)
class Sight:
    """Azimuth, elevation [deg] and range [km] at ``time_s``; NaN where the orbit source has no answer."""

    time_s: Floats
    azimuth_deg: Floats
    elevation_deg: Floats
    range_km: Floats


def sight(source: OrbitSource, site: Site, start_utc: np.datetime64, time_s: Floats) -> Sight:
    """Pointing from ``site`` at ``time_s`` seconds after ``start_utc`` (geometric, no light time, no refraction)."""
    times = instants_of(start_utc, time_s)
    # The short nutation series agrees to a milliarcsecond and takes a fraction of the time.
    times._nutation_angles_radians = iau2000b_radians(times)
    place = wgs84.latlon(site.latitude_deg, site.longitude_deg, site.height_m)
    altitude, azimuth, distance = (_body(source, start_utc, time_s) - place).at(times).altaz()
    return Sight(np.asarray(time_s, np.float64), azimuth.degrees, altitude.degrees, distance.km)


def fixed_km(source: OrbitSource, start_utc: np.datetime64, time_s: Floats) -> Floats:
    """Earth-fixed position (3, n) in km at ``time_s`` seconds after ``start_utc``; NaN where there is no answer."""
    times = instants_of(start_utc, time_s)
    times._nutation_angles_radians = iau2000b_radians(times)
    return np.asarray(_body(source, start_utc, time_s).at(times).frame_xyz(itrs).km)


def _body(source: OrbitSource, start_utc: np.datetime64, time_s: Floats) -> VectorFunction:
    if isinstance(source, ElementSet):
        return EarthSatellite.from_satrec(source.satrec, _timescale())
    origin_s = float((start_utc - np.datetime64("2000-01-01", "ms")) / np.timedelta64(1, "ms")) / 1e3
    return _Tabulated(source, origin_s + np.asarray(time_s, np.float64))


def instants_of(start_utc: np.datetime64, time_s: Floats) -> Time:
    """Skyfield's instants at ``time_s`` seconds after ``start_utc``."""
    date = start_utc.astype("datetime64[ms]").item()
    seconds = date.second + date.microsecond / 1e6 + np.asarray(time_s, np.float64)
    return _timescale().utc(date.year, date.month, date.day, date.hour, date.minute, seconds)


def mask_deg(antenna: Antenna, azimuth_deg: Floats) -> Floats:
    """The least elevation [deg] the antenna may point to: the higher of its table and ``min_elevation_deg``."""
    flat = np.full_like(azimuth_deg, antenna.min_elevation_deg)
    if not antenna.mask:
        return flat
    azimuths, elevations = np.array(antenna.mask, np.float64).T
    # One more point on each side of north, so that straight lines join across it.
    around = np.concatenate((azimuths[-1:] - 360.0, azimuths, azimuths[:1] + 360.0))
    heights = np.concatenate((elevations[-1:], elevations, elevations[:1]))
    return np.asarray(np.maximum(flat, np.interp(azimuth_deg % 360.0, around, heights)))


def lifted_deg(run: Run, antenna: str, elevation_deg: Floats) -> Floats:
    """Elevations as the antenna sees them: with the bending of ITU-R P.834 where the policy asks for refraction.

    P.834-9, Annex 1: for geometric elevations e to 10 deg and heights h to 3 km, 1 over the polynomial below;
    carried on by the cotangent.
    """
    if run.policy.refraction == "off":
        return elevation_deg
    h = min(max(run.sites[run.antennas[antenna].site].height_m / 1e3, 0.0), 3.0)
    constant = 1.728 + 0.1815 * h + 0.01727 * h * h
    slope = 0.5411 + 0.06272 * h + 0.008288 * h * h
    square = 0.03723 + 0.01380 * h
    low = np.minimum(elevation_deg, 10.0)
    bent = 1.0 / (constant + low * (slope + low * square))
    fade = np.tan(np.radians(10.0)) / np.tan(np.radians(np.clip(elevation_deg, 10.0, 89.999)))
    return np.asarray(elevation_deg + bent * fade)


@lru_cache(maxsize=1)
def _timescale() -> Any:
    return load.timescale(builtin=True)


class _Tabulated(VectorFunction):  # type: ignore[misc]
    """An orbit ephemeris message as Skyfield wants it, at the fixed times ``utc_s`` (since 2000-01-01T00).

    Positions are interpolated by Lagrange over the eight nearest states, whatever the message asks for.
    """

    center = _EARTH

    def __init__(self, ephemeris: Ephemeris, utc_s: Floats) -> None:
        self.target = ephemeris.object_name
        self._ephemeris, self._utc_s = ephemeris, utc_s

    def _at(self, t: Time) -> tuple[Floats, Floats, None, None]:
        position_km = np.full((3, self._utc_s.size), np.nan)
        for segment in self._ephemeris.segments:
            own_s = _own_clock(segment.time_system, t, self._utc_s)
            inside = (own_s >= segment.usable_start) & (own_s <= segment.usable_stop)
            if np.any(inside):
                found = _to_gcrs(segment.frame, t, _lagrange(segment, own_s))
                position_km[:, inside] = found[:, inside]
        return position_km / AU_KM, np.zeros_like(position_km), None, None


def _own_clock(system: str, t: Time, utc_s: Floats) -> Floats:
    """Seconds since 2000-01-01T00:00:00 on the clock of the message."""
    if system == "UTC":
        return utc_s
    if system == "UT1":
        return np.asarray(utc_s + t.dut1)
    terrestrial_s = ((t.whole - 2_451_544.5) + t.tt_fraction) * 86_400.0
    behind_s = {"TT": 0.0, "TAI": 32.184, "GPS": 32.184 + 19.0}[system]
    return np.asarray(terrestrial_s - behind_s)


def _to_gcrs(frame: str, t: Time, position_km: Floats) -> Floats:
    if frame.startswith("ITRF"):
        rotation = itrs.rotation_at(t)
    elif frame == "TEME":
        rotation = TEME.rotation_at(t)
    else:
        # EME2000 differs from ICRF and GCRF by 0.02 arcsec, a metre at low orbits.
        return position_km
    # The matrices lead from GCRS to the frame; the way back is the transpose.
    return np.asarray(np.einsum("jin,jn->in", rotation, position_km))


def _lagrange(segment: EphemerisSegment, own_s: Floats) -> Floats:
    """Positions (3, n) through the states nearest to each time."""
    count = min(_NODES, segment.epochs.size)
    nearest = np.searchsorted(segment.epochs, own_s) - count // 2
    index = np.clip(nearest, 0, segment.epochs.size - count)[:, None] + np.arange(count)
    nodes = segment.epochs[index] - own_s[:, None]
    weights = np.ones_like(nodes)
    for i in range(count):
        for j in range(count):
            if i != j:
                weights[:, i] *= nodes[:, j] / (nodes[:, j] - nodes[:, i])
    return np.asarray(np.einsum("nk,nkj->jn", weights, segment.positions_km[index]))
