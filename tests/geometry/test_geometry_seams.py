"""An ephemeris made from an element set gives the element set's windows."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from geometry_cases import ECCENTRIC, END, LOW, NORTH, START, antenna, at_s, spans_s, windows

from passplan.geometry.pointing import look_angles, sample_windows
from passplan.geometry.timescale import Floats, julian_day, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ephemeris import Ephemeris, EphemerisSegment

MARGIN = np.timedelta64(2, "h")


def _states(source: ElementSet, frame: str, utc_s: Floats) -> tuple[Floats, Floats]:
    if frame == "TEME":
        _, positions, velocities = source.satrec.sgp4_array(*julian_day(utc_s))
        return positions, velocities
    return states_itrf(source, utc_s)


def _segment(
    source: ElementSet,
    start: np.datetime64,
    end: np.datetime64,
    step_s: float = 60.0,
    frame: str = "TEME",
    interpolation: str = "LAGRANGE",
    degree: int = 9,
) -> EphemerisSegment:
    low, high = float(utc_seconds(start)), float(utc_seconds(end))
    epochs = np.linspace(low, high, round((high - low) / step_s) + 1)
    positions, velocities = _states(source, frame, epochs)
    return EphemerisSegment(frame, "UTC", epochs, positions, velocities, low, high, interpolation, degree)


def _message(*segments: EphemerisSegment) -> Ephemeris:
    return Ephemeris("TEAL", "2027-001A", segments, Path("teal.oem"))


def check_same(found: pd.DataFrame, expected: pd.DataFrame, within_s: float = 2e-3) -> None:
    assert found["window_id"].tolist() == expected["window_id"].tolist()
    np.testing.assert_allclose(spans_s(found), spans_s(expected), atol=within_s)
    np.testing.assert_allclose(found["peak_elevation_deg"], expected["peak_elevation_deg"], atol=1e-3)
    np.testing.assert_allclose(found["min_range_km"], expected["min_range_km"], atol=1e-2)


@pytest.mark.parametrize("frame", ["TEME", "ITRF"])
@pytest.mark.parametrize("interpolation", ["LAGRANGE", "HERMITE"])
def test_windows_of_an_ephemeris_are_those_of_its_elements(frame: str, interpolation: str) -> None:
    message = _message(_segment(LOW, START - MARGIN, END + MARGIN, frame=frame, interpolation=interpolation))
    found = windows(message, antenna())
    check_same(found, windows(LOW, antenna()))
    assert found["element_epoch_utc"].isna().all()


def test_an_eccentric_orbit_and_a_hilly_mask_are_as_good() -> None:
    message = _message(_segment(ECCENTRIC, START - MARGIN, END + MARGIN, step_s=60.0, frame="ITRF"))
    dish = antenna(mask=[(0.0, 5.0), (80.0, 20.0), (150.0, 5.0), (260.0, 35.0), (320.0, 5.0)])
    found, expected = windows(message, dish), windows(ECCENTRIC, dish)
    np.testing.assert_allclose(spans_s(found), spans_s(expected), atol=5e-3)


def test_instants_are_those_of_the_message_even_if_it_interpolates_badly() -> None:
    message = _message(_segment(LOW, START - MARGIN, END + MARGIN, frame="ITRF", interpolation="LINEAR", degree=1))
    spans = spans_s(windows(message, antenna()))
    edges = spans.reshape(-1)
    edges = edges[(edges > 0.0) & (edges < 86_400.0)]
    level = look_angles(message, NORTH, at_s(edges)).elevation_deg
    np.testing.assert_allclose(level, 5.0, atol=2e-4)


def test_windows_across_the_seam_of_two_segments_are_whole() -> None:
    middle = windows(LOW, antenna()).iloc[2]["peak_utc"].to_datetime64()
    first, second = _segment(LOW, START - MARGIN, middle), _segment(LOW, middle, END + MARGIN)
    check_same(windows(_message(first, second), antenna()), windows(LOW, antenna()))


def test_a_gap_between_segments_cuts_a_window_and_nothing_is_extrapolated() -> None:
    whole = windows(LOW, antenna()).iloc[2]
    peak = whole["peak_utc"].to_datetime64()
    second = np.timedelta64(1, "s")
    first, later = _segment(LOW, START - MARGIN, peak - 30 * second), _segment(LOW, peak + 30 * second, END + MARGIN)
    found = windows(_message(first, later), antenna())
    parts = found[(found["los_utc"] > whole["aos_utc"]) & (found["aos_utc"] < whole["los_utc"])]
    assert len(parts) == 2
    assert parts["los_utc"].iloc[0] == peak - 30 * second
    assert parts["aos_utc"].iloc[1] == peak + 30 * second
    assert (parts["clipped"] == "none").all()
    assert found["window_id"].is_unique


def test_the_end_of_the_message_ends_the_last_window_inside_its_span() -> None:
    whole = windows(LOW, antenna()).iloc[2]
    stop = float(utc_seconds(whole["peak_utc"].to_datetime64())) + 0.0004
    segment = replace(_segment(LOW, START - MARGIN, END), usable_stop=stop)
    found = windows(_message(segment), antenna())
    assert utc_seconds(found["los_utc"].iloc[-1].to_datetime64()) <= stop
    samples = sample_windows(found, {"Teal": _message(segment)}, {"North": NORTH}, START)
    assert np.isfinite(samples.elevation_deg).all()


def test_a_message_outside_the_horizon_gives_no_windows() -> None:
    day = np.timedelta64(24, "h")
    assert windows(_message(_segment(LOW, START - 3 * day, START - 2 * day)), antenna()).empty
    assert windows(_message(_segment(LOW, END + 5 * day, END + 6 * day)), antenna()).empty


def test_a_short_message_is_read_to_its_ends() -> None:
    whole = windows(LOW, antenna()).iloc[1]
    aos = whole["aos_utc"].to_datetime64()
    message = _message(_segment(LOW, aos + np.timedelta64(60, "s"), aos + np.timedelta64(180, "s"), step_s=10.0))
    assert windows(message, antenna())["duration_s"].tolist() == pytest.approx([120.0], abs=2e-3)
