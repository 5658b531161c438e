"""Two-line element sets: what is read, what is refused, and that nothing is lost on the way."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from element_samples import MERLE, apart_m, lines_of, made, tle_lines, tle_text
from hypothesis import given, settings
from hypothesis import strategies as st
from sgp4.api import Satrec

from passplan.inputs.elements.mean import MeanElements, element_set, full_designator, short_designator
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.elements.tle_layout import checksum, decimal_power, decoded_number, line_kind
from passplan.inputs.errors import Findings

ONE, TWO = tle_lines()


def read(text: str) -> tuple[list, Findings]:
    findings = Findings()
    return parse_tle(text, "day.tle", findings), findings


def refit(line: str) -> str:
    """The line with a right checksum, for faults that the checksum would otherwise catch first."""
    return line[:68] + str(checksum(line))


def test_a_three_line_set_is_read_in_full():
    sets, findings = read(tle_text())
    assert not findings.problems
    (one,) = sets
    assert (one.name, one.catalogue_number, one.international_designator) == ("MERLE 1", 71_001, "2026-114A")
    assert one.epoch_utc == np.datetime64("2027-03-08T10:22:21.972864", "us")
    assert str(one.source) == "day.tle"
    assert one.place == "lines 2-3"
    assert one.satrec.elnum == 42
    assert one.satrec.revnum == 1_234


@pytest.mark.parametrize(
    "text",
    [
        f"{ONE}\n{TWO}\n",
        f"0 MERLE 1\n{ONE}\n{TWO}",
        f"# fetched today\r\n\r\nMERLE 1\r\n{ONE}  \r\n\r\n{TWO}\r\n",
        f"MERLE 1\r{ONE}\r{TWO}\r",
        f"\n  {ONE}\n  {TWO}\n",
    ],
)
def test_the_ways_a_set_is_written_down(text):
    sets, findings = read(text)
    assert not findings.problems
    assert len(sets) == 1
    assert sets[0].name in ("", "MERLE 1")
    assert apart_m(sets[0], element_set(MERLE, sets[0].source, "")) < 1.0


def test_sets_with_and_without_names_may_be_mixed():
    other = replace(MERLE, name="MERLE 2", catalogue_number=71_002)
    text = "\n".join([*tle_lines(), "MERLE 2", *tle_lines(other), *tle_lines(replace(MERLE, catalogue_number=5))])
    sets, findings = read(text)
    assert not findings.problems
    assert [(one.name, one.catalogue_number) for one in sets] == [("", 71_001), ("MERLE 2", 71_002), ("", 5)]


def test_a_name_may_begin_like_an_element_line():
    sets, findings = read(f"2 FAST\n{ONE}\n{TWO}\n1 MORE TIME\n{ONE}\n{TWO}\n")
    assert not findings.problems
    assert [one.name for one in sets] == ["2 FAST", "1 MORE TIME"]


def test_the_states_are_those_of_the_library():
    library = Satrec.twoline2rv(ONE, TWO)
    (one,), _ = read(tle_text())
    for day in (-2.0, 0.0, 5.0):
        ours = one.satrec.sgp4(library.jdsatepoch, library.jdsatepochF + day)
        theirs = library.sgp4(library.jdsatepoch, library.jdsatepochF + day)
        assert np.allclose(ours[1], theirs[1], atol=1e-6)


@pytest.mark.parametrize(
    ("field", "number"),
    [
        ("    5", 5),
        ("00005", 5),
        ("99999", 99_999),
        ("A0000", 100_000),
        ("H9999", 179_999),
        ("J0000", 180_000),
        ("N9999", 229_999),
        ("P0000", 230_000),
        ("Z9999", 339_999),
        ("     ", None),
        ("00000", None),
    ],
)
def test_catalogue_numbers_with_and_without_a_letter(field, number):
    assert decoded_number(field) == number


@pytest.mark.parametrize(
    ("field", "value"),
    [
        (" 27777-3", 0.27777e-3),
        ("-11606-4", -0.11606e-4),
        (" 00000+0", 0.0),
        (" 00000-0", 0.0),
        ("+12345 0", 0.12345),
        ("    12-5", 0.00012e-5),
    ],
)
def test_numbers_with_a_power_of_ten(field, value):
    assert decimal_power(field) == pytest.approx(value, rel=1e-12)


def test_an_object_without_a_number_is_read():
    blank = [refit(line[:2] + "     " + line[7:]) for line in (ONE, TWO)]
    sets, findings = read("\n".join(blank))
    assert not findings.problems
    assert sets[0].catalogue_number is None


def changed(line: str, first: int, text: str) -> str:
    return refit(line[: first - 1] + text + line[first - 1 + len(text) :])


@pytest.mark.parametrize(
    ("one", "two", "where", "remedy"),
    [
        (ONE[:-1] + str((int(ONE[-1]) + 1) % 10), TWO, "line 1, column 69", f"checksum of this line is {ONE[-1]}"),
        (ONE, TWO[:-3], "line 2", "has 66 characters, an element line has 69"),
        (ONE + "7", TWO, "line 1", "has 70 characters"),
        (changed(ONE, 54, " 2a456-3"), TWO, "line 1, columns 54-61", "BSTAR"),
        (changed(ONE, 19, "2x"), TWO, "line 1, columns 19-20", "epoch year"),
        (changed(ONE, 21, "400"), TWO, "line 1, columns 21-32", "no such day of the year"),
        (changed(ONE, 63, "4"), TWO, "line 1, column 63", "not an SGP4 set"),
        (ONE, changed(TWO, 3, "71002"), "line 2, columns 3-7", "line 1 is of '71001'"),
        (ONE, changed(TWO, 3, "I1002"), "line 2, columns 3-7", "catalogue number"),
        (ONE, changed(TWO, 9, "197.4321"), "lines 1-2", "inclination 197.432 is not from 0 to 180 deg"),
        (ONE, changed(TWO, 53, " 0.00000000"), "lines 1-2", "not closed"),
        (ONE, changed(TWO, 53, "99.00000000"), "lines 1-2", "mean motion"),
        (changed(ONE, 10, "é"), TWO, "line 1, columns 10-17", "international designator"),
    ],
)
def test_a_faulty_line_is_named_with_its_columns(one, two, where, remedy):
    good = tle_lines(replace(MERLE, catalogue_number=71_009))
    sets, findings = read("\n".join([one, two, *good]))
    (line,) = lines_of(findings)
    assert line.startswith(f"day.tle: {where}")
    assert remedy in line
    assert [one.catalogue_number for one in sets] == [71_009], "reading goes on after the fault"


def test_several_faults_are_reported_in_one_go():
    bad = ONE[:20] + "x" + ONE[21:]
    _, findings = read("\n".join([bad, TWO, ONE, TWO[:50], TWO, "LONELY", "LONELY TOO", ONE]))
    places = [problem.where.split(",")[0] for problem in findings.problems]
    assert places == ["line 1", "line 4", "line 5", "line 6", "line 8"]
    assert "no first line stands above" in str(findings.problems[2])
    assert "no element lines follow this name" in str(findings.problems[3])
    assert "no second line follows" in str(findings.problems[-1])


def test_a_first_line_that_is_replaced_by_another_is_not_lost_silently():
    sets, findings = read("\n".join(["MERLE 1", ONE, ONE, TWO]))
    assert len(sets) == 1
    assert [p.where for p in findings.problems] == ["line 2"]


def test_a_line_of_another_kind_is_named():
    _, findings = read("x" * 5_000 + "\n\x00\x01\n")
    assert all("neither a name nor an element line" in line for line in lines_of(findings))
    assert all(len(line) < 200 for line in lines_of(findings))
    assert len(findings.problems) == 2


def test_the_number_in_the_sgp4_record_never_limits_the_set():
    assert made(catalogue_number=999_999_999).catalogue_number == 999_999_999


def test_designators_both_ways():
    assert full_designator("98067A") == "1998-067A"
    assert full_designator("26114AB ") == "2026-114AB"
    assert full_designator("odd") == "odd"
    assert short_designator("1998-067A") == "98067A"
    assert short_designator("98067A") == "98067A"
    assert short_designator("odd") == ""


def test_what_counts_as_an_element_line():
    assert line_kind(ONE) == 1
    assert line_kind(TWO) == 2
    assert line_kind("2 71001  97.4") == 2, "a cut line is still meant as an element line"
    assert line_kind("2 FAST 4U") == 0


ANGLES = st.integers(0, 3_599_999).map(lambda n: n / 10_000)
MEANS = st.builds(
    MeanElements,
    name=st.just("MERLE 7"),
    catalogue_number=st.integers(1, 339_999),
    international_designator=st.sampled_from(["1998-067A", "2026-114ABC", ""]),
    epoch_days=st.integers(-15_000, 20_000),
    epoch_s=st.integers(0, 99_999_999).map(lambda n: n * 86_400 / 1e8),
    mean_motion_rev_per_day=st.integers(10_000_000, 1_700_000_000).map(lambda n: n / 1e8),
    eccentricity=st.integers(0, 9_000_000).map(lambda n: n / 1e7),
    inclination_deg=st.integers(0, 1_800_000).map(lambda n: n / 1e4),
    raan_deg=ANGLES,
    argument_of_perigee_deg=ANGLES,
    mean_anomaly_deg=ANGLES,
    bstar_per_earth_radius=st.integers(-99_999, 99_999).map(lambda n: n * 1e-8),
    element_set_number=st.integers(0, 9_999),
    revolution=st.integers(0, 99_999),
)


@settings(deadline=None, max_examples=150)
@given(mean=MEANS)
def test_a_round_trip_through_the_lines_keeps_everything(mean):
    sets, findings = read(tle_text(mean))
    assert not findings.problems
    original = element_set(mean, sets[0].source, sets[0].place)
    assert sets[0].catalogue_number == mean.catalogue_number
    assert sets[0].international_designator == original.international_designator
    assert abs(sets[0].epoch_utc - original.epoch_utc) <= np.timedelta64(1, "us")
    for field in ("inclo", "nodeo", "argpo", "mo", "ecco", "no_kozai", "bstar"):
        assert getattr(sets[0].satrec, field) == pytest.approx(getattr(original.satrec, field), rel=1e-9, abs=1e-12)
    assert (sets[0].satrec.elnum, sets[0].satrec.revnum) == (mean.element_set_number, mean.revolution)


@settings(deadline=None, max_examples=150)
@given(
    mean=MEANS,
    line=st.integers(0, 1),
    column=st.integers(0, 68),
    new=st.sampled_from("0123456789"),
)
def test_no_wrong_digit_goes_unnoticed(mean, line, column, new):
    lines = list(tle_lines(mean))
    old = lines[line][column]
    if old == new or not old.isdigit():
        return
    lines[line] = lines[line][:column] + new + lines[line][column + 1 :]
    sets, findings = read("\n".join(lines))
    assert findings.problems
    assert not sets


@settings(deadline=None, max_examples=200)
@given(text=st.one_of(st.text(), st.text(alphabet="012 .-+AUZ\n\r", max_size=300)))
def test_no_text_makes_the_reader_raise(text):
    sets, _ = read(text)
    assert isinstance(sets, list)


@settings(deadline=None, max_examples=200)
@given(column=st.integers(0, 140), junk=st.text(min_size=1, max_size=3))
def test_no_damage_to_a_set_makes_the_reader_raise(column, junk):
    text = f"{ONE}\n{TWO}\n"
    sets, findings = read(text[:column] + junk + text[column + len(junk) :])
    assert sets or findings.problems
