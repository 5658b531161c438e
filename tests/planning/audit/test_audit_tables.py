"""Tables that make no sense are named, and the rest of the plan is audited all the same."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from audit_bench import Bench

from passplan.planning.audit import Fault


def _of(bench: Bench, kind: str = "table") -> str:
    return "\n".join(str(fault) for fault in bench.audit() if fault.kind == kind)


def test_a_fault_reads_as_place_and_sentence() -> None:
    assert str(Fault("value", "plan", "its value is wrong")) == "plan: its value is wrong"


@pytest.mark.parametrize("column", ["modcod", "usable_s", "start_utc"])
def test_missing_columns(bench: Bench, column: str) -> None:
    bench.contacts = bench.contacts.drop(columns=column)
    assert f"contacts table: the column {column} is missing" in _of(bench)


def test_missing_column_of_segments(bench: Bench) -> None:
    bench.segments = bench.segments.drop(columns="rate_mbps")
    assert "segments table: the column rate_mbps is missing" in _of(bench)


def test_identifiers_that_stand_twice(bench: Bench) -> None:
    bench.set_contact(3, contact_id=bench.contacts["contact_id"].iloc[0])
    assert "stands 2 times" in _of(bench)


def test_a_segment_without_a_contact(bench: Bench) -> None:
    bench.set_segment(3, contact_id="nobody")
    assert "segment of nobody: belongs to no contact" in _of(bench)
    assert "no segment in which it sends" in _of(bench, "usable")


@pytest.mark.parametrize(
    ("column", "value", "words"),
    [
        ("spacecraft", "Phantom", "the run has no spacecraft Phantom"),
        ("antenna", "Nowhere-A", "the run has no antenna Nowhere-A"),
        ("service", "uplink", "the service 'uplink' is none of downlink, command, both"),
        ("start_utc", pd.NaT, "a time is missing"),
        ("end_utc", pd.Timestamp("2027-03-09T00:00:00"), "does not end after it starts"),
        ("site", "Port Ellery", "the site of Isvarde-A is Isvarde, not Port Ellery"),
        ("duration_s", 1, "its duration does not agree"),
    ],
)
def test_rows_that_make_no_sense(bench: Bench, column: str, value: object, words: str) -> None:
    bench.set_contact(3, **{column: value})
    assert words in _of(bench)


def test_a_spacecraft_that_was_left_out(bench: Bench) -> None:
    orbits = {name: orbit for name, orbit in bench.run.orbits.items() if name != "Teasel-1"}
    run = type(bench.run)(**{**bench.run.__dict__, "orbits": orbits, "left_out": {"Teasel-1": "element set too old"}})
    bench.run = run
    assert "Teasel-1 was left out of the run: element set too old" in _of(bench)


@pytest.mark.parametrize("column", ["volume_mb", "usable_s", "min_margin_db", "weight", "value", "cost"])
def test_a_figure_that_is_not_a_number_agrees_with_nothing(bench: Bench, column: str) -> None:
    bench.contacts[column] = bench.contacts[column].astype(float)
    bench.set_contact(3, **{column: np.nan})
    assert any("Ambril-3" in fault.place for fault in bench.audit())


def test_words_in_place_of_figures(bench: Bench) -> None:
    bench.contacts["volume_mb"] = bench.contacts["volume_mb"].astype(object)
    bench.set_contact(3, volume_mb="plenty")
    assert any(fault.kind == "volume" for fault in bench.audit())


def test_segments_out_of_their_contact(bench: Bench) -> None:
    row = bench.row_of_segment(3)
    bench.set_segment(3, end_utc=bench.contacts["end_utc"].iloc[3] + np.timedelta64(5, "s"))
    assert "segments overlap, are empty, or reach beyond it" in _of(bench)
    assert bench.segments["end_utc"].iloc[row] > bench.contacts["end_utc"].iloc[3]


@pytest.mark.parametrize("summary", [{}, {"storage": {}, "value": None, "volume_mb": "much", "shortfalls": []}])
def test_a_summary_without_figures(bench: Bench, summary: dict[str, object]) -> None:
    bench.summary = summary
    assert {"storage", "value"} <= bench.kinds()


def test_times_with_a_zone_are_understood(bench: Bench) -> None:
    for table in (bench.contacts, bench.segments):
        for column in ("start_utc", "end_utc"):
            table[column] = table[column].dt.tz_localize("UTC").dt.tz_convert("Europe/Oslo")
    assert bench.audit() == []


def test_storage_figures_of_a_spacecraft_that_takes_no_part(bench: Bench) -> None:
    bench.summary["storage"]["Phantom"] = dict(bench.summary["storage"]["Teasel-1"])
    assert "spacecraft Phantom: it takes no part in the plan" in _of(bench, "storage")
