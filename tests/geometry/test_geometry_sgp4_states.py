from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import DECAYING, END, LOW, START

from passplan.geometry.sgp4_states import sgp4_itrf, sgp4_span
from passplan.geometry.timescale import utc_seconds

START_S, END_S = float(utc_seconds(START)), float(utc_seconds(END))
EPOCH_S = float(utc_seconds(DECAYING.epoch_utc))


def test_a_sound_orbit_has_the_whole_span() -> None:
    assert sgp4_span(LOW.satrec, EPOCH_S, START_S, END_S) == (START_S, END_S)


def test_a_decay_ends_the_span_at_the_last_good_instant() -> None:
    low, high = sgp4_span(DECAYING.satrec, EPOCH_S, EPOCH_S, END_S + 5 * 86_400.0)
    assert low == EPOCH_S
    assert EPOCH_S < high < END_S + 5 * 86_400.0
    positions, _ = sgp4_itrf(DECAYING.satrec, np.array([high, high + 1e-3]))
    assert np.isfinite(positions[0]).all()
    assert np.isnan(positions[1]).all()


def test_nothing_is_left_after_the_decay() -> None:
    _, high = sgp4_span(DECAYING.satrec, EPOCH_S, EPOCH_S, END_S + 5 * 86_400.0)
    low, end = sgp4_span(DECAYING.satrec, EPOCH_S, high + 60.0, high + 9 * 86_400.0)
    assert end - low == pytest.approx(0.0)
