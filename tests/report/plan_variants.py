"""Plans made from the sample's: with other names, or many times over."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import pandas as pd

from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord

TABLES = ("windows", "contacts", "segments", "unused")
NAMED = ("spacecraft", "antenna", "site")
IDS = ("window_id", "contact_id")

HOSTILE = {
    "Ambril-1": "<script>window.hurt=1</script>",
    "Teasel-1": "\"'><img src=x onerror=window.hurt=2>",
    "Highwater": "\u202eretawhgiH",
    "Isvarde-A": "{{ 7*7 }} & </script>",
    "Tarrow-A": "צופה-1",
    "Cape Orrin": '=HYPERLINK("x")',
}


def renamed(record: PlanRecord, run: Run, names: Mapping[str, str]) -> tuple[PlanRecord, Run]:
    """``record`` and ``run`` with names replaced wherever they stand, past every check of the input floor."""

    def new(name: Any) -> Any:
        return names.get(name, name)

    def keys(entries: Mapping[str, Any]) -> dict[str, Any]:
        return {new(name): entry for name, entry in entries.items()}

    tables = {}
    for name in TABLES:
        table = getattr(record, name).copy()
        for column in set(NAMED) & set(table.columns):
            table[column] = table[column].map(new).astype(object)
        tables[name] = table
    summary = dict(record.summary)
    summary |= {key: keys(summary[key]) for key in ("spacecraft", "antennas", "storage")}
    summary["antennas"] = {name: {**entry, "site": new(entry["site"])} for name, entry in summary["antennas"].items()}
    changed = replace(
        run,
        spacecraft={new(n): c.model_copy(update={"name": new(n)}) for n, c in run.spacecraft.items()},
        antennas={new(n): a.model_copy(update={"name": new(n), "site": new(a.site)}) for n, a in run.antennas.items()},
        sites={new(n): s.model_copy(update={"name": new(n)}) for n, s in run.sites.items()},
        orbits=keys(run.orbits),
    )
    return replace(record, summary=summary, **tables), changed


def multiplied(record: PlanRecord, run: Run, times: int) -> tuple[PlanRecord, Run]:
    """The plan side by side with itself: ``times`` as many spacecraft, antennas, windows and contacts."""
    parts = []
    for k in range(times):
        names = {n: f"{n}-{k}" for n in (*record.summary["spacecraft"], *record.summary["antennas"])}
        part, of_part = renamed(record, run, names)
        tables = {}
        for name in TABLES:
            table = getattr(part, name)
            for column in set(IDS) & set(table.columns):
                table[column] = table[column] + f"-{k}"
            tables[name] = table
        parts.append((replace(part, **tables), of_part))
    summary = dict(record.summary)
    for key in ("spacecraft", "antennas", "storage"):
        summary[key] = {n: e for part, _ in parts for n, e in part.summary[key].items()}
    summary |= {"contacts": times * len(record.contacts), "windows": times * len(record.windows)}
    tables = {n: pd.concat([getattr(part, n) for part, _ in parts], ignore_index=True) for n in TABLES}
    whole = replace(
        run,
        spacecraft={n: c for _, r in parts for n, c in r.spacecraft.items()},
        antennas={n: a for _, r in parts for n, a in r.antennas.items()},
        orbits={n: o for _, r in parts for n, o in r.orbits.items()},
    )
    return replace(record, summary=summary, **tables), whole
