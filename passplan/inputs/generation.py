"""How fast a spacecraft makes data: a rate, an amount per revolution, a file; what is given adds up."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Annotated, Any

import numpy as np
from numpy.typing import NDArray
from pydantic import BeforeValidator, Field, model_validator

from passplan.inputs.errors import Findings, nearest
from passplan.inputs.lines import few_faults
from passplan.inputs.reader import Reader
from passplan.inputs.records import Instant, Record, datetime64
from passplan.inputs.tables import checked, read_csv_records

_Rate = Annotated[float, Field(ge=0.0, le=10_000.0)]
_Amount = Annotated[float, Field(ge=0.0, le=1e9)]
_Share = Annotated[float, Field(ge=0.0, le=1.0)]
_COLUMNS = ("start_utc", "end_utc", "mb_per_s", "mb")
# A last row of rates holds on; no horizon is as long.
_FOR_EVER = np.datetime64("2200-01-01", "ms")


def _shares(value: Any) -> Any:
    """A CSV cell holds the span as ``0.2;0.6``."""
    return tuple(part.strip() for part in value.split(";")) if isinstance(value, str) else value


class Generation(Record):
    """The keys that say what is generated, of a spacecraft or of one of its data classes.

    ``generation_mb_per_orbit`` comes evenly over the part ``generation_orbit_span`` of each revolution, in shares
    of the time from one ascending node to the next. ``generation_file`` names a CSV file (see :func:`read_series`).
    """

    generation_mb_per_s: _Rate = 0.0
    generation_mb_per_orbit: _Amount = 0.0
    generation_orbit_span: Annotated[tuple[_Share, _Share], BeforeValidator(_shares)] = (0.0, 1.0)
    generation_file: str | None = None

    @model_validator(mode="after")
    def _span_has_length(self) -> Generation:
        low, high = self.generation_orbit_span
        if low >= high:
            raise ValueError(f"generation_orbit_span ends at {high:g}, not after its start {low:g}; swap or widen it")
        return self


@dataclass(frozen=True, eq=False)
class Series:
    """What a generation file says: rates [MB/s] in spans of time (datetime64[ms]), in order and apart."""

    start_utc: NDArray[np.datetime64]
    end_utc: NDArray[np.datetime64]
    mb_per_s: NDArray[np.float64]


class _RateRow(Record):
    start_utc: Instant
    mb_per_s: _Rate


class _AmountRow(Record):
    start_utc: Instant
    end_utc: Instant
    mb: _Amount

    @model_validator(mode="after")
    def _has_length(self) -> _AmountRow:
        if self.end_utc <= self.start_utc:
            raise ValueError("end_utc is not after start_utc; correct one")
        return self


def read_series(path: Path, reader: Reader, findings: Findings) -> Series | None:
    """A generation file, or None with every fault noted.

    Either ``start_utc,mb_per_s``: each rate holds until the next row, the last one for good; or
    ``start_utc,end_utc,mb``: each amount comes evenly over its span, and nothing between spans. Rows are in time
    order; what lies outside the horizon does not matter.
    """
    noted = len(findings.problems)
    with few_faults(path, findings) as own:
        records = read_csv_records(path, reader, own)
        unknown = sorted({key for _, record in records for key in record if key not in _COLUMNS})
        for key in unknown:
            own.problem(path, f"row 1.{key}", None, f"unknown column; {nearest(key, _COLUMNS)}")
        if records and not unknown:
            amounts = any("mb" in record or "end_utc" in record for _, record in records)
            model = _AmountRow if amounts else _RateRow
            rows = [(where, checked(model, record, path, where, own)) for where, record in records]
            sound = [(where, row) for where, row in rows if row is not None]
            _check_order(sound, path, own)
        elif not records and not own.problems:
            own.problem(path, "", None, "the file has no rows; write at least one")
    if len(findings.problems) > noted:
        return None
    return _series([row for _, row in sound])


def _check_order(rows: Sequence[tuple[str, Any]], path: Path, findings: Findings) -> None:
    for (above, earlier), (where, later) in pairwise(rows):
        if later.start_utc <= earlier.start_utc:
            remedy = f"does not start after {above}; sort the rows and give each instant once"
            findings.problem(path, f"{where}.start_utc", later.start_utc.isoformat(), remedy)
        elif isinstance(earlier, _AmountRow) and later.start_utc < earlier.end_utc:
            findings.problem(path, where, None, f"overlaps {above}; spans lie apart")


def _series(rows: Sequence[Any]) -> Series:
    starts = np.array([datetime64(row.start_utc) for row in rows], dtype="datetime64[ms]")
    if isinstance(rows[0], _RateRow):
        ends = np.append(starts[1:], _FOR_EVER)
        return Series(starts, ends, np.array([row.mb_per_s for row in rows], dtype=float))
    ends = np.array([datetime64(row.end_utc) for row in rows], dtype="datetime64[ms]")
    amounts = np.array([row.mb for row in rows], dtype=float)
    return Series(starts, ends, amounts / ((ends - starts) / np.timedelta64(1, "ms") / 1000.0))
