"""The run config: which files make up a run, and its horizon."""

from __future__ import annotations

from datetime import timedelta
from pathlib import Path
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, model_validator

from passplan.inputs.errors import Findings
from passplan.inputs.reader import Reader
from passplan.inputs.records import Instant, Label, Record
from passplan.inputs.tables import checked, read_toml

_LONGEST_DAYS = 31


def _as_list(value: Any) -> Any:
    return [value] if isinstance(value, str | dict) else value


class CalendarFile(Record):
    """A file with closures; ``antenna`` or ``site`` says whose calendar it is where the file does not."""

    file: str
    antenna: str | None = None
    site: str | None = None


def _calendar_files(value: Any) -> Any:
    listed = _as_list(value)
    if not isinstance(listed, list):
        return listed
    return [{"file": item} if isinstance(item, str) else item for item in listed]


class RunConfig(Record):
    """The config as written. Paths are relative to the config; the horizon is ``hours`` long or runs to ``end``.

    ``rain_mm_per_h`` is the day's rain rate by site, where it is known. ``published`` is the directory of the
    published plan, ``last_commands`` a CSV file with the last command contact of each spacecraft. ``slots`` are CSV
    files with time in which spacecraft cannot have contacts, ``loaded`` the contacts that are already uplinked.
    ``bookings`` are CSV files of time on rented antennas; ``now`` is the moment at which it is asked for, the start
    where it is absent.
    """

    name: Label = "run"
    start: Instant | None = None
    end: Instant | None = None
    hours: Annotated[float, Field(gt=0.0, le=24.0 * _LONGEST_DAYS)] | None = None
    fleet: str
    ground: str
    elements: Annotated[tuple[str, ...], BeforeValidator(_as_list)] = ()
    closures: Annotated[tuple[CalendarFile, ...], BeforeValidator(_calendar_files)] = ()
    pfd_limits: str | None = None
    rain_mm_per_h: dict[str, Annotated[float, Field(ge=0.0, le=300.0)]] = Field(default_factory=dict)
    requests: Annotated[tuple[str, ...], BeforeValidator(_as_list)] = ()
    decisions: Annotated[tuple[str, ...], BeforeValidator(_as_list)] = ()
    published: str | None = None
    last_commands: str | None = None
    bookings: Annotated[tuple[str, ...], BeforeValidator(_as_list)] = ()
    now: Instant | None = None
    slots: Annotated[tuple[str, ...], BeforeValidator(_as_list)] = ()
    loaded: str | None = None
    policy: str | dict[str, Any] = Field(default_factory=dict)

    @model_validator(mode="after")
    def _consistent(self) -> RunConfig:
        if self.hours is not None and self.end is not None:
            raise ValueError("give either hours or end, not both")
        if self.end is not None and self.start is not None:
            length = self.end - self.start
            if length <= timedelta(0):
                raise ValueError("end is not after start; the horizon must have a length")
            if length > timedelta(days=_LONGEST_DAYS):
                raise ValueError(f"the horizon is longer than {_LONGEST_DAYS} days; shorten it")
        for instant in (self.start, self.end):
            if instant is not None and instant.microsecond:
                raise ValueError("start and end must fall on whole seconds; drop the fraction")
        return self


def read_config(path: Path, reader: Reader, findings: Findings) -> RunConfig | None:
    """The config at ``path``, or None with every fault noted."""
    document = read_toml(path, reader, findings)
    if document is None:
        return None
    config: RunConfig | None = checked(RunConfig, document, path, "", findings)
    return config
