"""Limits of power flux density at the ground: the built-in table and the user's own."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from pathlib import Path
from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.errors import Findings
from passplan.inputs.reader import Reader
from passplan.inputs.records import Record
from passplan.inputs.tables import checked, read_csv_records

_ARTICLE_21 = "ITU Radio Regulations, Art. 21, Table 21-4, from memory: verify"


class PfdLimit(Record):
    """One point of a limit: power flux density in a reference bandwidth at an angle of arrival.

    Points of one band are joined by straight lines over the angle of arrival and are level beyond them.
    """

    low_mhz: Annotated[float, Field(ge=100.0, le=50_000.0)]
    high_mhz: Annotated[float, Field(ge=100.0, le=50_000.0)]
    arrival_deg: Annotated[float, Field(ge=0.0, le=90.0)]
    limit_dbw_per_m2: Annotated[float, Field(ge=-250.0, le=0.0)]
    bandwidth_hz: Annotated[float, Field(gt=0.0, le=1e9)] = 4_000.0
    source: str = "the user's table"

    @model_validator(mode="after")
    def _consistent(self) -> PfdLimit:
        if self.low_mhz > self.high_mhz:
            raise ValueError(f"low_mhz {self.low_mhz:g} is above high_mhz {self.high_mhz:g}; swap them")
        return self


def builtin_pfd_limits() -> tuple[PfdLimit, ...]:
    """Limits for the bands of the trade's downlinks: -150 to -140 dB(W/m2/4 kHz) at X band, and so on."""
    bands = ((2_200.0, 2_290.0, 4e3, -154.0), (8_025.0, 8_400.0, 4e3, -150.0), (25_500.0, 27_000.0, 1e6, -115.0))
    return tuple(
        PfdLimit(low_mhz=low, high_mhz=high, arrival_deg=angle, limit_dbw_per_m2=base + more, bandwidth_hz=width,
                 source=_ARTICLE_21)
        for low, high, width, base in bands
        for angle, more in ((5.0, 0.0), (25.0, 10.0))
    )


def read_pfd_limits(path: Path, reader: Reader, findings: Findings) -> tuple[PfdLimit, ...]:
    """The user's CSV: ``low_mhz, high_mhz, arrival_deg, limit_dbw_per_m2, bandwidth_hz, source``, by rising angle."""
    placed = [
        (where, checked(PfdLimit, record, path, where, findings))
        for where, record in read_csv_records(path, reader, findings)
    ]
    rows = [(where, row) for where, row in placed if row is not None]
    for (_, before), (where, row) in pairwise(rows):
        same = (before.low_mhz, before.high_mhz) == (row.low_mhz, row.high_mhz)
        if same and not row.arrival_deg > before.arrival_deg:
            remedy = "angles of one band must rise; sort the rows"
            findings.problem(path, f"{where}.arrival_deg", row.arrival_deg, remedy)
    return tuple(row for _, row in rows)


def limits_at(limits: Sequence[PfdLimit], frequency_mhz: float) -> tuple[PfdLimit, ...]:
    """The points of the first band that holds the frequency; empty where none does."""
    band = next(((p.low_mhz, p.high_mhz) for p in limits if p.low_mhz <= frequency_mhz <= p.high_mhz), None)
    return tuple(p for p in limits if (p.low_mhz, p.high_mhz) == band)
