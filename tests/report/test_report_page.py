"""The page as text: complete, self-contained, safe against hostile names, and small."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from html.parser import HTMLParser
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from plan_variants import HOSTILE, multiplied, renamed

from passplan.inputs.run import Run
from passplan.link.choice import WindowLink
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.page import render_page
from passplan.report.page.axis import Day
from passplan.report.page.ribbons import Share, levels, outline, shared_heights
from passplan.report.page.scale import RateScale, scale_for
from passplan.report.tracks import WindowTrack


class _Reader(HTMLParser):
    """Tags with their attributes, and the text outside scripts and styles."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text: list[str] = []
        self.data = ""
        self._inside = ""

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        self._inside = tag if tag in ("script", "style") else self._inside

    def handle_endtag(self, tag: str) -> None:
        self._inside = "" if tag == self._inside else self._inside

    def handle_data(self, data: str) -> None:
        if not self._inside:
            self.text.append(data)
        elif self._inside == "script" and self.tags[-1][1].get("type") == "application/json":
            self.data += data


def _read(page: str) -> _Reader:
    reader = _Reader()
    reader.feed(page)
    return reader


@pytest.fixture(scope="module")
def page(short_plan: PlanRecord, short_run: Run) -> str:
    return render_page(short_plan, short_run)


@pytest.fixture(scope="module")
def reader(page: str) -> _Reader:
    return _read(page)


def test_the_page_says_what_a_review_needs(reader: _Reader, short_plan: PlanRecord) -> None:
    text = " ".join(" ".join(reader.text).split())
    summary = short_plan.summary
    for part in (
        "Draft",
        "until a named approval",
        summary["plan_id"],
        "no plan can exceed",
        "Antennas through the day",
        "what they hold",
        "How the antennas are used",
        "What was not used, and why",
        *summary["antennas"],
        *summary["spacecraft"],
        *CAUTIONS,
    ):
        assert part in text, part


def test_nothing_is_fetched_from_anywhere(page: str, reader: _Reader) -> None:
    assert "default-src 'none'" in page
    for _, attributes in reader.tags:
        for key in ("src", "href", "data", "action"):
            value = attributes.get(key) or "#"
            assert value.startswith("#") or value == "data:,", (key, value)
    addresses = set(re.findall(r"https?://[^\s\"'<)]+", page))
    assert addresses <= {"http://www.w3.org/2000/svg"}
    assert "@import" not in page
    assert "url(" not in page


def test_every_contact_is_in_the_table_on_both_ribbons_and_in_the_data(reader: _Reader, short_plan: PlanRecord) -> None:
    count = len(short_plan.contacts)
    marks = [a["data-c"] for tag, a in reader.tags if tag == "a" and "mark" in (a.get("class") or "").split()]
    assert sorted(map(int, filter(None, marks))) == sorted([*range(count), *range(count)])
    rows = [a["id"] for tag, a in reader.tags if tag == "tr" and "data-c" in a]
    assert rows == [f"c{i}" for i in range(count)]
    data = json.loads(reader.data)
    assert [c["id"] for c in data["contacts"]] == list(short_plan.contacts["contact_id"])
    assert len(data["unused"]) == len(short_plan.unused)


def test_marks_speak_to_screen_readers(reader: _Reader) -> None:
    for tag, attributes in reader.tags:
        if tag == "a" and "mark" in (attributes.get("class") or "").split():
            assert re.search(r" on .*, \d\d:\d\d to \d\d:\d\d UTC, ", attributes["aria-label"] or "")
        if tag == "th":
            assert attributes["scope"] in ("col", "row")
    labelled = [a for tag, a in reader.tags if tag == "select"]
    assert len(labelled) == 7


def test_tracks_agree_with_the_tables(reader: _Reader, short_plan: PlanRecord) -> None:
    data = json.loads(reader.data)
    for contact, row in zip(data["contacts"], short_plan.contacts.itertuples(), strict=True):
        assert max(contact["el"]) <= row.peak_elevation_deg + 0.1
        assert contact["t"][0] <= contact["from"] < contact["to"] <= contact["t"][-1] + 1
        assert contact["db"]
        if contact["sent"]:
            first, last = contact["sent"][0][0], contact["sent"][-1][1]
            margin = np.interp(np.linspace(first, last, 50), contact.get("dt", contact["t"]), contact["db"])
            assert margin.min() == pytest.approx(row.min_margin_db, abs=0.6)


def test_hostile_names_are_text_and_nothing_else(short_plan: PlanRecord, short_run: Run) -> None:
    record, run = renamed(short_plan, short_run, HOSTILE)
    hurt = "<img src=x onerror=alert(1)>"
    shortfall = {"kind": "request", "name": hurt, "sentence": f"{hurt} is not met"}
    record = replace(record, summary={**record.summary, "name": hurt, "shortfalls": [shortfall], "warnings": [hurt]})
    page = render_page(record, run)
    assert page.count("<script") == 2
    assert page.count("</script>") == 2
    reader = _read(page)
    assert not [tag for tag, _ in reader.tags if tag == "img"]
    text = " ".join(reader.text)
    for name in (
        hurt,
        *(n for n in HOSTILE.values() if n in {*record.summary["spacecraft"], *record.summary["antennas"]}),
    ):
        assert name in text, name
    assert "49 & </script>" not in text
    assert json.loads(reader.data)["spacecraft"] == list(record.summary["spacecraft"])


def test_changes_are_shown_against_an_earlier_plan(replanned: PlanRecord, outage_run: Run) -> None:
    text = " ".join(" ".join(_read(render_page(replanned, outage_run)).text).split())
    against = replanned.summary["against"]
    assert f"Changes against plan {against['plan_id']}" in text
    assert f"{against['counts']['kept']} kept" in text
    assert "gearbox" in text


def test_three_hundred_contacts_fit_in_three_megabytes(short_plan: PlanRecord, short_run: Run) -> None:
    record, run = multiplied(short_plan, short_run, 3)
    assert len(record.contacts) >= 300
    assert len(render_page(record, run).encode()) < 3e6


def test_a_plan_without_contacts_has_a_page(short_plan: PlanRecord, short_run: Run) -> None:
    summary = {**short_plan.summary, "contacts": 0, "status": "empty", "gap": None}
    summary["antennas"] = {n: {**a, "contacts": 0, "contact_s": 0.0} for n, a in summary["antennas"].items()}
    empty = replace(
        short_plan,
        summary=summary,
        windows=short_plan.windows[:0],
        contacts=short_plan.contacts[:0],
        segments=short_plan.segments[:0],
        unused=short_plan.unused[:0],
    )
    text = " ".join(_read(render_page(empty, short_run)).text)
    assert "No contact is possible in this horizon." in text


def test_frozen_time_is_marked_where_a_plan_states_it(short_plan: PlanRecord, short_run: Run) -> None:
    summary = {**short_plan.summary, "frozen_until_utc": "2027-03-09T10:00:00.000Z"}
    page = render_page(replace(short_plan, summary=summary), short_run)
    assert page.count('class="span frozen"') == len(summary["antennas"]) + len(summary["spacecraft"])
    assert "frozen until 10:00 UTC" in page


def _track(rates: list[float]) -> WindowTrack:
    time_s = np.arange(len(rates)) * 10.0
    flat = np.zeros(len(rates))
    return WindowTrack(time_s, flat, flat, flat, np.array(rates, float), WindowLink())


def test_an_outline_steps_with_the_rate() -> None:
    scale = RateScale(10.0)
    assert outline(_track([5, 5, 10, 10, 0, 0]), scale) == "M0 100V50H2V0H4V96H5V100Z"
    assert outline(_track([5, 5, 10, 10, 0, 0]), scale, 10.0, 30.0) == "M1 100V50H2V0H3V100Z"
    assert outline(_track([10, 10, 10]), scale, 0.0, 4.0) == "M0 100V0H1V100Z"


def test_scales() -> None:
    assert not scale_for([100.0, 140.0]).by_decades
    assert scale_for([0.0, 0.0]).ticks() == []
    wide = scale_for([140.0, 3.5])
    assert wide.by_decades
    assert wide.height(np.array([0.0, 140.0])).tolist() == [0, 100]
    assert [rate for rate, _ in wide.ticks()] == [10.0, 100.0]
    heights = wide.height(np.geomspace(0.5, 140.0, 9))
    assert (np.diff(heights) > 0).all()


def test_labels_keep_apart() -> None:
    assert levels([0.0, 0.4, 0.8, 5.0], apart=1.0) == [0, 1, 2, 0]


def test_contacts_at_once_share_the_height_and_others_have_all_of_it() -> None:
    shares = shared_heights([(0.0, 10.0), (5.0, 20.0), (6.0, 8.0), (10.0, 12.0), (30.0, 40.0), (40.0, 50.0)])
    assert [(share.row, share.rows) for share in shares] == [(0, 3), (1, 3), (2, 3), (0, 3), (0, 1), (0, 1)]
    assert shared_heights([]) == []
    scale = scale_for([10.0])
    assert outline(_track([10, 10, 10]), scale, share=Share(1, 2)) == "M0 50V0H2V50Z"


@given(st.lists(st.tuples(st.integers(0, 500), st.integers(1, 90)), max_size=20))
def test_no_two_contacts_stand_on_one_another(raw: list[tuple[int, int]]) -> None:
    spans = sorted((float(start), float(start + length)) for start, length in raw)
    shares = shared_heights(spans)
    for i, one in enumerate(spans):
        assert 0 <= shares[i].row < shares[i].rows
        for k in range(i):
            if spans[k][0] < one[1] and one[0] < spans[k][1]:
                assert shares[i].rows == shares[k].rows
                assert shares[i].row != shares[k].row


@pytest.mark.parametrize(("hours", "bands"), [(1, 1), (24, 1), (36, 1), (37, 2), (72, 3), (744, 31)])
def test_hours_of_any_horizon(hours: int, bands: int) -> None:
    found = Day(pd.Timestamp("2027-03-09T08:30"), hours * 3600.0).bands()
    assert len(found) == bands
    assert found[0].first_s == 0.0
    assert found[-1].last_s >= hours * 3600.0
    for band, after in pairwise(found):
        assert band.last_s == after.first_s
    for band in found:
        marks = band.hours()
        assert 1 <= len(marks) <= 25
        assert all(0.0 <= left < 100.0 for left, _ in marks)


def test_a_span_is_cut_to_its_band_and_to_the_horizon() -> None:
    *_, last = Day(pd.Timestamp("2027-03-09T00:00"), 60 * 3600.0).bands()
    assert last.span("2027-03-10T22:00:00Z", "2027-03-11T03:00:00Z") == (0.0, 12.5)
    assert last.span("2027-03-11T09:00:00Z", "2027-03-12T03:00:00Z") == (37.5, 12.5)
    assert not last.touches("2027-03-10T22:00:00Z", "2027-03-11T00:00:00Z")


def test_a_plan_of_several_days_has_a_band_for_each_and_every_mark_once(
    short_plan: PlanRecord, short_run: Run
) -> None:
    summary = {**short_plan.summary, "horizon_end_utc": "2027-03-11T20:00:00.000Z"}
    reader = _read(render_page(replace(short_plan, summary=summary), short_run))
    bands = [a["data-band"] for _, a in reader.tags if a.get("data-band")]
    assert bands == ["0", "1", "2"] * 2
    marks = [a["data-c"] for tag, a in reader.tags if tag == "a" and "mark" in (a.get("class") or "").split()]
    assert sorted(map(int, marks)) == sorted([*range(len(short_plan.contacts))] * 2)
    assert "f-d" in [a.get("id") for tag, a in reader.tags if tag == "select"]
