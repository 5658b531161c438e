from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from audit_bench import ROOT
from skyfield.api import EarthSatellite, load, wgs84

from passplan.geometry.pointing import look_angles
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ephemeris import Ephemeris, EphemerisSegment
from passplan.inputs.ground import Antenna
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.audit.quality import Quality
from passplan.planning.audit.sky import mask_deg, sight

TIMES = np.arange(5_000.0, 5_600.0, 10.0)


@pytest.fixture(scope="module")
def run() -> Run:
    return load_run(ROOT / "configs" / "daily.toml")


def test_pointing_agrees_with_the_geometry_floor(run: Run) -> None:
    site = run.sites["Isvarde"]
    for name in ("Ambril-1", "Highwater"):
        seen = sight(run.orbits[name], site, run.start_utc, TIMES)
        look = look_angles(run.orbits[name], site, run.start_utc + (TIMES * 1e3).astype("timedelta64[ms]"))
        assert seen.elevation_deg == pytest.approx(look.elevation_deg, abs=1e-5)
        assert seen.range_km == pytest.approx(look.range_km, abs=1e-3)
        assert seen.azimuth_deg == pytest.approx(look.azimuth_deg, abs=1e-4)


def test_the_short_nutation_series_changes_nothing(run: Run) -> None:
    orbit, site = run.orbits["Ambril-1"], run.sites["Isvarde"]
    assert isinstance(orbit, ElementSet)
    scale = load.timescale(builtin=True)
    place = wgs84.latlon(site.latitude_deg, site.longitude_deg, site.height_m)
    times = scale.utc(2027, 3, 9, 0, 0, TIMES)
    altitude = (EarthSatellite.from_satrec(orbit.satrec, scale) - place).at(times).altaz()[0].degrees
    assert sight(orbit, site, run.start_utc, TIMES).elevation_deg == pytest.approx(altitude, abs=1e-7)


def _tabulated(run: Run, frame: str, system: str, offset_s: float) -> Ephemeris:
    """The orbit of Ambril-1 as an ephemeris message at steps of one minute."""
    from skyfield.framelib import itrs
    from skyfield.sgp4lib import TEME

    orbit = run.orbits["Ambril-1"]
    assert isinstance(orbit, ElementSet)
    scale = load.timescale(builtin=True)
    utc_s = np.arange(4_000.0, 7_000.0, 60.0)
    times = scale.utc(2027, 3, 9, 0, 0, utc_s)
    place = EarthSatellite.from_satrec(orbit.satrec, scale).at(times)
    frames = {"ITRF2014": itrs, "TEME": TEME}
    positions = place.frame_xyz(frames[frame]).km.T if frame in frames else place.position.km.T
    midnight_s = float((run.start_utc - np.datetime64("2000-01-01", "ms")) / np.timedelta64(1, "s"))
    epochs = midnight_s + utc_s + offset_s
    segment = EphemerisSegment(
        frame, system, epochs, positions, np.zeros_like(positions), epochs[0], epochs[-1], "LAGRANGE", 7
    )
    return Ephemeris("Ambril-1", "2026-001A", (segment,), Path("ambril.oem"))


@pytest.mark.parametrize(
    ("frame", "system", "offset_s"),
    # In 2027 TAI is 37 s ahead of UTC (no leap second is announced), TT 32.184 s more, GPS 19 s less than TAI.
    [("GCRF", "UTC", 0.0), ("TEME", "TAI", 37.0), ("ITRF2014", "TT", 69.184), ("EME2000", "GPS", 18.0)],
)
def test_an_ephemeris_message_points_as_its_orbit_does(run: Run, frame: str, system: str, offset_s: float) -> None:
    site = run.sites["Isvarde"]
    expected = sight(run.orbits["Ambril-1"], site, run.start_utc, TIMES)
    seen = sight(_tabulated(run, frame, system, offset_s), site, run.start_utc, TIMES)
    assert seen.elevation_deg == pytest.approx(expected.elevation_deg, abs=1e-3)
    assert seen.range_km == pytest.approx(expected.range_km, abs=0.02)


def test_an_ephemeris_message_has_no_answer_outside_its_span(run: Run) -> None:
    seen = sight(_tabulated(run, "GCRF", "UTC", 0.0), run.sites["Isvarde"], run.start_utc, np.array([3_000.0, 5_000.0]))
    assert np.isnan(seen.elevation_deg).tolist() == [True, False]


def test_masks() -> None:
    azimuth = np.array([0.0, 90.0, 100.0, 270.0, 359.0])
    assert mask_deg(Antenna(name="a", site="s", min_elevation_deg=7.0), azimuth) == pytest.approx(np.full(5, 7.0))
    points = ((80.0, 1.0), (90.0, 11.0), (110.0, 11.0), (280.0, 4.0))
    ridge = Antenna(name="a", site="s", min_elevation_deg=2.0, mask=points)
    # By hand: across north from (280, 4) to (440, 1) it falls by 3 / 160 deg per degree.
    expected = [2.5, 11.0, 11.0, 11.0 - 7.0 * 160.0 / 170.0, 4.0 - 3.0 * 79.0 / 160.0]
    assert mask_deg(ridge, azimuth) == pytest.approx(expected)


def test_quality_over_time() -> None:
    quality = Quality(np.array([0.0, 10.0, 20.0, 30.0]), np.array([0.0, 10.0, 0.0, 5.0]))
    assert quality.least_db(5.0, 12.0) == pytest.approx(5.0)
    assert quality.least_db(5.0, 25.0) == pytest.approx(0.0)
    # At or above 5 dB from 5 s to 15 s, and at 30 s alone.
    assert quality.longest_s(5.0) == 10.0
    assert quality.longest_s(11.0) == 0.0
