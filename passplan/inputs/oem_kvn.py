"""Orbit ephemeris messages in keyword-value notation, cut into segments."""

from __future__ import annotations

from pathlib import Path

from passplan.inputs.ccsds_kvn import is_comment, key_value
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.lines import numbered_lines, shortened
from passplan.inputs.oem_raw import METADATA, RawSegment

_HEADER = ("CCSDS_OEM_VERS", "CREATION_DATE", "ORIGINATOR", "MESSAGE_ID", "CLASSIFICATION")
_MARKS = ("META_START", "META_STOP", "COVARIANCE_START", "COVARIANCE_STOP")


def segments_of_kvn(text: str, file: str | Path, findings: Findings) -> list[RawSegment]:
    """The segments of ``text``, each faulty line noted as a problem. Covariance blocks are skipped."""
    reading = _Reading(file, findings)
    for number, raw in numbered_lines(text):
        line = raw.strip()
        if not is_comment(line):
            reading.take(f"line {number}", line)
    reading.end()
    return reading.segments


class _Reading:
    """The place in the message: header, metadata, data or covariance."""

    def __init__(self, file: str | Path, findings: Findings) -> None:
        self.segments: list[RawSegment] = []
        self._file = file
        self._findings = findings
        self._block = "header"

    def take(self, where: str, line: str) -> None:
        if line in _MARKS:
            self._mark(where, line)
        elif self._block == "metadata":
            self._metadata(where, line)
        elif self._block == "data":
            self.segments[-1].states.append((where, line.split()))
        elif self._block == "header":
            self._header(where, line)

    def end(self) -> None:
        if self._block in ("metadata", "covariance"):
            mark = "META_STOP" if self._block == "metadata" else "COVARIANCE_STOP"
            self._problem("last line", None, f"the message ends before {mark}; fetch the whole file again")

    def _mark(self, where: str, mark: str) -> None:
        before = {
            "META_START": ("header", "data"),
            "META_STOP": ("metadata",),
            "COVARIANCE_START": ("data",),
            "COVARIANCE_STOP": ("covariance",),
        }
        if self._block not in before[mark]:
            self._problem(where, mark, f"does not belong inside the {self._block}; fetch the file again")
        if mark == "META_START":
            self.segments.append(RawSegment(where))
        after = {"META_START": "metadata", "COVARIANCE_START": "covariance"}
        self._block = after.get(mark, "data" if self.segments else "header")

    def _header(self, where: str, line: str) -> None:
        found = key_value(line)
        if found is None or found[0] not in _HEADER:
            self._problem(where, shortened(line), "not a header line of an OEM; the metadata begins with META_START")

    def _metadata(self, where: str, line: str) -> None:
        found = key_value(line)
        metadata = self.segments[-1].metadata
        if found is None:
            self._problem(where, shortened(line), "not of the form KEYWORD = value; correct the line")
        elif found[0] not in METADATA:
            self._problem(
                where, shortened(line), f"not a metadata keyword of an OEM; {nearest(shortened(found[0]), METADATA)}"
            )
        elif found[0] in metadata:
            self._problem(where, shortened(line), f"{found[0]} stands twice; remove one")
        else:
            metadata[found[0]] = found[1]

    def _problem(self, where: str, value: object, remedy: str) -> None:
        self._findings.problem(self._file, where, value, remedy)
