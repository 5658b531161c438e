"""One orbit source for each spacecraft: matching, ages, left out or stopped, own files."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest
from element_samples import END, MERLE, START, lines_of, omm, reading, tle_text
from oem_samples import oem_kvn

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.resolve import ElementsError, resolve_orbits
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.errors import InputError
from passplan.inputs.fleet import Spacecraft
from passplan.inputs.policy import Policy

OTHER = replace(MERLE, name="MERLE 2", catalogue_number=71_002)


def craft(name: str = "Merle", **fields: object) -> Spacecraft:
    return Spacecraft.model_validate({"name": name, **fields})


class Desk:
    """A folder with files, and one call of the resolver over it."""

    def __init__(self, folder):
        self.folder = folder
        self.reader, self.findings = reading(folder)

    def write(self, name, text):
        path = self.folder / name
        path.parent.mkdir(exist_ok=True)
        path.write_text(text, encoding="utf-8")
        return path

    def resolve(self, fleet, paths, **policy):
        return resolve_orbits(
            {one.name: one for one in fleet},
            paths,
            self.folder,
            START,
            END,
            Policy(**policy),
            self.reader,
            self.findings,
        )


@pytest.fixture
def desk(tmp_path):
    return Desk(tmp_path)


def test_matching_is_by_number_and_never_by_name(desk):
    path = desk.write("day.tle", tle_text(MERLE, OTHER))
    found = desk.resolve([craft("MERLE 2", catalogue_number=71_001), craft("Twin", catalogue_number=71_002)], [path])
    assert found.orbits["MERLE 2"].catalogue_number == 71_001
    assert found.orbits["Twin"].catalogue_number == 71_002
    assert not found.left_out
    assert not desk.findings.problems
    assert not desk.findings.warnings
    row = found.elements.iloc[0]
    assert (row["spacecraft"], row["name"], row["use"], row["place"]) == ("MERLE 2", "MERLE 1", "chosen", "lines 2-3")
    assert row["epoch_utc"] == np.datetime64("2027-03-08T10:22:21.972")
    assert row["age_days"] == pytest.approx(1.0 - 0.43219876, abs=1e-6)
    assert row["source"] == str(path)


def test_the_number_looked_for_may_have_nine_digits(desk):
    path = desk.write("day.json", json.dumps(omm(replace(MERLE, catalogue_number=999_999_999))))
    assert desk.resolve([craft(catalogue_number=999_999_999)], [path]).orbits


def test_the_nearest_of_several_files_is_chosen_and_the_rest_listed(desk):
    old = replace(MERLE, epoch_days=MERLE.epoch_days - 2)
    paths = [desk.write("a.tle", tle_text(old, MERLE)), desk.write("b.json", json.dumps(omm()))]
    found = desk.resolve([craft(catalogue_number=71_001)], paths)
    assert found.orbits["Merle"].source == paths[0]
    assert list(found.elements["use"]) == ["listed", "chosen", "listed"]


def test_sets_of_others_do_not_fill_the_table(desk):
    path = desk.write("day.tle", tle_text(MERLE, OTHER))
    assert len(desk.resolve([craft(catalogue_number=71_001)], [path]).elements) == 1


def test_an_unknown_number_leaves_the_spacecraft_out_and_names_the_files(desk):
    paths = [desk.write("a.tle", tle_text(MERLE)), desk.write("b.tle", tle_text(OTHER))]
    found = desk.resolve([craft(catalogue_number=71_001), craft("Lost", catalogue_number=555)], paths)
    assert set(found.orbits) == {"Merle"}
    reason = f"catalogue number 555 is in none of the element files: {paths[0]}, {paths[1]}"
    assert found.left_out == {"Lost": reason}
    assert desk.findings.warnings == [f"Lost: {reason}; left out of this run"]


def test_the_policy_may_stop_the_run_instead(desk):
    path = desk.write("a.tle", tle_text(MERLE))
    fleet = [craft(catalogue_number=71_001), craft("Lost", catalogue_number=555), craft("Gone", catalogue_number=556)]
    with pytest.raises(ElementsError) as stopped:
        desk.resolve(fleet, [path], when_elements_fail="stop")
    assert len(stopped.value.lines) == 2
    assert stopped.value.lines[0].startswith("Lost: catalogue number 555")
    assert "fetch fresh element sets" in str(stopped.value)


def test_the_run_stops_when_none_is_left(desk):
    path = desk.write("a.tle", tle_text(replace(MERLE, epoch_days=MERLE.epoch_days - 800)))
    with pytest.raises(
        ElementsError, match=r"too old: its epoch lies 800\.6 days before the start, the limit is 14 days"
    ):
        desk.resolve([craft(catalogue_number=71_001)], [path])


def test_faults_in_the_files_come_before_missing_sets(desk):
    path = desk.write("a.tle", tle_text(MERLE)[:-3] + "\n")
    with pytest.raises(InputError, match="an element line has 69"):
        desk.resolve([craft(catalogue_number=71_001)], [path])


def test_an_old_set_is_warned_of_by_the_policy_or_the_spacecraft(desk):
    path = desk.write("a.tle", tle_text(replace(MERLE, epoch_days=MERLE.epoch_days - 4)))
    desk.resolve([craft(catalogue_number=71_001)], [path])
    (warning,) = desk.findings.warnings
    assert warning == "Merle: its epoch lies 4.6 days before the start, more than 3 days; fetch a fresh element set"
    desk.findings.warnings.clear()
    desk.resolve([craft(catalogue_number=71_001, element_warn_age_days=5.0)], [path])
    assert not desk.findings.warnings


def test_a_spacecraft_may_refuse_earlier_than_the_policy(desk):
    path = desk.write("a.tle", tle_text(replace(MERLE, epoch_days=MERLE.epoch_days - 4)))
    patient = craft("Patient", catalogue_number=71_001, element_refuse_age_days=9.0)
    strict = craft("Strict", catalogue_number=71_001, element_refuse_age_days=2.0)
    found = desk.resolve([patient, strict], [path])
    assert set(found.orbits) == {"Patient"}
    assert "the limit is 2 days" in found.left_out["Strict"]
    assert any("have the same catalogue number 71001" in warning for warning in desk.findings.warnings)


def test_in_a_drop_folder_the_newest_wins_and_a_jump_is_warned_of(desk):
    early = replace(MERLE, epoch_days=MERLE.epoch_days - 1)
    late = replace(MERLE, epoch_days=MERLE.epoch_days + 1, mean_anomaly_deg=10.0)
    desk.write("drop/1.tle", tle_text(early))
    desk.write("drop/2.tle", tle_text(late))
    found = desk.resolve([craft(catalogue_number=71_001)], [desk.folder / "drop"])
    chosen = found.orbits["Merle"]
    assert isinstance(chosen, ElementSet)
    assert chosen.source.name == "2.tle"
    (warning,) = desk.findings.warnings
    assert "its element set jumps by" in warning
    assert "2.0 days before" in warning


def test_a_quiet_refresh_is_not_a_jump(desk):
    nudged = replace(MERLE, epoch_s=MERLE.epoch_s + 0.1)
    desk.write("drop/1.tle", tle_text(MERLE))
    desk.write("drop/2.tle", tle_text(nudged))
    desk.resolve([craft(catalogue_number=71_001)], [desk.folder / "drop"])
    assert not desk.findings.warnings


def test_a_set_that_decays_within_the_horizon_is_warned_of(desk):
    doomed = replace(MERLE, epoch_days=9_929, epoch_s=0.0, mean_motion_rev_per_day=16.4, bstar_per_earth_radius=0.03)
    path = desk.write("a.tle", tle_text(doomed))
    found = desk.resolve([craft(catalogue_number=71_001)], [path])
    assert found.orbits
    assert "SGP4 fails within the horizon" in desk.findings.warnings[0]


def test_a_fresh_spacecraft_names_its_own_set(desk):
    desk.write("fresh.tle", tle_text(replace(MERLE, catalogue_number=None)))
    found = desk.resolve([craft(elements_file="fresh.tle")], [])
    assert found.orbits["Merle"].catalogue_number is None
    assert found.elements["catalogue_number"].isna().all()


@pytest.mark.parametrize(
    ("text", "fields", "remedy"),
    [
        (tle_text(MERLE, OTHER), {}, "holds 2 element sets; the elements_file of Merle must hold exactly one"),
        ("# none yet\n", {}, "holds 0 element sets"),
        (tle_text(), {"catalogue_number": 5}, "Merle has catalogue number 5"),
    ],
)
def test_an_own_file_holds_exactly_the_one_set(desk, text, fields, remedy):
    desk.write("own.tle", text)
    desk.write("day.tle", tle_text(OTHER))
    desk.resolve(
        [craft(elements_file="own.tle", **fields), craft("B", catalogue_number=71_002)], [desk.folder / "day.tle"]
    )
    assert remedy in "\n".join(lines_of(desk.findings))


def test_an_ephemeris_goes_before_an_element_set(desk):
    desk.write("own.oem", oem_kvn(START, hours=30))
    path = desk.write("day.tle", tle_text())
    found = desk.resolve([craft(catalogue_number=71_001, ephemeris_file="own.oem")], [path])
    assert isinstance(found.orbits["Merle"], Ephemeris)
    assert not desk.findings.warnings
    (row,) = found.elements.to_dict("records")
    assert (row["name"], row["use"], row["catalogue_number"]) == ("MERLE 1", "chosen", 71_001)
    assert found.elements["epoch_utc"].isna().all()


def test_an_ephemeris_of_a_part_of_the_horizon_is_warned_of(desk):
    desk.write("own.oem", oem_kvn(START, hours=6))
    found = desk.resolve([craft(ephemeris_file="own.oem")], [])
    assert found.orbits
    assert "covers 2027-03-09T00:00Z to 2027-03-09T06:00Z, only a part of the horizon" in desk.findings.warnings[0]


def test_an_ephemeris_of_another_day_does_not_serve(desk):
    desk.write("own.oem", oem_kvn(START - np.timedelta64(9, "D"), hours=6))
    path = desk.write("day.tle", tle_text())
    found = desk.resolve([craft("A", ephemeris_file="own.oem"), craft("B", catalogue_number=71_001)], [path])
    assert "not the horizon" in found.left_out["A"]
    assert list(found.elements["use"]) == ["unusable", "chosen"]


def test_a_broken_or_missing_ephemeris_is_a_fault_of_the_input(desk):
    desk.write("own.oem", "CCSDS_OEM_VERS = 2.0\nnonsense\n")
    with pytest.raises(InputError) as refused:
        desk.resolve([craft(ephemeris_file="own.oem"), craft("B", ephemeris_file="gone.oem")], [])
    assert "not a header line of an OEM" in str(refused.value)
    assert "no such file" in str(refused.value)


def test_an_empty_fleet_resolves_to_nothing(desk):
    found = desk.resolve([], [])
    assert (found.orbits, found.left_out, len(found.elements)) == ({}, {}, 0)
