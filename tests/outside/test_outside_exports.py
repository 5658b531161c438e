"""Our exports and drawings held against independent libraries."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from astropy import units
from astropy.coordinates import AltAz, EarthLocation, get_sun
from astropy.time import Time
from astropy.utils import iers
from oem import OrbitEphemerisMessage

from passplan.geometry.sun import sun_look_deg
from passplan.geometry.timescale import datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.ephemerides import write_ephemerides


def test_another_library_reads_our_ephemeris_messages(short_plan: PlanRecord, short_run: Run, tmp_path: Path) -> None:
    """The ``oem`` package (PyPI, CCSDS 502.0-B reader of its own) finds the same states at and between nodes."""
    for path in write_ephemerides(short_plan, short_run, tmp_path)[:3]:
        message = OrbitEphemerisMessage.open(path)
        (segment,) = message
        assert segment.metadata["REF_FRAME"] == "ITRF2000"
        start = float(utc_seconds(short_run.start_utc))
        times = start + np.array([0.0, 60.0, 3_333.0, 50_000.0, 86_399.0])
        positions, velocities = states_itrf(short_run.orbits[path.stem], times)
        for instant, position, velocity in zip(datetimes_ms(times), positions, velocities, strict=True):
            state = message(Time(str(instant), scale="utc"))
            assert np.linalg.norm(np.asarray(state.position) - position) < 1e-3
            assert np.linalg.norm(np.asarray(state.velocity) - velocity) < 1e-5


@pytest.mark.filterwarnings("ignore:Tried to get polar motions")
@pytest.mark.parametrize("site", ["Isvarde", "Tarrow Mesa", "Port Ellery"])
def test_the_sun_stands_where_astropy_puts_it(short_run: Run, site: str) -> None:
    """astropy's ``get_sun`` (ERFA's epv00): within 0.01 deg, far less than a pixel of the panorama."""
    place = short_run.sites[site]
    times = np.datetime64("2027-01-01T00:00:00", "ms") + np.arange(0, 365 * 24, 37) * np.timedelta64(3_600_000, "ms")
    azimuth, elevation = sun_look_deg(place, times)
    with iers.conf.set_temp("auto_download", False), iers.conf.set_temp("auto_max_age", None):
        moments = Time(times.astype(str), scale="utc")
        here = EarthLocation.from_geodetic(
            place.longitude_deg * units.deg, place.latitude_deg * units.deg, place.height_m * units.m
        )
        sun = get_sun(moments).transform_to(AltAz(obstime=moments, location=here))
    apart = np.degrees(
        np.arccos(
            np.clip(
                np.sin(np.radians(elevation)) * np.sin(sun.alt.rad)
                + np.cos(np.radians(elevation)) * np.cos(sun.alt.rad) * np.cos(np.radians(azimuth) - sun.az.rad),
                -1.0,
                1.0,
            )
        )
    )
    assert apart.max() < 0.01
