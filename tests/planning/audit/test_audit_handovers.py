"""A span that contacts are to follow from hand to hand: the audit goes along it by itself."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from passplan.inputs.calendar_records import Request
from passplan.inputs.run import Run
from passplan.planning.audit import Fault, audit_plan
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run

# From the sight of one site to that of another; both see it for 189 s.
SPAN = {"earliest_utc": "2027-03-09T12:40:00Z", "latest_utc": "2027-03-09T13:40:00Z"}


def following(run: Run, overlap_s: int) -> Run:
    """The run in which Highwater is to be followed with so many seconds of overlap."""
    asked = Request(name="perigee", spacecraft="Highwater", handover_overlap_s=overlap_s, **SPAN)
    return replace(run, requests=(asked,))


@pytest.fixture(scope="module")
def followed(short_run: Run) -> tuple[Run, PlanRecord]:
    """The audited plan of one spacecraft with two links that is to be followed."""
    craft = short_run.spacecraft["Highwater"].model_copy(update={"links": 2})
    run = following(replace(
        short_run, spacecraft={"Highwater": craft}, orbits={"Highwater": short_run.orbits["Highwater"]},
        end_utc=short_run.start_utc + np.timedelta64(8, "h")), 120)
    return run, plan_run(run)


def overlap_s(plan: PlanRecord) -> int:
    """How long both contacts over the seam of the two sites last together."""
    seam = pd.Timestamp("2027-03-09T13:13:00")
    both = plan.contacts[(plan.contacts["start_utc"] < seam) & (plan.contacts["end_utc"] > seam)]
    assert both["site"].nunique() == 2 and set(both["origin"]) == {"requested"}
    return int((both["end_utc"].min() - both["start_utc"].max()).total_seconds())


def audited(run: Run, plan: PlanRecord, contacts: pd.DataFrame | None = None, **summary: object) -> list[Fault]:
    return audit_plan(
        run, plan.contacts if contacts is None else contacts, plan.segments, {**plan.summary, **summary})


def test_a_plan_that_hands_over_is_found_right(followed: tuple[Run, PlanRecord]) -> None:
    run, plan = followed
    assert plan.summary["shortfalls"] == []
    assert overlap_s(plan) >= 120
    assert audited(run, plan) == []


def test_an_overlap_that_is_a_second_short_is_named(followed: tuple[Run, PlanRecord]) -> None:
    run, plan = followed
    assert audited(following(run, overlap_s(plan)), plan) == []
    (fault,) = audited(following(run, overlap_s(plan) + 1), plan)
    assert (fault.kind, fault.place) == ("request", "request perigee")
    assert "takes over" in fault.sentence and "the plan does not say so" in fault.sentence


def test_a_contact_of_the_chain_that_is_gone_is_named(followed: tuple[Run, PlanRecord]) -> None:
    run, plan = followed
    first = plan.contacts[plan.contacts["start_utc"] < pd.Timestamp(SPAN["earliest_utc"].rstrip("Z"))].index[-1]
    assert "request" in {fault.kind for fault in audited(run, plan, plan.contacts.drop(index=first))}


def test_a_shortfall_that_is_none_is_named(followed: tuple[Run, PlanRecord]) -> None:
    run, plan = followed
    claimed = [{"kind": "request", "name": "perigee"}]
    assert [fault.sentence for fault in audited(run, plan, shortfalls=claimed)] == [
        "the plan calls it a shortfall, yet it is met"]
    # Nowhere do two sites see it for so long: then it is one, and the plan has to say so.
    assert audited(following(run, 400), plan, shortfalls=claimed) == []
