"""What a plan needs of rented antennas: time still to ask for, time whose answer is awaited, time to give back."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any, NamedTuple

import numpy as np

from passplan.inputs.bookings import Booking
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.horizon import instants_of, seconds_of
from passplan.planning.spans import Span, without


class Held(NamedTuple):
    """A contact and the seconds in which it holds its antenna, preparing and releasing included."""

    contact_id: str
    antenna: str
    start_s: int
    end_s: int


def rented_time(run: Run, held: Sequence[Held]) -> dict[str, list[dict[str, Any]]]:
    """``to_ask``, ``awaited`` and ``give_back`` of a plan, each in time order.

    Rows say ``antenna, start_utc, end_utc``, then ``ask_by_utc`` and ``contact_id``, or ``give_back_by_utc``, and all
    of it again in words (``name``, ``sentence``); an instant that nobody states is None. Granted time counts as unused
    in stretches of at least a contact's length.
    """
    mine = [one for one in held if run.antennas[one.antenna].rented]
    asked = [row for one in mine for row in _needed(run, one)]
    back = [row for name, antenna in run.antennas.items() if antenna.rented
            for row in _unused(run, name, [(one.start_s, one.end_s) for one in mine if one.antenna == name])]
    asked.sort(key=lambda row: (row["start_utc"], row["antenna"]))
    back.sort(key=lambda row: (row["start_utc"], row["antenna"]))
    return {
        "to_ask": [row for row, state in ((_without_state(row), row["state"]) for row in asked) if state != "asked"],
        "awaited": [row for row, state in ((_without_state(row), row["state"]) for row in asked) if state == "asked"],
        "give_back": back,
    }


def _needed(run: Run, one: Held) -> Iterator[dict[str, Any]]:
    """The parts of a held span that are not granted, by how they stand."""
    span, spans = (one.start_s, one.end_s), []
    for row in (row for row in run.bookings if row.antenna == one.antenna):
        a, b = max(span[0], _span(run, row)[0]), min(span[1], _span(run, row)[1])
        if a < b:
            spans.append((a, b))
            if row.state != "granted":
                yield _row(run, one, (a, b), row.state, None if row.ask_by_utc is None else datetime64(row.ask_by_utc))
    ahead = np.timedelta64(round(3_600_000.0 * (run.antennas[one.antenna].ask_before_h or 0.0)), "ms")
    for part in without(span, spans):
        yield _row(run, one, part, "open", instants_of(run, part[0]) - ahead)


def _unused(run: Run, antenna: str, held: Sequence[Span]) -> Iterator[dict[str, Any]]:
    for row in run.bookings:
        gone = row.give_back_by_utc is not None and datetime64(row.give_back_by_utc) < run.now_utc
        if row.antenna != antenna or row.state != "granted" or gone:
            continue
        a, b = _span(run, row)
        for part in without((max(a, 0), min(b, run.horizon_s)), held):
            if part[1] - part[0] >= run.policy.min_contact_s:
                start_utc, end_utc = (instants_of(run, edge) for edge in part)
                by = None if row.give_back_by_utc is None else datetime64(row.give_back_by_utc)
                words = "can be given back" if by is None else f"can be given back until {_minute(by)}"
                yield {"name": antenna, "sentence": f"{_words((start_utc, end_utc))} {words}",
                       "antenna": antenna, "start_utc": _iso(start_utc), "end_utc": _iso(end_utc),
                       "give_back_by_utc": None if by is None else _iso(by)}


def _span(run: Run, row: Booking) -> Span:
    """The whole seconds that lie within a booking."""
    return math.ceil(seconds_of(run, row.start_utc)), math.floor(seconds_of(run, row.end_utc))


def _row(run: Run, one: Held, part: Span, state: str, ask_by: Any) -> dict[str, Any]:
    start_utc, end_utc = (instants_of(run, edge) for edge in part)
    words = f"{_words((start_utc, end_utc))}, for contact {one.contact_id}"
    if ask_by is not None:
        words += f"; to be {'granted' if state == 'asked' else 'asked for'} by {_minute(ask_by)}"
    return {
        "name": one.antenna, "sentence": words,
        "antenna": one.antenna, "start_utc": _iso(start_utc), "end_utc": _iso(end_utc),
        "ask_by_utc": None if ask_by is None else _iso(ask_by), "contact_id": one.contact_id, "state": state}


def _without_state(row: dict[str, Any]) -> dict[str, Any]:
    return {key: value for key, value in row.items() if key != "state"}


def _words(span: tuple[Any, Any]) -> str:
    """Both edges to the minute, the date only once where it is the same."""
    first, last = (_minute(edge) for edge in span)
    return f"{first.removesuffix(' UTC')} to {last[11:] if last[:10] == first[:10] else last}"


def _minute(instant: Any) -> str:
    return f"{str(np.datetime64(instant, 'm')).replace('T', ' ')} UTC"


def _iso(instant: Any) -> str:
    return f"{np.datetime64(instant, 'ms')}Z"
