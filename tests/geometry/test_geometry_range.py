"""The least range of each window, against dense sampling, for orbits of every kind."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from geometry_cases import REGIMES, START, antenna, at_s, orbit, spans_s

from passplan.geometry.pointing import look_angles
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trim import trimmed
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ground import Site

ORBITS = {
    **REGIMES,
    "equatorial": orbit(rev_per_day=4.2, inclination_deg=0.1, bstar=0.0),
    "oval": orbit(rev_per_day=8.0, eccentricity=0.2, inclination_deg=30.0, perigee_deg=200.0, bstar=0.0),
    "long": orbit(rev_per_day=3.0, eccentricity=0.5, inclination_deg=100.0, perigee_deg=20.0, bstar=0.0),
    "daily": orbit(rev_per_day=0.9, eccentricity=0.8, inclination_deg=20.0, perigee_deg=320.0, bstar=0.0),
}
PLACES = [(-59.0, 0.0, 0.0), (-15.0, 100.0, 5.0), (20.0, 40.0, 40.0), (61.0, -120.0, 20.0)]
# Instants are rounded to milliseconds, in which the range changes by some metres.
CLOSE_KM = 0.02


def _table(source: ElementSet, place: tuple[float, float, float]) -> tuple[pd.DataFrame, dict[str, Site]]:
    site = Site(name="There", latitude_deg=place[0], longitude_deg=place[1], height_m=100.0)
    dish = antenna(site, place[2])
    end = START + np.timedelta64(72, "h")
    return find_windows({"Teal": source}, {"Dish": dish}, {"There": site}, START, end), {"There": site}


def _least_km(source: ElementSet, site: Site, start_s: float, end_s: float) -> float:
    t = np.linspace(start_s, end_s, max(60, int((end_s - start_s) / 20.0)))
    k = int(look_angles(source, site, at_s(t)).range_km.argmin())
    fine = np.linspace(t[max(k - 1, 0)], t[min(k + 1, t.size - 1)], 1_001)
    return float(look_angles(source, site, at_s(fine)).range_km.min())


@pytest.mark.parametrize("name", ORBITS)
def test_the_least_range_is_that_of_dense_sampling(name: str) -> None:
    seen = 0
    for place in PLACES:
        table, sites = _table(ORBITS[name], place)
        for k, (start_s, end_s) in enumerate(spans_s(table)):
            least = _least_km(ORBITS[name], sites["There"], start_s, end_s)
            assert table["min_range_km"][k] == pytest.approx(least, abs=CLOSE_KM)
            seen += 1
    assert seen >= 1


@pytest.mark.parametrize("name", ["low", "medium", "eccentric", "long", "daily"])
@pytest.mark.parametrize("part", [(0.0, 0.2), (0.4, 1.0), (0.7, 0.9)])
def test_what_is_left_of_a_window_has_its_own_peak_and_least_range(name: str, part: tuple[float, float]) -> None:
    source = ORBITS[name]
    table, sites = _table(source, PLACES[1])
    aos, los = (utc_seconds(table[c].to_numpy()) for c in ("aos_utc", "los_utc"))
    starts, ends = (aos + share * (los - aos) for share in part)
    cut = trimmed(table, starts, ends, {"Teal": source}, sites)
    for k, (start_s, end_s) in enumerate(spans_s(cut)):
        least = _least_km(source, sites["There"], start_s, end_s)
        assert cut["min_range_km"][k] == pytest.approx(least, abs=CLOSE_KM)
        t = np.linspace(start_s, end_s, 4_001)
        seen = look_angles(source, sites["There"], at_s(t)).elevation_deg
        assert cut["peak_elevation_deg"][k] == pytest.approx(seen.max(), abs=1e-3)
