"""The orbit file that a spacecraft names itself: one element set, or an ephemeris."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.read import read_elements
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.errors import Findings
from passplan.inputs.fleet import Spacecraft
from passplan.inputs.oem import parse_oem
from passplan.inputs.reader import Reader

# Clocks of an OEM against UTC, to the second, since 2017. Good enough to compare a span with the horizon;
# the geometry floor converts each epoch exactly.
_SYSTEM_MINUS_UTC_S = {"UTC": 0.0, "UT1": 0.0, "GPS": 18.0, "TAI": 37.0, "TT": 69.184}
_SLACK_S = 2.0


@dataclass(frozen=True)
class OwnEphemeris:
    """An ephemeris, whether it can serve the horizon, and the reason if it cannot."""

    ephemeris: Ephemeris | None
    usable: bool
    reason: str = ""


def own_element_set(craft: Spacecraft, folder: Path, reader: Reader, findings: Findings) -> ElementSet | None:
    """The one element set in the spacecraft's ``elements_file``; more or fewer, or another number, is a problem.

    The number is compared only where both the fleet and the set state one: an object fresh from launch
    may have none, or a provisional one in the file.
    """
    path = folder / str(craft.elements_file)
    before = len(findings.problems)
    sets = read_elements(path, reader, findings)
    if len(findings.problems) > before:
        return None
    if len(sets) != 1:
        findings.problem(
            path, "", None, f"holds {len(sets)} element sets; the elements_file of {craft.name} must hold exactly one"
        )
        return None
    stated = sets[0].catalogue_number
    if craft.catalogue_number is not None and stated is not None and stated != craft.catalogue_number:
        findings.problem(
            path,
            f"{sets[0].place}, catalogue number",
            stated,
            f"{craft.name} has catalogue number {craft.catalogue_number}; name its own file, or correct the number",
        )
        return None
    return sets[0]


def own_ephemeris(
    craft: Spacecraft,
    folder: Path,
    reader: Reader,
    start_utc: np.datetime64,
    end_utc: np.datetime64,
    findings: Findings,
) -> OwnEphemeris:
    """The spacecraft's ``ephemeris_file``; unusable if it does not touch the horizon, warned of if it covers a part."""
    path = folder / str(craft.ephemeris_file)
    content = reader.read(path, findings)
    ephemeris = parse_oem(content, path, findings) if content is not None else None
    if ephemeris is None:
        return OwnEphemeris(None, False, f"its ephemeris file {path} cannot be read")
    spans = [
        _utc_span(segment.usable_start, segment.usable_stop, segment.time_system) for segment in ephemeris.segments
    ]
    first, last = spans[0][0], spans[-1][1]
    words = f"its ephemeris {path} covers {_shown(first)} to {_shown(last)}"
    if not any(begin < end_utc and end > start_utc for begin, end in spans):
        return OwnEphemeris(ephemeris, False, f"{words}, not the horizon")
    slack = np.timedelta64(int(_SLACK_S * 1e3), "ms")
    if first > start_utc + slack or last < end_utc - slack:
        findings.warn(f"{craft.name}: {words}, only a part of the horizon; no contacts outside it")
    return OwnEphemeris(ephemeris, True)


def _utc_span(start: float, stop: float, system: str) -> tuple[np.datetime64, np.datetime64]:
    first, last = (
        np.datetime64("2000-01-01", "ms") + np.timedelta64(round((t - _SYSTEM_MINUS_UTC_S[system]) * 1e3), "ms")
        for t in (start, stop)
    )
    return first, last


def _shown(instant: np.datetime64) -> str:
    return f"{np.datetime_as_string(instant, 'm')}Z"
