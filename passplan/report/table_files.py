"""The plan's tables in other forms than CSV: one JSON file, or Parquet where pyarrow is installed."""

from __future__ import annotations

import json
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import pandas as pd

from passplan.inputs.errors import PassplanError
from passplan.planning.record import PlanRecord
from passplan.report.csv_files import iso, write_csv

TABLES = ("windows", "contacts", "segments", "unused")


class MissingLibraryError(PassplanError):
    """An optional library is not installed; the message names the extra that brings it."""

    exit_code = 2


def write_csv_tables(record: PlanRecord, folder: Path) -> None:
    """The four tables as CSV files, as in the plan directory."""
    for name in TABLES:
        write_csv(getattr(record, name), folder / f"{name}.csv")


def write_json(record: PlanRecord, path: Path) -> None:
    """Summary and tables in one JSON file: each table a list of rows, times as ISO 8601 text, null for nothing."""
    document = {"plan": record.summary, **{name: rows_of(getattr(record, name)) for name in TABLES}}
    path.write_text(json.dumps(document, ensure_ascii=False, allow_nan=False, indent=1) + "\n", encoding="utf-8")


def read_json(path: Path) -> tuple[dict[str, Any], dict[str, pd.DataFrame]]:
    """What :func:`write_json` wrote: the summary, and the tables with ``*_utc`` columns as datetime64[ms]."""
    document = json.loads(path.read_text(encoding="utf-8"))
    summary = document.pop("plan")
    tables = {}
    for name, rows in document.items():
        table = pd.DataFrame(rows)
        for column in table.columns:
            if column.endswith("_utc"):
                table[column] = pd.to_datetime(table[column].str.rstrip("Z"), format="ISO8601").astype("datetime64[ms]")
        tables[name] = table
    return summary, tables


def rows_of(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Rows as plain values, for JSON."""
    plain = table.copy()
    for name in plain.columns:
        if pd.api.types.is_datetime64_any_dtype(plain[name]):
            plain[name] = iso(plain[name])
    return [
        {str(key): None if pd.isna(value) else value for key, value in row.items()} for row in plain.to_dict("records")
    ]


def write_parquet(record: PlanRecord, folder: Path) -> None:
    """The four tables as Parquet files, times as UTC timestamps. Raises :class:`MissingLibraryError`."""
    if find_spec("pyarrow") is None:
        raise MissingLibraryError("Parquet needs pyarrow; install passplan[parquet]")
    for name in TABLES:
        table = getattr(record, name).copy()
        for column in table.columns:
            if pd.api.types.is_datetime64_any_dtype(table[column]):
                table[column] = table[column].dt.tz_localize("UTC")
        table.to_parquet(folder / f"{name}.parquet", engine="pyarrow", index=False)
