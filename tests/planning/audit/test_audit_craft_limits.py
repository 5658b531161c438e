"""A plan that breaks one limit of one spacecraft, by a second: the audit names that limit and nothing else."""

from __future__ import annotations

import re
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from audit_bench import Bench

from passplan.geometry.eclipse import eclipses
from passplan.geometry.revolutions import ascending_nodes
from passplan.planning.audit import Fault

CRAFT = "Ambril-3"


def audited(bench: Bench, **limits: float) -> list[Fault]:
    """The faults of the honest plan where its spacecraft have these limits."""
    craft = bench.run.spacecraft[CRAFT]
    run = replace(bench.run, spacecraft={**bench.run.spacecraft, CRAFT: craft.model_copy(update=limits)})
    return replace(bench, run=run).audit()


def spans_s(bench: Bench) -> list[tuple[float, float]]:
    """Start and end of the spacecraft's contacts [s]."""
    own = bench.contacts[bench.contacts["spacecraft"] == CRAFT]
    return [tuple((own[edge].iloc[k].to_datetime64() - bench.run.start_utc) / np.timedelta64(1, "s")
                  for edge in ("start_utc", "end_utc")) for k in range(len(own))]


@pytest.mark.parametrize(("key", "words"), [
    ("contact_gap_s", "s are needed"), ("cool_down_s", "contacts with sending")])
def test_too_little_rest(bench: Bench, key: str, words: str) -> None:
    least_s = min(b[0] - a[1] for a, b in pairwise(spans_s(bench)))
    assert audited(bench, **{key: least_s}) == []
    faults = audited(bench, **{key: least_s + 1.0})
    assert {fault.kind for fault in faults} == {key.removesuffix("_s")}
    assert words in faults[0].sentence


def test_a_contact_for_commands_needs_no_cooling(bench: Bench) -> None:
    own = bench.contacts.index[bench.contacts["spacecraft"] == CRAFT]
    bench.contacts.loc[own[1::2], "service"] = "command"
    assert "cool_down" not in {fault.kind for fault in audited(bench, cool_down_s=1_800.0)}
    assert "contact_gap" in {fault.kind for fault in audited(bench, contact_gap_s=86_400.0)}


def on_air_s(bench: Bench) -> list[tuple[float, float]]:
    """Start and end of the transmitter's time in the spacecraft's contacts [s]."""
    own = bench.contacts[bench.contacts["spacecraft"] == CRAFT]
    found = []
    for contact, (start_s, _) in zip(own["contact_id"], spans_s(bench), strict=True):
        mine = bench.segments[bench.segments["contact_id"] == contact]
        first, last = ((mine[edge].iloc[k].to_datetime64() - bench.run.start_utc) / np.timedelta64(1, "s")
                       for edge, k in (("start_utc", 0), ("end_utc", -1)))
        found.append((max(start_s, first - bench.run.radios["x-8190"].acquisition_s), last))
    return found


def test_too_many_contacts_on_a_day(bench: Bench) -> None:
    count = len(spans_s(bench))
    assert audited(bench, contacts_per_day=count) == []
    (fault,) = audited(bench, contacts_per_day=count - 1)
    assert fault.kind == "contacts_per_day"
    assert f"{count} contacts start on 2027-03-09" in fault.sentence


def test_too_many_contacts_in_an_orbit(bench: Bench) -> None:
    nodes = ascending_nodes(bench.run.orbits[CRAFT], bench.run.start_utc, bench.run.end_utc)
    starts = np.array([a for a, _ in spans_s(bench)])
    edges_s = (nodes - bench.run.start_utc) / np.timedelta64(1, "s")
    counts = np.bincount(np.searchsorted(edges_s, starts))
    assert counts.max() >= 2
    assert audited(bench, contacts_per_orbit=int(counts.max())) == []
    faults = audited(bench, contacts_per_orbit=int(counts.max()) - 1)
    assert [fault.kind for fault in faults] == ["contacts_per_orbit"] * int(np.sum(counts == counts.max()))


def test_sending_too_long_in_one_contact(bench: Bench) -> None:
    longest_s = max(b - a for a, b in on_air_s(bench))
    assert audited(bench, sending_per_contact_s=longest_s) == []
    (fault,) = audited(bench, sending_per_contact_s=longest_s - 1.0)
    assert fault.kind == "sending_per_contact"
    assert f"on for {longest_s:g} s" in fault.sentence


def test_sending_too_long_in_an_orbit(bench: Bench) -> None:
    spans, nodes = on_air_s(bench), ascending_nodes(bench.run.orbits[CRAFT], bench.run.start_utc, bench.run.end_utc)
    edges_s = [-np.inf, *((nodes - bench.run.start_utc) / np.timedelta64(1, "s")), np.inf]
    most_s = max(sum(max(0.0, min(b, high) - max(a, low)) for a, b in spans) for low, high in pairwise(edges_s))
    assert audited(bench, sending_per_orbit_s=most_s) == []
    faults = audited(bench, sending_per_orbit_s=most_s - 5.0)
    assert {fault.kind for fault in faults} == {"sending_per_orbit"}


def test_sending_too_long_in_some_hours(bench: Bench) -> None:
    seconds = np.zeros(86_400)
    for a, b in on_air_s(bench):
        seconds[int(a):int(b)] = 1.0
    sums = np.concatenate([[0.0], np.cumsum(seconds)])
    most_s = float((sums[7_200:] - sums[:-7_200]).max())
    assert audited(bench, sending_per_span_s=most_s, sending_span_h=2.0) == []
    (fault,) = audited(bench, sending_per_span_s=most_s - 1.0, sending_span_h=2.0)
    assert fault.kind == "sending_per_span"
    assert "s in 2 h, from" in fault.sentence


POWER = {"battery_wh": 120.0, "solar_w": 110.0, "base_load_w": 55.0}


def powered(bench: Bench, floor_percent: float, lowest_wh: float, **power: float) -> list[Fault]:
    """The faults where the spacecraft has a battery and the summary states its lowest charge."""
    bench.run = replace(bench.run, radios={
        **bench.run.radios, "x-8190": bench.run.radios["x-8190"].model_copy(update={"load_w": 150.0})})
    bench.summary["battery"] = {CRAFT: {"lowest_wh": lowest_wh}}
    return audited(bench, **{**POWER, "battery_floor_percent": floor_percent, **power})


def lowest_wh_by_seconds(bench: Bench, **power: float) -> float:
    """The lowest charge, by stepping through the day with the eclipses of the geometry floor."""
    keys = {**POWER, "battery_start_percent": 100.0, **power}
    load_w = np.full(86_400, -keys["base_load_w"] + keys["solar_w"])
    for a, b in eclipses(bench.run.orbits[CRAFT], bench.run.start_utc, bench.run.end_utc):
        first, last = ((t - bench.run.start_utc) / np.timedelta64(1, "s") for t in (a, b))
        load_w[round(first):round(last)] = -keys["base_load_w"]
    for a, b in on_air_s(bench):
        load_w[int(a):int(b)] -= 150.0
    charge = lowest = keys["battery_wh"] * keys["battery_start_percent"] / 100.0
    for power_w in load_w.tolist():
        charge = min(keys["battery_wh"], charge + power_w / 3600.0)
        lowest = min(lowest, charge)
    return lowest


def test_a_battery_under_its_floor(bench: Bench) -> None:
    lowest_wh = lowest_wh_by_seconds(bench)
    assert 10.0 < lowest_wh < 100.0
    percent = lowest_wh / 1.2
    assert powered(bench, percent, lowest_wh) == []
    (fault,) = powered(bench, percent + 1.0, lowest_wh)
    assert fault.kind == "battery"
    # The steps of a second above round the edges of the shadow.
    found = re.search(r"falls (.*) Wh under the floor", fault.sentence)
    assert found and float(found[1]) == pytest.approx(1.2, abs=0.02)


def test_a_lowest_charge_that_is_not_the_plan_s(bench: Bench) -> None:
    lowest_wh = lowest_wh_by_seconds(bench)
    (fault,) = powered(bench, 0.0, lowest_wh + 1.0)
    assert fault.kind == "battery" and "the summary says" in fault.sentence


def test_a_base_load_that_breaks_the_floor_is_no_contact_s_fault(bench: Bench) -> None:
    low = {"battery_start_percent": 10.0}
    nothing = bench.copy()
    nothing.contacts, nothing.segments = bench.contacts.iloc[:0], bench.segments.iloc[:0]
    faults = powered(nothing, 30.0, 12.0, solar_w=0.0, base_load_w=0.0, **low)
    assert "battery" not in {fault.kind for fault in faults}
    (fault,) = powered(bench, 30.0, 0.0, solar_w=0.0, base_load_w=0.0, **low)
    assert fault.kind == "battery"
