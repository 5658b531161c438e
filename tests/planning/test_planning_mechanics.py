"""Mechanics all the way: a network with mounts, keep-outs and refraction is planned and audited."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from planning_cases import problem_of

from passplan.geometry.slew import Stance, turnaround_s
from passplan.inputs.mounts import Mount
from passplan.inputs.run import Run
from passplan.planning.audit import audit_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits
from passplan.planning.record import PlanRecord
from passplan.planning.rules.slew_time import slew_time
from passplan.planning.steps import losses_of, plan_run, windows_of

SLOW = Mount(
    name="slow", kind="az_el", lower_rate_deg_s=2.0, upper_rate_deg_s=2.0, lower_acceleration_deg_s2=1.0,
    lower_from_deg=-200.0, lower_to_deg=380.0, upper_from_deg=0.0, upper_to_deg=90.0,
)  # fmt: skip
CRADLE = Mount(name="cradle", kind="x_y", lower_axis_azimuth_deg=0.0, lower_rate_deg_s=1.0, upper_rate_deg_s=1.0)


@pytest.fixture(scope="module")
def stiff_run(short_run: Run) -> Run:
    """The short run with mounts on three antennas, limits for sending, refraction and guard time."""
    limits = {
        "Isvarde-A": {"mount": "slow", "beamwidth_deg": 0.4, "sun_keep_out_deg": 5.0},
        "Isvarde-B": {"mount": "slow", "beamwidth_deg": 0.4},
        "Tarrow-A": {
            "mount": "cradle", "beamwidth_deg": 0.4, "transmit_min_elevation_deg": 10.0,
            "transmit_keep_out": ((300.0, 30.0, 0.0, 40.0),), "transmit_arc_keep_out_deg": 3.0,
        },
    }
    antennas = {name: item.model_copy(update=limits.get(name, {})) for name, item in short_run.antennas.items()}
    policy = short_run.policy.model_copy(update={"refraction": "itu_p834", "guard_sigmas": 1.0})
    mounts = {**short_run.mounts, "slow": SLOW, "cradle": CRADLE}
    return replace(short_run, antennas=antennas, mounts=mounts, policy=policy)


@pytest.fixture(scope="module")
def stiff_plan(stiff_run: Run) -> PlanRecord:
    return plan_run(stiff_run)


def test_the_plan_passes_the_audit_and_states_its_conventions(stiff_plan: PlanRecord) -> None:
    assert len(stiff_plan.contacts) > 10
    stated = stiff_plan.summary["geometry"]
    assert (stated["refraction"], stated["light_time"], stated["guard_sigmas"]) == ("itu_p834", "off", 1.0)
    assert stated["largest_timing_sigma_s"] == pytest.approx(stiff_plan.windows["timing_sigma_s"].max(), abs=1e-4)
    assert stated["lost_s"] == pytest.approx(stiff_plan.windows["lost_s"].sum(), abs=1e-3)
    assert any("the beam allows 0.1 deg" in line for line in stiff_plan.summary["warnings"])


def test_nothing_is_sent_in_lost_seconds_and_only_they_are_deducted(stiff_run: Run, stiff_plan: PlanRecord) -> None:
    losses = losses_of(stiff_run, stiff_plan.windows)
    assert {"keyhole", "guard", "transmit"} <= {loss.cause for loss in losses.rows}
    number = {name: k for k, name in enumerate(stiff_plan.windows["window_id"])}
    contacts = stiff_plan.contacts.set_index("contact_id")
    split = 0
    for name, own in stiff_plan.segments.groupby("contact_id"):
        spans = losses.of(number[contacts.loc[name, "window_id"]], "downlink")
        seconds = [
            ((own[c] - pd.Timestamp(stiff_run.start_utc)) / pd.Timedelta(1, "s")).to_numpy()
            for c in ("start_utc", "end_utc")
        ]
        assert all(np.all((seconds[1] <= a) | (seconds[0] >= b)) for a, b in spans)
        assert contacts.loc[name, "usable_s"] == (seconds[1] - seconds[0]).sum()
        if len(own) > 1:
            radio = stiff_run.radios[contacts.loc[name, "radio"]]
            step_s = radio.switching_gap_s if radio.rate_control == "adaptive" else 0.0
            for before, after in zip(seconds[1][:-1], seconds[0][1:], strict=True):
                inside = [b - a for a, b in spans if before <= a and b <= after]
                split += len(inside)
                if inside:
                    assert after - before <= sum(inside) + len(inside) * (radio.acquisition_s + 2.0) + step_s
                else:
                    assert after - before == step_s
    assert split >= 1


def test_a_mount_never_adds_volume(stiff_plan: PlanRecord, short_plan: PlanRecord) -> None:
    assert stiff_plan.summary["value"] < short_plan.summary["value"] * 1.02


@pytest.mark.parametrize(
    ("change", "kind"),
    [
        ({"lower_rate_deg_s": 0.4, "lower_acceleration_deg_s2": None}, "rate"),
        ({"lower_rate_deg_s": 0.4, "upper_rate_deg_s": 0.05}, "turnaround"),
        ({"upper_to_deg": 30.0}, "reach"),
        ({"lower_from_deg": 0.0, "lower_to_deg": 40.0}, "reach"),
    ],
)
def test_the_audit_refuses_what_a_weaker_mount_cannot_do(
    stiff_run: Run, stiff_plan: PlanRecord, change: dict[str, float], kind: str
) -> None:
    weaker = replace(stiff_run, mounts={**stiff_run.mounts, "slow": SLOW.model_copy(update=change)})
    faults = audit_plan(weaker, stiff_plan.contacts, stiff_plan.segments, stiff_plan.summary)
    assert kind in {fault.kind for fault in faults}


def test_the_audit_refuses_sending_where_limits_forbid_it(stiff_run: Run, stiff_plan: PlanRecord) -> None:
    both = stiff_plan.contacts[stiff_plan.contacts["service"].isin(["both", "command"])]["antenna"].iloc[0]
    shut = stiff_run.antennas[both].model_copy(update={"transmit_keep_out": ((0.0, 360.0, -5.0, 90.0),)})
    run = replace(stiff_run, antennas={**stiff_run.antennas, both: shut})
    faults = audit_plan(run, stiff_plan.contacts, stiff_plan.segments, stiff_plan.summary)
    assert "command" in {fault.kind for fault in faults}


def test_the_audit_refuses_receiving_beside_the_sun_and_contacts_beyond_a_manoeuvre(
    stiff_run: Run, stiff_plan: PlanRecord
) -> None:
    blind = {name: item.model_copy(update={"sun_keep_out_deg": 150.0}) for name, item in stiff_run.antennas.items()}
    craft = stiff_plan.contacts["spacecraft"].iloc[0]
    at = pd.Timestamp(stiff_run.start_utc, tz="UTC").to_pydatetime()
    moved = {**stiff_run.spacecraft, craft: stiff_run.spacecraft[craft].model_copy(update={"manoeuvres_utc": (at,)})}
    run = replace(stiff_run, antennas=blind, spacecraft=moved)
    kinds = {fault.kind for fault in audit_plan(run, stiff_plan.contacts, stiff_plan.segments, stiff_plan.summary)}
    assert {"sun", "manoeuvre"} <= kinds


def test_windows_end_at_a_manoeuvre(short_run: Run) -> None:
    craft = next(iter(short_run.orbits))
    at = pd.Timestamp(short_run.start_utc + np.timedelta64(6, "h"), tz="UTC").to_pydatetime()
    moved = {**short_run.spacecraft, craft: short_run.spacecraft[craft].model_copy(update={"manoeuvres_utc": (at,)})}
    run = replace(short_run, spacecraft=moved)
    before, after = windows_of(short_run), windows_of(run)
    mine = after[after["spacecraft"] == craft]
    assert 0 < len(mine) < np.count_nonzero(before["spacecraft"] == craft)
    assert mine["los_utc"].max() <= pd.Timestamp(at).tz_localize(None)


def test_turnaround_in_the_plan_depends_on_the_order() -> None:
    # Cable angles [deg]: A ends at 10 where B starts at 20, B ends at -150 where A starts at 170; 3 deg/s, 60 s apart.
    mount = Mount(name="m", kind="az_el", lower_rate_deg_s=3.0, lower_from_deg=-180.0, lower_to_deg=540.0)
    starts, ends = {"A": 170.0, "B": 20.0}, {"A": 10.0, "B": -150.0}

    def plan(first: str, second: str) -> int:
        end, start = (Stance(np.array([angle]), np.zeros(1)) for angle in (ends[first], starts[second]))
        tight = [[0, 1]] if turnaround_s(mount, end, start)[0] > 60.0 else []
        rows = [{"start_s": a, "end_s": b, "pieces": [(a, b, 1.0)]} for a, b in ((0, 600), (660, 1_200))]
        problem = problem_of(rows, prepare_s=(0,), too_tight=np.array(tight, dtype=np.int64).reshape(-1, 2))
        assert len(slew_time(problem).lanes) == len(tight)
        return len(find_plan(problem, Limits(gap=0.0)).chosen)

    assert (plan("A", "B"), plan("B", "A")) == (2, 1)


def test_one_lane_excludes_each_later_contact_but_not_these_among_themselves() -> None:
    rows = [{"start_s": 0, "end_s": 60}, {"start_s": 100, "end_s": 160}, {"start_s": 110, "end_s": 180, "antenna": 0}]
    problem = problem_of(
        [{**row, "pieces": [(row["start_s"], row["end_s"], 1.0)]} for row in rows], prepare_s=(0,),
        too_tight=np.array([[0, 1], [0, 2]]))
    (lane,) = slew_time(problem).lanes
    holds = {int(o): (int(a), int(b)) for o, a, b in zip(lane.options, lane.start_s, lane.end_s, strict=True)}
    overlap = lambda x, y: holds[x][0] < holds[y][1] and holds[y][0] < holds[x][1]  # noqa: E731
    assert overlap(0, 1) and overlap(0, 2) and not overlap(1, 2)
