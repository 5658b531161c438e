"""Tiers and the cost of changes: a figure that the contacts do not come to is caught and named."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import UTC

import pytest
from audit_bench import Bench

from passplan.inputs.decisions import Published


def _sentences(bench: Bench, kind: str) -> str:
    return "\n".join(str(fault) for fault in bench.audit() if fault.kind == kind)


def _in_order(bench: Bench) -> None:
    """The plan with its objectives apart, the first contact of the published plan dropped, another one new."""
    policy = bench.run.policy.model_copy(update={"tiers": "in_order", "change_cost": 64.0, "change_half_h": 4.0})
    rows = bench.contacts.sort_values("start_utc").to_dict("records")[1:]
    published = [Published(
        spacecraft=row["spacecraft"], antenna=row["antenna"], start_utc=row["start_utc"].replace(tzinfo=UTC),
        end_utc=row["end_utc"].replace(tzinfo=UTC)) for row in rows]
    there = published[0]
    ahead = there.model_copy(update={"antenna": "Ellery-B" if there.antenna != "Ellery-B" else "Isvarde-A"})
    bench.run = replace(bench.run, policy=policy, published=(*published, ahead))
    hours = (ahead.start_utc.replace(tzinfo=None) - bench.run.start_utc.astype(object)).total_seconds() / 3600
    run, storage = bench.run, bench.summary["storage"]
    value = sum(run.spacecraft[name].weight * entry["delivered_mb"] for name, entry in storage.items())
    value -= 64.0 * 0.5 ** (hours / 4.0)
    lost = math.fsum(entry["lost_mb"] for entry in storage.values())
    bench.summary["value"] = value
    bench.summary["tiers"] = [
        {"name": name, "sense": sense, "value": figure, "bound": figure, "gap": 0.0}
        for name, sense, figure in (
            ("lost data", "least", lost), ("value", "most", value), ("cost", "least", 0.0), ("changes", "least", 2.0))]


def test_objectives_apart_pass(bench: Bench) -> None:
    _in_order(bench)
    assert bench.audit() == []


@pytest.mark.parametrize("tier", range(4))
def test_a_tier_that_is_not_what_the_contacts_come_to(bench: Bench, tier: int) -> None:
    _in_order(bench)
    entry = dict(bench.summary["tiers"][tier])
    entry["value"] += 1.0
    entry["bound"] += 1.0
    bench.summary["tiers"][tier] = entry
    assert f"tier {entry['name']}: stated as" in _sentences(bench, "tier")


def test_a_bound_on_the_wrong_side_and_a_tier_left_out(bench: Bench) -> None:
    _in_order(bench)
    bench.summary["tiers"][1]["bound"] -= 1.0
    bench.summary["tiers"].pop()
    said = _sentences(bench, "tier")
    assert "tier value: its bound" in said
    assert "tier changes: the summary does not state it" in said


def test_a_value_without_what_the_changes_cost(bench: Bench) -> None:
    policy = bench.run.policy.model_copy(update={"change_cost": 64.0})
    gone = Published(spacecraft="Teasel-1", antenna="Ellery-B", start_utc=bench.run.start_utc.astype(object).replace(
        tzinfo=UTC), end_utc=bench.run.end_utc.astype(object).replace(tzinfo=UTC))
    bench.run = replace(bench.run, policy=policy, published=(gone,))
    assert "its value is stated as" in _sentences(bench, "value")
    bench.summary["value"] -= 64.0
    assert bench.audit() == []
