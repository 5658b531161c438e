"""Orbit ephemeris messages (CCSDS 502.0-B OEM) in keyword-value notation or XML, read and checked."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

from passplan.inputs.ephemeris import Ephemeris, EphemerisSegment
from passplan.inputs.errors import Findings
from passplan.inputs.lines import few_faults
from passplan.inputs.oem_kvn import segments_of_kvn
from passplan.inputs.oem_raw import RawSegment
from passplan.inputs.oem_segment import checked_segment
from passplan.inputs.oem_xml import segments_of_xml


def parse_oem(content: bytes, file: str | Path, findings: Findings) -> Ephemeris | None:
    """The ephemeris in ``content``, or None with each fault noted as a problem (at most 50 of one file).

    Read are all segments of one object about the Earth in ICRF, GCRF, EME2000, TEME or an ITRF, in UTC,
    TAI, TT, GPS or UT1, epochs as calendar date or day of year; covariances and accelerations are
    skipped. Usable spans may touch, not overlap. Where INTERPOLATION is not stated it is HERMITE of
    degree 7 (common practice, no source). Source: CCSDS 502.0-B-3 section 5.
    """
    with few_faults(file, findings) as own:
        raw = _raw_segments(content, file, own)
        if not raw and not own.problems:
            own.problem(file, "", None, "the message holds no segment; fetch the whole file again")
        segments = [checked_segment(one, file, own) for one in raw]
        _check_one_object(raw, file, own)
        sound = [(one, segment) for one, segment in zip(raw, segments, strict=True) if segment is not None]
        sound.sort(key=lambda pair: pair[1].usable_start)
        _check_spans(sound, file, own)
        if own.problems or not sound:
            return None
        first = raw[0].metadata
        return Ephemeris(
            object_name=first["OBJECT_NAME"],
            object_id=first["OBJECT_ID"],
            segments=tuple(segment for _, segment in sound),
            source=Path(file),
        )


def _raw_segments(content: bytes, file: str | Path, findings: Findings) -> list[RawSegment]:
    bare = content.removeprefix(b"\xef\xbb\xbf").lstrip()
    if bare.startswith(b"<"):
        return segments_of_xml(bare, file, findings)
    if not bare.startswith((b"CCSDS_OEM_VERS", b"COMMENT")):
        findings.problem(
            file, "line 1", None, "not an orbit ephemeris message (CCSDS_OEM_VERS stands first); name an OEM file"
        )
        return []
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        findings.problem(file, f"byte {fault.start}", None, "not UTF-8 text; save the file as UTF-8")
        return []
    return segments_of_kvn(text, file, findings)


def _check_one_object(raw: list[RawSegment], file: str | Path, findings: Findings) -> None:
    for key, remedy in (
        ("OBJECT_ID", "is of another object than the first segment; give each object its own file"),
        ("TIME_SYSTEM", "differs from the first segment; use one time system in a message"),
    ):
        for one in raw[1:]:
            value, first = one.metadata.get(key, ""), raw[0].metadata.get(key, "")
            if value and first and value.upper() != first.upper():
                findings.problem(file, f"{one.place}, {key}", value, remedy)


def _check_spans(sound: list[tuple[RawSegment, EphemerisSegment]], file: str | Path, findings: Findings) -> None:
    for (earlier, before), (later, after) in pairwise(sound):
        if after.usable_start < before.usable_stop:
            remedy = f"its usable span overlaps that of {earlier.place}; set USEABLE_START_TIME and USEABLE_STOP_TIME"
            findings.problem(file, later.place, None, remedy)
        elif after.usable_start > before.usable_stop:
            gap_s = after.usable_start - before.usable_stop
            findings.warn(f"{file}: {later.place}: no states for {gap_s:.0f} s before this segment; no contacts there")
