"""Planning by the mean over the year: a dry site is preferred to a wet one, and the audit believes no other mean."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from planning_runs import make_run, make_windows

from passplan.geometry.pointing import Samples
from passplan.inputs.ground import Receiver, Site
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.link.expected import PlannedContact, expected_volumes, expecting
from passplan.link.profiles import link_profiles
from passplan.planning.audit import audit_plan
from passplan.planning.plan import make_plan
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run

ROOT = Path(__file__).parents[2]


def _two_sites(basis: str) -> tuple[Run, pd.DataFrame, Samples]:
    """One Ka-band pass that a wet site sees for 4 s longer than a dry one, and storage for more than it brings."""
    small = make_run(policy={"unavailability_percent": 10.0, "volume_basis": basis, "cut_grid_s": 0})
    radio = small.radios["x"].model_copy(update={"frequency_mhz": 26_000.0, "eirp_dbw": 17.0, "modcods": ("8PSK 2/3",)})
    dish = Receiver(name="rx", low_mhz=25_500, high_mhz=27_000, polarisations=("RHCP",), gain_dbi=61.0,
                    receiver_noise_k=130.0)
    run = replace(
        small, radios={"x": radio}, receivers={"rx": dish},
        sites={"Dry": Site(name="Dry", latitude_deg=34.3, longitude_deg=-106.7, height_m=1_500.0),
               "Wet": Site(name="Wet", latitude_deg=3.1, longitude_deg=101.7)},
        antennas={name: small.antennas["Isvarde-A"].model_copy(update={"name": name, "site": name})
                  for name in ("Dry", "Wet")},
        spacecraft={"Teasel-1": small.spacecraft["Teasel-1"].model_copy(update={
            "storage_mb": 1e6, "start_fill_mb": 5e5, "generation_mb_per_s": 0.0})},
        orbits={"Teasel-1": None},  # type: ignore[dict-item]
    )
    windows = make_windows([("Teasel-1", "Dry", 1_000.0, 1_392.0), ("Teasel-1", "Wet", 1_000.0, 1_396.0)])
    windows["site"] = ["Dry", "Wet"]
    times, heights, ranges, offsets = [], [], [], [0]
    for length_s in (392.0, 396.0):
        time_s = np.append(np.arange(0.0, length_s, 10.0), length_s)
        elevation = 85.0 - 65.0 * np.abs(time_s / length_s - 0.5) * 2.0
        times.append(1_000.0 + time_s)
        heights.append(elevation)
        ranges.append(550.0 / np.sin(np.radians(elevation)))
        offsets.append(offsets[-1] + time_s.size)
    nothing = np.zeros(offsets[-1])
    return run, windows, Samples(
        np.concatenate(times), nothing, np.concatenate(heights), np.concatenate(ranges), nothing, np.array(offsets))


def test_a_dry_site_is_preferred_to_a_wet_one_that_promises_a_little_more() -> None:
    chosen, planned = {}, {}
    for basis in ("availability", "expected"):
        run, windows, samples = _two_sites(basis)
        links = link_profiles(run, windows, samples)
        if basis == "expected":
            links = expecting(run, windows, samples, links)
        plan = make_plan(run, windows, links)
        chosen[basis], planned[basis] = plan.contacts["antenna"].tolist(), plan
    assert chosen == {"availability": ["Wet"], "expected": ["Dry"]}
    # What the plan counts is the mean that the report states.
    run, windows, samples = _two_sites("expected")
    row = planned["expected"].contacts.iloc[0]
    start_s = int((row["start_utc"].to_datetime64() - run.start_utc) / np.timedelta64(1, "s"))
    end_s = start_s + int(row["duration_s"])
    profile = link_profiles(run, windows, samples)[0].downlink
    choice = None if profile is None else profile.best(start_s, end_s)
    assert choice is not None
    contact = PlannedContact(0, start_s, end_s, "x", choice.modcod, choice.rate_mbps)
    mean_mb = expected_volumes(run, windows, samples, [contact])[0].mean_mb
    assert row["volume_mb"] == pytest.approx(mean_mb, rel=1e-9)
    assert mean_mb != pytest.approx(choice.volume_mb, rel=1e-4)


@pytest.fixture(scope="module")
def run() -> Run:
    """Half a day of Skerry-1, which steps its rate, and Ambril-5, which does not."""
    whole = load_run(ROOT / "configs" / "rain.toml", policy={
        "volume_basis": "expected", "cut_grid_s": 0, "options_per_window": 2, "gap": 0.01})
    names = ("Skerry-1", "Ambril-5")
    return replace(
        whole, spacecraft={name: whole.spacecraft[name] for name in names}, requests=(),
        orbits={name: whole.orbits[name] for name in names}, end_utc=whole.start_utc + np.timedelta64(12, "h"))


@pytest.fixture(scope="module")
def plan(run: Run) -> PlanRecord:
    return plan_run(run)


def test_the_audit_recomputes_the_mean(run: Run, plan: PlanRecord) -> None:
    assert {"stepped"} < set(plan.contacts["modcod"])
    assert plan.summary["weather"]["volume_basis"] == "expected"
    assert audit_plan(run, plan.contacts, plan.segments, plan.summary) == []
    for factor, least in ((1.3, 1), (0.4, 1)):
        rates = plan.segments.assign(rate_mbps=plan.segments["rate_mbps"] * factor)
        faults = audit_plan(run, plan.contacts, rates, plan.summary)
        assert sum(fault.kind == "expectation" for fault in faults) >= least
    calm = replace(run, policy=run.policy.model_copy(update={"volume_basis": "availability"}))
    assert "modcod" in {fault.kind for fault in audit_plan(calm, plan.contacts, plan.segments, plan.summary)}


def test_every_rate_of_a_contact_is_scaled_alike(run: Run, plan: PlanRecord) -> None:
    weather = plan.summary["weather"]["contacts"]
    for name, own in plan.segments.groupby("contact_id"):
        seconds = (own["end_utc"] - own["start_utc"]).dt.total_seconds()
        carried_mb = float((own["rate_mbps"] * seconds).sum() / 8.0)
        assert carried_mb == pytest.approx(weather[name]["mean_mb"], abs=0.01)
        assert weather[name]["link_mb"] < carried_mb


def test_a_rate_that_differs_within_a_contact_is_refused(run: Run, plan: PlanRecord) -> None:
    stepped = plan.contacts[plan.contacts["modcod"] == "stepped"]["contact_id"].iloc[0]
    row = int(np.flatnonzero(plan.segments["contact_id"] == stepped)[2])
    rates = plan.segments["rate_mbps"].to_numpy().copy()
    rates[row] *= 1.01
    faults = audit_plan(run, plan.contacts, plan.segments.assign(rate_mbps=rates), plan.summary)
    assert "modcod" in {fault.kind for fault in faults}
