"""A plan with a contact in a slot, or beside the schedule aboard: the audit names it."""

from __future__ import annotations

from dataclasses import replace

import pytest
from audit_bench import Bench

from passplan.inputs.aboard import Slot
from passplan.inputs.decisions import Published
from passplan.planning.audit import Fault


def audited(bench: Bench, **changes: object) -> list[Fault]:
    return replace(bench, run=replace(bench.run, **changes)).audit()


def utc(instant: object) -> str:
    return f"{instant.isoformat()}Z"  # type: ignore[attr-defined]


def own(bench: Bench, craft: str = "Ambril-3") -> list[dict[str, object]]:
    return bench.contacts[bench.contacts["spacecraft"] == craft].to_dict("records")


def published(row: dict[str, object]) -> Published:
    return Published(spacecraft=row["spacecraft"], antenna=row["antenna"], start_utc=utc(row["start_utc"]),
                     end_utc=utc(row["end_utc"]))


@pytest.mark.parametrize("kind", ["imaging", "attitude"])
def test_a_contact_in_a_slot(bench: Bench, kind: str) -> None:
    first, second = own(bench)[:2]
    free = Slot(spacecraft="Ambril-3", start_utc=utc(first["end_utc"]), end_utc=utc(second["start_utc"]), kind=kind)
    assert audited(bench, slots=(free,)) == []
    wide = free.model_copy(update={"end_utc": Slot(
        spacecraft="x", start_utc=utc(first["end_utc"]), end_utc=utc(second["end_utc"])).end_utc})
    (fault,) = audited(bench, slots=(wide,))
    assert fault.kind == kind and str(second["contact_id"]) in fault.place


def test_sending_beside_the_schedule_aboard(bench: Bench) -> None:
    rows = own(bench)[:3]
    aboard = tuple(published(row) for row in rows)
    assert audited(bench, loaded=aboard) == []
    (fault,) = audited(bench, loaded=(aboard[0], aboard[2]))
    assert fault.kind == "loaded" and str(rows[1]["contact_id"]) in fault.place


def test_a_loaded_contact_that_is_missing_or_moved_by_a_second(bench: Bench) -> None:
    rows = own(bench)[:2]
    aboard = tuple(published(row) for row in rows)
    late = replace(bench, run=replace(bench.run, loaded=aboard)).copy()
    index = late.contacts.index[late.contacts["contact_id"] == rows[0]["contact_id"]][0]
    position = late.contacts.index.get_loc(index)
    late.shift(position, start_s=2)
    assert "loaded" in late.kinds()
    gone = replace(bench, run=replace(bench.run, loaded=aboard)).copy()
    gone.contacts = gone.contacts.drop(index=index)
    gone.segments = gone.segments[gone.segments["contact_id"] != rows[0]["contact_id"]]
    assert "no contact is as it was loaded aboard, and the plan does not say so" in "\n".join(
        fault.sentence for fault in gone.audit() if fault.kind == "loaded")


def test_commands_may_come_at_any_time(bench: Bench) -> None:
    rows = own(bench)[:3]
    index = bench.contacts.index[bench.contacts["contact_id"] == rows[1]["contact_id"]]
    bench.contacts.loc[index, "service"] = "command"
    assert "loaded" not in {
        fault.kind for fault in audited(bench, loaded=(published(rows[0]), published(rows[2])))}
