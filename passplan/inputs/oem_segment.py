"""One segment of an orbit ephemeris message, from words to checked numbers."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from passplan.inputs.ccsds_time import seconds_since_2000
from passplan.inputs.ephemeris import EphemerisSegment
from passplan.inputs.errors import Findings
from passplan.inputs.lines import shortened
from passplan.inputs.oem_raw import MANDATORY, RawSegment

TIME_SYSTEMS = ("UTC", "TAI", "TT", "GPS", "UT1")
_FRAMES = re.compile(r"ICRF|GCRF|EME2000|TEME|ITRF(-?[0-9]{2,4})?")
_INTERPOLATIONS = ("LAGRANGE", "HERMITE", "LINEAR")
_HIGHEST_DEGREE = 20
# Where the message leaves the method open: position and velocity of four states (common practice, no source).
_OPEN_METHOD, _OPEN_DEGREE = "HERMITE", 7
# Inside the Earth, or far beyond the Moon: the usual slip is metres for kilometres.
_LEAST_RADIUS_KM, _MOST_RADIUS_KM = 6_300.0, 2_000_000.0
_MOST_SPEED_KM_S = 20.0
_SLACK_S = 1e-3
_GAP_FACTOR = 5.0

Floats = NDArray[np.float64]


def checked_segment(raw: RawSegment, file: str | Path, findings: Findings) -> EphemerisSegment | None:
    """``raw`` as numbers, or None with each fault noted as a problem. Metadata as CCSDS 502.0-B-3, table 5-3."""
    before = len(findings.problems)
    for key in MANDATORY:
        if not raw.metadata.get(key):
            findings.problem(file, f"{raw.place}, {key}", None, "missing in the metadata of this segment; add it")
    _check_words(raw, file, findings)
    span = _span(raw, file, findings)
    method, degree = _interpolation(raw, file, findings)
    states = _states(raw, file, findings)
    if len(findings.problems) > before or span is None or states is None:
        return None
    needed = {"LAGRANGE": degree + 1, "HERMITE": max(2, (degree + 1) // 2), "LINEAR": 2}[method]
    if len(states) < needed:
        findings.problem(
            file,
            raw.place,
            len(states),
            f"too few states: {method} of degree {degree} needs {needed}; add states or lower the degree",
        )
        return None
    _warn_of_gaps(raw, states[:, 0], span, file, findings)
    return EphemerisSegment(
        frame=raw.metadata["REF_FRAME"].upper(),
        time_system=raw.metadata["TIME_SYSTEM"].upper(),
        epochs=states[:, 0],
        positions_km=states[:, 1:4],
        velocities_km_s=states[:, 4:7],
        usable_start=span[0],
        usable_stop=span[1],
        interpolation=method,
        interpolation_degree=degree,
    )


def _check_words(raw: RawSegment, file: str | Path, findings: Findings) -> None:
    centre, frame = raw.metadata.get("CENTER_NAME", ""), raw.metadata.get("REF_FRAME", "")
    system = raw.metadata.get("TIME_SYSTEM", "")
    if centre and centre.upper() != "EARTH":
        findings.problem(file, f"{raw.place}, CENTER_NAME", centre, "only EARTH can be read; convert the message")
    if frame and not _FRAMES.fullmatch(frame.upper()):
        remedy = "only ICRF, GCRF, EME2000, TEME and ITRF... can be read; convert the message"
        findings.problem(file, f"{raw.place}, REF_FRAME", frame, remedy)
    if system and system.upper() not in TIME_SYSTEMS:
        remedy = f"only {', '.join(TIME_SYSTEMS)} can be read; convert the message"
        findings.problem(file, f"{raw.place}, TIME_SYSTEM", system, remedy)


def _span(raw: RawSegment, file: str | Path, findings: Findings) -> tuple[float, float] | None:
    """The usable span: USEABLE_START/STOP_TIME, else START/STOP_TIME."""
    times: dict[str, float] = {}
    for key in ("START_TIME", "USEABLE_START_TIME", "USEABLE_STOP_TIME", "STOP_TIME"):
        text = raw.metadata.get(key)
        if text:
            try:
                times[key] = seconds_since_2000(text)
            except ValueError as fault:
                findings.problem(file, f"{raw.place}, {key}", shortened(text), str(fault))
    if "START_TIME" not in times or "STOP_TIME" not in times:
        return None
    first, last = times["START_TIME"], times["STOP_TIME"]
    start, stop = times.get("USEABLE_START_TIME", first), times.get("USEABLE_STOP_TIME", last)
    if not first <= start < stop <= last:
        remedy = "the times must run START <= USEABLE_START < USEABLE_STOP <= STOP; correct them"
        findings.problem(file, f"{raw.place}, START_TIME", raw.metadata["START_TIME"], remedy)
        return None
    return start, stop


def _interpolation(raw: RawSegment, file: str | Path, findings: Findings) -> tuple[str, int]:
    method = raw.metadata.get("INTERPOLATION", "").upper()
    degree = raw.metadata.get("INTERPOLATION_DEGREE", "")
    if not method:
        return _OPEN_METHOD, _OPEN_DEGREE if len(raw.states) >= (_OPEN_DEGREE + 1) // 2 else 3
    if method not in _INTERPOLATIONS:
        remedy = f"only {', '.join(_INTERPOLATIONS)} can be read; convert the message"
        findings.problem(file, f"{raw.place}, INTERPOLATION", shortened(method), remedy)
        return _OPEN_METHOD, _OPEN_DEGREE
    if method == "LINEAR":
        return method, 1
    if not re.fullmatch(r"[0-9]{1,3}", degree) or not 1 <= int(degree) <= _HIGHEST_DEGREE:
        remedy = f"write a whole number from 1 to {_HIGHEST_DEGREE}"
        findings.problem(file, f"{raw.place}, INTERPOLATION_DEGREE", shortened(degree) or None, remedy)
        return method, 1
    return method, int(degree)


def _states(raw: RawSegment, file: str | Path, findings: Findings) -> Floats | None:
    """The states as rows of (epoch, km, km, km, km/s, km/s, km/s), or None if one is faulty."""
    rows = [row for where, words in raw.states if (row := _state(where, words, file, findings)) is not None]
    if not raw.states:
        findings.problem(file, raw.place, None, "the segment holds no states; fetch the whole file again")
    if not rows or len(rows) < len(raw.states):
        return None
    states = np.array(rows, dtype=np.float64)
    with np.errstate(over="ignore"):  # a number too large to square is outside the limits as well
        radius_km, speed_km_s = (np.linalg.norm(states[:, i : i + 3], axis=1) for i in (1, 4))
    faults = (
        (np.diff(states[:, 0], prepend=-np.inf) <= 0.0, "its epoch is not after the one before; sort the states"),
        (
            (radius_km < _LEAST_RADIUS_KM) | (radius_km > _MOST_RADIUS_KM),
            "the position is not that of an orbit; give it in km from the Earth's centre",
        ),
        (speed_km_s > _MOST_SPEED_KM_S, "the speed is not that of an orbit; give it in km/s"),
    )
    sound = True
    for wrong, remedy in faults:
        places = np.flatnonzero(wrong)
        if places.size:
            more = f" (and {places.size - 1} more states)" if places.size > 1 else ""
            where, words = raw.states[int(places[0])]
            findings.problem(file, where, shortened(" ".join(words)), f"{remedy}{more}")
            sound = False
    return states if sound else None


def _state(where: str, words: Sequence[str], file: str | Path, findings: Findings) -> list[float] | None:
    if len(words) not in (7, 10):
        remedy = "a state is an epoch, three km and three km/s (and three accelerations if any); correct it"
        findings.problem(file, where, shortened(" ".join(words)) or None, remedy)
        return None
    try:
        epoch = seconds_since_2000(words[0])
    except ValueError as fault:
        findings.problem(file, where, shortened(words[0]), str(fault))
        return None
    try:
        numbers = [float(part) for part in words[1:7]]
    except ValueError:
        numbers = [math.nan]
    if not all(map(math.isfinite, numbers)):
        findings.problem(
            file, where, shortened(" ".join(words)), "holds something that is not a finite number; correct it"
        )
        return None
    return [epoch, *numbers]


def _warn_of_gaps(
    raw: RawSegment, epochs: Floats, span: tuple[float, float], file: str | Path, findings: Findings
) -> None:
    """Warn where the states do not reach the stated span, or where one step is far longer than its neighbours.

    Step lengths may vary along an orbit, but gradually; a step of more than five times both of its
    neighbours looks like lost states (common practice, no source).
    """
    if epochs[0] > span[0] + _SLACK_S or epochs[-1] < span[1] - _SLACK_S:
        findings.warn(f"{file}: {raw.place}: the states do not cover the stated span; no contacts where there are none")
    steps = np.diff(epochs)
    if steps.size < 3:
        return
    around = np.maximum(np.r_[steps[1], steps[:-1]], np.r_[steps[1:], steps[-2]])
    for i in np.flatnonzero(steps > _GAP_FACTOR * around)[:3]:
        where = raw.states[int(i)][0]
        findings.warn(f"{file}: {where}: no states for {steps[i]:.0f} s after this one; positions there are doubtful")
