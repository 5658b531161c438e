"""What a study found, in the terminal and in files."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
from rich.console import Console
from rich.table import Table
from rich.text import Text

from passplan._version import __version__
from passplan.report.csv_files import write_csv
from passplan.report.directory import new_directory
from passplan.report.words import megabytes
from passplan.studies.study import BASE, Study
from passplan.studies.whatif import BETTER, UNCLEAR, WORSE, Comparison

_VERDICT_STYLES = {BETTER: "bold green", WORSE: "bold red", UNCLEAR: "dim"}


def print_comparison(study: Study, comparison: Comparison, console: Console) -> None:
    """Print the variants beside the base, then the days of each."""
    console.print(Text.assemble((study.name, "bold"), f"  {study.days} days, each planned by itself, the same for all"))
    console.print()
    console.print(_variants(comparison))
    console.print(Text(
        "difference: value against the base; in brackets what the proofs leave open. A verdict is given only where "
        "that range excludes zero.", style="dim",
    ))
    console.print()
    console.print(_days(comparison))


def write_comparison(study: Study, comparison: Comparison, out: Path) -> None:
    """Write ``variants.csv``, ``days.csv`` and ``study.json`` to the new directory ``out``, whole or not at all."""
    with new_directory(out) as made:
        write_csv(comparison.variants, made / "variants.csv")
        write_csv(comparison.days, made / "days.csv")
        head = {
            "name": study.name, "days": study.days, "base": study.base.name,
            "variants": [v.model_dump(exclude_defaults=True) for v in study.variants],
            "versions": {"passplan": __version__},
        }
        (made / "study.json").write_text(json.dumps(head, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")


def _table(*headings: tuple[str, str]) -> Table:
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading, side in headings:
        table.add_column(heading, justify=side, no_wrap=heading != "variant")  # type: ignore[arg-type]
    return table


def _variants(comparison: Comparison) -> Table:
    table = _table(("variant", "left"), ("contacts", "right"), ("volume", "right"), ("lost", "right"),
                   ("value", "right"), ("gap", "right"), ("difference", "right"), ("verdict", "left"))
    for row in comparison.variants.to_dict("records"):
        difference = "" if row["variant"] == BASE else (
            f"{row['difference']:+,.0f} [{row['difference_low']:+,.0f}, {row['difference_high']:+,.0f}]"
        )
        table.add_row(
            row["variant"], f"{row['contacts']:.0f}", megabytes(row["volume_mb"]), megabytes(row["lost_mb"]),
            f"{row['value']:,.0f}", _percent(row["gap"]), Text(difference),
            Text(row["verdict"], style=_VERDICT_STYLES.get(row["verdict"], "")),
        )
    return table


def _days(comparison: Comparison) -> Table:
    names = list(comparison.variants["variant"])
    table = _table(("day", "left"), *((name, "right") for name in names))
    base = comparison.days[comparison.days["variant"] == BASE].set_index("start_utc")["value"]
    for start, group in comparison.days.groupby("start_utc", sort=True):
        values = group.set_index("variant")["value"]
        cells = [f"{values[n]:,.0f}" if n == BASE else f"{values[n] - base[start]:+,.0f}" for n in names]
        table.add_row(f"{pd.Timestamp(start):%d %b %H:%M}", *cells)  # type: ignore[arg-type]
    return table


def _percent(gap: float) -> str:
    return "" if pd.isna(gap) else f"{100 * gap:.2f} %"
