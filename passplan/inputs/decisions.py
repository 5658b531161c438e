"""What people decided before planning: pins, forbids and emergencies, and the published plan with its contacts."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from datetime import datetime
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.errors import Findings, nearest
from passplan.inputs.fleet import Spacecraft
from passplan.inputs.ground import Antenna
from passplan.inputs.reader import Reader
from passplan.inputs.records import Instant, Record, Service
from passplan.inputs.tables import checked, placed_in_files, read_csv_records


class Decision(Record):
    """One decision on a contact.

    A ``pin`` wants a contact in the window ``window``, or one of ``spacecraft`` on ``antenna`` that holds the span
    from ``start_utc`` to ``end_utc``. A ``forbid`` lets no contact touch what it names: a window, an antenna, a
    spacecraft, both, in a span or all along. An ``emergency`` wants a contact of ``spacecraft`` within the span, on
    any antenna if none is named, that offers ``service`` and lasts ``min_duration_s``; it outranks all else. With
    ``standby`` a pin of a span or an emergency counts only if a second antenna is held beside it all the time.
    """

    kind: Literal["pin", "forbid", "emergency"]
    window: str | None = None
    spacecraft: str | None = None
    antenna: str | None = None
    start_utc: Instant | None = None
    end_utc: Instant | None = None
    service: Service = "both"
    min_duration_s: Annotated[float, Field(ge=1.0, le=86_400.0)] = 120.0
    standby: bool = False
    note: str = ""

    @model_validator(mode="after")
    def _consistent(self) -> Decision:
        if (self.start_utc is None) != (self.end_utc is None):
            raise ValueError("give both start_utc and end_utc, or neither")
        if self.start_utc is not None and self.end_utc is not None and self.start_utc >= self.end_utc:
            raise ValueError("end_utc is not after start_utc; swap or correct them")
        if self.window is not None and (self.spacecraft or self.antenna or self.start_utc):
            raise ValueError("a window says it all; remove spacecraft, antenna and span, or the window")
        placed = self.spacecraft is not None and self.start_utc is not None
        if self.kind == "pin" and self.window is None and not (placed and self.antenna):
            raise ValueError("a pin needs a window, or spacecraft, antenna, start_utc and end_utc; add them")
        if self.kind == "emergency" and not placed:
            raise ValueError("an emergency needs spacecraft, start_utc and end_utc; add them")
        if self.kind == "forbid" and not (self.window or self.spacecraft or self.antenna):
            raise ValueError("a forbid needs a window, a spacecraft or an antenna; add one")
        if self.kind != "emergency" and {"service", "min_duration_s"} & self.model_fields_set:
            raise ValueError("service and min_duration_s are for an emergency only; remove them")
        if self.standby and (self.kind == "forbid" or self.window is not None):
            raise ValueError("standby is for an emergency or a pin of a span; remove it, or state the span")
        return self

    @property
    def name(self) -> str:
        """How reports call it."""
        if self.window is not None:
            return f"window {self.window}"
        span = "" if self.start_utc is None or self.end_utc is None else span_words(self.start_utc, self.end_utc)
        who = self.spacecraft or "any spacecraft"
        return f"{who} on {self.antenna or 'any antenna'}{span}"


class Published(Record):
    """One contact of the published plan."""

    spacecraft: str
    antenna: str
    start_utc: Instant
    end_utc: Instant

    @property
    def name(self) -> str:
        """How reports call it."""
        return f"{self.spacecraft} on {self.antenna}{span_words(self.start_utc, self.end_utc)}"


def span_words(start: datetime, end: datetime) -> str:
    """A span as names hold it, to the second."""
    return f" {start:%Y-%m-%d %H:%M:%S} to {end:%H:%M:%S} UTC"


def read_decisions(
    files: Iterable[Path], spacecraft: Mapping[str, Spacecraft], antennas: Mapping[str, Antenna], reader: Reader,
    findings: Findings,
) -> tuple[Decision, ...]:
    """The decisions of TOML files with ``[[decision]]`` tables, or of CSV files, every fault noted."""
    found: dict[tuple[str, str], Decision] = {}
    for file_name, where, row in placed_in_files(files, "decision", "decisions", reader, findings):
        item: Decision | None = checked(Decision, row, file_name, where, findings)
        if item is None:
            continue
        for key, known in (("spacecraft", spacecraft), ("antenna", antennas)):
            name = getattr(item, key)
            if name is not None and known and name not in known and name not in findings.unsound:
                findings.problem(file_name, f"{where}.{key}", name, f"not defined; {nearest(name, known)}")
        if (item.kind, item.name) in found:
            findings.problem(file_name, where, None, f"this {item.kind} of {item.name} stands twice; remove one")
        found[item.kind, item.name] = item
    return tuple(found.values())


def read_published(
    place: Path, spacecraft: Mapping[str, Spacecraft], antennas: Mapping[str, Antenna], reader: Reader,
    findings: Findings, what: Literal["published", "loaded"] = "published",
) -> tuple[Published, ...]:
    """The contacts of the plan directory ``place`` (or of a CSV file with the same columns).

    A contact of a spacecraft or antenna that the run no longer has is left out with a warning. Where ``what`` is
    ``loaded`` so are contacts for commands alone, without one: no schedule aboard knows of them. Stand-bys are left out
    too: what asks for them asks again.
    """
    table = place if place.suffix.lower() == ".csv" else place / "contacts.csv"
    found = []
    for where, row in read_csv_records(table, reader, findings):
        if row.get("origin") == "standby":
            continue
        if what == "loaded" and row.get("service") == "command":
            continue
        record = {key: value for key, value in row.items() if key in Published.model_fields}
        item: Published | None = checked(Published, record, table, where, findings)
        if item is None:
            continue
        gone = [name for name, known in ((item.spacecraft, spacecraft), (item.antenna, antennas)) if name not in known]
        if gone and spacecraft and antennas:
            findings.warn(f"{table}: {where}: {what} contact {item.name}: the run has no {gone[0]}")
        elif not gone:
            found.append(item)
    return tuple(found)


class LastCommand(Record):
    """When a spacecraft was last commanded with success."""

    spacecraft: str
    last_command_utc: Instant


def with_last_commands(
    file: Path, spacecraft: dict[str, Spacecraft], reader: Reader, findings: Findings
) -> dict[str, Spacecraft]:
    """The fleet with the last command contacts of a CSV file, where they are later than what the fleet file says."""
    fleet = dict(spacecraft)
    for where, row in read_csv_records(file, reader, findings):
        item: LastCommand | None = checked(LastCommand, row, file, where, findings)
        if item is None:
            continue
        craft = fleet.get(item.spacecraft)
        if craft is None:
            if fleet and item.spacecraft not in findings.unsound:
                remedy = f"not defined; {nearest(item.spacecraft, fleet)}"
                findings.problem(file, f"{where}.spacecraft", item.spacecraft, remedy)
        elif craft.last_command_utc is None or craft.last_command_utc < item.last_command_utc:
            fleet[craft.name] = craft.model_copy(update={"last_command_utc": item.last_command_utc})
    return fleet
