"""The Ka-band spacecraft of the sample, planned with and without weather, and the audit of stepped contacts."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.audit import audit_plan
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run

ROOT = Path(__file__).parents[2]
QUICK = {"cut_grid_s": 0, "options_per_window": 3, "gap": 0.01}


def _ka_run(config: str, **policy: Any) -> Run:
    """Skerry-1 alone; it starts with more aboard than a day can bring down, so that every contact counts."""
    run = load_run(ROOT / "configs" / config, policy={**QUICK, **policy})
    craft = run.spacecraft["Skerry-1"].model_copy(update={"storage_mb": 1e6, "start_fill_mb": 5e5})
    return replace(run, spacecraft={"Skerry-1": craft}, orbits={"Skerry-1": run.orbits["Skerry-1"]}, requests=())


@pytest.fixture(scope="module")
def wet_run() -> Run:
    return _ka_run("rain.toml")


@pytest.fixture(scope="module")
def wet(wet_run: Run) -> PlanRecord:
    return plan_run(wet_run)


@pytest.fixture(scope="module")
def dry() -> PlanRecord:
    return plan_run(_ka_run("daily.toml"))


def test_rain_costs_volume_and_moves_contacts(dry: PlanRecord, wet: PlanRecord) -> None:
    assert dry.summary["weather"]["unavailability_percent"] is None
    assert "contacts" not in dry.summary["weather"]
    assert wet.summary["volume_mb"] < 0.8 * dry.summary["volume_mb"]
    starts = [set(plan.contacts["start_utc"]) for plan in (dry, wet)]
    assert starts[0] != starts[1]
    assert set(wet.contacts["modcod"]) & {"stepped"}


def test_the_plan_says_what_its_contacts_carry_over_the_year(wet: PlanRecord) -> None:
    weather = wet.summary["weather"]
    down = wet.contacts[wet.contacts["service"] != "command"]
    assert set(weather["contacts"]) == set(down["contact_id"])
    for figures in weather["contacts"].values():
        assert figures["p10_mb"] <= figures["p50_mb"] <= figures["p90_mb"]
        assert figures["mean_mb"] > figures["link_mb"] > 0.0
    assert "not a forecast" in weather["statement"]
    assert any("4 to 20 GHz" in notice for notice in weather["notices"])


def test_a_stepped_contact_has_a_segment_for_each_step(wet: PlanRecord) -> None:
    stepped = wet.contacts[wet.contacts["modcod"] == "stepped"]
    for contact in stepped.itertuples():
        own = wet.segments[wet.segments["contact_id"] == contact.contact_id]
        assert own["modcod"].nunique() > 1
        assert own["volume_mb"].sum() == pytest.approx(contact.volume_mb)
        seconds = (own["end_utc"] - own["start_utc"]).dt.total_seconds()
        assert seconds.sum() == contact.usable_s


def test_rain_stated_for_the_day_is_what_counts(wet: PlanRecord, wet_run: Run) -> None:
    site = wet_run.sites["Isvarde"].model_copy(update={"rain_rate_mm_per_h": 40.0})
    soaked = plan_run(replace(wet_run, sites={**wet_run.sites, "Isvarde": site}))
    at_isvarde = [plan.contacts[plan.contacts["antenna"] == "Isvarde-B"]["volume_mb"].sum() for plan in (wet, soaked)]
    assert at_isvarde[1] < 0.5 * at_isvarde[0]
    assert soaked.summary["weather"]["rain_mm_per_h"] == {"Isvarde": 40.0, "Port Ellery": 6.0}


def _spoilt(wet_run: Run, wet: PlanRecord, row: int, **cells: Any) -> str:
    """The audit's sentences on the plan with cells of one segment changed."""
    segments = wet.segments.copy()
    for column, value in cells.items():
        segments.loc[segments.index[row], column] = value
    return "\n".join(f"{fault.kind}: {fault}" for fault in audit_plan(wet_run, wet.contacts, segments, wet.summary))


def _inner(wet: PlanRecord) -> int:
    """Row of a segment in the rising half of a stepped contact, with neighbours of the same contact."""
    segments = wet.segments.reset_index(drop=True)
    rates = segments["rate_mbps"]
    same = segments["contact_id"].shift(1) == segments["contact_id"].shift(-1)
    rising = same & (rates > rates.shift(1)) & (rates.shift(-1) > rates)
    return int(np.flatnonzero(rising)[1])


def test_the_audit_passes_the_honest_plan(wet_run: Run, wet: PlanRecord) -> None:
    assert audit_plan(wet_run, wet.contacts, wet.segments, wet.summary) == []


def test_the_audit_catches_a_faster_modcod_than_the_sky_allows(wet_run: Run, wet: PlanRecord) -> None:
    row = _inner(wet)
    after = wet.segments.iloc[row + 1]
    found = _spoilt(wet_run, wet, row, modcod=after["modcod"], rate_mbps=after["rate_mbps"])
    assert "margin:" in found


def test_the_audit_catches_a_rate_without_its_pilots(wet_run: Run, wet: PlanRecord) -> None:
    row = _inner(wet)
    assert "modcod:" in _spoilt(wet_run, wet, row, rate_mbps=wet.segments["rate_mbps"].iloc[row] * 1.025)


def test_the_audit_catches_a_missing_gap(wet_run: Run, wet: PlanRecord) -> None:
    row = _inner(wet)
    longer = wet.segments["end_utc"].iloc[row] + np.timedelta64(1, "s")
    assert "gap are missing" in _spoilt(wet_run, wet, row, end_utc=longer)


def test_the_audit_catches_a_dwell_that_is_too_short_and_a_hasty_step(wet_run: Run, wet: PlanRecord) -> None:
    row = _inner(wet)
    segments = wet.segments.copy()
    early = np.timedelta64(6, "s")
    segments.loc[segments.index[row], "end_utc"] -= early
    segments.loc[segments.index[row + 1], "start_utc"] -= early
    found = "\n".join(str(f) for f in audit_plan(wet_run, wet.contacts, segments, wet.summary))
    assert "the least dwell is 12 s" in found
    assert "dB to spare" in found or "has a margin of" in found


def test_the_audit_catches_needless_slowness(wet_run: Run, wet: PlanRecord) -> None:
    lengths = (wet.segments["end_utc"] - wet.segments["start_utc"]).dt.total_seconds()
    row = int(lengths.to_numpy().argmax())
    radio = wet_run.radios["ka-26250"]
    slow = wet_run.modcod_tables[radio.modcod_table].rows[0]  # type: ignore[union-attr]
    assert "would hold" in _spoilt(wet_run, wet, row, modcod=slow.name)


def test_the_audit_knows_the_weather(wet_run: Run, wet: PlanRecord, dry: PlanRecord) -> None:
    """A plan that was made without weather does not stand with it, and a fair-weather figure is not believed."""
    faults = audit_plan(wet_run, dry.contacts, dry.segments, dry.summary)
    assert "margin" in {fault.kind for fault in faults}
    contacts = wet.contacts.assign(min_margin_db=wet.contacts["min_margin_db"] + 1.0)
    kinds = {fault.kind for fault in audit_plan(wet_run, contacts, wet.segments, wet.summary)}
    assert kinds == {"margin"}


def test_the_sun_is_judged_by_the_audit_s_own_formula(wet_run: Run) -> None:
    from passplan.geometry.sun import sun_look_deg
    from passplan.planning.audit.sky import Sight
    from passplan.planning.audit.sun import separations_deg

    site = wet_run.sites["Tarrow Mesa"]
    time_s = np.arange(60_000.0, 60_300.0, 10.0)
    times = wet_run.start_utc + (time_s * 1e3).astype("timedelta64[ms]")
    azimuth, elevation = sun_look_deg(site, pd.DatetimeIndex(times).to_numpy("datetime64[ms]"))
    assert elevation.min() > 10.0
    on_it = Sight(time_s, azimuth, elevation, np.full_like(time_s, 1e3))
    least, greatest = separations_deg(site, wet_run.start_utc, on_it)
    assert least.max() == 0.0
    assert greatest.max() < 0.07
    aside = Sight(time_s, azimuth, elevation + 10.0, np.full_like(time_s, 1e3))
    least, greatest = separations_deg(site, wet_run.start_utc, aside)
    assert least == pytest.approx(9.95, abs=0.02)
    assert greatest == pytest.approx(10.05, abs=0.02)
