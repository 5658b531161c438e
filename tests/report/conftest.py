"""A second plan made against the first one, after an outage."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta

import pytest

from passplan.inputs.calendar_records import Closure
from passplan.inputs.records import parse_instant
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run


@pytest.fixture(scope="session")
def outage_run(short_run: Run) -> Run:
    """:func:`short_run` with Isvarde-A closed for five hours from its first contact on."""
    begin = parse_instant(f"{short_run.start_utc}Z") + timedelta(hours=1)
    closure = Closure(antenna="Isvarde-A", start_utc=begin, end_utc=begin + timedelta(hours=5), note="gearbox")
    return replace(short_run, closures=(*short_run.closures, closure))


@pytest.fixture(scope="session")
def replanned(outage_run: Run, short_plan: PlanRecord) -> PlanRecord:
    """The plan of :func:`outage_run` against :func:`short_plan`."""
    return plan_run(outage_run, against=short_plan)
