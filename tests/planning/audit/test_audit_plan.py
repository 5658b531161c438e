"""A clean plan passes the audit, and each way to spoil it is caught and named."""

from __future__ import annotations

import io
from dataclasses import replace
from datetime import UTC, timedelta

import numpy as np
import pandas as pd
import pytest
from audit_bench import Bench, settle

from passplan.inputs.calendar_records import Closure, Request

ONE_SECOND = np.timedelta64(1, "s")


def _sentences(bench: Bench, kind: str) -> str:
    return "\n".join(str(fault) for fault in bench.audit() if fault.kind == kind)


def _tight(bench: Bench) -> int:
    """A contact that starts less than half a second after its window, over an antenna with a flat mask."""
    return int(bench.contacts.index[bench.contacts["antenna"] == "Isvarde-A"][0])


def test_a_clean_plan_passes(bench: Bench) -> None:
    assert len(bench.contacts) > 40
    assert bench.audit() == []


def test_an_empty_plan_passes(bench: Bench) -> None:
    bench.contacts, bench.segments = bench.contacts.iloc[:0], bench.segments.iloc[:0]
    settle(bench)
    bench.summary["shortfalls"] = [{"kind": "command", "name": name, "sentence": ""} for name in bench.run.spacecraft]
    bench.summary["shortfalls"].append({"kind": "request", "name": "new coast schedule", "sentence": ""})
    assert bench.audit() == []


def test_a_plan_read_back_from_csv_passes(bench: Bench) -> None:
    for name in ("contacts", "segments"):
        text = getattr(bench, name).to_csv(index=False)
        setattr(bench, name, pd.read_csv(io.StringIO(text), parse_dates=["start_utc", "end_utc"]))
    assert bench.audit() == []


def test_volume_of_contact(bench: Bench) -> None:
    bench.set_contact(3, volume_mb=bench.contacts["volume_mb"].iloc[3] + 0.01)
    assert "does not agree with" in _sentences(bench, "volume")


def test_volume_of_segment_by_a_byte_in_a_gigabyte(bench: Bench) -> None:
    row = bench.row_of_segment(3)
    more = bench.segments["volume_mb"].iloc[row] + 2e-4
    bench.set_segment(3, volume_mb=more)
    bench.set_contact(3, volume_mb=more)
    assert "of what is aboard" in _sentences(bench, "volume")


def test_volume_above_the_rate(bench: Bench) -> None:
    bench.set_segment(3, volume_mb=1e5)
    assert "cannot go down in" in _sentences(bench, "volume")


def test_modcod_of_contact_only(bench: Bench) -> None:
    assert bench.contacts["modcod"].iloc[3] == "16APSK 2/3"
    bench.set_contact(3, modcod="16APSK 4/5")
    assert "'16APSK 2/3' is not one it may use" in _sentences(bench, "modcod")


@pytest.mark.parametrize(
    ("modcod", "efficiency", "needed_db", "kind", "words"),
    [
        ("16APSK 4/5", 3.165623, 11.03, "margin", "modcod 16APSK 4/5 has a margin of 0.9"),
        ("QPSK 3/4", 1.487473, 4.03, "modcod", "more than QPSK 3/4"),
    ],
)
def test_modcod_with_everything_that_follows_from_it(
    bench: Bench, modcod: str, efficiency: float, needed_db: float, kind: str, words: str
) -> None:
    # A consistent lie: too fast for its margin, or slower than the link allows.
    bench.set_contact(3, modcod=modcod, min_margin_db=bench.contacts["min_margin_db"].iloc[3] + 8.97 - needed_db)
    bench.set_segment(3, modcod=modcod, rate_mbps=45.0 * efficiency)
    settle(bench)
    assert words in _sentences(bench, kind)


def test_modcod_that_the_radio_does_not_have(bench: Bench) -> None:
    bench.set_contact(3, modcod="32APSK 3/4")
    bench.set_segment(3, modcod="32APSK 3/4", rate_mbps=45.0 * 3.703295)
    assert "'32APSK 3/4' is not one" in _sentences(bench, "modcod")


def test_rate_that_is_not_the_modcod_s(bench: Bench) -> None:
    bench.set_segment(3, rate_mbps=bench.segments["rate_mbps"].iloc[bench.row_of_segment(3)] * 1.001)
    assert "gives 118.674 Mbit/s" in _sentences(bench, "modcod")


def test_usable_time_of_contact_only(bench: Bench) -> None:
    bench.set_contact(3, usable_s=bench.contacts["usable_s"].iloc[3] + 1)
    assert "does not agree with 470 s of segments" in _sentences(bench, "usable")


def test_usable_time_with_everything_that_follows_from_it(bench: Bench) -> None:
    # Longer: the margin is gone by then. Shorter: the link holds for longer than claimed.
    for seconds, kind in ((15, "margin"), (-15, "usable")):
        spoilt = bench.copy()
        row = spoilt.row_of_segment(3)
        spoilt.set_segment(3, end_utc=spoilt.segments["end_utc"].iloc[row] + seconds * ONE_SECOND)
        spoilt.set_contact(3, usable_s=470 + seconds)
        settle(spoilt)
        assert kind in spoilt.kinds()


def test_sending_before_acquisition(bench: Bench) -> None:
    early = bench.contacts["start_utc"].iloc[0] + 10 * ONE_SECOND
    bench.set_segment(0, start_utc=early)
    assert "before the 25 s of acquisition" in _sentences(bench, "usable")


def test_least_margin(bench: Bench) -> None:
    bench.set_contact(3, min_margin_db=3.5)
    assert "least margin is 3.0" in _sentences(bench, "margin")


def test_start_one_second_outside_the_window(bench: Bench) -> None:
    contact = _tight(bench)
    bench.shift(contact, start_s=-1)
    faults = bench.audit()
    assert [fault.kind for fault in faults] == ["elevation"]
    assert "below the mask of 5.000 deg" in faults[0].sentence


def test_end_one_second_outside_the_window(bench: Bench) -> None:
    bench.shift(_tight(bench), end_s=1)
    assert "elevation" in bench.kinds()


def test_contact_behind_a_ridge(bench: Bench) -> None:
    # A wall of 70 deg to the north, which no pass of a sun-synchronous orbit can climb over here.
    walled = {"mask": ((0.0, 70.0), (40.0, 70.0), (50.0, 5.0), (310.0, 5.0), (320.0, 70.0), (360.0, 70.0))}
    antenna = bench.run.antennas["Tarrow-A"].model_copy(update=walled)
    bench.run = replace(bench.run, antennas={**bench.run.antennas, "Tarrow-A": antenna})
    said = _sentences(bench, "elevation")
    assert "below the mask of 70.000 deg" in said
    assert "Isvarde-A" not in said


def test_contact_at_another_time_of_day(bench: Bench) -> None:
    bench.shift(5, start_s=1_800, end_s=1_800)
    bench.set_segment(5, **{
        column: bench.segments[column].iloc[bench.row_of_segment(5)] + 1_800 * ONE_SECOND
        for column in ("start_utc", "end_utc")
    })
    assert "elevation" in bench.kinds()


def test_overlap_on_an_antenna_that_ignores_setup(bench: Bench) -> None:
    slow = bench.run.antennas["Isvarde-A"].model_copy(update={"prepare_s": 1_500.0})
    bench.run = replace(bench.run, antennas={**bench.run.antennas, "Isvarde-A": slow})
    said = _sentences(bench, "antenna_overlap")
    assert "antenna Isvarde-A: contacts" in said
    assert "s between them, 1530 s are needed" in said


def test_overlap_on_an_antenna(bench: Bench) -> None:
    # The same pass given to a second spacecraft: both cannot be served.
    extra = bench.contacts.iloc[[3]].assign(contact_id="second", spacecraft="Teasel-1")
    bench.contacts = pd.concat([bench.contacts, extra], ignore_index=True)
    assert "overlap" in _sentences(bench, "antenna_overlap")


def test_overlap_on_a_spacecraft(bench: Bench) -> None:
    extra = bench.contacts.iloc[[3]].assign(contact_id="second", antenna="Isvarde-B")
    piece = bench.segments.iloc[[bench.row_of_segment(3)]].assign(contact_id="second")
    bench.contacts = pd.concat([bench.contacts, extra], ignore_index=True)
    bench.segments = pd.concat([bench.segments, piece], ignore_index=True)
    faults = bench.audit()
    assert "spacecraft Ambril-3: contacts" in "\n".join(map(str, faults))
    assert {"spacecraft_overlap", "storage"} <= {fault.kind for fault in faults}


@pytest.mark.parametrize(("from_s", "until_s", "words"), [(60, 120, "lies in"), (-40, -5, "leaves no time to prepare")])
def test_contact_in_or_beside_a_closure(bench: Bench, from_s: int, until_s: int, words: str) -> None:
    start = bench.contacts["start_utc"].iloc[3].to_pydatetime().replace(tzinfo=UTC)
    closure = Closure(
        antenna="Isvarde-A", start_utc=start + timedelta(seconds=from_s), end_utc=start + timedelta(seconds=until_s)
    )
    bench.run = replace(bench.run, closures=(*bench.run.closures, closure))
    faults = bench.audit()
    assert [fault.kind for fault in faults] == ["closure"]
    assert words in faults[0].sentence
    assert "Isvarde-A" in faults[0].sentence


def test_too_short(bench: Bench) -> None:
    bench.run = replace(bench.run, policy=bench.run.policy.model_copy(update={"min_contact_s": 300.0}))
    assert "less than the 300 s" in _sentences(bench, "too_short")


def test_beyond_the_horizon(bench: Bench) -> None:
    bench.run = replace(bench.run, end_utc=bench.run.end_utc - np.timedelta64(3_600, "s"))
    assert "beyond the horizon" in _sentences(bench, "horizon")


@pytest.mark.parametrize("key", ["start_mb", "generated_mb", "delivered_mb", "lost_mb", "left_mb"])
def test_storage_that_does_not_balance(bench: Bench, key: str) -> None:
    bench.summary["storage"]["Ambril-3"][key] += 0.01
    said = _sentences(bench, "storage")
    assert f"spacecraft Ambril-3: storage figure {key}" in said
    assert "start and generated make" in said


def test_storage_filled_beyond_its_capacity(bench: Bench) -> None:
    # Half the storage: what the plan says to hold until the next contact is lost.
    small = bench.run.spacecraft["Ambril-3"].model_copy(update={"storage_mb": 7_000.0})
    bench.run = replace(bench.run, spacecraft={**bench.run.spacecraft, "Ambril-3": small})
    said = _sentences(bench, "storage")
    assert "storage figure lost_mb is 0.000000, the simulation gives" in said
    assert {"volume", "value"} <= bench.kinds()


def test_storage_entry_missing(bench: Bench) -> None:
    del bench.summary["storage"]["Teasel-1"]
    assert "no storage figures" in _sentences(bench, "storage")


def test_value(bench: Bench) -> None:
    bench.summary["value"] *= 1.0 + 2e-6
    faults = bench.audit()
    assert [(fault.kind, fault.place) for fault in faults] == [("value", "plan")]
    assert "value is stated as" in faults[0].sentence


@pytest.mark.parametrize("column", ["weight", "value", "cost"])
def test_money_of_a_contact(bench: Bench, column: str) -> None:
    bench.set_contact(3, **{column: bench.contacts[column].iloc[3] + 1.0})
    assert f"its {column} is" in _sentences(bench, "value")


def test_total_volume(bench: Bench) -> None:
    bench.summary["volume_mb"] += 1.0
    assert "volume_mb" in _sentences(bench, "value")


def test_a_dropped_request_that_counts_as_met(bench: Bench) -> None:
    asked = bench.run.requests[0]
    met = bench.contacts.index[
        (bench.contacts["spacecraft"] == asked.spacecraft) & (bench.contacts["site"] == asked.site)
        & (bench.contacts["start_utc"] >= pd.Timestamp(asked.earliest_utc.replace(tzinfo=None)))
        & (bench.contacts["end_utc"] <= pd.Timestamp(asked.latest_utc.replace(tzinfo=None)))
    ]
    gone = set(bench.contacts.loc[met, "contact_id"])
    bench.contacts = bench.contacts.drop(met)
    bench.segments = bench.segments[~bench.segments["contact_id"].isin(gone)]
    settle(bench)
    assert "request new coast schedule: no contact meets it" in _sentences(bench, "request")
    # Admitted, it is no fault.
    bench.summary["shortfalls"] = [{"kind": "request", "name": asked.name, "sentence": "It is not met."}]
    assert "request" not in bench.kinds()


def test_a_request_that_is_met_is_no_shortfall(bench: Bench) -> None:
    bench.summary["shortfalls"] = [{"kind": "request", "name": "new coast schedule", "sentence": ""}]
    assert "yet it is met" in _sentences(bench, "request")


def test_a_shortfall_of_nothing(bench: Bench) -> None:
    bench.summary["shortfalls"] = [{"kind": "request", "name": "imaginary", "sentence": ""}]
    assert "no such requirement" in _sentences(bench, "request")


def test_a_request_for_one_antenna(bench: Bench) -> None:
    asked = bench.run.requests[0]
    there = Request(
        name="there", spacecraft=asked.spacecraft, antenna="Ellery-B", earliest_utc=asked.earliest_utc,
        latest_utc=asked.latest_utc,
    )
    bench.run = replace(bench.run, requests=(asked, there))
    assert "request there" in _sentences(bench, "request")


def test_dropped_command_contacts(bench: Bench) -> None:
    # Teasel-1 is to be commanded every 12 h; its contacts before 13:00 become downlink only.
    before = bench.contacts["end_utc"] < pd.Timestamp("2027-03-09T13:00")
    bench.contacts.loc[before & (bench.contacts["spacecraft"] == "Teasel-1"), "service"] = "downlink"
    assert "spacecraft Teasel-1: a command contact is due every 12 h" in _sentences(bench, "command")
    bench.summary["shortfalls"] = [{"kind": "command", "name": "Teasel-1", "sentence": ""}]
    assert "command" not in bench.kinds()


def test_command_contacts_through_an_antenna_that_cannot_transmit(bench: Bench) -> None:
    mute = bench.run.antennas["Isvarde-A"].model_copy(update={"transmitters": ()})
    bench.run = replace(bench.run, antennas={**bench.run.antennas, "Isvarde-A": mute})
    assert "Isvarde-A cannot transmit" in _sentences(bench, "command")


def test_command_contacts_without_the_margin(bench: Bench) -> None:
    weak = bench.run.transmitters["s-up-7m"].model_copy(update={"eirp_dbw": 10.0})
    bench.run = replace(bench.run, transmitters={**bench.run.transmitters, "s-up-7m": weak})
    assert "120 s are required" in _sentences(bench, "command")


def test_a_radio_of_another_spacecraft(bench: Bench) -> None:
    bench.set_contact(3, radio="x-8070")
    assert "Ambril-3 carries no radio 'x-8070'" in _sentences(bench, "radio")


def test_frequency_polarisation_and_direction_of_the_radio(bench: Bench) -> None:
    bench.set_contact(3, frequency_mhz=8_070.0)
    bench.set_contact(4, polarisation="H")
    bench.set_contact(5, radio="s-command")
    said = _sentences(bench, "radio")
    assert said.count("frequency or polarisation is not that of") == 3
    assert "s-command cannot send" in said


def test_an_antenna_that_cannot_hear_the_radio(bench: Bench) -> None:
    deaf = bench.run.antennas["Isvarde-A"].model_copy(update={"receivers": ("s-7m",)})
    bench.run = replace(bench.run, antennas={**bench.run.antennas, "Isvarde-A": deaf})
    assert "no receiver of Isvarde-A can hear radio x-8190" in _sentences(bench, "radio")
