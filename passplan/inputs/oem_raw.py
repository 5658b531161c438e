"""An orbit ephemeris message as written: metadata and state lines, the same from KVN and from XML."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

METADATA = (
    "OBJECT_NAME",
    "OBJECT_ID",
    "CENTER_NAME",
    "REF_FRAME",
    "REF_FRAME_EPOCH",
    "TIME_SYSTEM",
    "START_TIME",
    "USEABLE_START_TIME",
    "USEABLE_STOP_TIME",
    "STOP_TIME",
    "INTERPOLATION",
    "INTERPOLATION_DEGREE",
)
"""The metadata keywords of CCSDS 502.0-B-3, table 5-3."""

MANDATORY = (
    "OBJECT_NAME",
    "OBJECT_ID",
    "CENTER_NAME",
    "REF_FRAME",
    "TIME_SYSTEM",
    "START_TIME",
    "STOP_TIME",
)


@dataclass
class RawSegment:
    """One segment: where it begins, its metadata, and (place, words) of each state.

    The words of a state are epoch, three coordinates in km, three in km/s, and accelerations if given.
    """

    place: str
    metadata: dict[str, str] = field(default_factory=dict)
    states: list[tuple[str, Sequence[str]]] = field(default_factory=list)
