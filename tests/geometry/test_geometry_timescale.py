from __future__ import annotations

import numpy as np
import pytest

from passplan.geometry.timescale import (
    datetimes_ms,
    julian_day,
    sidereal_angle_rad,
    system_minus_utc_s,
    timescale,
    utc_seconds,
)


def test_utc_seconds_count_days_of_86400_s_from_2000() -> None:
    # Six leap seconds lie between; a calendar of even days does not see them.
    assert utc_seconds(np.datetime64("2027-03-09T06:00:00.250", "ms")) == 9_929 * 86_400 + 21_600.25
    assert utc_seconds(np.array(["2000-01-01T00:00:01"], "datetime64[s]")).tolist() == [1.0]


def test_datetimes_round_to_the_nearest_millisecond_and_keep_nan() -> None:
    found = datetimes_ms(np.array([0.0004, 0.0006, np.nan]))
    assert found[:2].tolist() == np.array(["2000-01-01T00:00:00.000", "2000-01-01T00:00:00.001"], "M8[ms]").tolist()
    assert np.isnat(found[2])


def test_the_julian_day_is_split_at_midnight() -> None:
    whole, fraction = julian_day(np.array([86_400.0 * 9_929 + 43_200.0]))
    assert (whole[0], fraction[0]) == (2_451_544.5 + 9_929, 0.5)


def test_the_sidereal_angle_counts_leap_seconds() -> None:
    # The date goes into Skyfield as a date here and as seconds there: both must know the leap seconds since 2000.
    from skyfield.sgp4lib import theta_GMST1982

    time = timescale().utc(2021, 9, 18, 12, 34, 56.5)
    expected, _ = theta_GMST1982(time.whole, time.ut1_fraction)
    found = sidereal_angle_rad(utc_seconds(np.array(["2021-09-18T12:34:56.5"], "datetime64[ms]")))
    assert found[0] == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize(("system", "offset_s"), [("UTC", 0.0), ("TAI", 37.0), ("TT", 69.184), ("GPS", 18.0)])
def test_clock_offsets_since_2017(system: str, offset_s: float) -> None:
    # TAI - UTC has been 37 s since 2017-01-01 (IERS Bulletin C 52).
    assert system_minus_utc_s(system, np.array([9_929 * 86_400.0]))[0] == pytest.approx(offset_s, abs=1e-9)


def test_ut1_stays_within_a_second_of_utc() -> None:
    assert abs(system_minus_utc_s("UT1", np.array([7_931 * 86_400.0]))[0]) < 0.9


def test_an_unknown_clock_is_refused() -> None:
    with pytest.raises(ValueError, match="time system 'MARS'"):
        system_minus_utc_s("MARS", np.array([0.0]))
