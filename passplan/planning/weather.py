"""What the weather means for a plan: notices on the models, and what its contacts bring down over a year."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from passplan.geometry.losses import Losses
from passplan.geometry.pointing import Samples
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.run import Run
from passplan.link.chains import rungs_of
from passplan.link.expected import PlannedContact, expected_volumes
from passplan.link.notices import STATISTICS, run_notices
from passplan.planning.horizon import column_seconds
from passplan.planning.plan import Plan
from passplan.planning.record import sending


def weather_summary(
    run: Run, windows: pd.DataFrame, samples: Samples, plan: Plan, losses: Losses | None = None
) -> dict[str, Any]:
    """The entry ``weather`` of ``plan.json``: plain values.

    ``notices`` and ``volume_basis`` always; with an unavailability also what each downlink contact's link carries
    [MB] at it (``link_mb``) and over the year (``mean_mb, p10_mb, p50_mb, p90_mb``), by contact.
    """
    percent = run.policy.unavailability_percent
    rates = {name: s.rain_rate_mm_per_h for name, s in run.sites.items() if s.rain_rate_mm_per_h is not None}
    found: dict[str, Any] = {
        "unavailability_percent": percent, "volume_basis": run.policy.volume_basis, "rain_mm_per_h": rates,
        "notices": run_notices(run, windows),
    }
    if percent is None:
        return found
    planned, link_mb = _planned(run, windows, plan)
    volumes = expected_volumes(run, windows, samples, list(planned.values()), losses)
    found["statement"] = STATISTICS
    found["contacts"] = {
        name: {
            "link_mb": round(link_mb[name], 3), "mean_mb": round(v.mean_mb, 3), "p10_mb": round(v.p10_mb, 3),
            "p50_mb": round(v.p50_mb, 3), "p90_mb": round(v.p90_mb, 3),
        }
        for name, v in zip(planned, volumes, strict=True)
    }
    return found


def _planned(
    run: Run, windows: pd.DataFrame, plan: Plan
) -> tuple[dict[str, PlannedContact], dict[str, float]]:
    """The downlink contacts of a plan, and what their links can carry at the plan's unavailability [MB]."""
    row_of = {name: k for k, name in enumerate(windows["window_id"])}
    pieces = sending(plan.segments)
    seconds = column_seconds(run, pieces["end_utc"]) - column_seconds(run, pieces["start_utc"])
    # Not the rates of the segments: those may be expectations.
    radio_of = plan.contacts.set_index("contact_id")["radio"].to_dict()
    rates = [
        _rate_mbps(run, radio_of[contact], modcod)
        for contact, modcod in zip(pieces["contact_id"], pieces["modcod"], strict=True)
    ]
    pieces = pieces.assign(rate_mbps=rates, link_mb=np.array(rates) * seconds / 8.0)
    link_mb = pieces.groupby("contact_id")["link_mb"].sum().to_dict()
    rate_mbps = pieces.groupby("contact_id")["rate_mbps"].first().to_dict()
    starts, ends = column_seconds(run, plan.contacts["start_utc"]), column_seconds(run, plan.contacts["end_utc"])
    planned = {
        str(name): PlannedContact(row_of[window], round(start), round(end), str(radio), str(modcod), rate_mbps[name])
        for name, window, radio, modcod, start, end in zip(
            plan.contacts["contact_id"], plan.contacts["window_id"], plan.contacts["radio"], plan.contacts["modcod"],
            starts.tolist(), ends.tolist(), strict=True,
        )
        if name in rate_mbps
    }
    return planned, {str(name): float(volume) for name, volume in link_mb.items()}


def _rate_mbps(run: Run, radio_name: str, modcod: str) -> float:
    """The net rate of a modcod on a radio."""
    radio = run.radios[radio_name]
    if not isinstance(radio, DownlinkRadio):
        raise ValueError(f"radio {radio_name!r} does not send")
    rungs = rungs_of(radio, run.modcod_tables[radio.modcod_table])
    return next(rung.rate_mbps for rung in rungs if rung.name == modcod)
