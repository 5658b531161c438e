"""What the antennas of a site share: equipment, people and the line to the outside."""

from __future__ import annotations

from datetime import time
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, model_validator

from passplan.inputs.contact_kind import ContactKind
from passplan.inputs.records import Instant, Label, Names, Record

Weekday = Literal["mon", "tue", "wed", "thu", "fri", "sat", "sun"]
WEEKDAYS: tuple[Weekday, ...] = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
_MINUTES_OF_DAY = 1_440


def _minutes(value: Any) -> Any:
    """Minutes since midnight of a time of day, as text or as TOML's own."""
    if isinstance(value, str) and len(value.split(":")) == 2 and value.replace(":", "").isdecimal():
        hours, minutes = (int(part) for part in value.split(":"))
        if minutes < 60 and hours * 60 + minutes <= _MINUTES_OF_DAY:
            return hours * 60 + minutes
    if isinstance(value, time) and not value.second and not value.microsecond:
        return value.hour * 60 + value.minute
    raise ValueError("write the time of day as 06:30, from 00:00 to 24:00")


TimeOfDay = Annotated[int, BeforeValidator(_minutes)]


class Pool(ContactKind):
    """Equipment that some antennas of a site share: at most ``at_once`` contacts of the kind use it at a time.

    ``antennas`` are those that share it, all of the site where it is empty. A contact uses it from its
    preparing to its releasing, or with ``with_setup = false`` for itself only.
    """

    name: Label
    antennas: Names = ()
    at_once: Annotated[int, Field(ge=0, le=1_000)] = 1
    with_setup: bool = True


class Shift(Record):
    """Hours of the day in which a site is staffed; they run past midnight where ``closes`` is not after ``opens``.

    Minutes since midnight in UTC, or in the site's time zone; ``days`` are those on which they begin.
    """

    opens: TimeOfDay
    closes: TimeOfDay
    days: tuple[Weekday, ...] = WEEKDAYS
    zone: Literal["utc", "site"] = "utc"

    @model_validator(mode="after")
    def _consistent(self) -> Shift:
        if not self.days:
            raise ValueError("days is empty; name some, as [\"mon\", \"tue\"], or remove the key")
        if self.opens == _MINUTES_OF_DAY:
            raise ValueError("opens is 24:00; write 00:00 of the next day")
        return self


class LineClosure(Record):
    """A half-open interval in which the line of a site carries nothing."""

    start_utc: Instant
    end_utc: Instant

    @model_validator(mode="after")
    def _consistent(self) -> LineClosure:
        if self.start_utc >= self.end_utc:
            raise ValueError("end_utc is not after start_utc; swap or correct them")
        return self


class Backhaul(Record):
    """The line that takes a site's data away: ``mb_per_day`` by the UTC day, and ``rate_mbps`` for all antennas.

    Where the site does not buffer, the line carries what is received as it is received, so that the peak rates of
    the contacts going on add up to ``rate_mbps`` at most, and there is no contact while the line is closed. A
    ``buffered`` site sends later: then the rate bounds the volume of each day, less the time of closures.
    """

    mb_per_day: Annotated[float, Field(ge=0.0, le=1e12)] | None = None
    rate_mbps: Annotated[float, Field(ge=0.0, le=1e6)] | None = None
    buffered: bool = False
    closure: tuple[LineClosure, ...] = ()

    @model_validator(mode="after")
    def _consistent(self) -> Backhaul:
        if self.mb_per_day is None and self.rate_mbps is None and not self.closure:
            raise ValueError("give mb_per_day, rate_mbps or a closure, or remove this table")
        if self.buffered and self.closure and self.rate_mbps is None:
            raise ValueError("closures of a buffered line count only with rate_mbps; give it, or remove the closures")
        return self
