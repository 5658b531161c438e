"""The ASCII time codes of CCSDS messages: calendar (``2027-03-09T06:00:00.25``) and day of year (``2027-068T...``)."""

from __future__ import annotations

import re
from datetime import date

_DAY_ZERO = date(2000, 1, 1).toordinal()
_CODE = re.compile(
    r"([0-9]{4})-(?:([0-9]{2})-([0-9]{2})|([0-9]{3}))"
    r"(?:T([0-9]{2}):([0-9]{2})(?::([0-9]{2})(\.[0-9]*)?)?)?(Z?)"
)
_HINT = "write the epoch as 2027-03-09T06:00:00.000 or 2027-068T06:00:00.000"


def days_and_seconds(code: str) -> tuple[int, float]:
    """Whole days since 2000-01-01 and seconds of the day, on the time system's own calendar.

    Source: CCSDS 502.0-B-3 section 7.5.10 (which refers to CCSDS 301.0-B, ASCII time codes A and B).
    Raises ``ValueError`` with a remedy for anything else, for a zone other than ``Z``, and for a leap
    second, which a count of 86 400 s per day cannot hold.
    """
    found = _CODE.fullmatch(code.strip())
    if found is None:
        raise ValueError(_HINT)
    year, month, day, day_of_year, hour, minute, second, fraction, _ = found.groups()
    ordinal = _ordinal(int(year), month, day, day_of_year)
    hours, minutes, seconds = int(hour or 0), int(minute or 0), int(second or 0)
    if seconds == 60:
        raise ValueError("a leap second cannot be held here; give the message in TAI")
    if hours > 23 or minutes > 59 or seconds > 59:
        raise ValueError(f"no such time of day; {_HINT}")
    part = float(f"0{fraction}") if fraction and fraction != "." else 0.0
    return ordinal - _DAY_ZERO, hours * 3_600 + minutes * 60 + seconds + part


def seconds_since_2000(code: str) -> float:
    """Seconds since 2000-01-01T00:00:00 at 86 400 s per day; errors as :func:`days_and_seconds`."""
    days, seconds = days_and_seconds(code)
    return days * 86_400.0 + seconds


def _ordinal(year: int, month: str | None, day: str | None, day_of_year: str | None) -> int:
    try:
        if day_of_year is None:
            return date(year, int(month or 0), int(day or 0)).toordinal()
        first = date(year, 1, 1).toordinal()
        if not 1 <= int(day_of_year) <= date(year, 12, 31).toordinal() - first + 1:
            raise ValueError
        return first + int(day_of_year) - 1
    except ValueError:
        raise ValueError(f"no such day; {_HINT}") from None
