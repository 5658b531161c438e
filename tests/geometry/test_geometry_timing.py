from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import ECCENTRIC, GEOSYNCHRONOUS, LOW, antenna, windows

from passplan.geometry.timescale import utc_seconds
from passplan.geometry.timing import DEFAULT, off_pointing_deg, timing_model
from passplan.inputs.policy import Growth, Timing

EPOCH_S = float(utc_seconds(LOW.epoch_utc))


def test_sigma_grows_with_age_either_way() -> None:
    model = timing_model([LOW])
    days = np.array([0.0, 1.0, 3.0, -3.0])
    sigma = model.sigma_s(np.zeros(4, np.int64), EPOCH_S + 86_400.0 * days)
    # About 1 km at epoch and 2 km more for each day, over 7.6 km/s (common practice, no source).
    np.testing.assert_allclose(sigma * 7.6, [1.0, 3.0, 7.0, 7.0], rtol=0.01)


def test_each_source_has_the_growth_of_its_class() -> None:
    model = timing_model([LOW, GEOSYNCHRONOUS, ECCENTRIC])
    classes = ("low", "geosynchronous", "eccentric")
    assert model.per_day_km.tolist() == [getattr(DEFAULT, kind).per_day_km for kind in classes]


def test_the_growth_can_be_given() -> None:
    timing = Timing(low=Growth(at_epoch_km=5.0, per_day_km=0.0))
    sigma = timing_model([LOW], timing).sigma_s(np.array([0]), np.array([EPOCH_S + 1e6]))
    assert sigma[0] == pytest.approx(5.0 / 7.6, rel=0.01)


def test_off_pointing_is_the_along_track_sigma_seen_from_the_least_range() -> None:
    table = windows(LOW, antenna())
    off = off_pointing_deg(table, {"Teal": LOW})
    # Hand calculation: about 7.6 km/s over the range, in radians at these small angles.
    by_hand = np.degrees(table["timing_sigma_s"] * 7.6 / table["min_range_km"])
    np.testing.assert_allclose(off, by_hand, rtol=0.01)
