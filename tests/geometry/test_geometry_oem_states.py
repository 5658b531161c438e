from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.oem_states import ephemeris_itrf, interpolate, segment_itrf, segment_span
from passplan.geometry.timescale import Floats
from passplan.inputs.ephemeris import Ephemeris, EphemerisSegment

EPOCHS = np.cumsum(np.full(30, 60.0)) + 857_865_600.0


def _segment(powers: list[float], interpolation: str, degree: int, epochs: Floats = EPOCHS) -> EphemerisSegment:
    """States on one polynomial per axis, in hours from the first epoch."""
    curve = np.polynomial.Polynomial(powers)
    hours = (epochs - epochs[0]) / 3_600.0
    positions = np.stack([curve(hours), 2.0 * curve(hours), -curve(hours)], axis=-1)
    rates = np.stack([curve.deriv()(hours), 2.0 * curve.deriv()(hours), -curve.deriv()(hours)], axis=-1) / 3_600.0
    return EphemerisSegment("ITRF", "UTC", epochs, positions, rates, epochs[0], epochs[-1], interpolation, degree)


@settings(deadline=None, max_examples=60)
@given(
    st.lists(st.floats(-1e3, 1e3), min_size=8, max_size=8),
    st.floats(0.0, 1.0),
    st.sampled_from([("LAGRANGE", 7), ("HERMITE", 7), ("LAGRANGE", 9), ("HERMITE", 15)]),
)
def test_a_polynomial_of_the_stated_degree_is_reproduced_up_to_the_ends(
    powers: list[float], part: float, kind: tuple[str, int]
) -> None:
    segment = _segment(powers, *kind)
    at = EPOCHS[0] + part * (EPOCHS[-1] - EPOCHS[0])
    positions, velocities = interpolate(segment, np.array([at]))
    hours = (at - EPOCHS[0]) / 3_600.0
    assert positions[0, 0] == pytest.approx(np.polynomial.Polynomial(powers)(hours), abs=1e-6)
    if kind[0] == "LAGRANGE":
        rate = 2.0 * np.polynomial.Polynomial(powers).deriv()(hours) / 3_600.0
        assert velocities[0, 1] == pytest.approx(rate, abs=1e-6)


def test_states_at_the_epochs_are_the_states_given() -> None:
    for kind in ("LAGRANGE", "HERMITE", "LINEAR"):
        segment = _segment([1.0, 2.0, -3.0], kind, 5)
        positions, velocities = interpolate(segment, EPOCHS)
        np.testing.assert_allclose(positions, segment.positions_km, atol=1e-10)
        np.testing.assert_allclose(velocities, segment.velocities_km_s, atol=1e-10)


def test_linear_interpolation_joins_neighbours() -> None:
    segment = _segment([0.0, 0.0, 3_600.0], "LINEAR", 1)
    positions, _ = interpolate(segment, EPOCHS[:1] + 30.0)
    np.testing.assert_allclose(positions[0], 0.5 * (segment.positions_km[0] + segment.positions_km[1]))


def test_uneven_epochs_are_no_hindrance() -> None:
    epochs = EPOCHS[0] + np.array([0.0, 10.0, 70.0, 75.0, 200.0, 400.0, 410.0, 600.0, 900.0])
    segment = _segment([3.0, -2.0, 1.0, 5.0], "LAGRANGE", 5, epochs)
    at = EPOCHS[0] + np.array([5.0, 72.0, 300.0, 899.0])
    expected = np.polynomial.Polynomial([3.0, -2.0, 1.0, 5.0])((at - EPOCHS[0]) / 3_600.0)
    np.testing.assert_allclose(interpolate(segment, at)[0][:, 0], expected, atol=1e-9)


def test_nothing_is_said_outside_the_usable_span() -> None:
    segment = replace(_segment([1.0], "LAGRANGE", 5), usable_start=EPOCHS[3], usable_stop=EPOCHS[20])
    at = np.array([EPOCHS[3] - 1e-3, EPOCHS[3], EPOCHS[20], EPOCHS[20] + 1e-3])
    assert np.isfinite(segment_itrf(segment, at)[0][:, 0]).tolist() == [False, True, True, False]
    assert segment_span(segment) == (EPOCHS[3], EPOCHS[20])


def test_usable_times_wider_than_the_states_do_not_extrapolate() -> None:
    segment = replace(_segment([1.0], "LAGRANGE", 5), usable_start=EPOCHS[0] - 600.0, usable_stop=EPOCHS[-1] + 600.0)
    assert segment_span(segment) == (EPOCHS[0], EPOCHS[-1])


def test_other_clocks_are_turned_into_utc() -> None:
    # GPS time is 18 s ahead of UTC since 2017.
    segment = replace(_segment([0.0, 3_600.0], "LAGRANGE", 5), time_system="GPS")
    low, high = segment_span(segment)
    assert (low, high) == (EPOCHS[0] - 18.0, EPOCHS[-1] - 18.0)
    assert segment_itrf(segment, np.array([low + 60.0]))[0][0, 0] == pytest.approx(60.0)


def test_where_segments_meet_the_later_one_answers() -> None:
    first = _segment([1.0], "LAGRANGE", 5)
    second = _segment([9.0], "LAGRANGE", 5, EPOCHS + (EPOCHS[-1] - EPOCHS[0]))
    both = Ephemeris("TEAL", "2027-001A", (first, second), Path("teal.oem"))
    at = EPOCHS[-1] + np.array([-1.0, 0.0, 1.0, 1e6])
    found = ephemeris_itrf(both, at)[0][:, 0]
    assert found[:3].tolist() == pytest.approx([1.0, 9.0, 9.0])
    assert np.isnan(found[3])
