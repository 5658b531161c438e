"""Orbits of the planned spacecraft as ephemeris messages, for systems that prefer states to element sets."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.run import OrbitSource, Run
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.names import file_stems

Floats = NDArray[np.float64]
# States beyond the horizon on both sides, so that a reader interpolates up to its edges.
_MARGIN = 4
# Lagrange over positions alone: the velocities that SGP4 gives for deep-space orbits leave out lunar and solar
# periodics, so that Hermite over them errs by metres. Eight states a minute apart follow a low orbit to a millimetre.
_DEGREE = 7
# A line of KVN has at most 254 characters.
_LONGEST_NAME = 200


def write_ephemerides(record: PlanRecord, run: Run, folder: Path, step_s: float = 60.0) -> list[Path]:
    """Write one OEM for each planned spacecraft into ``folder``; those without any state are left out."""
    written = []
    for name, stem in file_stems(name for name in record.summary["spacecraft"] if name in run.orbits).items():
        text = oem_text(name, run.orbits[name], run.start_utc, run.end_utc, step_s, record.summary["plan_id"])
        if text:
            written.append(folder / f"{stem}.oem")
            written[-1].write_text(text, encoding="ascii")
    return written


def oem_text(
    name: str, orbit: OrbitSource, start_utc: np.datetime64, end_utc: np.datetime64, step_s: float, plan_id: str
) -> str:
    """An orbit ephemeris message (CCSDS 502.0-B-3 section 5, KVN) of the horizon, states every ``step_s``.

    The frame is the Earth-fixed one of the geometry floor (polar motion off) and is named ITRF2000, which is on
    the standard's list; its realisations differ by centimetres. Where the orbit source has a gap, a new segment
    begins. Empty where it knows no state at all.
    """
    first, last = float(utc_seconds(start_utc)), float(utc_seconds(end_utc))
    inner = np.append(np.arange(first, last, step_s), last)
    times = np.concatenate(
        [first - step_s * np.arange(_MARGIN, 0, -1), inner, last + step_s * np.arange(1, _MARGIN + 1)]
    )
    positions, velocities = states_itrf(orbit, times)
    blocks = list(_segments(name, orbit, times, np.hstack([positions, velocities]), (first, last)))
    if not blocks:
        return ""
    stamp = datetime.now(UTC).replace(tzinfo=None).isoformat(timespec="seconds")
    origin = "SGP4 element set" if isinstance(orbit, ElementSet) else "ephemeris message"
    head = [
        "CCSDS_OEM_VERS = 2.0",
        f"COMMENT Plan {plan_id}; from {origin}; polar motion off",
        *(f"COMMENT {caution}" for caution in CAUTIONS),
        f"CREATION_DATE = {stamp}",
        "ORIGINATOR = PASSPLAN",
        "",
    ]
    return "\n".join([*head, *blocks]) + "\n"


def _segments(
    name: str, orbit: OrbitSource, times: Floats, states: NDArray[np.float64], usable: tuple[float, float]
) -> Iterator[str]:
    known = np.isfinite(states).all(axis=1)
    edges = np.flatnonzero(np.diff(known.astype(np.int8), prepend=0, append=0))
    for begin, end in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True):
        low, high = max(times[begin], usable[0]), min(times[end - 1], usable[1])
        if end - begin < 2 or low >= high:
            continue
        degree = min(_DEGREE, end - begin - 1)
        lines = [
            "META_START",
            f"OBJECT_NAME = {_printable_ascii(name)}",
            f"OBJECT_ID = {_printable_ascii(_object_id(orbit))}",
            "CENTER_NAME = EARTH",
            "REF_FRAME = ITRF2000",
            "TIME_SYSTEM = UTC",
            f"START_TIME = {_epoch(times[begin])}",
            f"USEABLE_START_TIME = {_epoch(low)}",
            f"USEABLE_STOP_TIME = {_epoch(high)}",
            f"STOP_TIME = {_epoch(times[end - 1])}",
            "INTERPOLATION = LAGRANGE",
            f"INTERPOLATION_DEGREE = {degree}",
            "META_STOP",
        ]
        epochs = np.datetime_as_string(datetimes_ms(times[begin:end]), unit="ms").tolist()
        lines += [
            f"{epoch} " + " ".join(f"{value:.6f}" for value in row[:3]) + " " + " ".join(f"{v:.9f}" for v in row[3:])
            for epoch, row in zip(epochs, states[begin:end].tolist(), strict=True)
        ]
        yield "\n".join([*lines, ""])


def _object_id(orbit: OrbitSource) -> str:
    """The international designator in full, as 1998-067A; UNKNOWN where there is none (CCSDS 502.0-B-3, table 5-3)."""
    if not isinstance(orbit, ElementSet):
        return orbit.object_id
    text = orbit.international_designator.strip()
    if len(text) >= 6 and text[:5].isdigit():
        year = int(text[:2])
        return f"{1900 + year if year >= 57 else 2000 + year}-{text[2:]}"
    return text or "UNKNOWN"


def _printable_ascii(text: str) -> str:
    """``text`` in the printable ASCII that KVN allows (CCSDS 502.0-B-3, section 7, from memory).

    Letters lose their accents; what has no such letter is written ``\\uXXXX``, so that names stay apart.
    """
    plain = "".join(one for one in unicodedata.normalize("NFKD", text) if not unicodedata.combining(one))
    spaced = "".join(" " if one.isspace() else one for one in plain if one.isprintable() or one.isspace())
    plain = " ".join(spaced.encode("ascii", "backslashreplace").decode("ascii").split())
    return plain[:_LONGEST_NAME] or "UNKNOWN"


def _epoch(seconds: float) -> str:
    return str(np.datetime_as_string(datetimes_ms(np.array([seconds])), unit="ms")[0])
