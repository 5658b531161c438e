"""A part of a plan: the contacts of one spacecraft, antenna or site."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import pandas as pd

from passplan.inputs.errors import InputError, Problem, nearest
from passplan.planning.record import PlanRecord


@dataclass(frozen=True)
class Selection:
    """Names to narrow by; None leaves that side open."""

    spacecraft: str | None = None
    antenna: str | None = None
    site: str | None = None

    def __bool__(self) -> bool:
        return any((self.spacecraft, self.antenna, self.site))


def select(record: PlanRecord, selection: Selection) -> PlanRecord:
    """``record`` with the tables, antennas and spacecraft that the selection names.

    The figures of the summary stay those of the whole plan. Raises :class:`InputError` for a name that the plan does
    not know.
    """
    antennas, craft = record.summary["antennas"], record.summary["spacecraft"]
    sites = {entry["site"] for entry in antennas.values()}
    for option, name, known in (
        ("--spacecraft", selection.spacecraft, craft),
        ("--antenna", selection.antenna, antennas),
        ("--site", selection.site, sites),
    ):
        if name is not None and name not in known:
            raise InputError([Problem(option, "", name, f"not in this plan; {nearest(name, known)}")])
    kept = [
        name
        for name, entry in antennas.items()
        if selection.antenna in (None, name) and selection.site in (None, entry["site"])
    ]
    flown = [name for name in craft if selection.spacecraft in (None, name)]
    contacts = _rows(record.contacts, kept, flown)
    summary = {
        **record.summary,
        "antennas": {name: antennas[name] for name in kept},
        "spacecraft": {name: craft[name] for name in flown},
        "storage": {name: record.summary["storage"][name] for name in flown},
    }
    if "lost_value" in summary:
        summary["lost_value"] = {name: record.summary["lost_value"][name] for name in flown}
    segments = record.segments[record.segments["contact_id"].isin(contacts["contact_id"])]
    return replace(
        record,
        summary=summary,
        windows=_rows(record.windows, kept, flown),
        contacts=contacts,
        segments=segments,
        unused=_rows(record.unused, kept, flown),
    )


def _rows(table: pd.DataFrame, antennas: Iterable[str], spacecraft: Iterable[str]) -> pd.DataFrame:
    return table[table["antenna"].isin(list(antennas)) & table["spacecraft"].isin(list(spacecraft))].reset_index(
        drop=True
    )
