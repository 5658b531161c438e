"""Bad requirements: each fault is one line that says file, key or row, value and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from passplan.inputs.load import load_run

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

REQUESTS = "sample_fleet/requests.toml"
FLEET, DAILY = "sample_fleet/fleet.toml", "configs/daily.toml"
STORE = "storage_mb = 16000"
LENGTH = "min_duration_s = 300"


@pytest.mark.parametrize(
    ("file", "old", "new", "parts"),
    [
        (REQUESTS, LENGTH, "points = 0", ("request[1]", "points", "must be above 0")),
        (REQUESTS, LENGTH, "points = 11", ("request[1]", "points", "at most 10")),
        (REQUESTS, LENGTH, "fixed = 3", ("request[1]", "fixed", "write true or false")),
        (REQUESTS, LENGTH, 'standby = "Isvarde-B"', ("request[1]", "standby", "write true or false")),
        (REQUESTS, 'service = "both"', 'service = "rangin"', ("service", "write one of", "'ranging'")),
        (FLEET, STORE, STORE + "\nleast_contacts_per_day = 0", ("least_contacts_per_day", "at least 1")),
        (FLEET, STORE, STORE + "\nleast_mb_per_day = 0", ("least_mb_per_day", "above 0")),
        (DAILY, "gap = 0.005", 'guarantee = [{ mission = "sea stat", mb = 5 }]', ("[1].mission", "did you mean")),
        (DAILY, "gap = 0.005", 'guarantee = [{ mission = "land" }]', ("needs contacts, mb or both",)),
        (DAILY, "gap = 0.005", 'guarantee = [{ mission = "land", mb = 5, days = 0 }]', ("days", "at least 1")),
        (REQUESTS, 'service = "both"', 'service = "ranging"', ("service", "set ranging = true")),
        (REQUESTS, LENGTH, "handover_overlap_s = 0", ("handover_overlap_s", "0", "must be at least 1")),
        (REQUESTS, LENGTH, "handover_overlap_s = 60.5", ("handover_overlap_s", "60.5", "write a whole number")),
        (REQUESTS, LENGTH, "handover_overlap_s = 60", (
            "(new coast schedule).handover_overlap_s", "60", "Ambril-3 is in one contact", "give it links = 2")),
        (REQUESTS, LENGTH, "handover_overlap_s = 60\nfixed = true", ("on several antennas; drop fixed",)),
        (REQUESTS, 'site = "Isvarde"', 'antenna = "Isvarde-A"\nhandover_overlap_s = 60', ("drop antenna",)),
        (REQUESTS, "14:00:00Z", "09:10:00Z\nhandover_overlap_s = 700", (
            "the span of 600 s is no longer than handover_overlap_s 700", "widen it")),
    ],
)
def test_requirements_that_make_no_sense(
    edit: Edit, lines_of: Lines, file: str, old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(file, old, new)
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in parts:
        assert part in lines[0], (part, lines[0])


PIN = '[[decision]]\nkind = "pin"\nspacecraft = "Ambril-3"\nantenna = "Isvarde-A"\n'
SPAN = "start_utc = 2027-03-09T09:00:00Z\nend_utc = 2027-03-09T09:10:00Z\n"


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        (PIN, ("decision[1]", "a pin needs a window, or spacecraft, antenna, start_utc and end_utc")),
        (PIN + SPAN.replace("09:10", "08:10"), ("decision[1]", "end_utc is not after start_utc")),
        (PIN + SPAN.splitlines()[0], ("decision[1]", "give both start_utc and end_utc")),
        (PIN.replace("Ambril-3", "Ambril-33") + SPAN, ("decision[1].spacecraft", "Ambril-33", "did you mean")),
        (PIN.replace("Isvarde-A", "Isvarde-Q") + SPAN, ("decision[1].antenna", "Isvarde-Q", "did you mean")),
        (2 * (PIN + SPAN), ("decision[2]", "stands twice; remove one")),
        ('[[decision]]\nkind = "pin"\nwindow = "x"\nstandby = true\n', ("decision[1]", "standby is for an emergency")),
        (PIN.replace("pin", "forbid") + "standby = true\n", ("decision[1]", "standby is for an emergency or a pin")),
        (PIN + SPAN + 'window = "x"', ("decision[1]", "a window says it all")),
        (PIN + SPAN + "min_duration_s = 60", ("decision[1]", "for an emergency only")),
        (PIN.replace('"pin"', '"pine"') + SPAN, ("decision[1].kind", "write one of 'pin', 'forbid' or 'emergency'")),
        ('[[decision]]\nkind = "forbid"\n' + SPAN, ("decision[1]", "a forbid needs a window, a spacecraft or")),
        ('[[decision]]\nkind = "emergency"\nspacecraft = "Ambril-3"', ("decision[1]", "an emergency needs")),
        ("[[pin]]\n", ("pin", "unknown key", "decision")),
    ],
)
def test_decisions_that_make_no_sense(
    sample: Path, edit: Edit, lines_of: Lines, text: str, parts: tuple[str, ...]
) -> None:
    (sample / "configs/decisions.toml").write_text(text, encoding="utf-8")
    edit("configs/daily.toml", "\n[policy]", 'decisions = "decisions.toml"\n\n[policy]')
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in ("decisions.toml", *parts):
        assert part in lines[0], (part, lines[0])


@pytest.mark.parametrize(
    ("key", "file", "text", "parts"),
    [
        ("last_commands", "sent.csv", "spacecraft,last_command_utc\nAmbril-33,2027-03-08T21:00:00Z\n",
         ("sent.csv", "row 2.spacecraft", "Ambril-33", "did you mean")),
        ("last_commands", "sent.csv", "spacecraft,last_command_utc\nAmbril-3,2027-03-08T21:00:00\n",
         ("sent.csv", "row 2", "last_command_utc", "no zone")),
        ("published", "plan", None, ("plan/contacts.csv", "no such file")),
        ("published", "plan.csv", "spacecraft,antenna,start_utc\nAmbril-3,Isvarde-A,2027-03-09T09:00:00Z\n",
         ("plan.csv", "row 2.end_utc", "missing")),
    ],
)
def test_files_of_what_went_before(
    sample: Path, edit: Edit, lines_of: Lines, key: str, file: str, text: str | None, parts: tuple[str, ...]
) -> None:
    if text is not None:
        (sample / "configs" / file).write_text(text, encoding="utf-8")
    edit("configs/daily.toml", "\n[policy]", f'{key} = "{file}"\n\n[policy]')
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in parts:
        assert part in lines[0], (part, lines[0])


def test_the_later_of_two_last_command_contacts_counts(sample: Path, edit: Edit) -> None:
    (sample / "configs/sent.csv").write_text(
        "spacecraft,last_command_utc\nTeasel-1,2027-03-08T21:00:00Z\nTeasel-1,2027-03-08T20:00:00Z\n", encoding="utf-8")
    edit("configs/daily.toml", "\n[policy]", 'last_commands = "sent.csv"\n\n[policy]')
    run = load_run(sample / "configs/daily.toml")
    assert str(run.spacecraft["Teasel-1"].last_command_utc) == "2027-03-08 21:00:00+00:00"


def test_published_contacts_of_what_the_run_no_longer_has_are_warned_of(sample: Path, edit: Edit) -> None:
    (sample / "configs/plan.csv").write_text(
        "contact_id,spacecraft,antenna,start_utc,end_utc\n"
        "a,Ambril-3,Isvarde-Z,2027-03-09T09:00:00Z,2027-03-09T09:10:00Z\n"
        "b,Ambril-3,Isvarde-A,2027-03-09T09:00:00.000Z,2027-03-09T09:10:00Z\n"
        "c,Ambril-3,Isvarde-A,2027-03-06T09:00:00Z,2027-03-06T09:10:00Z\n", encoding="utf-8")
    edit("configs/daily.toml", "\n[policy]", 'published = "plan.csv"\n\n[policy]')
    run = load_run(sample / "configs/daily.toml")
    assert [contact.antenna for contact in run.published] == ["Isvarde-A"]
    assert any("the run has no Isvarde-Z" in warning for warning in run.warnings)
