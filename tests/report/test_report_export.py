"""Every kind of export: whole or not at all, where it was asked for, and read back without loss."""

from __future__ import annotations

import shutil
import xml.etree.ElementTree as ET
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plan_variants import HOSTILE, renamed

import passplan
from passplan.cli.export import Kind
from passplan.inputs.errors import InputError
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report import table_files
from passplan.report.csv_files import read_csv
from passplan.report.directory import DirectoryError, read_plan, stored_run, write_plan
from passplan.report.export import KINDS, Wanted, draw, export
from passplan.report.names import file_stems
from passplan.report.picture import picture_svg
from passplan.report.table_files import TABLES, MissingLibraryError, read_json, write_json


@pytest.fixture(scope="module")
def written(short_plan: PlanRecord, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_plan(short_plan, tmp_path_factory.mktemp("export") / "plan")


@pytest.fixture
def wanted(written: Path, tmp_path: Path) -> Wanted:
    """A plan directory, and nothing but what it carries."""
    out = shutil.copytree(written, tmp_path / "plan")
    record = read_plan(out)
    return Wanted(record, stored_run(out, record), out, step_s=60.0)


def test_the_command_knows_every_kind() -> None:
    assert {kind.value for kind in Kind} == {*KINDS, "all"}


@pytest.mark.parametrize("kind", KINDS)
def test_a_plan_directory_is_all_that_an_export_needs(wanted: Wanted, kind: str, tmp_path: Path) -> None:
    inside = export(kind, wanted)
    assert inside.parent == wanted.directory
    assert inside.exists()
    assert not list(tmp_path.rglob(".*"))
    with pytest.raises(DirectoryError, match="already exists"):
        export(kind, wanted, inside)


def test_an_export_replaces_its_own_and_goes_where_it_is_asked(wanted: Wanted, tmp_path: Path) -> None:
    for kind in ("csv", "json"):
        assert export(kind, wanted) == export(kind, wanted)
        assert export(kind, wanted, tmp_path / "else" / kind).exists()


def test_a_failed_export_leaves_nothing(wanted: Wanted, monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    def full(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "write_text", full)
    with pytest.raises(DirectoryError, match="No space left"):
        export("svg", wanted)
    with pytest.raises(DirectoryError, match="No space left"):
        export("oem", wanted, tmp_path / "oem")
    assert not (wanted.directory / "timeline.svg").exists()
    assert not (tmp_path / "oem").exists()


def test_pointing_tables_stop_when_they_expire(wanted: Wanted) -> None:
    soon = datetime(2027, 3, 9, 12, tzinfo=UTC)
    place = export("pointing", Wanted(wanted.record, wanted.run, wanted.directory, 60.0, soon))
    for file in list(place.iterdir())[:5]:
        assert "# expires_utc: 2027-03-09T12:00:00.000Z\n" in file.read_text(encoding="utf-8")


@pytest.mark.parametrize("name", TABLES)
def test_json_csv_and_parquet_come_back(wanted: Wanted, short_plan: PlanRecord, name: str, tmp_path: Path) -> None:
    table = getattr(short_plan, name)
    summary, tables = read_json(export("json", wanted))
    assert summary == wanted.record.summary
    csv = read_csv(export("csv", wanted) / f"{name}.csv")
    parquet = pd.read_parquet(export("parquet", wanted) / f"{name}.parquet")
    for back in (tables[name], csv, parquet):
        assert list(back.columns) == list(table.columns)
        assert len(back) == len(table)
        for column in table.columns:
            if column.endswith("_utc"):
                times = back[column].dt.tz_localize(None) if back[column].dt.tz else back[column]
                assert (times.astype("datetime64[ms]").to_numpy() == table[column].to_numpy("datetime64[ms]")).all()
            elif pd.api.types.is_numeric_dtype(table[column]):
                close = np.isclose(back[column].astype(float), table[column].astype(float), atol=1e-3, equal_nan=True)
                assert close.all(), column
            else:
                assert list(back[column]) == list(table[column]), column


def test_formulas_are_harmless_in_a_spreadsheet(short_plan: PlanRecord, short_run: Run, tmp_path: Path) -> None:
    record, run = renamed(short_plan, short_run, {"Isvarde-A": "=1+2", "Isvarde": "@SUM(A1)"})
    place = export("csv", Wanted(record, run, tmp_path), tmp_path / "csv")
    text = (place / "contacts.csv").read_text(encoding="utf-8")
    assert ",'=1+2,'@SUM(A1)," in text
    assert ",=1+2" not in text


def test_parquet_without_pyarrow_names_the_extra(wanted: Wanted, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(table_files, "find_spec", lambda _: None)
    with pytest.raises(MissingLibraryError, match=r"passplan\[parquet\]"):
        export("parquet", wanted)
    assert not (wanted.directory / "parquet").exists()


def test_the_picture_is_sound_svg_and_shows_every_contact(short_plan: PlanRecord, short_run: Run) -> None:
    root = ET.fromstring(picture_svg(short_plan, short_run))
    texts = [node.text or "" for node in root.iter("{http://www.w3.org/2000/svg}text")]
    keys = [node for node in root.iter("{http://www.w3.org/2000/svg}text") if node.get("class") == "key"]
    assert len(keys) == len(short_plan.contacts)
    for part in ("DRAFT until a named approval", *short_plan.summary["antennas"]):
        assert part in texts
    assert "not permission to transmit" in " ".join(texts)


def test_the_picture_of_several_days_has_a_band_for_each(short_plan: PlanRecord, short_run: Run) -> None:
    summary = {**short_plan.summary, "horizon_end_utc": "2027-03-11T20:00:00.000Z"}
    root = ET.fromstring(picture_svg(replace(short_plan, summary=summary), short_run))
    texts = [node.text or "" for node in root.iter("{http://www.w3.org/2000/svg}text")]
    assert [text for text in texts if text.endswith(" Mar")] == ["Tue 09 Mar", "Wed 10 Mar", "Thu 11 Mar"]
    assert texts.count("Tarrow-A") == 3
    counts = [int(text.split()[0]) for text in texts if text.endswith((" contact", " contacts"))]
    assert sum(counts) == len(short_plan.contacts)


def test_hostile_names_are_text_in_the_picture(short_plan: PlanRecord, short_run: Run) -> None:
    root = ET.fromstring(picture_svg(*renamed(short_plan, short_run, HOSTILE)))
    assert not list(root.iter("{http://www.w3.org/2000/svg}script"))
    assert HOSTILE["Isvarde-A"] in [node.text for node in root.iter("{http://www.w3.org/2000/svg}text")]


def test_png_and_svg_by_the_ending(wanted: Wanted, tmp_path: Path) -> None:
    draw(wanted, tmp_path / "a.png")
    assert (tmp_path / "a.png").read_bytes().startswith(b"\x89PNG\r\n")
    draw(wanted, tmp_path / "a.SVG")
    assert (tmp_path / "a.SVG").read_text(encoding="utf-8").startswith("<svg")
    with pytest.raises(InputError, match=r"\.svg or \.png"):
        draw(wanted, tmp_path / "a.gif")


@given(st.lists(st.text(max_size=100), unique=True, max_size=12))
@settings(deadline=None, max_examples=60)
def test_file_names_are_safe_and_never_alike(names: list[str]) -> None:
    stems = file_stems(names)
    assert list(stems) == names
    assert len({stem.casefold() for stem in stems.values()}) == len(names)
    for stem in stems.values():
        assert 0 < len(stem) <= 90
        assert not set(stem) & set('/\\:*?"<>|\0\n\t')
        assert not stem.startswith(".")


def test_json_has_null_for_nothing(short_plan: PlanRecord, tmp_path: Path) -> None:
    write_json(short_plan, tmp_path / "t.json")
    assert "NaN" not in (tmp_path / "t.json").read_text(encoding="utf-8")


def test_a_notebook_exports_in_one_line(written: Path, tmp_path: Path) -> None:
    place = passplan.export_plan(written, "calendar", tmp_path / "ics")
    assert (place / "all.ics").is_file()
    with pytest.raises(ValueError, match="one of csv"):
        passplan.export_plan(written, "tapes")
