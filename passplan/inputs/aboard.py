"""What spacecraft do by themselves: slots in which they cannot point at a station, and schedules already aboard."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Literal

from pydantic import model_validator

from passplan.inputs.errors import Findings, nearest
from passplan.inputs.fleet import Spacecraft
from passplan.inputs.reader import Reader
from passplan.inputs.records import Instant, Record
from passplan.inputs.tables import checked, read_csv_records


class Slot(Record):
    """A half-open interval in which a spacecraft can have no contact.

    ``imaging``: it points its camera elsewhere. ``attitude``: it holds an attitude that keeps it from a station.
    """

    spacecraft: str
    start_utc: Instant
    end_utc: Instant
    kind: Literal["imaging", "attitude"] = "imaging"
    note: str = ""

    @model_validator(mode="after")
    def _consistent(self) -> Slot:
        if self.start_utc >= self.end_utc:
            raise ValueError("end_utc is not after start_utc; swap or correct them")
        return self


def read_slots(
    files: Iterable[Path], spacecraft: Mapping[str, Spacecraft], reader: Reader, findings: Findings
) -> tuple[Slot, ...]:
    """The slots of CSV files ``spacecraft,start_utc,end_utc,kind,note``, every fault noted."""
    found = []
    for file in files:
        for where, row in read_csv_records(file, reader, findings):
            item: Slot | None = checked(Slot, row, file, where, findings)
            if item is None:
                continue
            if spacecraft and item.spacecraft not in spacecraft and item.spacecraft not in findings.unsound:
                remedy = f"not defined; {nearest(item.spacecraft, spacecraft)}"
                findings.problem(file, f"{where}.spacecraft", item.spacecraft, remedy)
            found.append(item)
    return tuple(found)
