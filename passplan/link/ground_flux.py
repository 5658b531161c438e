"""Power flux density at the ground against the limits of the run: a flag, not a verdict.

What is permitted depends on the service, the station and the licence; the table only says where to look.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from passplan.geometry.stations import EQUATORIAL_RADIUS_KM
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.pfd import limits_at
from passplan.inputs.run import Run
from passplan.link.budget import Floats, off_nadir_deg, power_flux_density_dbw_per_m2
from passplan.link.chains import radiated_dbw
from passplan.link.interference import downlinks_of
from passplan.link.profiles import pattern_loss_db

_STEP_S = 60.0
_ARRIVALS_DEG = np.arange(0.0, 90.5, 0.5)


@dataclass(frozen=True)
class GroundFlux:
    """Power flux density and its limit [dB(W/m2)] in a reference bandwidth, shape (n,); where the limit is from."""

    density_dbw_per_m2: Floats
    limit_dbw_per_m2: Floats
    bandwidth_hz: float
    source: str

    @property
    def excess_db(self) -> Floats:
        """By how much the limit is exceeded; negative below it."""
        return np.asarray(self.density_dbw_per_m2 - self.limit_dbw_per_m2)

    @property
    def unit(self) -> str:
        """The unit with its bandwidth."""
        return f"dBW/m2/{self.bandwidth_hz / 1e6:g} MHz" if self.bandwidth_hz >= 1e6 else (
            f"dBW/m2/{self.bandwidth_hz / 1e3:g} kHz")


@dataclass(frozen=True)
class WorstFlux:
    """The worst that one radio of one spacecraft does to the ground: at which angle of arrival, how near the limit."""

    spacecraft: str
    radio: str
    arrival_deg: float
    density_dbw_per_m2: float
    limit_dbw_per_m2: float
    excess_db: float
    unit: str
    source: str


def ground_flux(run: Run, radio: DownlinkRadio, eirp_dbw: ArrayLike, range_km: Floats, elevation_deg: Floats) -> (
    GroundFlux | None
):
    """Flux density where a radio arrives with an EIRP [dBW] towards the place; None without a limit for its frequency.

    Without atmosphere; the limit runs along straight lines between its angles of arrival.
    """
    points = limits_at(run.pfd_limits, radio.frequency_mhz)
    if not points:
        return None
    bandwidth_hz = points[0].bandwidth_hz
    density = power_flux_density_dbw_per_m2(eirp_dbw, range_km, radio.symbol_rate_msps * 1e6, bandwidth_hz)
    limit = np.interp(elevation_deg, [p.arrival_deg for p in points], [p.limit_dbw_per_m2 for p in points])
    return GroundFlux(density, np.asarray(limit), bandwidth_hz, points[0].source)


def worst_fluxes(run: Run) -> Iterator[WorstFlux]:
    """The worst angle of arrival of every radio that a limit is stated for, anywhere on the ground it could shine on.

    From the lowest point of the orbit within the horizon, over a sphere of the equator's radius; a steered
    antenna is taken to point at the place.
    """
    for name in run.orbits:
        radios = [radio for radio in downlinks_of(run, name) if limits_at(run.pfd_limits, radio.frequency_mhz)]
        radius_km = _lowest_km(run, name) if radios else np.nan
        if not radius_km > EQUATORIAL_RADIUS_KM:
            continue
        sine = np.sin(np.radians(_ARRIVALS_DEG)) * EQUATORIAL_RADIUS_KM
        range_km = np.sqrt(sine**2 + radius_km**2 - EQUATORIAL_RADIUS_KM**2) - sine
        for radio in radios:
            loss_db: Floats | float = 0.0
            if radio.pattern:
                loss_db = pattern_loss_db(radio.pattern, off_nadir_deg(_ARRIVALS_DEG, range_km, 0.0, 0.0))
            found = ground_flux(run, radio, radiated_dbw(radio) - loss_db, range_km, _ARRIVALS_DEG)
            if found is not None:
                k = int(np.argmax(found.excess_db))
                yield WorstFlux(
                    name, radio.name, float(_ARRIVALS_DEG[k]), float(found.density_dbw_per_m2[k]),
                    float(found.limit_dbw_per_m2[k]), float(found.excess_db[k]), found.unit, found.source)


def _lowest_km(run: Run, name: str) -> float:
    """Least distance from the Earth's centre within the horizon; NaN where the orbit has no answer at all."""
    begin_s = float(utc_seconds(run.start_utc))
    times_s = np.arange(begin_s, begin_s + run.horizon_s + _STEP_S, _STEP_S)
    radii = np.linalg.norm(states_itrf(run.orbits[name], times_s)[0], axis=1)
    return float(np.fmin.reduce(radii))
