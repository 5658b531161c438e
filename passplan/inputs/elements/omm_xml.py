"""OMM in NDM/XML: one ``omm`` element, or an ``ndm`` element that holds several."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from passplan.inputs.ccsds_xml import find_all, find_first, leaves, tag, xml_root
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.omm import OmmRecord, sets_of, unit_is_right
from passplan.inputs.errors import Findings

_BLOCKS = ("meanElements", "tleParameters")


def parse_omm_xml(content: bytes, file: str | Path, findings: Findings) -> list[ElementSet]:
    """All sound element sets in ``content``; each fault is noted as a problem naming record and keyword."""
    root = xml_root(content, file, findings)
    if root is None:
        return []
    messages = find_all(root, "omm")
    if not messages:
        findings.problem(file, tag(root), None, "no <omm> element in this XML; name an OMM file here")
        return []
    records: list[OmmRecord] = []
    number = 0
    for message in messages:
        for segment in find_all(message, "segment"):
            number += 1
            record = _record(segment, f"record {number}", file, findings)
            if record is not None:
                records.append((f"record {number}", record))
    if number == 0:
        findings.problem(file, "omm", None, "no <segment> in the message; fetch the file again")
    return sets_of(records, file, findings)


def _record(segment: Any, where: str, file: str | Path, findings: Findings) -> dict[str, str] | None:
    metadata, data = find_first(segment, "metadata"), find_first(segment, "data")
    blocks = [metadata] if metadata is not None else []
    if data is not None:
        blocks += [block for block in data if tag(block) in _BLOCKS]
    record: dict[str, str] = {}
    sound = True
    for block in blocks:
        for key, value, unit in leaves(block):
            if key in record:
                findings.problem(file, f"{where}.{key}", value, "stands twice in one message; remove one")
                sound = False
            if not unit_is_right(key, unit):
                findings.problem(file, f"{where}.{key}", unit, "the standard has another unit here; convert it")
                sound = False
            record[key] = value
    return record if sound else None
