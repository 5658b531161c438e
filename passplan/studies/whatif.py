"""Plans each variant of a study day by day and says what differs, as far as the proofs allow.

A plan's value v and its bound b enclose the best possible value. A variant is called better than the
base only where its value exceeds the base's bound, worse only where its bound is below the base's
value; anything between is "not distinguishable", however large the difference looks.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import pandas as pd

from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.studies.study import BASE, Study, apply

BETTER, WORSE, UNCLEAR = "better", "worse", "not distinguishable"


@dataclass(frozen=True)
class Comparison:
    """What a study found.

    ``days`` has a row for each variant and day (``variant, start_utc, contacts, volume_mb, value, bound,
    gap, status, cost, lost_mb, shortfalls``); ``variants`` a row for each variant, with the sums, the
    difference to the base, the range ``[difference_low, difference_high]`` that the proofs leave for it,
    and the verdict.
    """

    days: pd.DataFrame
    variants: pd.DataFrame


def run_study(
    study: Study,
    planner: Callable[[Run], PlanRecord],
    *,
    policy: Mapping[str, Any] | None = None,
    progress: Callable[[str, int, int], None] | None = None,
) -> Comparison:
    """Plan the base and every variant on each day with ``planner``; the same days for all, so they pair."""
    first = load_run(study.base, policy=policy)
    runs = [first, *(load_run(study.base, start=_later(first.start_utc, day), policy=policy)
                     for day in range(1, study.days))]
    # Every variant is applied before anything is planned: a fault in the last one must not cost an hour.
    networks = [(BASE, runs)] + [(v.name, [apply(v, run, study.file) for run in runs]) for v in study.variants]
    rows: list[dict[str, Any]] = []
    for name, variant_runs in networks:
        for run in variant_runs:
            if progress is not None:
                progress(name, len(rows), len(networks) * len(runs))
            rows.append(_row(name, run, planner(run).summary))
    days = pd.DataFrame(rows)
    return Comparison(days, compare(days))


def compare(days: pd.DataFrame) -> pd.DataFrame:
    """One row for each variant from the rows of its days; see :class:`Comparison`."""
    sums = ["contacts", "volume_mb", "value", "bound", "cost", "lost_mb", "shortfalls"]
    table = days.groupby("variant", sort=False)[sums].sum().reset_index()
    # The value can be negative (losses and rent outweigh the data), hence the magnitude in the denominator.
    table["gap"] = (table["bound"] - table["value"]) / table["bound"].abs().where(table["bound"] != 0.0)
    base = table.loc[table["variant"] == BASE].iloc[0]
    table["difference"] = table["value"] - base["value"]
    table["difference_low"] = table["value"] - base["bound"]
    table["difference_high"] = table["bound"] - base["value"]
    table["verdict"] = np.select(
        [table["variant"] == BASE, table["difference_low"] > 0.0, table["difference_high"] < 0.0],
        ["", BETTER, WORSE], default=UNCLEAR,
    )
    better_days = days.assign(base=days["start_utc"].map(days[days["variant"] == BASE].set_index("start_utc")["bound"]))
    table["days_better"] = table["variant"].map(
        (better_days["value"] > better_days["base"]).groupby(better_days["variant"]).sum()
    )
    return table


def _later(start_utc: np.datetime64, days: int) -> datetime:
    start: datetime = start_utc.astype("datetime64[ms]").item()
    return start.replace(tzinfo=UTC) + timedelta(days=days)


def _row(variant: str, run: Run, summary: Mapping[str, Any]) -> dict[str, Any]:
    return {
        "variant": variant, "start_utc": run.start_utc,
        **{key: summary[key] for key in ("contacts", "volume_mb", "value", "bound", "gap", "status", "cost")},
        "lost_mb": sum(store["lost_mb"] for store in summary["storage"].values()),
        "shortfalls": len(summary["shortfalls"]),
    }
