"""A plan beside an earlier one: what is new, what stays, what moved, and what is no longer there.

A contact is ``kept`` where the earlier plan has it with the same times, modcod and service; ``retimed``
where it has another contact in the same window; ``moved`` where the earlier plan heard the same
spacecraft during this window from another antenna, in a contact that is no longer there; else ``new``.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from passplan.planning.record import PlanRecord

CHANGES = ("new", "kept", "retimed", "moved")
_SAME = ("start_utc", "end_utc", "modcod", "service")
_DROPPED = ("contact_id", "window_id", "spacecraft", "antenna", "site", "service", "start_utc", "end_utc")


def compare(record: PlanRecord, earlier: PlanRecord) -> PlanRecord:
    """``record`` with its ``change`` column set against ``earlier``, and what was dropped in its summary.

    The summary gains ``against``: ``plan_id`` of the earlier plan, ``counts`` of each change, ``dropped``
    (the contacts that are gone, those that the earlier plan had dropped itself included, as far as they end
    within this horizon), and ``revisions``: how often each contact has changed since it was first planned,
    which is what a calendar counts as SEQUENCE.
    """
    contacts = record.contacts.copy()
    before: dict[str, Any] = {row["contact_id"]: row for row in earlier.contacts.to_dict("records")}
    gone = [row for name, row in before.items() if name not in set(contacts["contact_id"])]
    taken: set[str] = set()
    changes, origins = [], []
    spans = record.windows.set_index("window_id")[["aos_utc", "los_utc"]]
    for row in contacts.to_dict("records"):
        change, origin = _change(row, before.get(row["contact_id"]), gone, taken, spans)
        changes.append(change)
        origins.append(origin)
    contacts["change"] = np.array(changes, dtype=object)
    dropped: list[dict[str, Any]] = [_plain(row) for row in gone if _within(row, record.summary)]
    dropped += _still_dropped(record, earlier, {row["contact_id"] for row in dropped})
    moved = {origin: name for name, origin in zip(contacts["contact_id"], origins, strict=True) if origin}
    for gone_row in dropped:
        gone_row["moved_to"] = moved.get(gone_row["contact_id"], gone_row.get("moved_to", ""))
    counts = {name: changes.count(name) for name in CHANGES} | {"dropped": sum(not row["moved_to"] for row in dropped)}
    against = {
        "plan_id": earlier.summary["plan_id"],
        "counts": counts,
        "dropped": dropped,
        "revisions": _revisions(contacts, dropped, earlier),
    }
    return replace(record, contacts=contacts, summary={**record.summary, "against": against})


def _change(
    row: Mapping[Any, Any],
    same: Mapping[Any, Any] | None,
    gone: Sequence[Mapping[Any, Any]],
    taken: set[str],
    spans: pd.DataFrame,
) -> tuple[str, str]:
    """The change of one contact, and the id of the contact it replaces on another antenna."""
    if same is not None:
        return ("kept" if all(row[key] == same[key] for key in _SAME) else "retimed"), ""
    aos, los = spans.loc[row["window_id"]] if row["window_id"] in spans.index else (row["start_utc"], row["end_utc"])
    for other in gone:
        overlaps = other["start_utc"] < los and other["end_utc"] > aos
        if other["spacecraft"] == row["spacecraft"] and overlaps and other["contact_id"] not in taken:
            if other["antenna"] == row["antenna"]:
                continue
            taken.add(other["contact_id"])
            return "moved", str(other["contact_id"])
    return "new", ""


def _within(row: Mapping[Any, Any], summary: Mapping[Any, Any]) -> bool:
    """Whether a contact ends within the horizon; one that lies before it is history, not dropped."""
    return bool(
        pd.Timestamp(row["end_utc"]) > pd.Timestamp(summary["horizon_start_utc"].rstrip("Z"))
        and pd.Timestamp(row["start_utc"]) < pd.Timestamp(summary["horizon_end_utc"].rstrip("Z"))
    )


def _still_dropped(record: PlanRecord, earlier: PlanRecord, known: set[str]) -> list[dict[str, Any]]:
    """What the earlier plan had dropped and this plan has not taken up again: calendars may still hold it."""
    present = set(record.contacts["contact_id"]) | known
    listed = earlier.summary.get("against", {}).get("dropped", [])
    fresh = [
        {**row, "start_utc": row["start_utc"].rstrip("Z"), "end_utc": row["end_utc"].rstrip("Z")} for row in listed
    ]
    return [_plain(row) for row in fresh if row["contact_id"] not in present and _within(row, record.summary)]


def _revisions(contacts: pd.DataFrame, dropped: list[dict[str, Any]], earlier: PlanRecord) -> dict[str, int]:
    """Raised by one with every change; a contact that comes back after it was dropped has changed too."""
    before: dict[str, int] = dict(earlier.summary.get("against", {}).get("revisions", {}))
    old = {row["contact_id"] for row in earlier.summary.get("against", {}).get("dropped", [])}
    revisions = {}
    for name, change in zip(contacts["contact_id"], contacts["change"], strict=True):
        raised = change == "retimed" or name in old
        revisions[name] = before.get(name, 0) + int(raised)
    for row in dropped:
        revisions[row["contact_id"]] = before.get(row["contact_id"], 0) + int(row["contact_id"] not in old)
    return {name: count for name, count in revisions.items() if count}


def _plain(row: Mapping[Any, Any]) -> dict[str, Any]:
    plain = {key: row[key] for key in (*_DROPPED, "moved_to") if key in row}
    for key in ("start_utc", "end_utc"):
        plain[key] = f"{np.datetime64(plain[key], 'ms')}Z"
    return plain
