"""UTC as plain seconds, and the Earth's rotation as Skyfield's built-in timescale knows it.

Inside this floor a time is a float64: UTC seconds since 2000-01-01T00:00:00 on a calendar of 86 400 s
days (called ``utc_s``). Its resolution is 0.12 microseconds until 2034. A leap second has no number of its own.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from skyfield.timelib import Time, Timescale

Floats = NDArray[np.float64]

DAY_S = 86_400.0
_ORIGIN = np.datetime64("2000-01-01T00:00:00", "us")
_ORIGIN_JD = 2_451_544.5


@lru_cache(maxsize=1)
def timescale() -> Timescale:
    """Skyfield's built-in timescale (its own delta-T and leap second tables; no file is fetched)."""
    from skyfield.api import load

    return load.timescale(builtin=True)


def utc_seconds(times_utc: NDArray[np.datetime64] | np.datetime64) -> Floats:
    """``utc_s`` of ``datetime64`` values of any unit, to the microsecond."""
    return np.asarray((np.asarray(times_utc).astype("datetime64[us]") - _ORIGIN) / np.timedelta64(1, "s"), float)


def datetimes_ms(utc_s: Floats) -> NDArray[np.datetime64]:
    """``datetime64[ms]`` of ``utc_s``, rounded to the nearest millisecond; NaN becomes NaT."""
    rounded = np.rint(np.asarray(utc_s, float) * 1e3)
    known = np.isfinite(rounded)
    steps = np.where(known, rounded, 0.0).astype("int64").astype("timedelta64[ms]")
    return np.where(known, _ORIGIN.astype("datetime64[ms]") + steps, np.datetime64("NaT", "ms"))


def julian_day(utc_s: Floats) -> tuple[Floats, Floats]:
    """UTC Julian day as (whole part ending in .5, fraction), the split that keeps SGP4 exact."""
    days = np.floor(utc_s / DAY_S)
    return _ORIGIN_JD + days, (utc_s - days * DAY_S) / DAY_S


def skyfield_time(utc_s: Floats) -> Time:
    """A Skyfield ``Time`` of ``utc_s``.

    Days and seconds of the day go in apart: Skyfield adds the leap seconds of the date it is given,
    so seconds counted from 2000 would miss those inserted since.
    """
    days = np.floor(np.asarray(utc_s, float) / DAY_S)
    return timescale().utc(2000, 1, 1 + days.astype(int), 0, 0, utc_s - days * DAY_S)


def sidereal_angle_rad(utc_s: Floats) -> Floats:
    """Greenwich mean sidereal angle of 1982 at UT1 (AIAA 2006-6753, appendix C), shape as ``utc_s``.

    This is the single turn from TEME to the Earth-fixed frame. UT1 comes from the built-in timescale.
    """
    from skyfield.sgp4lib import theta_GMST1982

    time = skyfield_time(utc_s)
    return np.asarray(theta_GMST1982(time.whole, time.ut1_fraction)[0], float)


def tai_minus_utc_s(utc_s: Floats) -> Floats:
    """Whole leap seconds between TAI and UTC."""
    time = skyfield_time(utc_s)
    days = (time.whole - _ORIGIN_JD) + time.tai_fraction
    return np.asarray(np.rint(days * DAY_S - utc_s), float)


def system_minus_utc_s(system: str, utc_s: Floats) -> Floats:
    """What to add to ``utc_s`` to get the reading of the clock ``system``: UTC, TAI, TT, GPS or UT1.

    TT = TAI + 32.184 s and GPS = TAI - 19 s by definition; UT1 from the built-in timescale.
    """
    utc_s = np.asarray(utc_s, float)
    if system == "UTC":
        return np.zeros_like(utc_s)
    if system == "UT1":
        return np.asarray(skyfield_time(utc_s).dut1, float)
    offset = {"TAI": 0.0, "TT": 32.184, "GPS": -19.0}.get(system)
    if offset is None:
        raise ValueError(f"time system {system!r} is not one of UTC, TAI, TT, GPS, UT1")
    return tai_minus_utc_s(utc_s) + offset
