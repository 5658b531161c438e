"""Element sets from a file of any known format, or from every such file in a drop folder."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Literal

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.omm_csv import parse_omm_csv
from passplan.inputs.elements.omm_json import parse_omm_json
from passplan.inputs.elements.omm_kvn import parse_omm_kvn
from passplan.inputs.elements.omm_xml import parse_omm_xml
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.errors import Findings
from passplan.inputs.lines import few_faults
from passplan.inputs.reader import Reader

ElementFormat = Literal["tle", "json", "xml", "kvn", "csv"]

_BY_EXTENSION: dict[str, ElementFormat] = {
    ".tle": "tle",
    ".2le": "tle",
    ".3le": "tle",
    ".json": "json",
    ".xml": "xml",
    ".kvn": "kvn",
    ".omm": "kvn",
    ".csv": "csv",
}
_BY_START: tuple[tuple[ElementFormat, re.Pattern[bytes]], ...] = (
    ("xml", re.compile(rb"<")),
    ("json", re.compile(rb"[{\[]")),
    ("csv", re.compile(rb"[^\r\n]*(NORAD_CAT_ID|MEAN_MOTION)[^=\r\n]*[\r\n]")),
    ("kvn", re.compile(rb"CCSDS_OMM_VERS|COMMENT |[A-Z_]+ *=")),
)
_ELEMENT_LINE = re.compile(rb"^[ \t]*1 [ 0-9A-Z][ 0-9]{4}[A-Z ] ", re.MULTILINE)
_OTHER_MESSAGES = (b"CCSDS_OEM_VERS", b"CCSDS_OPM_VERS", b"CCSDS_OCM_VERS", b"CCSDS_TDM_VERS", b"CCSDS_CDM_VERS")
_XML_MESSAGE = re.compile(rb"<(?:[A-Za-z]+:)?(oem|opm|ocm|tdm|cdm)[\s>]")


def read_elements(path: Path, reader: Reader, findings: Findings) -> list[ElementSet]:
    """The element sets in the file ``path``, or in every recognised file of the folder ``path``.

    The content decides the format (TLE; OMM as JSON, XML, KVN or CSV); the extension decides only where
    the content does not say. Files of a folder that hold no element sets are left alone with a warning.
    Faults are noted as problems (at most 50 of one file), and the sound sets are returned.
    """
    if not reader.is_folder(path):
        return _read_file(path, reader, findings)
    sets: list[ElementSet] = []
    recognised = 0
    for item in reader.listing(path):
        content = reader.read(item, findings)
        if content is None:
            continue
        if element_format(content, item) is None:
            findings.warn(f"{item}: holds no element sets that can be read; left alone")
            continue
        recognised += 1
        sets.extend(_read_file(item, reader, findings))
    if recognised == 0:
        findings.warn(f"{path}: no file with element sets in this folder")
    return sets


def element_format(content: bytes, path: Path) -> ElementFormat | None:
    """The format of an element file, by its content and, where that says nothing, its extension."""
    start = content.removeprefix(b"\xef\xbb\xbf").lstrip()[:4_096]
    if _is_other_message(start):
        return None
    # Element lines come first: the name above them may begin with any character.
    if _ELEMENT_LINE.search(content):
        return "tle"
    for form, pattern in _BY_START:
        if pattern.match(start):
            return form
    return _BY_EXTENSION.get(path.suffix.lower()) if start else None


def _is_other_message(start: bytes) -> bool:
    if start.startswith(b"<"):
        return _XML_MESSAGE.search(start) is not None and b"<omm" not in start
    return any(keyword in start for keyword in _OTHER_MESSAGES)


def _read_file(path: Path, reader: Reader, findings: Findings) -> list[ElementSet]:
    with few_faults(path, findings) as own:
        sets = _parsed(path, reader, own)
        if not sets and not own.problems:
            own.warn(f"{path}: holds no element sets")
    return sets


def _parsed(path: Path, reader: Reader, findings: Findings) -> list[ElementSet]:
    content = reader.read(path, findings)
    form = element_format(content, path) if content is not None else None
    if content is not None and form is None:
        remedy = "neither a TLE nor an OMM file (JSON, XML, KVN, CSV); name a file of element sets"
        findings.problem(path, "", None, remedy)
    if content is None or form is None:
        return []
    if form == "xml":
        return parse_omm_xml(content, path, findings)
    if form == "csv":
        return parse_omm_csv(path, reader, findings)
    text = reader.text(path, findings)
    if text is None:
        return []
    return {"tle": parse_tle, "json": parse_omm_json, "kvn": parse_omm_kvn}[form](text, path, findings)
