"""The tables of a plan as typed rows, with a fault for whatever cannot be read as one."""

from __future__ import annotations

import math
from collections import Counter, defaultdict
from collections.abc import Hashable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd

from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault

_CONTACT_COLUMNS = (
    "contact_id", "window_id", "spacecraft", "antenna", "site", "service", "radio", "frequency_mhz", "polarisation",
    "start_utc", "end_utc", "duration_s", "usable_s", "modcod", "volume_mb", "min_margin_db", "weight", "value", "cost",
)
_SEGMENT_COLUMNS = ("contact_id", "start_utc", "end_utc", "modcod", "rate_mbps", "data_class", "volume_mb")
_SERVICES = ("downlink", "command", "both")


@dataclass(frozen=True)
class Piece:
    """One piece of sending, of one or several segments; times in seconds from the horizon's start.

    ``class_mb`` is the volume by class of data.
    """

    start_s: float
    end_s: float
    modcod: str
    rate_mbps: float
    volume_mb: float
    class_mb: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Contact:
    """One row of the contacts table with its segments in time order; seconds from the horizon's start.

    One that stands by is there to take over from another contact of its spacecraft, and no more.
    """

    contact_id: str
    window_id: str
    spacecraft: str
    antenna: str
    site: str
    service: str
    radio: str
    frequency_mhz: float
    polarisation: str
    start_s: float
    end_s: float
    duration_s: float
    usable_s: float
    modcod: str
    volume_mb: float
    min_margin_db: float
    weight: float
    value: float
    cost: float
    pieces: tuple[Piece, ...]
    standby: bool = False

    @property
    def place(self) -> str:
        """How a fault names the contact."""
        return f"contact {self.contact_id} ({self.spacecraft} on {self.antenna})"


def read_rows(run: Run, contacts: pd.DataFrame, segments: pd.DataFrame) -> tuple[list[Contact], list[Fault]]:
    """The contacts that make sense, in time order, and a fault for every row or column that does not."""
    faults = [
        Fault("table", name, f"the column {column} is missing")
        for name, table, columns in (
            ("contacts table", contacts, _CONTACT_COLUMNS), ("segments table", segments, _SEGMENT_COLUMNS))
        for column in columns
        if column not in table.columns
    ]
    if faults:
        return [], faults
    known = set(map(str, contacts["contact_id"]))
    for name, count in Counter(map(str, contacts["contact_id"])).items():
        if count > 1:
            faults.append(Fault("table", f"contact {name}", f"this identifier stands {count} times"))
    pieces: dict[str, list[Piece]] = defaultdict(list)
    for record in segments.to_dict("records"):
        owner = str(record["contact_id"])
        if owner not in known:
            faults.append(Fault("table", f"segment of {owner}", "belongs to no contact of the plan"))
        pieces[owner].append(_piece(run, record))
    rows = []
    for record in contacts.to_dict("records"):
        own = sorted(_joined(pieces[str(record["contact_id"])]), key=lambda piece: piece.start_s)
        contact = _contact(run, record, tuple(own))
        wrong = _nonsense(run, contact)
        faults.extend(wrong)
        if not wrong:
            rows.append(contact)
    return sorted(rows, key=lambda contact: (contact.start_s, contact.contact_id)), faults


def _joined(segments: list[Piece]) -> list[Piece]:
    """Segments that differ in their class alone are one piece of sending."""
    found: list[Piece] = []
    for one in segments:
        for k, other in enumerate(found):
            alike = (one.start_s, one.end_s, one.modcod, one.rate_mbps) == (
                other.start_s, other.end_s, other.modcod, other.rate_mbps)
            if alike and not set(one.class_mb) & set(other.class_mb):
                found[k] = replace(
                    other, volume_mb=other.volume_mb + one.volume_mb, class_mb={**other.class_mb, **one.class_mb})
                break
        else:
            found.append(one)
    return found


def _nonsense(run: Run, contact: Contact) -> list[Fault]:
    """Faults that leave nothing to check any further."""
    said: list[str] = []
    if contact.spacecraft not in run.spacecraft:
        said.append(f"the run has no spacecraft {contact.spacecraft}")
    elif contact.spacecraft not in run.orbits:
        said.append(f"{contact.spacecraft} was left out of the run: {run.left_out.get(contact.spacecraft, 'no orbit')}")
    if contact.antenna not in run.antennas:
        said.append(f"the run has no antenna {contact.antenna}")
    if contact.service not in _SERVICES:
        said.append(f"the service {contact.service!r} is none of {', '.join(_SERVICES)}")
    times = [contact.start_s, contact.end_s, *(t for piece in contact.pieces for t in (piece.start_s, piece.end_s))]
    if not all(map(math.isfinite, times)):
        said.append("a time is missing or cannot be read")
    elif contact.end_s <= contact.start_s:
        said.append("it does not end after it starts")
    return [Fault("table", contact.place, sentence) for sentence in said]


def _contact(run: Run, record: Mapping[Hashable, Any], pieces: tuple[Piece, ...]) -> Contact:
    return Contact(
        contact_id=_text(record["contact_id"]),
        window_id=_text(record["window_id"]),
        spacecraft=_text(record["spacecraft"]),
        antenna=_text(record["antenna"]),
        site=_text(record["site"]),
        service=_text(record["service"]),
        radio=_text(record["radio"]),
        frequency_mhz=_figure(record["frequency_mhz"]),
        polarisation=_text(record["polarisation"]),
        start_s=_seconds(run, record["start_utc"]),
        end_s=_seconds(run, record["end_utc"]),
        duration_s=_figure(record["duration_s"]),
        usable_s=_figure(record["usable_s"]),
        modcod=_text(record["modcod"]),
        volume_mb=_figure(record["volume_mb"]),
        min_margin_db=_figure(record["min_margin_db"]),
        weight=_figure(record["weight"]),
        value=_figure(record["value"]),
        cost=_figure(record["cost"]),
        pieces=pieces,
        standby=_text(record.get("origin")) == "standby",
    )


def _piece(run: Run, record: Mapping[Hashable, Any]) -> Piece:
    volume_mb = _figure(record["volume_mb"])
    return Piece(
        _seconds(run, record["start_utc"]), _seconds(run, record["end_utc"]), _text(record["modcod"]),
        _figure(record["rate_mbps"]), volume_mb, {_text(record["data_class"]): volume_mb},
    )


def _text(value: Any) -> str:
    """An empty cell of a CSV file comes back as NaN."""
    return "" if value is None or (isinstance(value, float) and math.isnan(value)) else str(value)


def _figure(value: Any) -> float:
    try:
        return float(value)
    except (TypeError, ValueError):
        return math.nan


def _seconds(run: Run, value: Any) -> float:
    try:
        instant = pd.Timestamp(value)
        if instant.tzinfo is not None:
            instant = instant.tz_convert("UTC").tz_localize(None)
        return float((instant.to_datetime64() - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
    except (TypeError, ValueError):
        return math.nan
