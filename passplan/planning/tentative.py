"""Tentative closures that a plan uses all the same: the contacts that would have to go."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import Any

from passplan.inputs.run import Run
from passplan.planning.horizon import seconds_of
from passplan.planning.rented import Held


def touched_by_tentative(run: Run, held: Iterable[Held]) -> list[dict[str, Any]]:
    """Contacts that touch a tentative closure, preparing and releasing included, with that closure; in time order."""
    closures = [
        (closure, math.floor(seconds_of(run, closure.start_utc)), math.ceil(seconds_of(run, closure.end_utc)))
        for closure in run.closures if closure.tentative]
    return [
        {"contact_id": one.contact_id, "antenna": one.antenna, "kind": closure.kind, "note": closure.note,
         "start_utc": f"{closure.start_utc:%Y-%m-%dT%H:%M:%S}Z", "end_utc": f"{closure.end_utc:%Y-%m-%dT%H:%M:%S}Z"}
        for one in sorted(held, key=lambda one: (one.start_s, one.antenna))
        for closure, start_s, end_s in closures
        if closure.antenna == one.antenna and start_s < one.end_s and end_s > one.start_s]


def tentative_warnings(touched: Iterable[dict[str, Any]]) -> list[str]:
    """One line for each tentative closure, which lists its contacts."""
    by_closure: dict[tuple[str, ...], list[str]] = {}
    for row in touched:
        key = tuple(row[name] for name in ("kind", "antenna", "start_utc", "end_utc"))
        by_closure.setdefault(key, []).append(row["contact_id"])
    return [
        f"the tentative {kind.replace('_', ' ')} of {antenna} from {start[:16].replace('T', ' ')} to "
        f"{end[:16].replace('T', ' ')} UTC is planned through; if it stands, these contacts go: {', '.join(contacts)}"
        for (kind, antenna, start, end), contacts in by_closure.items()]
