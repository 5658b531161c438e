"""From a plan to its page: the numbers in Python, the layout in a template, the movement in a small script."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Mapping, Sequence
from functools import lru_cache
from importlib.resources import files
from pathlib import Path
from typing import Any

import pandas as pd
from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from passplan.inputs.run import Run
from passplan.planning.backlog import Backlog, backlogs
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.keys import spacecraft_keys
from passplan.report.page.axis import Band, Day
from passplan.report.page.lanes import Names, antenna_ribbons, spacecraft_ribbons, storage_path
from passplan.report.page.payload import payload
from passplan.report.page.ribbons import UNIT_S, Ribbon
from passplan.report.standing import standing_lists, tier_lines
from passplan.report.tracks import WindowTrack, window_tracks
from passplan.report.usage import antenna_use, causes, lost_causes
from passplan.report.words import LEAST_MB, STATUS_WORDS, clock, megabytes, minute, rate

PAGE = "report.html"
_SCRIPT = ("words", "panorama", "chart", "contact", "filters", "view", "start")


def render_page(record: PlanRecord, run: Run, tracks: Sequence[WindowTrack] | None = None) -> str:
    """The whole page as text; ``run`` is the run that the plan was made from (``directory.stored_run``)."""
    tracks = window_tracks(run, record.windows) if tracks is None else tracks
    names = Names.of(record, spacecraft_keys(record.summary["spacecraft"]))
    style, script = _asset("page.css"), _script()
    return (
        _environment()
        .get_template("page.html.j2")
        .render(
            s=record.summary,
            day=Day.of(record),
            unit_s=UNIT_S,
            names=names,
            cautions=CAUTIONS,
            draft=record.summary.get("approval", "draft") == "draft",
            status=STATUS_WORDS.get(record.summary["status"], record.summary["status"]),
            least_mb=LEAST_MB,
            lost_mb=sum(store["lost_mb"] for store in record.summary["storage"].values()),
            bands=_bands(record, tracks, names),
            contacts=_contact_rows(record),
            use=antenna_use(record),
            causes=causes(record, tracks),
            lost_causes=_lost_causes(record),
            tiers=tier_lines(record.summary),
            standing=standing_lists(record.summary),
            lost=_lost(record),
            ages=_ages(record),
            data=payload(record, run, tracks, names),
            style=Markup(style),
            script=Markup(script),
            script_hash=_digest(script),
        )
    )


def write_page(record: PlanRecord, run: Run, path: Path, tracks: Sequence[WindowTrack] | None = None) -> None:
    """Write the page as UTF-8; raises OSError where it cannot be written."""
    path.write_text(render_page(record, run, tracks), encoding="utf-8")


@lru_cache(maxsize=1)
def _environment() -> Environment:
    environment = Environment(
        loader=PackageLoader("passplan.report.page", "assets"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters |= {"megabytes": megabytes, "clock": clock, "minute": minute, "rate": rate}
    environment.policies["json.dumps_kwargs"] = {"separators": (",", ":"), "ensure_ascii": False, "allow_nan": False}
    return environment


def _asset(name: str) -> str:
    return files("passplan.report.page").joinpath("assets", name).read_text(encoding="utf-8")


def _script() -> str:
    """The script's parts in order, in one scope of their own."""
    return '"use strict";\n(() => {\n' + "\n".join(_asset(f"{part}.js") for part in _SCRIPT) + "})();\n"


def _digest(script: str) -> str:
    """The hash by which the page's own policy lets this script run, and no other."""
    return "sha256-" + base64.b64encode(hashlib.sha256(script.encode("utf-8")).digest()).decode("ascii")


def _bands(record: PlanRecord, tracks: Sequence[WindowTrack], names: Names) -> list[dict[str, Any]]:
    """The lanes of each band: those of the antennas, then those of the spacecraft."""
    use = {row.antenna: row for row in antenna_use(record)}
    stores = backlogs(record)
    found = []
    for number, band in enumerate(Day.of(record).bands()):
        ribbons = antenna_ribbons(record, tracks, names, band)
        antennas = [
            {"name": name, "number": k, "site": names.sites[use[name].site], "use": use[name], "ribbon": ribbons[name]}
            for name, k in names.antennas.items()
        ]
        found.append({
            "number": number, "axis": band, "hours": band.hours(), "antennas": antennas,
            "spacecraft": _spacecraft(record, spacecraft_ribbons(record, tracks, names, band), stores, names, band),
        })
    return found


def _spacecraft(
    record: PlanRecord, ribbons: Mapping[str, Ribbon], stores: Mapping[str, Backlog], names: Names, band: Band
) -> list[dict[str, Any]]:
    contacts = record.contacts["spacecraft"].value_counts()
    rows = []
    for name, number in names.spacecraft.items():
        fill, loss = storage_path(stores[name], band)
        rows.append({
            "name": name, "number": number, "key": names.craft_keys[name], "ribbon": ribbons[name], "fill": fill,
            "loss": loss, "store": record.summary["storage"][name], "contacts": int(contacts.get(name, 0)),
        })
    return rows


def _contact_rows(record: PlanRecord) -> list[dict[Any, Any]]:
    rows: list[dict[Any, Any]] = record.contacts.to_dict("records")
    for row in rows:
        row["margin"] = "" if pd.isna(row["min_margin_db"]) else f"{row['min_margin_db']:.1f}"
        row["start"] = pd.Timestamp(row["start_utc"])
    return rows


def _lost_causes(record: PlanRecord) -> list[dict[str, Any]]:
    """Causes of data not brought down, with lengths of bars in per cent of the dearest."""
    found = lost_causes(record.summary)
    longest = max((one.lost_value + one.left_value for one in found), default=0.0) or 1.0
    return [
        {"cause": one, "lost": round(100.0 * max(one.lost_value, 0.0) / longest, 1),
         "left": round(100.0 * max(one.left_value, 0.0) / longest, 1)}
        for one in found
    ]


def _lost(record: PlanRecord) -> list[dict[str, Any]]:
    """Spacecraft that lose data aboard, with what it was worth, the dearest first."""
    rows = []
    for name, store in record.summary["storage"].items():
        weight = record.summary["spacecraft"][name]["weight"]
        if store["lost_mb"] > LEAST_MB:
            rows.append({"name": name, "lost_mb": store["lost_mb"], "worth": weight * store["lost_mb"]})
    return sorted(rows, key=lambda row: (-row["worth"], row["name"]))


def _ages(record: PlanRecord) -> tuple[float, float] | None:
    ages = [s["element_age_days"] for s in record.summary["spacecraft"].values() if s["element_age_days"] is not None]
    return (min(ages), max(ages)) if ages else None
