"""Random limits on the sample's spacecraft: whatever is planned, the audit agrees."""

from __future__ import annotations

import random
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from passplan.inputs.run import Run
from passplan.planning.steps import plan_run


def limits(rng: random.Random) -> dict[str, Any]:
    """Each limit by a coin's toss, tight enough to bite now and then."""
    drawn: dict[str, Any] = {
        "contact_gap_s": rng.uniform(0.0, 2_000.0), "cool_down_s": rng.uniform(0.0, 4_000.0),
        "contacts_per_orbit": rng.randint(1, 2), "contacts_per_day": rng.randint(1, 8),
        "sending_per_contact_s": rng.uniform(200.0, 600.0), "sending_per_orbit_s": rng.uniform(200.0, 900.0)}
    kept = {key: value for key, value in drawn.items() if rng.random() < 0.4}
    if rng.random() < 0.4:
        kept |= {"sending_span_h": rng.uniform(1.0, 30.0), "sending_per_span_s": rng.uniform(300.0, 3_000.0)}
    if rng.random() < 0.6:
        kept |= {
            "battery_wh": rng.uniform(20.0, 80.0), "battery_floor_percent": rng.uniform(0.0, 90.0),
            "battery_start_percent": rng.uniform(10.0, 100.0), "solar_w": rng.uniform(0.0, 120.0),
            "base_load_w": rng.uniform(0.0, 60.0)}
    return kept


def limited(run: Run, seed: int, hours: int) -> Run:
    rng = random.Random(seed)
    spacecraft = {name: craft.model_copy(update=limits(rng)) for name, craft in run.spacecraft.items()}
    return replace(run, spacecraft=spacecraft, end_utc=run.start_utc + np.timedelta64(hours, "h"), requests=())


def test_the_audit_agrees(short_run: Run) -> None:
    plan = plan_run(limited(short_run, 1, 8))
    assert len(plan.contacts) > 10
    assert len(plan.summary["battery"]) > 3


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(2, 42))
def test_the_audit_agrees_again_and_again(short_run: Run, seed: int) -> None:
    assert plan_run(limited(short_run, seed, 24)).summary["contacts"] > 0
