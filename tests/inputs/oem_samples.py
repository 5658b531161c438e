"""Invented orbit ephemeris messages for the tests of their readers."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

METADATA = {
    "OBJECT_NAME": "MERLE 1",
    "OBJECT_ID": "2026-114A",
    "CENTER_NAME": "EARTH",
    "REF_FRAME": "EME2000",
    "TIME_SYSTEM": "UTC",
}


def states(start: np.datetime64, hours: float, step_s: int = 60) -> list[str]:
    """State lines of a circular orbit of 6 900 km radius, inclined by 60 deg."""
    rate = math.sqrt(398_600.4418 / 6_900.0**3)
    lines = []
    for t in range(0, round(hours * 3_600) + 1, step_s):
        c, s = math.cos(rate * t), math.sin(rate * t)
        place = (6_900 * c, 6_900 * s * 0.5, 6_900 * s * math.sqrt(0.75))
        speed = (-6_900 * rate * s, 6_900 * rate * c * 0.5, 6_900 * rate * c * math.sqrt(0.75))
        epoch = np.datetime_as_string(start + np.timedelta64(t, "s"), "ms")
        lines.append(" ".join([epoch, *(f"{x:.6f}" for x in place), *(f"{x:.9f}" for x in speed)]))
    return lines


def segment_kvn(
    start: np.datetime64, hours: float, step_s: int = 60, lines: Sequence[str] = (), **metadata: str
) -> str:
    """One segment: metadata (a change to "" removes the keyword) and states."""
    ends = {
        "START_TIME": np.datetime_as_string(start, "ms"),
        "STOP_TIME": np.datetime_as_string(start + np.timedelta64(round(hours * 3_600), "s"), "ms"),
    }
    fields = {**METADATA, **ends, "INTERPOLATION": "HERMITE", "INTERPOLATION_DEGREE": "7", **metadata}
    meta = [f"{key} = {value}" for key, value in fields.items() if value]
    return "\n".join(["META_START", *meta, "META_STOP", *(lines or states(start, hours, step_s)), ""])


def oem_kvn(start: np.datetime64, hours: float, **metadata: str) -> str:
    """A message of one segment."""
    header = "CCSDS_OEM_VERS = 2.0\nCREATION_DATE = 2027-03-08T12:00:00\nORIGINATOR = INVENTED\n\n"
    return header + segment_kvn(start, hours, **metadata)


def oem_xml(start: np.datetime64, hours: float, space: str = "") -> str:
    """The same message in XML."""
    ends = f"<START_TIME>{start}</START_TIME><STOP_TIME>{start + np.timedelta64(round(hours * 3_600), 's')}</STOP_TIME>"
    meta = "".join(f"<{key}>{value}</{key}>" for key, value in METADATA.items()) + ends
    meta += "<INTERPOLATION>HERMITE</INTERPOLATION><INTERPOLATION_DEGREE>7</INTERPOLATION_DEGREE>"
    keys = ("EPOCH", "X", "Y", "Z", "X_DOT", "Y_DOT", "Z_DOT")
    vectors = "".join(
        "<stateVector>" + "".join(f"<{k}>{w}</{k}>" for k, w in zip(keys, line.split(), strict=True)) + "</stateVector>"
        for line in states(start, hours)
    )
    body = f"<segment><metadata>{meta}</metadata><data><COMMENT>invented</COMMENT>{vectors}</data></segment>"
    header = "<header><CREATION_DATE>2027-03-08T12:00:00</CREATION_DATE><ORIGINATOR>INVENTED</ORIGINATOR></header>"
    return f"<?xml version='1.0' encoding='UTF-8'?><oem{space} version='2.0'>{header}<body>{body}</body></oem>"
