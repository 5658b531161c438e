"""What the page's script draws from: contacts with their tracks, masks, the sun, unused windows; plain numbers only."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.masks import mask_of
from passplan.geometry.sun import sun_look_deg
from passplan.inputs.run import Run
from passplan.link.choice import STEPPED
from passplan.planning.record import PlanRecord, sending
from passplan.report.page.axis import Day
from passplan.report.page.lanes import Names
from passplan.report.rows import grouped, rows
from passplan.report.tracks import WindowTrack, thinned
from passplan.report.usage import reason_words

# Enough that a pass bends smoothly on a wide screen, and 3 000 contacts still load.
_SAMPLES, _SAMPLES_OF_MANY, _MANY = 56, 28, 1_000
_SUN_STEP_S = 1_200
_SUN_REACH_S = 43_200


def payload(record: PlanRecord, run: Run, tracks: Sequence[WindowTrack], names: Names) -> dict[str, Any]:
    """Everything as lists and numbers; times in seconds from the horizon's start, None for NaN."""
    day = Day.of(record)
    return {
        "start": record.summary["horizon_start_utc"],
        "horizon": day.horizon_s,
        "required": run.policy.required_margin_db,
        "spacecraft": list(names.spacecraft),
        "keys": [names.craft_keys[name] for name in names.spacecraft],
        "antennas": [_antenna(run, name, entry, names) for name, entry in record.summary["antennas"].items()],
        "sites": [_site(run, name, day) for name in names.sites],
        "contacts": _contacts(record, tracks, names, day),
        "unused": _unused(record, names, day),
        "reasons": {reason: reason_words(reason) for reason in sorted(set(record.unused["reason"]))},
    }


def _antenna(run: Run, name: str, entry: Mapping[str, Any], names: Names) -> dict[str, Any]:
    mask: list[list[float]] = []
    if name in run.antennas:
        pieces = mask_of(run.antennas[name])
        for begin, finish, first, last in zip(
            pieces.begin_deg, pieces.finish_deg, pieces.first_deg, pieces.last_deg, strict=True
        ):
            mask += [_round([begin, first]), _round([finish, last])]
    return {"name": name, "site": names.sites[entry["site"]], "mask": mask}


def _site(run: Run, name: str, day: Day) -> dict[str, Any]:
    """A site's zone, and where the sun stands every ``step`` seconds from ``first`` on: azimuth, elevation in turn."""
    if name not in run.sites:
        return {"name": name, "zone": None, "sun": []}
    # Half a day more on both sides: the drawing shows the sun's way around any contact.
    seconds = np.arange(-_SUN_REACH_S, day.horizon_s + _SUN_REACH_S + _SUN_STEP_S, _SUN_STEP_S)
    times = day.start_utc.to_datetime64() + (seconds * 1000).astype("timedelta64[ms]")
    azimuth, elevation = sun_look_deg(run.sites[name], times)
    return {
        "name": name,
        "zone": run.sites[name].time_zone,
        "first": -_SUN_REACH_S,
        "step": _SUN_STEP_S,
        "sun": _round(np.column_stack([azimuth, elevation]).ravel()),
    }


def _contacts(record: PlanRecord, tracks: Sequence[WindowTrack], names: Names, day: Day) -> list[dict[str, Any]]:
    by_window = dict(zip(record.windows["window_id"], tracks, strict=True))
    pieces = grouped(rows(sending(record.segments)), "contact_id")
    most = _SAMPLES if len(record.contacts) <= _MANY else _SAMPLES_OF_MANY
    entries = []
    for row in rows(record.contacts):
        entry: dict[str, Any] = {
            "id": row["contact_id"],
            "s": names.spacecraft[row["spacecraft"]],
            "a": names.antennas[row["antenna"]],
            "from": day.seconds(row["start_utc"]),
            "to": day.seconds(row["end_utc"]),
            "service": row["service"],
            "radio": row["radio"],
            "mhz": row["frequency_mhz"],
            "polarisation": row["polarisation"],
            "modcod": row["modcod"],
            "mb": _number(row["volume_mb"], 1),
            "margin": _number(row["min_margin_db"], 2),
            "peak": _number(row["peak_elevation_deg"], 1),
            "value": _number(row["value"], 1),
            "cost": _number(row["cost"], 2),
            "origin": row["origin"],
            "change": row["change"],
            "cut": row["cut"],
            "sent": [
                [day.seconds(p["start_utc"]), day.seconds(p["end_utc"]), _number(p["rate_mbps"], 4), p["modcod"]]
                for p in pieces.get(row["contact_id"], ())
            ],
        }
        if row["window_id"] in by_window:
            entry |= _track(by_window[row["window_id"]], row["radio"], row["modcod"], entry["sent"], most)
        entries.append(entry)
    return entries


def _track(
    track: WindowTrack, radio: str, modcod: str, sent: Sequence[Sequence[Any]], most: int
) -> dict[str, Any]:
    """The window of a contact; ``dt`` are the times of the margins ``db`` where they are others than ``t``."""
    pick = thinned(track.time_s.size, most)
    found = {
        "t": _round(track.time_s[pick], 0),
        "az": _round(track.azimuth_deg[pick]),
        "el": _round(track.elevation_deg[pick]),
        "km": _round(track.range_km[pick], 0),
        "rate": _round(track.rate_mbps[pick], 3),
        "keyholes": [list(span) for span in track.keyholes],
    }
    if modcod == STEPPED and sent:
        line = track.margin_in_force(radio, [(piece[0], piece[1], piece[3]) for piece in sent], track.time_s[pick])
        return found | ({"db": []} if line is None else {"dt": _round(line[0], 0), "db": _round(line[1], 2)})
    margin = track.margin_db(radio, modcod)
    return found | {"db": [] if margin is None else _round(margin[pick])}


def _unused(record: PlanRecord, names: Names, day: Day) -> list[list[Any]]:
    """Rows of spacecraft, antenna, from, to, reason, detail."""
    table = record.unused
    first = (table["aos_utc"] - day.start_utc).dt.total_seconds().round().astype("int64")
    last = (table["los_utc"] - day.start_utc).dt.total_seconds().round().astype("int64")
    listed = zip(
        table["spacecraft"],
        table["antenna"],
        first.tolist(),
        last.tolist(),
        table["reason"],
        table["detail"],
        strict=True,
    )
    return [
        [names.spacecraft[s], names.antennas[a], t0, t1, reason, detail]
        for s, a, t0, t1, reason, detail in listed
        if s in names.spacecraft and a in names.antennas
    ]


def _round(values: Sequence[float] | NDArray[np.float64], digits: int = 1) -> list[float]:
    return [_whole(value) for value in np.round(np.asarray(values, float), digits).tolist()]


def _whole(value: float) -> Any:
    return int(value) if value == int(value) else value


def _number(value: Any, digits: int) -> Any:
    return None if pd.isna(value) else _whole(round(float(value), digits))
