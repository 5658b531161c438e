"""Orbit ephemeris messages in NDM/XML, cut into segments."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from passplan.inputs.ccsds_xml import find_all, find_first, leaves, tag, xml_root
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.oem_raw import METADATA, RawSegment

_POSITION = ("X", "Y", "Z")
_VELOCITY = ("X_DOT", "Y_DOT", "Z_DOT")
_UNITS = {**dict.fromkeys(_POSITION, "km"), **dict.fromkeys(_VELOCITY, "km/s")}


def segments_of_xml(content: bytes, file: str | Path, findings: Findings) -> list[RawSegment]:
    """The segments of ``content``, each fault noted as a problem. Covariance blocks are skipped."""
    root = xml_root(content, file, findings)
    if root is None:
        return []
    messages = find_all(root, "oem")
    if not messages:
        findings.problem(file, tag(root), None, "no <oem> element in this XML; name an OEM file here")
        return []
    segments = [segment for message in messages for segment in find_all(message, "segment")]
    return [_segment(element, f"segment {i}", file, findings) for i, element in enumerate(segments, start=1)]


def _segment(element: Any, place: str, file: str | Path, findings: Findings) -> RawSegment:
    segment = RawSegment(place)
    metadata, data = find_first(element, "metadata"), find_first(element, "data")
    for key, value, _ in leaves(metadata if metadata is not None else ()):
        if key not in METADATA:
            findings.problem(
                file, f"{place}.{key}", value, f"not a metadata keyword of an OEM; {nearest(key, METADATA)}"
            )
        elif key in segment.metadata:
            findings.problem(file, f"{place}.{key}", value, "stands twice; remove one")
        else:
            segment.metadata[key] = value
    number = 0
    for vector in data if data is not None else ():
        if tag(vector) == "stateVector":
            number += 1
            where = f"{place}, state {number}"
            segment.states.append((where, _words(vector, where, file, findings)))
    return segment


def _words(vector: Any, where: str, file: str | Path, findings: Findings) -> list[str]:
    """The words of a state in the order of a KVN line; a missing one makes the line too short."""
    found: dict[str, str] = {}
    for key, value, unit in leaves(vector):
        if key in found:
            findings.problem(file, f"{where}.{key}", value, "stands twice in one state; remove one")
        if unit and unit != _UNITS.get(key, unit):
            findings.problem(file, f"{where}.{key}", unit, f"the unit is {_UNITS[key]} in the standard; convert it")
        found[key] = value
    return [found[key] for key in ("EPOCH", *_POSITION, *_VELOCITY) if found.get(key)]
