"""Rented antennas: nothing is relied on that cannot be had, and what has to be asked or given back is said."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from datetime import datetime, timedelta
from itertools import pairwise
from typing import Any

import numpy as np

from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.occupancy import held
from passplan.planning.audit.rows import Contact

# Setup times may be fractions of a second, plans count whole ones.
_TOLERANCE_S = 1.0
_Part = tuple[str, float, float, float | None]


def check_rented(run: Run, contacts: Sequence[Contact], summary: Mapping[str, Any]) -> Iterator[Fault]:
    """Every part of a contact's time against the bookings, and the three lists of the summary."""
    wanted: dict[str, list[_Part]] = {"to_ask": [], "awaited": [], "give_back": _to_give_back(run, contacts)}
    yield from _check_reliance(run, contacts, wanted)
    for key, parts in wanted.items():
        stated = [_stated(run, key, entry) for entry in summary.get(key, [])]
        for part in parts:
            clear = part[2] - part[1] - (run.policy.min_contact_s if key == "give_back" else 0.0) > _TOLERANCE_S
            if clear and not any(_same(part, other) for other in stated):
                sentence = f"{_span(run, part)} belongs under {key}, as {_by(run, part)}"
                yield Fault("rented", f"antenna {part[0]}", sentence)
        for other in stated:
            if not any(_same(part, other) for part in parts):
                yield Fault("rented", f"antenna {other[0]}", f"{_span(run, other)} does not belong under {key}")


def _check_reliance(run: Run, contacts: Sequence[Contact], wanted: dict[str, list[_Part]]) -> Iterator[Fault]:
    """Faults where a contact relies on what cannot be had; notes in ``wanted`` what is not granted yet."""
    now_s = _seconds(run, run.now_utc)
    for contact in contacts:
        antenna = run.antennas[contact.antenna]
        if not antenna.rented:
            continue
        for from_s, until_s, state, ask_by_s in _parts(run, contact.antenna, *held(run, contact)):
            if state == "granted":
                continue
            if state == "declined":
                yield Fault("rented", contact.place, f"relies on time that {contact.antenna} declined")
            elif ask_by_s is not None and ask_by_s < now_s - 1e-3 and until_s - from_s > _TOLERANCE_S:
                yield Fault("rented", contact.place, f"it is too late to ask {contact.antenna} for its time")
            wanted["awaited" if state == "asked" else "to_ask"].append((contact.antenna, from_s, until_s, ask_by_s))


def _to_give_back(run: Run, contacts: Sequence[Contact]) -> list[_Part]:
    """Granted time that no contact uses and that can still be returned."""
    found: list[_Part] = []
    for row in run.bookings:
        by_s = None if row.give_back_by_utc is None else _seconds(run, row.give_back_by_utc)
        if row.state == "granted" and (by_s is None or by_s >= _seconds(run, run.now_utc)):
            span = _seconds(run, row.start_utc), _seconds(run, row.end_utc)
            found += [(row.antenna, a, b, by_s) for a, b in _idle(run, row.antenna, contacts, span)]
    return found


def _parts(run: Run, antenna: str, from_s: float, until_s: float) -> Iterator[tuple[float, float, str, float | None]]:
    """Time on a rented antenna, piece by piece: its state, and the latest moment to ask."""
    rows = [(_seconds(run, row.start_utc), _seconds(run, row.end_utc), row) for row in run.bookings
            if row.antenna == antenna]
    edges = sorted({from_s, until_s, *(edge for a, b, _ in rows for edge in (a, b) if from_s < edge < until_s)})
    ahead_s = 3_600.0 * (run.antennas[antenna].ask_before_h or 0.0)
    for low, high in pairwise(edges):
        row = next((row for a, b, row in rows if a <= low < b), None)
        if row is None:
            yield low, high, "open", low - ahead_s
        else:
            yield low, high, row.state, None if row.ask_by_utc is None else _seconds(run, row.ask_by_utc)


def _idle(
    run: Run, antenna: str, contacts: Sequence[Contact], span: tuple[float, float],
) -> Iterator[tuple[float, float]]:
    """The stretches of a granted span in which no contact holds the antenna, those long enough for one."""
    reached, end_s = max(span[0], 0.0), min(span[1], float(run.horizon_s))
    for from_s, until_s in sorted(held(run, one) for one in contacts if one.antenna == antenna):
        if min(from_s, end_s) - reached >= run.policy.min_contact_s - _TOLERANCE_S:
            yield reached, min(from_s, end_s)
        reached = max(reached, until_s)
    if end_s - reached >= run.policy.min_contact_s - _TOLERANCE_S:
        yield reached, end_s


def _stated(run: Run, key: str, entry: Mapping[str, Any]) -> _Part:
    by = entry.get("give_back_by_utc" if key == "give_back" else "ask_by_utc")
    return (str(entry.get("antenna")), _instant(run, entry.get("start_utc")), _instant(run, entry.get("end_utc")),
            None if by is None else _instant(run, by))


def _same(part: _Part, other: _Part) -> bool:
    if part[0] != other[0] or (part[3] is None) != (other[3] is None):
        return False
    return all(a is None or b is None or abs(a - b) <= _TOLERANCE_S for a, b in zip(part[1:], other[1:], strict=True))


def _span(run: Run, part: _Part) -> str:
    a, b = (run.start_utc.astype(datetime) + timedelta(seconds=edge) for edge in part[1:3])
    return f"{a:%Y-%m-%d %H:%M:%S} to {b:%H:%M:%S} UTC"


def _by(run: Run, part: _Part) -> str:
    if part[3] is None:
        return "one without a latest moment"
    moment = run.start_utc.astype(datetime) + timedelta(seconds=part[3])
    return f"one with the latest moment {moment:%Y-%m-%d %H:%M} UTC"


def _instant(run: Run, value: Any) -> float:
    try:
        return float((np.datetime64(str(value).rstrip("Z"), "ms") - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
    except ValueError:
        return float("nan")


def _seconds(run: Run, instant: datetime | np.datetime64) -> float:
    at = datetime64(instant) if isinstance(instant, datetime) else instant
    return float((at - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
