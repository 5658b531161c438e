"""Closures from tables and calendars: times, antennas, kinds, and each fault in one line."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import numpy as np
import pytest
from element_samples import END, START, lines_of, reading
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.inputs.closures import ClosureSource, read_closures
from passplan.inputs.ground import Antenna

ANTENNAS = {
    name: Antenna(name=name, site=site)
    for name, site in (("Hope 1", "Hope Ridge"), ("Hope 2", "Hope Ridge"), ("Skerry", "Skerry Isle"))
}
HEADER = "antenna,start_utc,end_utc,kind,note\n"


def utc(day: int, hour: int = 0, minute: int = 0) -> datetime:
    return datetime(2027, 3, day, hour, minute, tzinfo=UTC)


class Desk:
    """A folder, and one call of the reader over files written into it."""

    def __init__(self, folder):
        self.folder = folder
        self.reader, self.findings = reading(folder)

    def read(self, *sources, start=START, end=END):
        """Each source is a (file name, text) with, if need be, the antenna and site of the config."""
        listed = []
        for name, text, *rest in sources:
            path = self.folder / name
            path.write_bytes(text if isinstance(text, bytes) else text.encode())
            listed.append(ClosureSource(path, *rest))
        return read_closures(listed, ANTENNAS, start, end, self.reader, self.findings)


@pytest.fixture
def desk(tmp_path):
    return Desk(tmp_path)


def event(*lines: str, uid: str = "a") -> str:
    return "\r\n".join(["BEGIN:VEVENT", f"UID:{uid}", *lines, "END:VEVENT", ""])


def calendar(*events: str, head: str = "") -> str:
    return f"BEGIN:VCALENDAR\r\nVERSION:2.0\r\nPRODID:-//invented//EN\r\n{head}" + "".join(events) + "END:VCALENDAR\r\n"


TEN = ("DTSTART:20270309T100000Z", "DTEND:20270309T110000Z")


def test_a_table_is_read(desk):
    found = desk.read(
        (
            "c.csv",
            HEADER + "Skerry,2027-03-09T10:00:00Z,2027-03-09T12:00:00+01:00,booking,for a friend\n"
            "Hope 1,2027-03-09T01:00:00Z,2027-03-09T02:00:00Z,,\n",
        )
    )
    assert not desk.findings.problems
    one, two = found
    assert (one.antenna, one.kind, one.note, one.start_utc, one.end_utc) == (
        "Hope 1",
        "outage",
        "",
        utc(9, 1),
        utc(9, 2),
    )
    assert (two.antenna, two.kind, two.note, two.end_utc) == ("Skerry", "booking", "for a friend", utc(9, 11))


def test_a_site_in_a_table_means_all_its_antennas(desk):
    found = desk.read(("c.csv", HEADER + "hope ridge,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,,\n"))
    assert [one.antenna for one in found] == ["Hope 1", "Hope 2"]


@pytest.mark.parametrize(
    ("rest", "antennas"), [(("Skerry",), ["Skerry"]), ((None, "Hope Ridge"), ["Hope 1", "Hope 2"])]
)
def test_the_config_may_name_the_antenna_instead_of_the_rows(desk, rest, antennas):
    found = desk.read(("c.csv", "start_utc,end_utc\n2027-03-09T10:00:00Z,2027-03-09T11:00:00Z\n", *rest))
    assert not desk.findings.problems
    assert [one.antenna for one in found] == antennas


def test_closures_far_from_the_horizon_are_left_out_after_checking(desk):
    rows = "".join(f"Skerry,2027-03-{day:02}T10:00:00Z,2027-03-{day:02}T11:00:00Z,,\n" for day in (1, 8, 9, 10, 20))
    assert [one.start_utc.day for one in desk.read(("c.csv", HEADER + rows))] == [8, 9, 10]


@pytest.mark.parametrize(
    ("row", "where", "remedy"),
    [
        ("Skery,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,,", "row 2.antenna = 'Skery'", "did you mean 'Skerry'?"),
        ("Skerry,2027-03-09T10:00:00,2027-03-09T11:00:00Z,,", "row 2.start_utc", "the time has no zone"),
        ("Skerry,2027-03-09T12:00:00Z,2027-03-09T11:00:00Z,,", "row 2", "end_utc is not after start_utc"),
        ("Skerry,2027-03-09T12:00:00Z,2027-03-09T12:00:00Z,,", "row 2", "end_utc is not after start_utc"),
        ("Skerry,noon,2027-03-09T11:00:00Z,,", "row 2.start_utc", "write the instant as"),
        ("Skerry,2027-03-09T10:00:00Z,,,", "row 2.end_utc", "missing"),
        (",2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,,", "row 2.antenna", "missing"),
        ("Skerry,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,holiday,", "row 2.kind", "write one of"),
        ("Skerry,2027-03-09T10:00:00Z", "row 2", "has 2 cells"),
    ],
)
def test_a_faulty_row_is_one_clear_line(desk, row, where, remedy):
    assert desk.read(("c.csv", f"{HEADER}{row}\n")) == ()
    (line,) = lines_of(desk.findings)
    assert f"c.csv: {where}" in line
    assert remedy in line


def test_an_unknown_column_is_named(desk):
    desk.read(("c.csv", "antenna,start_utc,end_utc,remark\nSkerry,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,x\n"))
    assert "row 2.remark: unknown key" in lines_of(desk.findings)[0]


def test_a_row_of_another_antenna_than_the_config_says_is_a_problem(desk):
    desk.read(("c.csv", HEADER + "Skerry,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,,\n", "Hope 1"))
    assert "this file is about Hope 1 only" in lines_of(desk.findings)[0]


@pytest.mark.parametrize(
    ("rest", "remedy"),
    [
        (("Hope 3",), "no such antenna; did you mean"),
        (("Hope Ridge",), "no such antenna"),
        ((None, "Hop Ridge"), "no antenna stands there; did you mean 'Hope Ridge'?"),
    ],
)
def test_an_unknown_antenna_or_site_in_the_config(desk, rest, remedy):
    assert desk.read(("c.csv", HEADER, *rest)) == ()
    assert remedy in lines_of(desk.findings)[0]


def test_overlaps_of_one_kind_are_a_problem_naming_both_rows(desk):
    rows = (
        "Skerry,2027-03-09T10:00:00Z,2027-03-09T14:00:00Z,outage,\n"
        "Skerry,2027-03-09T11:00:00Z,2027-03-09T12:00:00Z,outage,\n"
        "Skerry,2027-03-09T13:00:00Z,2027-03-09T15:00:00Z,outage,\n"
        "Hope 1,2027-03-09T11:00:00Z,2027-03-09T12:00:00Z,outage,\n"
    )
    desk.read(("c.csv", HEADER + rows))
    assert [line.partition("c.csv: ")[2] for line in lines_of(desk.findings)] == [
        "row 3: overlaps the outage of Skerry at row 2; correct or remove one",
        "row 4: overlaps the outage of Skerry at row 2; correct or remove one",
    ]


def test_overlaps_between_files_name_the_other_file(desk):
    desk.read(
        ("a.csv", HEADER + "Skerry,2027-03-09T10:00:00Z,2027-03-09T14:00:00Z,,\n"),
        ("b.ics", calendar(event(*TEN, "LOCATION:Skerry", "SUMMARY:Grease"))),
    )
    (line,) = lines_of(desk.findings)
    assert "b.ics: event 1 (Grease) on 2027-03-09: overlaps the outage of Skerry at" in line or "a.csv: row 2" in line
    assert "a.csv: row 2" in line


def test_an_outage_over_a_booking_is_only_warned_of(desk):
    rows = (
        "Skerry,2027-03-09T10:00:00Z,2027-03-09T14:00:00Z,outage,\n"
        "Skerry,2027-03-09T11:00:00Z,2027-03-09T12:00:00Z,booking,\n"
    )
    assert len(desk.read(("c.csv", HEADER + rows))) == 2
    assert not desk.findings.problems
    assert "this booking of Skerry overlaps the outage at row 2" in desk.findings.warnings[0]


def test_closures_that_touch_do_not_overlap(desk):
    rows = (
        "Skerry,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,outage,\n"
        "Skerry,2027-03-09T11:00:00Z,2027-03-09T12:00:00Z,outage,\n"
    )
    assert len(desk.read(("c.csv", HEADER + rows))) == 2
    assert not desk.findings.problems


def test_a_missing_file_is_one_line(tmp_path):
    reader, findings = reading(tmp_path)
    assert read_closures([ClosureSource(tmp_path / "gone.ics")], ANTENNAS, START, END, reader, findings) == ()
    assert "no such file" in lines_of(findings)[0]


def test_a_calendar_event_is_read(desk):
    found = desk.read(("c.ics", calendar(event(*TEN, "LOCATION:Skerry", "SUMMARY:Grease", "CATEGORIES:Booking,Other"))))
    assert not desk.findings.problems
    (one,) = found
    assert (one.antenna, one.kind, one.note) == ("Skerry", "booking", "Grease")
    assert (one.start_utc, one.end_utc) == (utc(9, 10), utc(9, 11))


def test_times_in_a_zone_and_durations(desk):
    zoned = event("DTSTART;TZID=Europe/Oslo:20270309T100000", "DURATION:PT90M", "LOCATION:Skerry")
    (one,) = desk.read(("c.ics", calendar(zoned)))
    assert (one.start_utc, one.end_utc) == (utc(9, 9), utc(9, 10, 30))


def test_a_zone_that_the_calendar_itself_defines(desk):
    zone = (
        "BEGIN:VTIMEZONE\r\nTZID:House time\r\nBEGIN:STANDARD\r\nDTSTART:19700101T000000\r\n"
        "TZOFFSETFROM:+0300\r\nTZOFFSETTO:+0300\r\nEND:STANDARD\r\nEND:VTIMEZONE\r\n"
    )
    zoned = event("DTSTART;TZID=House time:20270309T100000", "DTEND;TZID=House time:20270309T110000", "LOCATION:Skerry")
    (one,) = desk.read(("c.ics", calendar(zone, zoned)))
    assert one.start_utc == utc(9, 7)


def test_a_series_is_expanded_over_the_horizon_with_its_changes(desk):
    series = event(
        "DTSTART;TZID=Europe/Oslo:20270101T100000",
        "DTEND;TZID=Europe/Oslo:20270101T110000",
        "RRULE:FREQ=DAILY",
        "EXDATE;TZID=Europe/Oslo:20270308T100000",
        "LOCATION:Skerry",
    )
    moved = event(
        "RECURRENCE-ID;TZID=Europe/Oslo:20270309T100000",
        "DTSTART;TZID=Europe/Oslo:20270309T150000",
        "DTEND;TZID=Europe/Oslo:20270309T160000",
        "LOCATION:Skerry",
    )
    cancelled = event(
        "RECURRENCE-ID;TZID=Europe/Oslo:20270310T100000",
        "DTSTART;TZID=Europe/Oslo:20270310T100000",
        "DTEND;TZID=Europe/Oslo:20270310T110000",
        "STATUS:CANCELLED",
    )
    found = desk.read(("c.ics", calendar(series, moved, cancelled)), end=START + np.timedelta64(2, "D"))
    assert not desk.findings.problems
    assert [one.start_utc for one in found] == [utc(9, 14), utc(11, 9)]


def test_a_series_keeps_its_local_hour_over_a_change_of_clocks(desk):
    series = event("DTSTART;TZID=Europe/Oslo:20270320T100000", "DURATION:PT1H", "RRULE:FREQ=DAILY", "LOCATION:Skerry")
    start = np.datetime64("2027-03-27T00:00", "ms")
    found = desk.read(("c.ics", calendar(series)), start=start, end=start + np.timedelta64(2, "D"))
    assert {one.start_utc.day: one.start_utc.hour for one in found} == {26: 9, 27: 9, 28: 8, 29: 8}


@pytest.mark.parametrize("line", ["STATUS:CANCELLED", "TRANSP:TRANSPARENT"])
def test_cancelled_and_transparent_events_are_left_out_even_if_faulty(desk, line):
    assert (
        desk.read(("c.ics", calendar(event(*TEN, "LOCATION:Nowhere", line), event("DTSTART:1", line, uid="b")))) == ()
    )
    assert not desk.findings.problems


def test_a_cancelling_calendar_closes_nothing(desk):
    assert desk.read(("c.ics", calendar(event(*TEN, "LOCATION:Skerry"), head="METHOD:CANCEL\r\n"))) == ()


def test_whole_days_are_days_of_the_calendar_s_zone_or_else_of_utc(desk):
    whole = event("DTSTART;VALUE=DATE:20270309", "LOCATION:Skerry")
    (one,) = desk.read(("a.ics", calendar(whole, head="X-WR-TIMEZONE:Europe/Oslo\r\n")))
    assert (one.start_utc, one.end_utc) == (utc(8, 23), utc(9, 23))
    assert not desk.findings.warnings
    (one,) = desk.read(("b.ics", calendar(whole)))
    assert (one.start_utc, one.end_utc) == (utc(9), utc(10))
    assert "taken as UTC days" in desk.findings.warnings[0]


@pytest.mark.parametrize(
    ("lines", "rest", "antennas"),
    [
        (("LOCATION:Skerry Isle",), (), ["Skerry"]),
        (("LOCATION:hope ridge",), (), ["Hope 1", "Hope 2"]),
        (("RESOURCES:Hope 1,Skerry",), (), ["Hope 1", "Skerry"]),
        ((), ("Skerry",), ["Skerry"]),
        ((), (None, "Hope Ridge"), ["Hope 1", "Hope 2"]),
        (("LOCATION:Hope 2",), (None, "Hope Ridge"), ["Hope 2"]),
        (("LOCATION:The big hall",), (None, "Hope Ridge"), ["Hope 1", "Hope 2"]),
        (("LOCATION:Skerry",), ("Hope 1",), ["Hope 1"]),
    ],
)
def test_which_antennas_an_event_means(desk, lines, rest, antennas):
    found = desk.read(("c.ics", calendar(event(*TEN, *lines)), *rest))
    assert not desk.findings.problems
    assert [one.antenna for one in found] == antennas


@pytest.mark.parametrize(
    ("lines", "where", "remedy"),
    [
        (
            ("DTSTART:20270309T100000", "DTEND:20270309T110000"),
            "event 1 (X), DTSTART = '2027-03-09T10:00:00'",
            "has no zone",
        ),
        (
            ("DTSTART;TZID=Moon/Base:20270309T100000", "DURATION:PT1H"),
            "event 1 (X), DTSTART",
            "this time zone is not known",
        ),
        (("DTSTART:20270309T100000Z", "DTEND:20270309T090000Z"), "event 1 (X), DTEND", "is not after DTSTART"),
        (("DTSTART:20270309T100000Z", "DTEND;VALUE=DATE:20270310"), "event 1 (X), DTEND", "the other has none"),
        (("DTSTART:20270309T100000Z", "DURATION:-PT1H"), "event 1 (X), DURATION", "is not positive"),
        (("DTSTART:20270309T100000Z",), "event 1 (X), DTEND", "missing"),
        (("DTEND:20270309T100000Z",), "event 1 (X), DTSTART", "missing"),
        (("DTSTART:soon", "DTEND:20270309T100000Z"), "event 1 (X), DTSTART", "cannot be read"),
        (("DTSTART;VALUE=UID:soon", "DTEND:20270309T100000Z"), "event 1 (X), DTSTART = 'soon'", "not a time"),
        ((*TEN, "DTSTART:20270309T080000Z"), "event 1 (X), DTSTART", "stands twice"),
        ((*TEN, "RRULE:FREQ=SOMETIMES"), "event 1 (X), RRULE", "cannot be read"),
        ((*TEN, "RRULE:FREQ=SECONDLY"), "event 1 (X), RRULE", "repeats too often"),
        ((*TEN, "RRULE:FREQ=DAILY;BYMINUTE=1,2,3"), "event 1 (X), RRULE", "repeats too often"),
        (
            (*TEN, "RRULE:FREQ=HOURLY;BYMONTH=2;BYMONTHDAY=30"),
            "event 1 (X), RRULE",
            "only BYHOUR and BYDAY go with HOURLY",
        ),
        ((*TEN, "RRULE:FREQ=HOURLY;INTERVAL=0"), "event 1 (X), RRULE", "must be at least 1"),
        (
            ("DTSTART:00010309T100000Z", "DURATION:PT1H", "RRULE:FREQ=DAILY"),
            "event 1 (X), DTSTART",
            "since before 1970",
        ),
        ((*TEN, "LOCATION:Skery"), "event 1 (X), LOCATION = 'Skery'", "did you mean 'Skerry'?"),
        (TEN, "event 1 (X), LOCATION", "name the antenna or site in LOCATION"),
    ],
)
def test_a_faulty_event_is_one_clear_line(desk, lines, where, remedy):
    located = () if any(line.startswith("LOCATION") for line in lines) or lines == TEN else ("LOCATION:Skerry",)
    assert desk.read(("c.ics", calendar(event("SUMMARY:X", *lines, *located)))) == ()
    (line,) = lines_of(desk.findings)
    assert f"c.ics: {where}" in line
    assert remedy in line


@pytest.mark.parametrize(
    ("text", "remedy"),
    [
        ("BEGIN:VCALENDAR\r\nBEGIN:VEVENT\r\nUID:1", "no complete VCALENDAR"),
        (calendar(event(*TEN)) + "BEGIN:VCALENDAR\r\nBEGIN:VEVENT\r\nUID:1", "cut off inside an event"),
        ("BEGIN:VCALENDAR\r\nmuddle\r\nEND:VCALENDAR", "not a valid iCalendar file"),
        (b"BEGIN:VCALENDAR\r\n\xff\xfe", "not UTF-8 text"),
        (calendar(event("DTSTART;TZID=Europe/:20270309T100000", "DURATION:PT1H")), "not a valid iCalendar file"),
        ("", "no complete VCALENDAR"),
    ],
)
def test_a_broken_calendar_is_one_clear_line(desk, text, remedy):
    desk.read(("c.ics", text, "Skerry"))
    (line,) = lines_of(desk.findings)
    assert remedy in line


def test_several_faults_in_several_files_are_reported_in_one_go(desk):
    desk.read(
        ("a.csv", HEADER + "X,2027-03-09T10:00:00Z,2027-03-09T11:00:00Z,,\nSkerry,noon,late,,\n"),
        ("b.ics", calendar(event(*TEN), event("DTSTART:1", uid="b"))),
    )
    assert len(desk.findings.problems) == 5


@settings(deadline=None, max_examples=60)
@given(text=st.text(max_size=200), as_event=st.booleans())
def test_no_calendar_text_makes_the_reader_raise(tmp_path_factory, text, as_event):
    desk = Desk(tmp_path_factory.mktemp("junk"))
    body = calendar(event(*TEN, text)) if as_event else "BEGIN:VCALENDAR\r\n" + text
    found = desk.read(("c.ics", body.encode("utf-8", "replace"), "Skerry"))
    assert found or desk.findings.problems or "CANCEL" in text.upper() or "TRANSP" in text.upper()


@settings(deadline=None, max_examples=60)
@given(rows=st.lists(st.lists(st.text(max_size=12), min_size=1, max_size=6), max_size=5))
def test_no_table_makes_the_reader_raise(tmp_path_factory, rows):
    desk = Desk(tmp_path_factory.mktemp("junk"))
    text = HEADER + "\n".join(",".join(row) for row in rows)
    assert desk.read(("c.csv", text.encode("utf-8", "replace"))) == ()


@settings(deadline=None, max_examples=60)
@given(
    spans=st.lists(st.tuples(st.integers(0, 40), st.integers(1, 8), st.sampled_from(["outage", "booking"])), max_size=8)
)
def test_overlaps_are_found_exactly_where_there_are_some(tmp_path_factory, spans):
    desk = Desk(tmp_path_factory.mktemp("spans"))
    rows = "".join(
        f"Skerry,{utc(9) + timedelta(hours=start):%Y-%m-%dT%H:%M:%SZ},"
        f"{utc(9) + timedelta(hours=start + length):%Y-%m-%dT%H:%M:%SZ},{kind},\n"
        for start, length, kind in spans
    )
    desk.read(("c.csv", HEADER + rows))
    pairs = [(a, b) for i, a in enumerate(spans) for b in spans[:i] if a[0] < b[0] + b[1] and b[0] < a[0] + a[1]]
    assert bool(desk.findings.problems) == any(a[2] == b[2] for a, b in pairs)
    assert bool(desk.findings.warnings) == any(a[2] != b[2] for a, b in pairs)


@pytest.mark.parametrize("category", ["wind_stow", "Wind stow"])
def test_a_calendar_event_can_be_a_wind_stow(desk, category):
    (one,) = desk.read(("c.ics", calendar(event(*TEN, "LOCATION:Skerry", "SUMMARY:Gale", f"CATEGORIES:{category}"))))
    assert one.kind == "wind_stow"
