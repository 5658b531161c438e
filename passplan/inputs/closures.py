"""Closures of antennas from CSV tables and iCalendar files, checked against each other."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np

from passplan.inputs.calendar_records import Closure
from passplan.inputs.closure_calendar import calendar_closures
from passplan.inputs.closure_places import Antennas, ClosureSource, PlacedClosure
from passplan.inputs.errors import Findings
from passplan.inputs.ground import Antenna
from passplan.inputs.lines import few_faults
from passplan.inputs.reader import Reader
from passplan.inputs.records import datetime64
from passplan.inputs.tables import checked, read_csv_records

__all__ = ["ClosureSource", "read_closures"]

# Closures this far outside the horizon still matter to nobody: preparing takes an hour at most.
_MARGIN = np.timedelta64(1, "D")


def read_closures(
    sources: Sequence[ClosureSource],
    antennas: Mapping[str, Antenna],
    start_utc: np.datetime64,
    end_utc: np.datetime64,
    reader: Reader,
    findings: Findings,
) -> tuple[Closure, ...]:
    """The closures of all ``sources`` that touch the horizon widened by a day, by antenna and start.

    A source is a CSV table with the fields of :class:`~passplan.inputs.calendar_records.Closure`, or an
    iCalendar file; the content decides. The antenna is that of the row or event, else that of the source;
    a site stands for all its antennas. Two closures of one kind that overlap on an antenna are a problem,
    an outage and a booking that overlap a warning. Every fault is noted with its row or event.
    """
    known = Antennas(antennas)
    first, last = start_utc - _MARGIN, end_utc + _MARGIN
    placed: list[PlacedClosure] = []
    for source in sources:
        with few_faults(source.path, findings) as own:
            content = reader.read(source.path, own)
            outer = known.of_source(source, own)
            if content is None or outer is None:
                continue
            if _is_calendar(content, source.path):
                placed += calendar_closures(content, source.path, outer, known, first, last, own)
            else:
                placed += _table_closures(source, outer, known, reader, own)
    placed.sort(key=lambda one: (one.closure.antenna, one.closure.start_utc, one.closure.end_utc, one.closure.kind))
    with few_faults("closures", findings) as own:
        _check_overlaps(placed, own)
    return tuple(
        one.closure
        for one in placed
        if datetime64(one.closure.start_utc) < last and datetime64(one.closure.end_utc) > first
    )


def _is_calendar(content: bytes, path: Path) -> bool:
    start = content.removeprefix(b"\xef\xbb\xbf").lstrip()[:64].upper()
    if start.startswith(b"BEGIN:"):
        return True
    return path.suffix.lower() in (".ics", ".ical", ".ifb") and not start.startswith((b"ANTENNA", b"START_UTC"))


def _table_closures(
    source: ClosureSource, outer: tuple[str, ...], known: Antennas, reader: Reader, findings: Findings
) -> list[PlacedClosure]:
    found: list[PlacedClosure] = []
    for where, row in read_csv_records(source.path, reader, findings):
        stated = row.get("antenna")
        names = known.named(stated) if stated is not None else outer
        # Without any antenna the record itself reports that the column is missing.
        record = row if stated is not None or not names else {**row, "antenna": names[0]}
        closure: Closure | None = checked(Closure, record, source.path, where, findings)
        if stated is not None and not names:
            findings.problem(
                source.path, f"{where}.antenna", stated, f"no such antenna or site; {known.remedy(stated)}"
            )
        elif stated is not None and outer and not set(names) <= set(outer):
            remedy = f"this file is about {', '.join(outer)} only; correct the row or the config"
            findings.problem(source.path, f"{where}.antenna", stated, remedy)
        elif closure is not None:
            found += [PlacedClosure(closure.model_copy(update={"antenna": name}), source.path, where) for name in names]
    return found


def _check_overlaps(placed: Sequence[PlacedClosure], findings: Findings) -> None:
    """``placed`` is sorted by antenna and start, so what reaches furthest so far is all there is to compare with."""
    reach: dict[str, dict[str, PlacedClosure]] = defaultdict(dict)
    for one in placed:
        closure = one.closure
        furthest = reach[closure.antenna]
        for kind, other in furthest.items():
            if other.closure.end_utc <= closure.start_utc:
                continue
            if kind == closure.kind:
                remedy = f"overlaps the {kind} of {closure.antenna} at {_place(other, one)}; correct or remove one"
                findings.problem(one.file, one.where, None, remedy)
            else:
                findings.warn(
                    f"{one}: this {closure.kind} of {closure.antenna} overlaps the {kind} at {_place(other, one)}"
                )
        held = furthest.get(closure.kind)
        if held is None or held.closure.end_utc < closure.end_utc:
            furthest[closure.kind] = one


def _place(other: PlacedClosure, beside: PlacedClosure) -> str:
    return other.where if other.file == beside.file else str(other)
