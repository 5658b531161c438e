"""Flux density at the stations: each contact's worst moment in ``plan.json``, and a warning, but no other plan."""

from __future__ import annotations

import io
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from rich.console import Console

from passplan.geometry.pointing import look_angles
from passplan.inputs.load import load_run
from passplan.inputs.pfd import PfdLimit
from passplan.inputs.run import Run
from passplan.planning.steps import plan_run
from passplan.report.flux import flux_of_plan
from passplan.report.health import print_health

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def run() -> Run:
    whole = load_run(ROOT / "configs" / "daily.toml")
    return replace(whole, end_utc=whole.start_utc + np.timedelta64(6, "h"), requests=())


def test_contacts_over_a_limit_are_flagged_and_planned_all_the_same(run: Run) -> None:
    calm = plan_run(run)
    tight = replace(run, pfd_limits=(
        PfdLimit(low_mhz=8_025, high_mhz=8_400, arrival_deg=5.0, limit_dbw_per_m2=-170.0, source="the house"),))
    plan = plan_run(tight)
    assert plan.contacts["window_id"].tolist() == calm.contacts["window_id"].tolist()
    flux = plan.summary["flux_density"]["contacts"]
    heard = plan.contacts[plan.contacts["radio"].str.startswith("x-")]
    assert set(flux) == set(heard["contact_id"])
    for row in heard.to_dict("records"):
        times = np.arange(row["start_utc"].to_datetime64(), row["end_utc"].to_datetime64(), np.timedelta64(1, "s"))
        look = look_angles(run.orbits[row["spacecraft"]], run.sites[row["site"]], times)
        # EIRP 9 dBW over 4 pi d^2, and 4 kHz of 45 Msymbol/s, at the nearest.
        nearest = 9.0 - 10.0 * np.log10(4.0 * np.pi) - 20.0 * np.log10(look.range_km.min() * 1e3)
        by_hand = nearest - 10.0 * np.log10(45e6 / 4e3)
        assert flux[row["contact_id"]]["dbw_per_m2"] == pytest.approx(by_hand, abs=0.05)
        assert flux[row["contact_id"]]["excess_db"] == pytest.approx(by_hand + 170.0, abs=0.05)
    said = [text for text in plan.summary["warnings"] if "flux density" in text]
    assert len(said) == len(set(heard["radio"]))
    assert all("the house" in text and "not a verdict" in text for text in said)
    assert not any("flux density" in text for text in calm.summary["warnings"])
    out = io.StringIO()
    Console(file=out, width=100).print(flux_of_plan(plan))
    assert "the house" in out.getvalue()


def test_check_names_the_radio_and_the_angle(run: Run) -> None:
    tight = replace(run, warnings=(), pfd_limits=(
        PfdLimit(low_mhz=8_060, high_mhz=8_080, arrival_deg=5.0, limit_dbw_per_m2=-160.0, source="the house"),))
    out = io.StringIO()
    assert print_health(tight, Console(file=out, width=100))
    said = " ".join(out.getvalue().split())
    assert "Ambril-1: radio x-8070 could put 3.4 dB more than the limit on the ground at 90 deg (the house)" in said
    assert not print_health(replace(tight, pfd_limits=()), Console(file=out, width=100))
