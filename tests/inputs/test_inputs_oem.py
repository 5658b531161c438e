"""Orbit ephemeris messages in KVN and XML: what is read, and each fault in one line."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import numpy as np
import pytest
from element_samples import START, lines_of
from hypothesis import given, settings
from hypothesis import strategies as st
from oem_samples import METADATA, oem_kvn, oem_xml, segment_kvn, states

from passplan.inputs.ccsds_time import days_and_seconds, seconds_since_2000
from passplan.inputs.errors import Findings
from passplan.inputs.oem import parse_oem

HEADER = "CCSDS_OEM_VERS = 2.0\n"
START_S = float((START - np.datetime64("2000-01-01", "ms")) / np.timedelta64(1, "s"))


def read(text: str | bytes):
    findings = Findings()
    return parse_oem(text if isinstance(text, bytes) else text.encode(), "own.oem", findings), findings


@pytest.mark.parametrize("write", [oem_kvn, oem_xml])
def test_a_message_is_read_in_full(write):
    ephemeris, findings = read(write(START, 2.0))
    assert not findings.problems
    assert not findings.warnings
    assert (ephemeris.object_name, ephemeris.object_id) == ("MERLE 1", "2026-114A")
    (segment,) = ephemeris.segments
    assert (segment.frame, segment.time_system) == ("EME2000", "UTC")
    assert (segment.interpolation, segment.interpolation_degree) == ("HERMITE", 7)
    assert segment.epochs.shape == (121,)
    assert segment.positions_km.shape == segment.velocities_km_s.shape == (121, 3)
    assert (segment.usable_start, segment.usable_stop) == (START_S, START_S + 7_200.0)
    assert np.linalg.norm(segment.positions_km, axis=1) == pytest.approx(6_900.0)
    assert np.linalg.norm(segment.velocities_km_s, axis=1) == pytest.approx(7.6006, abs=1e-3)


def test_xml_in_a_namespace_with_units_is_read():
    text = oem_xml(START, 1.0, space=" xmlns='urn:ccsds:schema:ndmxml'").replace("<X>", "<X units='km'>")
    ephemeris, findings = read(text)
    assert not findings.problems
    assert len(ephemeris.segments) == 1


def test_covariance_comments_and_accelerations_are_passed_over():
    lines = [f"{line} 0.0 0.0 0.0" for line in states(START, 1.0)]
    covariance = "COVARIANCE_START\nEPOCH = 2027-03-09T00:00:00\nCOV_REF_FRAME = RTN\n1.0\n0.1 1.0\nCOVARIANCE_STOP\n"
    second = segment_kvn(START + np.timedelta64(1, "h"), 1.0)
    ephemeris, findings = read(HEADER + "COMMENT a\n" + segment_kvn(START, 1.0, lines=lines) + covariance + second)
    assert not findings.problems
    assert [segment.epochs.size for segment in ephemeris.segments] == [61, 61]


def test_usable_times_bound_the_segment_and_segments_are_put_in_order():
    late = segment_kvn(START + np.timedelta64(1, "h"), 1.0)
    early = segment_kvn(START, 2.0, USEABLE_START_TIME="2027-03-09T00:10:00", USEABLE_STOP_TIME="2027-068T01:00:00Z")
    ephemeris, findings = read(HEADER + late + early)
    assert not findings.problems
    assert [segment.usable_start - START_S for segment in ephemeris.segments] == [600.0, 3_600.0]
    assert ephemeris.segments[0].usable_stop - START_S == 3_600.0


def test_an_open_method_is_hermite_of_degree_seven():
    ephemeris, findings = read(oem_kvn(START, 1.0, INTERPOLATION="", INTERPOLATION_DEGREE=""))
    assert not findings.problems
    assert (ephemeris.segments[0].interpolation, ephemeris.segments[0].interpolation_degree) == ("HERMITE", 7)


@pytest.mark.parametrize(("method", "degree", "kept"), [("LINEAR", "", 1), ("lagrange", "5", 5), ("HERMITE", "3", 3)])
def test_methods_and_degrees(method, degree, kept):
    ephemeris, findings = read(oem_kvn(START, 1.0, INTERPOLATION=method, INTERPOLATION_DEGREE=degree))
    assert not findings.problems
    assert ephemeris.segments[0].interpolation == method.upper()
    assert ephemeris.segments[0].interpolation_degree == kept


@pytest.mark.parametrize("frame", ["ICRF", "GCRF", "EME2000", "TEME", "ITRF2000", "ITRF-93", "ITRF"])
def test_the_frames_that_are_read(frame):
    ephemeris, _ = read(oem_kvn(START, 1.0, REF_FRAME=frame))
    assert ephemeris.segments[0].frame == frame


@pytest.mark.parametrize(
    ("metadata", "remedy"),
    [
        ({"CENTER_NAME": "MOON"}, "only EARTH can be read"),
        ({"REF_FRAME": "MCI"}, "only ICRF, GCRF, EME2000, TEME and ITRF... can be read"),
        ({"TIME_SYSTEM": "TDB"}, "only UTC, TAI, TT, GPS, UT1 can be read"),
        ({"OBJECT_ID": ""}, "OBJECT_ID: missing in the metadata"),
        ({"STOP_TIME": ""}, "STOP_TIME: missing in the metadata"),
        ({"STOP_TIME": "soon"}, "write the epoch as"),
        ({"STOP_TIME": "2027-03-08T00:00:00"}, "START <= USEABLE_START < USEABLE_STOP <= STOP"),
        ({"USEABLE_STOP_TIME": "2027-03-10T00:00:00"}, "START <= USEABLE_START < USEABLE_STOP <= STOP"),
        ({"INTERPOLATION": "SPLINE"}, "only LAGRANGE, HERMITE, LINEAR can be read"),
        ({"INTERPOLATION_DEGREE": ""}, "write a whole number from 1 to 20"),
        ({"INTERPOLATION_DEGREE": "99"}, "write a whole number from 1 to 20"),
        ({"REF_FRAM": "ICRF"}, "did you mean 'REF_FRAME'?"),
    ],
)
def test_faulty_metadata(metadata, remedy):
    ephemeris, findings = read(oem_kvn(START, 1.0, **metadata))
    assert ephemeris is None
    (line,) = lines_of(findings)
    assert line.startswith("own.oem: line ")
    assert remedy in line


LINES = states(START, 1.0)


@pytest.mark.parametrize(
    ("old", "new", "remedy"),
    [
        (LINES[5], LINES[5][:40], "a state is an epoch, three km and three km/s"),
        (LINES[5], LINES[5].replace("2027-03-09T00:05", "2027-02-30T00:05"), "no such day"),
        (LINES[5], LINES[5].replace("T00:05:00", "T24:05:00"), "no such time of day"),
        (LINES[5], LINES[5].replace("T00:05:00", "T23:59:60"), "leap second"),
        (LINES[5], LINES[5].rpartition(" ")[0] + " nan", "not a finite number"),
        (LINES[5], LINES[5].rpartition(" ")[0] + " 1..2", "not a finite number"),
        (LINES[5], LINES[4], "its epoch is not after the one before"),
        (LINES[5], f"{LINES[6]}\n{LINES[5]}", "its epoch is not after the one before"),
        (LINES[0], LINES[0].replace(" 6900.000000", " 6900000.000000"), "give it in km from the Earth's centre"),
        (LINES[0], LINES[0].replace(" 6900.000000", " 69.000000"), "give it in km from the Earth's centre"),
        (LINES[5], LINES[5].rpartition(" ")[0] + " 3800.0", "give it in km/s"),
        (LINES[5], LINES[5].rpartition(" ")[0] + " 1e300", "give it in km/s"),
    ],
)
def test_faulty_states(old, new, remedy):
    text = oem_kvn(START, 1.0)
    assert old in text
    ephemeris, findings = read(text.replace(old, new, 1))
    assert ephemeris is None
    (line,) = lines_of(findings)
    assert remedy in line
    assert line.startswith("own.oem: line ")


@pytest.mark.parametrize(
    ("method", "degree", "count", "enough"),
    [
        ("LAGRANGE", 5, 5, False),
        ("LAGRANGE", 5, 6, True),
        ("HERMITE", 7, 3, False),
        ("HERMITE", 7, 4, True),
        ("LINEAR", 1, 1, False),
        ("LINEAR", 1, 2, True),
    ],
)
def test_the_states_must_be_enough_for_the_degree(method, degree, count, enough):
    text = HEADER + segment_kvn(START, 1.0, lines=LINES[:count], INTERPOLATION=method, INTERPOLATION_DEGREE=str(degree))
    ephemeris, findings = read(text)
    assert (ephemeris is not None) == enough
    assert enough or "too few states" in lines_of(findings)[0]


def test_states_that_end_early_and_gaps_are_warned_of():
    _, findings = read(HEADER + segment_kvn(START, 1.0, lines=LINES[:30] + LINES[45:50]))
    assert not findings.problems
    assert "do not cover the stated span" in findings.warnings[0]
    assert "no states for 960 s after this one" in findings.warnings[1]


def test_a_gap_between_segments_is_warned_of():
    _, findings = read(HEADER + segment_kvn(START, 1.0) + segment_kvn(START + np.timedelta64(2, "h"), 1.0))
    assert "no states for 3600 s before this segment" in findings.warnings[0]


@pytest.mark.parametrize(
    ("second", "remedy"),
    [
        (segment_kvn(START + np.timedelta64(30, "m"), 1.0), "its usable span overlaps that of line"),
        (segment_kvn(START + np.timedelta64(1, "h"), 1.0, OBJECT_ID="2026-114B"), "is of another object"),
        (segment_kvn(START + np.timedelta64(1, "h"), 1.0, TIME_SYSTEM="TAI"), "use one time system"),
    ],
)
def test_segments_must_fit_together(second, remedy):
    ephemeris, findings = read(HEADER + segment_kvn(START, 1.0) + second)
    assert ephemeris is None
    assert remedy in lines_of(findings)[0]


@pytest.mark.parametrize(
    ("text", "remedy"),
    [
        ("", "not an orbit ephemeris message"),
        ("1 71001U", "not an orbit ephemeris message"),
        (b"CCSDS_OEM_VERS = 2.0\n\xff\xfe", "not UTF-8 text"),
        (HEADER, "holds no segment"),
        (HEADER + "META_START\nOBJECT_NAME = A\n", "ends before META_STOP"),
        (segment_kvn(START, 1.0), "not an orbit ephemeris message"),
        (HEADER + "META_STOP\n", "does not belong inside the header"),
        (HEADER + "META_START\nmuddle\nMETA_STOP\n", "KEYWORD = value"),
        (HEADER + "META_START\nOBJECT_ID = A\nOBJECT_ID = B\nMETA_STOP\n", "stands twice"),
        (HEADER + segment_kvn(START, 1.0) + "COVARIANCE_START\n1.0\n", "ends before COVARIANCE_STOP"),
        ("<oem>", "not valid XML"),
        ("<ndm/>", "no <oem> element"),
        ("<oem/>", "holds no segment"),
        ('<!DOCTYPE x [<!ENTITY a "b">]><oem>&a;</oem>', "document type or entities"),
        (oem_xml(START, 1.0).replace("<X>", "<X units='m'>"), "the unit is km in the standard"),
        (oem_xml(START, 1.0).replace("<X>", "<X>1</X><X>"), "stands twice in one state"),
        (oem_xml(START, 1.0).replace("<REF_FRAME>", "<REF_FRAME>ICRF</REF_FRAME><REF_FRAME>"), "stands twice"),
        (oem_xml(START, 1.0).replace("REF_FRAME>", "REF_FRAMES>"), "did you mean 'REF_FRAME'?"),
        (oem_xml(START, 1.0).replace("<Z>", "<ZZ>").replace("</Z>", "</ZZ>"), "a state is an epoch"),
    ],
)
def test_broken_messages(text, remedy):
    ephemeris, findings = read(text)
    assert ephemeris is None
    assert remedy in lines_of(findings)[0]


def test_a_segment_without_states():
    text = HEADER + "META_START\n" + "".join(f"{k} = {v}\n" for k, v in METADATA.items())
    text += "START_TIME = 2027-03-09T00:00:00\nSTOP_TIME = 2027-03-10T00:00:00\nMETA_STOP\n"
    _, findings = read(text)
    assert "holds no states" in lines_of(findings)[0]


def test_several_faults_are_reported_in_one_go():
    text = oem_kvn(START, 1.0, REF_FRAME="MCI", TIME_SYSTEM="TDB").replace(LINES[7], "x").replace(LINES[9], "y")
    _, findings = read(text)
    assert len(findings.problems) == 4


@settings(deadline=None, max_examples=100)
@given(instant=st.datetimes(datetime(1960, 1, 1), datetime(2150, 1, 1)), of_year=st.booleans(), zulu=st.booleans())
def test_both_time_codes_give_the_calendar_s_seconds(instant, of_year, zulu):
    code = instant.strftime("%Y-%jT%H:%M:%S.%f" if of_year else "%Y-%m-%dT%H:%M:%S.%f") + ("Z" if zulu else "")
    days, seconds = days_and_seconds(code)
    exact = (instant - datetime(2000, 1, 1)) - timedelta(days=days)
    assert seconds == pytest.approx(exact.total_seconds(), abs=1e-9)
    assert seconds_since_2000(code) == pytest.approx((instant - datetime(2000, 1, 1)).total_seconds(), abs=1e-6)


@pytest.mark.parametrize("code", ["2027-03-09", "2027-068", "2027-03-09T06:00", "2027-03-09T06:00:00."])
def test_short_time_codes(code):
    moment = datetime(2027, 3, 9, 6 if "T" in code else 0, tzinfo=UTC)
    assert seconds_since_2000(code) == (moment - datetime(2000, 1, 1, tzinfo=UTC)).total_seconds()


@pytest.mark.parametrize(
    "code",
    [
        "",
        "now",
        "2027-13-01",
        "2027-366",
        "2027-000",
        "2027-03-09T06:00:00+02:00",
        "2027-3-9",
        "²027-03-09",
        "2027-03-09T06:61:00",
        "0000-01-01",
    ],
)
def test_other_times_are_refused_with_a_remedy(code):
    with pytest.raises(ValueError, match="write the epoch as"):
        seconds_since_2000(code)


@settings(deadline=None, max_examples=150)
@given(content=st.one_of(st.binary(max_size=200), st.text(max_size=200).map(lambda t: (HEADER + t).encode())))
def test_no_bytes_make_the_reader_raise(content):
    ephemeris, findings = read(content)
    assert ephemeris is None
    assert findings.problems


@settings(deadline=None, max_examples=150)
@given(position=st.integers(0, 900), junk=st.text(max_size=4), cut=st.integers(0, 60), xml=st.booleans())
def test_no_damage_to_a_message_makes_the_reader_raise(position, junk, cut, xml):
    whole = oem_xml(START, 0.1) if xml else oem_kvn(START, 0.1)
    ephemeris, findings = read(whole[:position] + junk + whole[position + cut :])
    assert (ephemeris is None) == bool(findings.problems)
