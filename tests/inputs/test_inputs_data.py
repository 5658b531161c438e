"""Generation and classes of data as the user writes them: what is read, and one line for each fault."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from test_inputs_bad import DAILY, FLEET, expect_one

from passplan.inputs.load import load_run

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

CLASSES = """
[[data]]
name = "frames"
spacecraft = ["Teasel-1", "Teasel-2"]
weight = 2
generation_mb_per_orbit = 60
generation_orbit_span = [0.1, 0.4]
start_fill_mb = 50

[[data]]
name = "alerts"
spacecraft = ["Teasel-1"]
weight = 20
generation_file = "alerts.csv"
"""
ALERTS = "start_utc,mb_per_s\n2027-03-09T01:00:00Z,0.01\n2027-03-09T02:00:00Z,0\n"
KEYS = "weight = 5.0\ngeneration_mb_per_s = 0.012\nstorage_mb = 300\nstart_fill_mb = {}\n"


@pytest.fixture
def write(edit: Edit, sample: Path) -> Callable[..., None]:
    """Classes for the first two Teasels, whose own keys go; ``series`` is the generation file."""

    def write(classes: str = CLASSES, series: str | None = ALERTS) -> None:
        path = sample / FLEET
        path.write_text(path.read_text() + classes)
        for fill in (120, 60):
            edit(FLEET, KEYS.format(fill), "storage_mb = 300\n")
        if series is not None:
            (sample / "sample_fleet/alerts.csv").write_text(series)

    return write


def test_classes_come_by_falling_weight_and_others_keep_their_keys(write: Callable[..., None], sample: Path) -> None:
    write()
    run = load_run(sample / DAILY)
    assert [(one.name, one.weight) for one in run.data_of("Teasel-1")] == [("alerts", 20.0), ("frames", 2.0)]
    assert run.data_of("Teasel-2")[0].generation_orbit_span == (0.1, 0.4)
    own, = run.data_of("Ambril-1")
    assert (own.name, own.weight, own.generation_mb_per_s, own.start_fill_mb) == ("data", 2.0, 0.55, 6000.0)
    series = run.series["alerts.csv"]
    assert series.mb_per_s.tolist() == [0.01, 0.0]
    assert series.end_utc[0] == series.start_utc[1] == np.datetime64("2027-03-09T02:00:00")
    assert "alerts.csv" in [Path(file.path).name for file in run.files]


def test_classes_may_be_a_csv_file(write: Callable[..., None], edit: Edit, sample: Path) -> None:
    write("")
    edit(FLEET, 'radio = "radios.csv"', 'radio = "radios.csv"\ndata = "data.csv"')
    (sample / "sample_fleet/data.csv").write_text(
        "name,spacecraft,weight,generation_mb_per_orbit,generation_orbit_span\n"
        "frames,Teasel-1;Teasel-2,2,60,0.1;0.4\nalerts,Teasel-1,2,5,\n")
    run = load_run(sample / DAILY)
    assert [one.name for one in run.data_of("Teasel-1")] == ["frames", "alerts"]  # equals in the order of the file
    assert run.data_of("Teasel-2")[0].generation_orbit_span == (0.1, 0.4)


def test_amounts_come_evenly_over_their_spans(write: Callable[..., None], sample: Path) -> None:
    write(series="start_utc,end_utc,mb\n2027-03-09T01:00:00Z,2027-03-09T01:10:00Z,60\n")
    assert load_run(sample / DAILY).series["alerts.csv"].mb_per_s.tolist() == [pytest.approx(0.1)]


@pytest.mark.parametrize(
    ("old", "new", "parts"),
    [
        ('name = "frames"', 'name = "alerts"', ("data[2] (alerts).name", "Teasel-1 has a class of this name already")),
        ('"Teasel-1", "Teasel-2"', '"Teasel-1", "Teasel-9"', ("data[1] (frames)", "Teasel-9", "did you mean 'Teasel-")),
        ('["Teasel-1", "Teasel-2"]', "[]", ("data[1] (frames).spacecraft", "names no spacecraft")),
        ("weight = 20", "wieght = 20", ("data[2] (alerts)", "did you mean 'weight'")),
        ("[0.1, 0.4]", "[0.4, 0.1]", ("generation_orbit_span ends at 0.1, not after its start 0.4",)),
        ("[0.1, 0.4]", "[0.4, 1.1]", ("generation_orbit_span.1", "1.1", "at most 1")),
        ("start_fill_mb = 50", "deadline_h = 0", ("deadline_h", "above 0", "unit")),
        ("start_fill_mb = 50", "deadline_h = 2\nstart_age_h = 3", ("start_age_h 3 is above deadline_h 2", "gone")),
        ("start_fill_mb = 50", "freshness = [[1, 1]]", ("freshness starts at age 0", "add the share")),
        ("start_fill_mb = 50", "freshness = [[0, 1], [5, 0.2], [3, 0.1]]", ("ages rise and shares fall", "sort")),
        ("start_fill_mb = 50", "freshness = [[0, 2]]", ("freshness.0.1", "2", "at most 1")),
        ("start_fill_mb = 50", "start_fill_mb = 500", ("Teasel-1: start_fill_mb = 500", "storage_mb 300", "lower")),
        ('"Teasel-1"]\nweight', '"Ambril-1"]\nweight', ("spacecraft Ambril-1", "weight = 2.0", "remove it")),
        ('"alerts.csv"', '"alert.csv"', ("alert.csv", "no such file")),
    ],
)
def test_faults_of_classes(
    write: Callable[..., None], lines_of: Lines, old: str, new: str, parts: tuple[str, ...],
) -> None:
    write(CLASSES.replace(old, new, 1))
    lines = [line for line in lines_of() if all(part in line for part in parts)]
    assert len(lines) == 1, lines_of()


@pytest.mark.parametrize(
    ("series", "parts"),
    [
        (ALERTS.replace("0.01", "-1"), ("row 2.mb_per_s", "-1", "at least 0")),
        (ALERTS.replace("01:00:00Z", "01:00:00"), ("row 2.start_utc", "no zone")),
        (ALERTS.replace("T01", "T03"), ("row 3.start_utc", "does not start after row 2", "sort")),
        (ALERTS.replace("mb_per_s", "mbps"), ("row 1.mbps", "unknown column", "did you mean 'mb_per_s'")),
        ("start_utc,mb_per_s\n", ("no rows", "at least one")),
        ("start_utc,end_utc,mb\n2027-03-09T01:00:00Z,2027-03-09T01:00:00Z,5\n", ("row 2", "end_utc is not after")),
        ("start_utc,end_utc,mb\n2027-03-09T01:00:00Z,2027-03-09T02:00:00Z,5\n"
         "2027-03-09T01:30:00Z,2027-03-09T03:00:00Z,5\n", ("row 3", "overlaps row 2")),
        ("start_utc,mb\n2027-03-09T01:00:00Z,5\n", ("row 2.end_utc", "missing")),
    ],
)
def test_faults_of_a_generation_file(
    write: Callable[..., None], lines_of: Lines, series: str, parts: tuple[str, ...],
) -> None:
    write(series=series)
    expect_one(lines_of(), "alerts.csv", *parts)


@pytest.mark.parametrize(("key", "value"), [("overflow", "oldst"), ("acknowledged_by", "contacts")])
def test_a_policy_of_the_storage_that_there_is_not(edit: Edit, lines_of: Lines, key: str, value: str) -> None:
    edit(FLEET, "storage_mb = 16000", f'storage_mb = 16000\n{key} = "{value}"')
    expect_one(lines_of(), f"spacecraft[1] (Ambril-1).{key}", value, "write one of")
