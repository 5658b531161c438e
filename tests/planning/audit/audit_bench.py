"""A small plan over part of the sample network, and ways to spoil it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from passplan.geometry.pointing import sample_windows
from passplan.geometry.windows import find_windows
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.link.profiles import link_profiles
from passplan.planning.audit import Fault, audit_plan
from passplan.planning.audit.rows import Piece
from passplan.planning.audit.storage import follow

ROOT = Path(__file__).parents[3]
CRAFT = ("Ambril-3", "Teasel-1", "Teasel-3")


@dataclass
class Bench:
    """A run with a plan made by hand: tables and summary, free to be spoilt."""

    run: Run
    contacts: pd.DataFrame
    segments: pd.DataFrame
    summary: dict[str, Any]

    def copy(self) -> Bench:
        storage = {name: dict(entry) for name, entry in self.summary["storage"].items()}
        summary = {**self.summary, "storage": storage, "shortfalls": list(self.summary["shortfalls"])}
        return Bench(self.run, self.contacts.copy(), self.segments.copy(), summary)

    def audit(self) -> list[Fault]:
        return audit_plan(self.run, self.contacts, self.segments, self.summary)

    def kinds(self) -> set[str]:
        return {fault.kind for fault in self.audit()}

    def row_of_segment(self, contact: int) -> int:
        """Number of the only segment of a contact."""
        owner = self.contacts["contact_id"].iloc[contact]
        return int(np.flatnonzero(self.segments["contact_id"] == owner)[0])

    def shift(self, contact: int, start_s: int = 0, end_s: int = 0) -> None:
        """Move the ends of a contact and keep its duration and money honest."""
        index = self.contacts.index[contact]
        for column, seconds in (("start_utc", start_s), ("end_utc", end_s)):
            self.contacts.loc[index, column] += np.timedelta64(seconds, "s")
        length_s = (self.contacts.loc[index, "end_utc"] - self.contacts.loc[index, "start_utc"]).total_seconds()
        price = self.run.antennas[self.contacts.loc[index, "antenna"]].price_per_minute
        self.contacts.loc[index, "duration_s"] = int(length_s)
        self.contacts.loc[index, "cost"] = price * length_s / 60.0

    def set_contact(self, contact: int, **values: Any) -> None:
        for column, value in values.items():
            self.contacts.loc[self.contacts.index[contact], column] = value

    def set_segment(self, contact: int, **values: Any) -> None:
        row = self.row_of_segment(contact)
        for column, value in values.items():
            self.segments.loc[self.segments.index[row], column] = value


def planned() -> Bench:
    """Every window that fits after the ones before it, whole, in time order: no search, no model."""
    whole = load_run(ROOT / "configs" / "daily.toml")
    run = replace(
        whole,
        spacecraft={name: whole.spacecraft[name] for name in CRAFT},
        orbits={name: whole.orbits[name] for name in CRAFT},
    )
    windows = find_windows(run.orbits, run.antennas, run.sites, run.start_utc, run.end_utc)
    links = link_profiles(run, windows, sample_windows(windows, run.orbits, run.sites, run.start_utc))
    free_antenna = dict.fromkeys(run.antennas, -1e9)
    free_craft = dict.fromkeys(run.spacecraft, -1e9)
    rows: list[dict[str, Any]] = []
    pieces: list[dict[str, Any]] = []
    for window, link in zip(windows.to_dict("records"), links, strict=True):
        start_s = int(np.ceil((window["aos_utc"].to_datetime64() - run.start_utc) / np.timedelta64(1, "ms") / 1e3))
        end_s = int(np.floor((window["los_utc"].to_datetime64() - run.start_utc) / np.timedelta64(1, "ms") / 1e3))
        antenna, craft = run.antennas[window["antenna"]], run.spacecraft[window["spacecraft"]]
        down = link.downlink.best(start_s, end_s) if link.downlink else None
        command = link.command.best(start_s, end_s) if link.command else None
        if down is None or end_s - start_s < run.policy.min_contact_s or antenna.price_per_minute:
            continue
        held = start_s - antenna.prepare_s, end_s + antenna.release_s
        busy = held[0] < free_antenna[antenna.name] or start_s < free_craft[craft.name]
        if busy or _closed(run, antenna.name, *held):
            continue
        free_antenna[antenna.name], free_craft[craft.name] = held[1], end_s
        commands = command is not None and command.usable_s >= run.policy.command_min_s
        rows.append({
            "contact_id": f"{window['window_id']}.c1", "window_id": window["window_id"], "spacecraft": craft.name,
            "antenna": antenna.name, "site": antenna.site, "service": "both" if commands else "downlink",
            "radio": down.radio, "frequency_mhz": down.frequency_mhz, "polarisation": down.polarisation,
            "start_utc": _utc(run, start_s), "end_utc": _utc(run, end_s), "duration_s": end_s - start_s,
            "usable_s": down.usable_s, "modcod": down.modcod, "volume_mb": 0.0, "min_margin_db": down.min_margin_db,
            "peak_elevation_deg": window["peak_elevation_deg"], "weight": craft.weight, "value": 0.0, "cost": 0.0,
            "origin": "planned", "change": "new", "cut": "",
        })
        pieces.append({
            "contact_id": rows[-1]["contact_id"], "start_utc": _utc(run, down.send_start_s),
            "end_utc": _utc(run, down.send_end_s), "modcod": down.modcod, "rate_mbps": down.rate_mbps,
            "data_class": "data", "volume_mb": 0.0,
        })
    bench = Bench(run, pd.DataFrame(rows), pd.DataFrame(pieces), {})
    settle(bench)
    return bench


def settle(bench: Bench) -> None:
    """Fill in volumes, values and the summary, as an honest plan would."""
    run, storage = bench.run, {}
    owners = bench.segments["contact_id"].map(bench.contacts.set_index("contact_id")["spacecraft"])
    value = 0.0
    for name, craft in run.spacecraft.items():
        own = bench.segments[owners == name].sort_values("start_utc")
        pieces = [
            Piece(_seconds(run, s["start_utc"]), _seconds(run, s["end_utc"]), s["modcod"], s["rate_mbps"], 0.0)
            for s in own.to_dict("records")
        ]
        balance = follow(craft, pieces, run.horizon_s)
        bench.segments.loc[own.index, "volume_mb"] = balance.sent_mb
        value += craft.weight * balance.delivered_mb - run.policy.spill_cost_per_mb * balance.lost_mb
        storage[name] = {
            key: getattr(balance, key) for key in ("start_mb", "generated_mb", "delivered_mb", "lost_mb", "left_mb")
        }
    sums = bench.segments.groupby("contact_id")["volume_mb"].sum()
    bench.contacts["volume_mb"] = bench.contacts["contact_id"].map(sums).astype("float64")
    bench.contacts["value"] = bench.contacts["weight"].astype("float64") * bench.contacts["volume_mb"]
    value -= run.policy.worth_per_money * float(bench.contacts["cost"].sum())
    bench.summary = {
        "storage": storage, "value": value, "volume_mb": float(bench.contacts["volume_mb"].sum()), "shortfalls": [],
    }


def _closed(run: Run, antenna: str, from_s: float, until_s: float) -> bool:
    return any(
        closure.antenna == antenna
        and np.datetime64(closure.start_utc.replace(tzinfo=None), "ms") < _utc(run, until_s)
        and _utc(run, from_s) < np.datetime64(closure.end_utc.replace(tzinfo=None), "ms")
        for closure in run.closures
    )


def _utc(run: Run, seconds: float) -> np.datetime64:
    return run.start_utc + np.timedelta64(round(seconds * 1e3), "ms")


def _seconds(run: Run, instant: pd.Timestamp) -> float:
    return float((instant.to_datetime64() - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
