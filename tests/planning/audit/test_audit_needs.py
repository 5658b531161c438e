"""Requirements beyond plain requests: each way to miss one and not to say so is caught and named."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC

import numpy as np
import pandas as pd
import pytest
from audit_bench import Bench

from passplan.inputs.calendar_records import Request


def _sentences(bench: Bench, kind: str) -> str:
    return "\n".join(str(fault) for fault in bench.audit() if fault.kind == kind)


def _ask_for(bench: Bench, contact: int, **rest: object) -> None:
    """A request that one contact of the plan meets exactly."""
    row = bench.contacts.iloc[contact]
    start, end = (row[key].to_pydatetime().replace(tzinfo=UTC) for key in ("start_utc", "end_utc"))
    asked = Request(name="asked", spacecraft=row["spacecraft"], antenna=row["antenna"], earliest_utc=start,
                    latest_utc=end, **rest)
    bench.run = replace(bench.run, requests=(*bench.run.requests, asked))


@pytest.mark.parametrize("seconds", [1, -1])
def test_a_fixed_request_shifted_by_a_second(bench: Bench, seconds: int) -> None:
    row = bench.contacts.iloc[3]
    _ask_for(bench, 3, fixed=True)
    assert bench.audit() == []
    asked = bench.run.requests[-1]
    moved = asked.model_copy(update={
        "earliest_utc": asked.earliest_utc + pd.Timedelta(seconds=seconds).to_pytimedelta(),
        "latest_utc": asked.latest_utc + pd.Timedelta(seconds=seconds).to_pytimedelta()})
    bench.run = replace(bench.run, requests=(*bench.run.requests[:-1], moved))
    assert "request asked: no contact meets it" in _sentences(bench, "request")
    assert row["duration_s"] == int((row["end_utc"] - row["start_utc"]) / np.timedelta64(1, "s"))


def test_ranging_on_an_antenna_that_does_not_measure_range(bench: Bench) -> None:
    both = int(np.flatnonzero(bench.contacts["service"] == "both")[0])
    _ask_for(bench, both, service="ranging")
    assert "request asked: no contact meets it" in _sentences(bench, "request")
    name = bench.contacts["antenna"].iloc[both]
    able = bench.run.antennas[name].model_copy(update={"ranging": True})
    bench.run = replace(bench.run, antennas={**bench.run.antennas, name: able})
    assert bench.audit() == []
