"""The terminal report: everything on it, in 100 columns, with and without colour."""

from __future__ import annotations

import io
from copy import deepcopy
from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np
import pandas as pd
import pytest
from rich.console import Console

from passplan.inputs.errors import InputError
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.health import print_health
from passplan.report.keys import spacecraft_keys
from passplan.report.selection import Selection
from passplan.report.tables import print_windows
from passplan.report.terminal import print_plan
from passplan.report.timeline import CLOSED, SEEN, SEVERAL, antenna_row, hour_ruler, stretches
from passplan.report.words import megabytes
from passplan.report.zones import local_time


def _printed(record: PlanRecord, width: int = 100, shown: dict[str, Any] | None = None, **options: object) -> str:
    out = io.StringIO()
    console = Console(file=out, width=width, **options)  # type: ignore[arg-type]
    print_plan(record, console, **(shown or {}))
    return out.getvalue()


@pytest.mark.parametrize("width", [80, 100, 160])
@pytest.mark.parametrize("shown", [{}, {"full": True}, {"selection": Selection(antenna="Tarrow-A")}])
def test_no_line_is_wider_than_the_terminal(short_plan: PlanRecord, width: int, shown: dict[str, Any]) -> None:
    text = _printed(short_plan, width, shown)
    assert max(map(len, text.splitlines())) <= width
    assert "…" not in text


def test_the_review_is_one_screen(short_plan: PlanRecord) -> None:
    # 7 antennas and 14 spacecraft: the timeline takes two rows of hours where the terminal is narrow.
    assert len(_printed(short_plan, 160).splitlines()) <= 62
    assert len(_printed(short_plan, 100).splitlines()) <= 69


def test_the_review_of_a_week_shows_its_first_day_and_says_so(short_plan: PlanRecord) -> None:
    week = replace(short_plan, summary={**short_plan.summary, "horizon_end_utc": "2027-03-16T08:00:00.000Z"})
    review, full = _printed(week, 100), _printed(week, 100, shown={"full": True})
    assert len(review.splitlines()) <= 70
    assert "and on to 2027-03-16 08:00 UTC" in review
    assert "and on to" not in full
    assert full.split("Contacts ──")[0].count("Tarrow-A") == 14


def test_detail_on_request(short_plan: PlanRecord) -> None:
    full = _printed(short_plan, shown={"full": True})
    assert "Lowest margins" in full
    assert "What was not used, and why" in full
    assert full.count("Isvarde-A") > short_plan.contacts["antenna"].eq("Isvarde-A").sum()
    one = _printed(short_plan, 160, shown={"selection": Selection(spacecraft="Ambril-3")})
    assert "Shown: Ambril-3" in one
    contacts = short_plan.contacts[short_plan.contacts["spacecraft"] == "Ambril-3"]
    assert all(name in one for name in contacts["contact_id"])
    assert "Teasel-1" not in one.replace("Teasel-1 on", "").split("What was not used")[0]


def test_local_time_is_an_extra_labelled_column(short_plan: PlanRecord, short_run: Run) -> None:
    local = local_time(short_run, "Port Ellery")
    text = _printed(short_plan, shown={"local": local})
    assert "start     at Port Ellery" in text
    first = short_plan.contacts.sort_values(["start_utc", "antenna"]).iloc[0]["start_utc"]
    assert f"{first:%H:%M:%S}" in text
    assert f"{first + pd.Timedelta(hours=13):%d %b %H:%M} NZDT" in text


def test_a_site_without_a_zone_has_no_local_time(short_run: Run) -> None:
    sites = {name: site.model_copy(update={"time_zone": None}) for name, site in short_run.sites.items()}
    with pytest.raises(InputError, match="time_zone"):
        local_time(replace(short_run, sites=sites), "Isvarde")
    with pytest.raises(InputError, match="did you mean 'Isvarde'"):
        local_time(short_run, "Isvard")


def test_changes_are_counted_and_listed_on_request(replanned: PlanRecord) -> None:
    against = replanned.summary["against"]
    text = _printed(replanned)
    assert f"Against plan {against['plan_id']}" in text
    assert f"{against['counts']['kept']} kept" in text
    gone = against["dropped"][0]
    assert f"{gone['spacecraft']} on {gone['antenna']}" in _printed(replanned, shown={"full": True})


def test_the_report_says_what_a_review_needs(short_plan: PlanRecord) -> None:
    text = _printed(short_plan)
    summary = short_plan.summary
    flat = " ".join(text.split())
    for part in ("DRAFT", summary["plan_id"], "no plan can pass", "gap", "Inputs", "Antennas through the day",
                 "Contacts", "Data aboard", *summary["antennas"], *summary["spacecraft"]):
        assert part in flat, part
    for caution in CAUTIONS:
        assert caution[:40] in flat


def test_piped_text_has_no_escape_codes(short_plan: PlanRecord) -> None:
    assert "\x1b" not in _printed(short_plan)


def test_no_color_is_respected(short_plan: PlanRecord, monkeypatch: pytest.MonkeyPatch) -> None:
    coloured = _printed(short_plan, force_terminal=True, color_system="truecolor")
    assert "\x1b[36m" in coloured or "36m" in coloured
    monkeypatch.setenv("NO_COLOR", "1")
    plain = _printed(short_plan, force_terminal=True)
    assert "36m" not in plain


def test_shortfalls_and_warnings_come_first(short_plan: PlanRecord) -> None:
    summary = deepcopy(short_plan.summary)
    summary["shortfalls"] = [{"kind": "request", "name": "[x]", "sentence": "Request [x] is not met: [red]no window."}]
    summary["warnings"] = ["element set of Ambril-1 is 9 days old"]
    text = _printed(replace(short_plan, summary=summary))
    assert text.index("Requirements not met") < text.index("Warnings") < text.index("Inputs")
    assert "[red]no window." in text


def test_an_empty_plan_is_reported(short_plan: PlanRecord) -> None:
    summary = {**short_plan.summary, "contacts": 0, "status": "empty", "gap": None}
    text = _printed(replace(short_plan, summary=summary, contacts=short_plan.contacts[:0]))
    assert "no contact possible" in text


def test_cells_of_a_timeline() -> None:
    start = np.datetime64("2027-03-09T00:00:00", "ms")
    (stretch,) = stretches(start, start + np.timedelta64(6 * 3600, "s"), 36)
    assert stretch.cell == np.timedelta64(600_000, "ms")

    def at(minute: int) -> pd.Timestamp:
        return pd.Timestamp(start + np.timedelta64(minute, "m"))

    windows = pd.DataFrame({"aos_utc": [at(0), at(60)], "los_utc": [at(20), at(90)]})
    contacts = pd.DataFrame({"start_utc": [at(61), at(66)], "end_utc": [at(64), at(71)], "spacecraft": ["P", "Q"]})
    closures = [{"start_utc": "2027-03-09T05:30:00.000Z", "end_utc": "2027-03-09T09:00:00.000Z"}]
    row = antenna_row(stretch, contacts, windows, closures, {"P": "A", "Q": "B"}).plain
    assert row == SEEN * 2 + " " * 4 + SEVERAL + "B" + SEEN + " " * 24 + CLOSED * 3


def test_a_ruler_labels_full_hours() -> None:
    start = np.datetime64("2027-03-09T23:30:00", "ms")
    (stretch,) = stretches(start, start + np.timedelta64(6 * 3600, "s"), 72)
    ruler = hour_ruler(stretch).plain
    assert ruler.index("00h") == 6
    assert ruler.index("01h") == 18
    assert len(ruler) == 72


def test_stretches_cover_the_horizon_once() -> None:
    start = np.datetime64("2027-03-09T00:00:00", "ms")
    for hours in (1, 12, 24, 25, 72):
        for cells in (30, 87, 147):
            rows = stretches(start, start + np.timedelta64(hours, "h"), cells)
            assert rows[0].start_utc == start
            assert all(a.end_utc == b.start_utc for a, b in pairwise(rows))
            assert rows[-1].end_utc >= start + np.timedelta64(hours, "h")


def test_keys() -> None:
    assert spacecraft_keys(["x", "y"]) == {"x": "A", "y": "B"}
    many = spacecraft_keys([f"s{i}" for i in range(62)])
    assert len(set(many.values())) == 62
    assert set(spacecraft_keys([f"s{i}" for i in range(63)]).values()) == {"*"}


@pytest.mark.parametrize(
    ("volume_mb", "text"), [(0.04, "0.0 MB"), (999.94, "999.9 MB"), (12_345, "12.35 GB"), (2e6, "2.00 TB")]
)
def test_volumes(volume_mb: float, text: str) -> None:
    assert megabytes(volume_mb) == text


def test_health_names_what_is_wrong(short_run: Run) -> None:
    out = io.StringIO()
    run = replace(short_run, left_out={"Teasel-1": "no element set"}, warnings=("mind the gap",))
    print_health(run, Console(file=out, width=100))
    text = out.getvalue()
    for part in ("Teasel-1 left out", "no element set", "mind the gap", "receive only", "330104", "5 to 24°", "4.5"):
        assert part in text, part


def test_windows_table_says_how_many_are_hidden(short_plan: PlanRecord) -> None:
    out = io.StringIO()
    print_windows(short_plan.windows, Console(file=out, width=100), rows=3)
    text = out.getvalue()
    assert f"... and {len(short_plan.windows) - 3} more" in text
    assert f"{len(short_plan.windows)} windows" in text
