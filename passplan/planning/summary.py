"""The summary of a plan: the content of ``plan.json``, plain enough for any program to read."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable
from dataclasses import asdict
from datetime import UTC, datetime
from importlib.metadata import PackageNotFoundError, version
from pathlib import PurePosixPath
from typing import Any

import numpy as np
import pandas as pd

from passplan._version import __version__
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.reader import ReadFile
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.aboard import schedule_warnings
from passplan.planning.battery import battery_summary, battery_warnings
from passplan.planning.plan import Plan
from passplan.planning.rented import Held, rented_time
from passplan.planning.rules.decisions import frozen_contacts
from passplan.planning.tentative import tentative_warnings, touched_by_tentative
from passplan.planning.value import Account

_PACKAGES = ("skyfield", "sgp4", "ortools", "itur", "numpy", "pandas")


def summarise(run: Run, windows: pd.DataFrame, plan: Plan) -> dict[str, Any]:
    """``plan.json`` as a dictionary of plain values.

    ``plan_id`` depends on the inputs, the horizon and the contacts, and on nothing else, so that the same
    work done twice carries the same name.
    """
    result, account = plan.result, plan.result.account
    held = _held(plan)
    touched = touched_by_tentative(run, held)
    summary: dict[str, Any] = {
        "plan_id": "", "name": run.name, "status": result.status, "approval": "draft",
        "generated_utc": datetime.now(UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z"),
        "horizon_start_utc": _iso(run.start_utc), "horizon_end_utc": _iso(run.end_utc),
        **({} if run.frozen_until_utc is None else {"frozen_until_utc": _iso(run.frozen_until_utc)}),
        "windows": len(windows), "contacts": len(plan.contacts),
        "volume_mb": float(np.sum(account.delivered_mb)), "value": result.value, "bound": _finite(result.bound),
        "gap": _finite(result.gap), "cost": account.cost, "path": result.path,
        "stopped_by_hand": result.stopped_by_hand,
        "tiers": [
            {"name": t.name, "sense": t.sense, "value": t.value, "bound": _finite(t.bound), "gap": _finite(t.gap)}
            for t in result.tiers
        ],
        "geometry": {
            "refraction": run.policy.refraction, "light_time": "off", "polar_motion": "off",
            "guard_sigmas": run.policy.guard_sigmas,
            **{f"largest_{name}": _largest(windows, name) for name in ("timing_sigma_s", "off_pointing_deg")},
            "lost_s": round(float(windows["lost_s"].sum()), 3) if "lost_s" in windows else 0.0,
        },
        "shortfalls": [{"kind": s.kind, "name": s.name, "sentence": s.sentence} for s in result.shortfalls],
        **({"tentative": touched} if touched else {}),
        **(rented_time(run, held) if any(antenna.rented for antenna in run.antennas.values()) else {}),
        **({} if plan.fair_floor is None else {"fair_floor": plan.fair_floor}),
        # A requirement that cannot be met for itself has said so in its shortfall.
        "contradictions": [
            {"demands": list(c.demands), "between": list(c.between), "sentence": c.sentence}
            for c in plan.contradictions if len(c.demands) > 1
        ],
        "pins": [f"{item.kind} {item.name}{item.note and ', ' + item.note}" for item in run.decisions],
        "frozen": [item.name for item in (*frozen_contacts(run), *run.loaded)],
        "warnings": [
            *run.warnings, *_own_warnings(run, windows), *battery_warnings(run, plan.problem),
            *schedule_warnings(run, plan.contacts), *tentative_warnings(touched)],
        "left_out": dict(run.left_out),
        "spacecraft": {name: _spacecraft(run, name) for name in run.spacecraft if name in run.orbits},
        "antennas": {name: _antenna(run, name, plan.contacts) for name in run.antennas},
        "storage": _storage(run, account), "battery": battery_summary(run, plan.problem, result.chosen),
        "inputs": stored_inputs(run.files),
        "versions": {"passplan": __version__, **{name: _version(name) for name in _PACKAGES}},
        "seconds": {},
    }
    summary["plan_id"] = _plan_id(summary, plan.contacts)
    return summary


def _held(plan: Plan) -> list[Held]:
    """When each contact holds its antenna, in the order of the contacts."""
    holds = plan.problem.options.holds
    start_s, end_s = holds.start_s - holds.prepare_s, holds.end_s + holds.release_s
    held = [k for o in plan.result.account.chosen for k in range(*np.searchsorted(holds.option, [o, o + 1]))]
    return [
        Held(contact, antenna, int(start_s[k]), int(end_s[k])) for contact, antenna, k in zip(
            plan.contacts["contact_id"], plan.contacts["antenna"], held, strict=True)]


def stored_inputs(files: Iterable[ReadFile]) -> list[dict[str, str]]:
    """Path, SHA-256 and place of the copy of each input; copies are numbered, so that equal names do not clash."""
    entries = []
    for i, file in enumerate(files):
        name = PurePosixPath(file.path).name
        # The config comes first and keeps its name: it is what a plan's own inputs are loaded by.
        copy = f"inputs/{i:02d}-{name}" if i else f"inputs/{name}"
        entries.append({"path": file.path, "sha256": file.sha256, "stored": copy})
    return entries


def _plan_id(summary: dict[str, Any], contacts: pd.DataFrame) -> str:
    edges = [contacts[name].to_numpy("datetime64[ms]") for name in ("start_utc", "end_utc")]
    chosen = [
        [contact, _iso(start), _iso(end), modcod]
        for contact, start, end, modcod in zip(contacts["contact_id"], *edges, contacts["modcod"], strict=True)
    ]
    identity = {
        "horizon": [summary["horizon_start_utc"], summary["horizon_end_utc"]],
        "inputs": [entry["sha256"] for entry in summary["inputs"]],
        "contacts": sorted(chosen),
    }
    return hashlib.sha256(json.dumps(identity, sort_keys=True).encode()).hexdigest()[:12]


def _spacecraft(run: Run, name: str) -> dict[str, Any]:
    orbit, craft = run.orbits[name], run.spacecraft[name]
    known = isinstance(orbit, ElementSet)
    return {
        "catalogue_number": craft.catalogue_number, "weight": run.data_of(name)[0].weight,
        "orbit_from": "element set" if known else "ephemeris",
        "element_epoch_utc": _iso(orbit.epoch_utc) if isinstance(orbit, ElementSet) else None,
        "element_age_days": round(orbit.age_days(run.start_utc), 4) if isinstance(orbit, ElementSet) else None,
    }


def _antenna(run: Run, name: str, contacts: pd.DataFrame) -> dict[str, Any]:
    own = contacts[contacts["antenna"] == name]
    return {
        "site": run.antennas[name].site, "contacts": len(own), "contact_s": float(own["duration_s"].sum()),
        "closures": [
            {"start_utc": _iso(datetime64(c.start_utc)), "end_utc": _iso(datetime64(c.end_utc)), "kind": c.kind,
             "note": c.note}
            for c in run.closures if c.antenna == name
        ],
    }


def _storage(run: Run, account: Account) -> dict[str, dict[str, Any]]:
    """Figures of each spacecraft's storage; where its data is of its own classes, theirs and the fill as well."""
    columns = {
        key: getattr(account, key) for key in ("start_mb", "generated_mb", "delivered_mb", "lost_mb", "left_mb")
    }
    return {
        name: {
            "capacity_mb": run.spacecraft[name].storage_mb, **{k: float(v[i]) for k, v in columns.items()},
            **_classes(account, i),
        }
        for i, name in enumerate(name for name in run.spacecraft if name in run.orbits)
    }


def _classes(account: Account, craft: int) -> dict[str, Any]:
    if craft not in account.aboard:
        return {}
    aboard = account.aboard[craft]
    return {
        "classes": {one.name: {k: v for k, v in asdict(one).items() if k != "name"} for one in account.classes[craft]},
        "fill": np.column_stack([aboard.path_s, aboard.path_mb]).round(3).tolist(),
        "losing_s": aboard.losing_s.round(3).tolist(),
    }


def _own_warnings(run: Run, windows: pd.DataFrame) -> list[str]:
    unseen = [name for name in run.orbits if name not in set(windows["spacecraft"])]
    if not len(windows):
        return ["no antenna sees any spacecraft within the horizon; the plan is empty"]
    return [f"{name}: no antenna sees it within the horizon" for name in unseen] + _pointing_warnings(run, windows)


def _pointing_warnings(run: Run, windows: pd.DataFrame) -> list[str]:
    """One line for each antenna whose beam is too narrow for what is known of some orbits."""
    found = []
    for name, antenna in run.antennas.items():
        if antenna.beamwidth_deg is None or "off_pointing_deg" not in windows:
            continue
        permitted_deg = run.policy.off_pointing_beamwidths * antenna.beamwidth_deg
        wide = windows[(windows["antenna"] == name) & (windows["off_pointing_deg"] > permitted_deg)]
        if len(wide):
            craft = ", ".join(sorted(set(wide["spacecraft"])))
            found.append(
                f"{name}: the orbits of {craft} are known to {wide['off_pointing_deg'].max():.2g} deg (1 sigma) only, "
                f"the beam allows {permitted_deg:.2g} deg; fetch fresh element sets, or search in time on acquisition"
            )
    return found


def _largest(windows: pd.DataFrame, column: str) -> float | None:
    return round(float(windows[column].max()), 4) if column in windows and len(windows) else None


def _finite(number: float) -> float | None:
    return float(number) if np.isfinite(number) else None


def _iso(instant: np.datetime64) -> str:
    return f"{instant.astype('datetime64[ms]')}Z"


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:  # pragma: no cover - a vendored or stripped installation
        return "unknown"
