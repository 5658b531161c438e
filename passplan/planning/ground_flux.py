"""Power flux density at the stations while the plan's contacts send: a flag, not a verdict."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from passplan.geometry.pointing import Samples
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.run import Run
from passplan.link.budget import off_nadir_deg
from passplan.link.chains import radiated_dbw
from passplan.link.ground_flux import ground_flux
from passplan.link.profiles import pattern_loss_db
from passplan.planning.horizon import column_seconds
from passplan.planning.plan import Plan

STATEMENT = "a flag, not a verdict: compare with the licence and the coordination of the spacecraft"


def flux_summary(run: Run, windows: pd.DataFrame, samples: Samples, plan: Plan) -> dict[str, Any]:
    """The entry ``flux_density`` of ``plan.json``: the worst moment of each downlink contact with a stated limit.

    By contact: ``excess_db`` over the limit (negative below it), ``dbw_per_m2`` with its ``unit``, ``limit``,
    ``elevation_deg`` of arrival and the limit's ``source``. Towards the station, as the spacecraft sends.
    """
    row_of = {name: k for k, name in enumerate(windows["window_id"])}
    contacts = plan.contacts
    starts, ends = column_seconds(run, contacts["start_utc"]), column_seconds(run, contacts["end_utc"])
    found: dict[str, dict[str, Any]] = {}
    for name, window, radio_name, start_s, end_s in zip(
        contacts["contact_id"], contacts["window_id"], contacts["radio"], starts.tolist(), ends.tolist(), strict=True
    ):
        radio, row = run.radios[radio_name], row_of[window]
        if not isinstance(radio, DownlinkRadio):
            continue
        own = slice(samples.offsets[row], samples.offsets[row + 1])
        time_s = samples.time_s[own]
        instants = np.concatenate([[start_s], time_s[(time_s > start_s) & (time_s < end_s)], [end_s]])
        elevation_deg, range_km = (
            np.interp(instants, time_s, values[own]) for values in (samples.elevation_deg, samples.range_km))
        site = run.sites[str(windows["site"].iloc[row])]
        loss_db = 0.0 * instants
        if radio.pattern:
            angle = off_nadir_deg(elevation_deg, range_km, site.latitude_deg, site.height_m)
            loss_db = pattern_loss_db(radio.pattern, angle)
        flux = ground_flux(run, radio, radiated_dbw(radio) - loss_db, range_km, elevation_deg)
        if flux is not None:
            k = int(np.argmax(flux.excess_db))
            found[str(name)] = {
                "excess_db": round(float(flux.excess_db[k]), 3),
                "dbw_per_m2": round(float(flux.density_dbw_per_m2[k]), 3), "unit": flux.unit,
                "limit": round(float(flux.limit_dbw_per_m2[k]), 3), "elevation_deg": round(float(elevation_deg[k]), 2),
                "source": flux.source,
            }
    return {"statement": STATEMENT, "contacts": found}


def flux_warnings(contacts: pd.DataFrame, flux: dict[str, Any]) -> list[str]:
    """One warning for each radio that exceeds a limit in some contacts."""
    radio_of = contacts.set_index("contact_id")["radio"].to_dict()
    over: dict[tuple[str, str], list[float]] = {}
    for name, entry in flux["contacts"].items():
        if entry["excess_db"] > 0.0:
            over.setdefault((str(radio_of[name]), entry["source"]), []).append(entry["excess_db"])
    return [
        f"radio {radio}: flux density at the ground over its limit in {len(excesses)} contact"
        f"{'s' if len(excesses) > 1 else ''}, by up to {max(excesses):.1f} dB ({source}); {STATEMENT}"
        for (radio, source), excesses in sorted(over.items())
    ]
