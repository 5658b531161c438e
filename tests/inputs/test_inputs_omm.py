"""Orbit mean-elements messages in JSON, XML, KVN and CSV: the same set from each, and what is refused."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from element_samples import END, MERLE, START, apart_m, lines_of, omm, omm_csv, omm_kvn, omm_xml, reading, tle_text
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.windows import find_windows
from passplan.inputs.elements.omm_json import parse_omm_json
from passplan.inputs.elements.omm_kvn import parse_omm_kvn
from passplan.inputs.elements.omm_xml import parse_omm_xml
from passplan.inputs.elements.read import element_format, read_elements
from passplan.inputs.errors import Findings
from passplan.inputs.ground import Antenna, Site

FRESH = replace(MERLE, name="MERLE 9", catalogue_number=123_456_789, mean_anomaly_deg=11.25)
WRITERS: dict[str, Callable[..., str]] = {
    ".json": lambda *records: json.dumps(records),
    ".xml": omm_xml,
    ".kvn": omm_kvn,
    ".csv": omm_csv,
}


def read_text(folder: Path, text: str | bytes, name: str) -> tuple[list, Findings]:
    path = folder / name
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    reader, findings = reading(folder)
    return read_elements(path, reader, findings), findings


@pytest.mark.parametrize("suffix", WRITERS)
def test_every_encoding_gives_the_set_of_the_tle(tmp_path, suffix):
    (twin,), _ = read_text(tmp_path, tle_text(), "twin.tle")
    (one, other), findings = read_text(tmp_path, WRITERS[suffix](omm(), omm(FRESH)), f"day{suffix}")
    assert not findings.problems
    assert not findings.warnings
    assert (one.name, one.catalogue_number, one.epoch_utc) == (twin.name, twin.catalogue_number, twin.epoch_utc)
    assert one.international_designator == twin.international_designator
    assert one.satrec.elnum == twin.satrec.elnum
    assert apart_m(one, twin) < 1.0
    assert other.catalogue_number == 123_456_789, "nine digits, far beyond what the library's own number field holds"
    assert other.satrec.sgp4(other.satrec.jdsatepoch, other.satrec.jdsatepochF + 1.0)[0] == 0
    assert one.place != other.place


@pytest.mark.parametrize("suffix", WRITERS)
def test_every_encoding_gives_the_windows_of_the_tle(tmp_path, suffix):
    (twin,), _ = read_text(tmp_path, tle_text(), "twin.tle")
    (one,), _ = read_text(tmp_path, WRITERS[suffix](omm()), f"day{suffix}")
    site = Site(name="North", latitude_deg=67.9, longitude_deg=21.1)
    dish = {"Dish": Antenna(name="Dish", site="North")}
    tables = [find_windows({"Merle": source}, dish, {"North": site}, START, END) for source in (twin, one)]
    assert len(tables[0]) >= 8
    for column in ("aos_utc", "los_utc"):
        # The digits are those of a TLE; its epoch has eight decimals of a day, half a millisecond.
        apart = np.abs(tables[0][column].to_numpy() - tables[1][column].to_numpy())
        assert apart.max() <= np.timedelta64(2, "ms")
    assert tables[0]["window_id"].tolist() == tables[1]["window_id"].tolist()


@pytest.mark.parametrize("suffix", WRITERS)
def test_the_content_decides_over_the_extension(tmp_path, suffix):
    (one,), findings = read_text(tmp_path, WRITERS[suffix](omm()), "elements.dat")
    assert one.catalogue_number == 71_001
    assert not findings.problems
    (one,), findings = read_text(tmp_path, WRITERS[suffix](omm()), "elements.tle")
    assert one.catalogue_number == 71_001
    assert not findings.problems
    (one,), _ = read_text(tmp_path, tle_text(), f"lines{suffix}")
    assert one.catalogue_number == 71_001


def test_a_name_above_element_lines_may_look_like_another_format(tmp_path):
    for name in ("[MERLE]", "{MERLE}", "<MERLE>", "MERLE = 1"):
        (one,), findings = read_text(tmp_path, tle_text(replace(MERLE, name=name)), "day.json")
        assert one.name == name
        assert not findings.problems


@pytest.mark.parametrize("suffix", WRITERS)
def test_what_sgp4_does_not_need_may_be_absent_or_extra(tmp_path, suffix):
    record = omm(MEAN_MOTION_DOT=None, MEAN_MOTION_DDOT=None, ELEMENT_SET_NO=None, REV_AT_EPOCH=None, NORAD_CAT_ID=None)
    (one,), findings = read_text(tmp_path, WRITERS[suffix]({**record, "USER_DEFINED_MOOD": "good"}), f"day{suffix}")
    assert not findings.problems
    assert one.catalogue_number is None


@pytest.mark.parametrize("suffix", WRITERS)
@pytest.mark.parametrize("key", ["EPOCH", "MEAN_MOTION", "BSTAR", "MEAN_ANOMALY"])
def test_a_missing_mandatory_keyword_is_named(tmp_path, suffix, key):
    sets, findings = read_text(tmp_path, WRITERS[suffix](omm(**{key: None})), f"day{suffix}")
    assert not sets
    (line,) = lines_of(findings)
    assert key in line
    assert "missing" in line
    assert f"day{suffix}" in line


def test_a_misspelt_column_is_recognised(tmp_path):
    _, findings = read_text(tmp_path, omm_csv(omm()).replace("BSTAR", "BSTARR"), "day.csv")
    (line,) = lines_of(findings)
    assert "column BSTAR is missing or empty; did you mean 'BSTARR'?" in line


def test_numbers_may_be_text_and_an_object_may_have_no_designator(tmp_path):
    record = {key: str(value) for key, value in omm().items()} | {
        "OBJECT_ID": None,
        "OBJECT_NAME": "",
        "DECAY_DATE": None,
    }
    (one,), findings = read_text(tmp_path, json.dumps(record), "one.json")
    assert not findings.problems
    assert (one.name, one.international_designator, one.catalogue_number) == ("", "", 71_001)
    (one,), _ = read_text(tmp_path, json.dumps(omm(OBJECT_ID="UNKNOWN")), "one.json")
    assert one.international_designator == ""


def test_epochs_as_day_of_year_and_with_a_z(tmp_path):
    calendar, of_year = omm(EPOCH="2027-03-08T10:22:21.972864Z"), omm(EPOCH="2027-067T10:22:21.972864")
    (one, other), findings = read_text(tmp_path, json.dumps([calendar, of_year]), "day.json")
    assert not findings.problems
    assert one.epoch_utc == other.epoch_utc


@pytest.mark.parametrize(
    ("changes", "remedy"),
    [
        ({"MEAN_ELEMENT_THEORY": "DSST"}, "only SGP4 or SGP/SGP4 can be read"),
        ({"MEAN_ELEMENT_THEORY": "SGP4-XP"}, "only SGP4"),
        ({"TIME_SYSTEM": "TAI"}, "only UTC can be read"),
        ({"REF_FRAME": "EME2000"}, "only TEME can be read"),
        ({"CENTER_NAME": "MARS"}, "only EARTH can be read"),
        ({"EPHEMERIS_TYPE": 4}, "EPHEMERIS_TYPE 4 is not SGP4"),
        ({"EPOCH": "8 March 2027"}, "write the epoch as"),
        ({"EPOCH": "2027-03-08T10:22:21+02:00"}, "write the epoch as"),
        ({"EPOCH": "0027-03-08T10:22:21"}, "not from 1957 to 2199"),
        ({"EPOCH": 2027}, "write the epoch as text"),
        ({"ECCENTRICITY": 1.2}, "the eccentricity 1.2 is not from 0 to 1"),
        ({"MEAN_MOTION": 0.0}, "not closed"),
        ({"MEAN_MOTION": "fast"}, "write a number"),
        ({"INCLINATION": True}, "neither a number nor text"),
        ({"BSTAR": [1]}, "neither a number nor text"),
        ({"NORAD_CAT_ID": 1_234_567_890}, "must be at most 999999999"),
        ({"NORAD_CAT_ID": 12.5}, "whole number"),
        ({"OBJECT_NAME": "M" * 101}, "100 characters"),
    ],
)
def test_a_faulty_value_is_one_clear_line(tmp_path, changes, remedy):
    sets, findings = read_text(tmp_path, json.dumps([omm(**changes), omm(FRESH)]), "day.json")
    (line,) = lines_of(findings)
    assert "day.json: record 1" in line
    assert remedy in line
    assert [one.catalogue_number for one in sets] == [123_456_789], "the sound record is still read"


def test_several_faults_are_reported_in_one_go(tmp_path):
    records = [omm(MEAN_MOTION="fast", EPOCH="late"), omm(BSTAR="x"), 7]
    _, findings = read_text(tmp_path, json.dumps(records), "day.json")
    assert len(findings.problems) == 4


@pytest.mark.parametrize(
    ("text", "remedy"),
    [
        ('[{"OBJECT_NAME": "A"', "not valid JSON"),
        ('{"EPOCH": "a", "EPOCH": "b"}', "the key 'EPOCH' stands twice"),
        ("[" * 100_000, "nested too deeply"),
        ('[{"BSTAR": NaN}]', "missing"),
        ('{"NORAD_CAT_ID": ' + "9" * 5_000 + "}", "not valid JSON"),
    ],
)
def test_broken_json(text, remedy):
    findings = Findings()
    assert not parse_omm_json(text, "day.json", findings)
    assert remedy in "\n".join(lines_of(findings))


def test_not_a_number_is_refused_wherever_it_stands():
    findings = Findings()
    assert not parse_omm_json(json.dumps(omm(BSTAR=float("nan"), MEAN_MOTION=float("inf"))), "day.json", findings)
    assert len(findings.problems) == 2


BOMB = (
    '<?xml version="1.0"?><!DOCTYPE omm [<!ENTITY a "aaaaaaaaaa"><!ENTITY b "&a;&a;&a;&a;&a;&a;">'
    '<!ENTITY c "&b;&b;&b;&b;&b;&b;">]><ndm><omm><OBJECT_NAME>&c;</OBJECT_NAME></omm></ndm>'
)
OUTSIDE = '<?xml version="1.0"?><!DOCTYPE omm [<!ENTITY x SYSTEM "file:///etc/hostname">]><omm><A>&x;</A></omm>'


@pytest.mark.parametrize(
    ("text", "remedy"),
    [
        (BOMB, "declares a document type or entities"),
        (OUTSIDE, "declares a document type or entities"),
        ("<ndm><omm>", "not valid XML"),
        ("<ndm/>", "no <omm> element"),
        ("<omm/>", "no <segment>"),
        ('<?xml version="1.0" encoding="klingon"?><ndm/>', "not valid XML"),
        ("<a>" * 10_000, "not valid XML"),
    ],
)
def test_broken_and_hostile_xml(text, remedy):
    findings = Findings()
    assert not parse_omm_xml(text.encode(), "day.xml", findings)
    (line,) = lines_of(findings)
    assert remedy in line


def test_xml_with_a_namespace_and_units():
    text = omm_xml(omm(), space=" xmlns='urn:ccsds:schema:ndmxml'").replace(
        "<INCLINATION>", "<INCLINATION units='deg'>"
    )
    findings = Findings()
    (one,) = parse_omm_xml(text.encode(), "day.xml", findings)
    assert one.catalogue_number == 71_001
    assert not findings.problems


def test_other_units_and_repeated_keywords_in_xml_are_refused():
    text = (
        omm_xml(omm())
        .replace("<INCLINATION>", "<INCLINATION units='rad'>")
        .replace("<BSTAR>", "<BSTAR>1</BSTAR><BSTAR>")
    )
    findings = Findings()
    assert not parse_omm_xml(text.encode(), "day.xml", findings)
    assert "another unit" in lines_of(findings)[0]
    assert "stands twice" in lines_of(findings)[1]


def test_kvn_with_units_and_comments():
    text = omm_kvn(omm()).replace("INCLINATION = 97.4321", "INCLINATION = 97.4321 [deg]")
    findings = Findings()
    (one,) = parse_omm_kvn(text, "day.kvn", findings)
    assert one.satrec.inclo == pytest.approx(1.70051, abs=1e-4)
    assert not findings.problems


@pytest.mark.parametrize(
    ("old", "new", "where", "remedy"),
    [
        ("INCLINATION = 97.4321", "INCLINATION = 1.7 [rad]", "line 12", "another unit"),
        ("INCLINATION = 97.4321", "INCLINATION 97.4321", "line 12", "KEYWORD = value"),
        ("INCLINATION = 97.4321", "INCLINATION = 97.4321\nINCLINATION = 7.1", "line 13", "stands twice"),
    ],
)
def test_faulty_lines_of_kvn(old, new, where, remedy):
    text = omm_kvn(omm())
    assert old in text
    findings = Findings()
    parse_omm_kvn(text.replace(old, new), "day.kvn", findings)
    line = lines_of(findings)[0]
    assert f"day.kvn: {where}" in line
    assert remedy in line


def test_an_empty_kvn_message_is_a_problem():
    findings = Findings()
    assert not parse_omm_kvn("COMMENT nothing\n", "day.kvn", findings)
    assert "no message" in lines_of(findings)[0]


@pytest.mark.parametrize(
    ("content", "form"),
    [
        (b"", None),
        (b"\x00\x01\x02", None),
        (b"CCSDS_OEM_VERS = 2.0\n", None),
        (b"<?xml version='1.0'?><oem id='x'>", None),
        (b"\xef\xbb\xbf  [{}]", "json"),
        (b"COMMENT x\nCCSDS_OMM_VERS = 2.0", "kvn"),
    ],
)
def test_the_format_by_content(content, form):
    assert element_format(content, Path("elements.dat")) == form


def test_a_file_of_another_kind_is_one_line(tmp_path):
    for content in (b"", b"\x7fELF\x00\xff", b"CCSDS_OEM_VERS = 2.0\nMETA_START\n"):
        sets, findings = read_text(tmp_path, content, "thing.bin")
        assert not sets
        (line,) = lines_of(findings)
        assert "neither a TLE nor an OMM file" in line


def test_a_missing_file_is_one_line(tmp_path):
    reader, findings = reading(tmp_path)
    assert not read_elements(tmp_path / "gone.tle", reader, findings)
    (line,) = lines_of(findings)
    assert "no such file" in line


def test_a_long_list_of_faults_is_cut_and_counted(tmp_path):
    _, findings = read_text(tmp_path, "junk\n" * 500, "junk.tle")
    assert len(findings.problems) == 51
    assert "450 more faults" in str(findings.problems[-1])


def test_a_drop_folder_gives_every_recognised_file(tmp_path):
    (tmp_path / "drop").mkdir()
    (tmp_path / "drop" / "a.tle").write_text(tle_text())
    (tmp_path / "drop" / "b.json").write_text(json.dumps(omm(FRESH)))
    (tmp_path / "drop" / "notes.txt").write_text("fetched by hand\n")
    (tmp_path / "drop" / ".partial").write_text("1 71001")
    reader, findings = reading(tmp_path)
    sets = read_elements(tmp_path / "drop", reader, findings)
    assert [one.catalogue_number for one in sets] == [71_001, 123_456_789]
    assert not findings.problems
    (warning,) = findings.warnings
    assert "notes.txt" in warning


def test_an_empty_drop_folder_is_warned_of(tmp_path):
    (tmp_path / "drop").mkdir()
    reader, findings = reading(tmp_path)
    assert not read_elements(tmp_path / "drop", reader, findings)
    assert "no file with element sets" in findings.warnings[0]


@settings(deadline=None, max_examples=100)
@given(
    text=st.text(max_size=300), start=st.sampled_from(["", "{", "[", "<", "CCSDS_OMM_VERS = 2.0\n", "EPOCH,BSTAR\n"])
)
def test_no_text_makes_a_reader_raise(text, start):
    findings = Findings()
    for sets in (
        parse_omm_json(start + text, "x", findings),
        parse_omm_kvn(start + text, "x", findings),
        parse_omm_xml((start + text).encode("utf-8", "replace"), "x", findings),
    ):
        assert sets == []
    assert findings.problems


@settings(deadline=None, max_examples=100)
@given(content=st.binary(max_size=200), suffix=st.sampled_from([".tle", *WRITERS]))
def test_no_bytes_make_the_reader_raise(tmp_path_factory, content, suffix):
    sets, findings = read_text(tmp_path_factory.mktemp("junk"), content, f"junk{suffix}")
    assert not sets
    assert findings.problems or findings.warnings


@settings(deadline=None, max_examples=100)
@given(
    number=st.integers(1, 999_999_999),
    anomaly=st.integers(0, 3_599_999).map(lambda n: n / 1e4),
    eccentricity=st.integers(0, 7_000_000).map(lambda n: n / 1e7),
)
def test_all_encodings_agree_for_any_number(tmp_path_factory, number, anomaly, eccentricity):
    mean = replace(MERLE, catalogue_number=number, mean_anomaly_deg=anomaly, eccentricity=eccentricity)
    folder = tmp_path_factory.mktemp("agree")
    found = [read_text(folder, write(omm(mean)), f"day{suffix}")[0][0] for suffix, write in WRITERS.items()]
    assert {one.catalogue_number for one in found} == {number}
    assert all(apart_m(found[0], one, (0.0,)) < 1.0 for one in found[1:] if not found[0].satrec.error)
