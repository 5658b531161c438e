"""OMM as a table: one row for each object, the keywords of the standard as column names."""

from __future__ import annotations

from pathlib import Path

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.omm import MANDATORY, sets_of
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.reader import Reader
from passplan.inputs.tables import read_csv_records


def parse_omm_csv(path: Path, reader: Reader, findings: Findings) -> list[ElementSet]:
    """All sound element sets in the table; each fault is noted as a problem naming row and column."""
    rows = read_csv_records(path, reader, findings)
    filled = {column for _, row in rows for column in row}
    # Name and designator may be empty cells, and a column of empty cells is not in the rows at all.
    missing = [column for column in MANDATORY if column not in filled and column not in ("OBJECT_NAME", "OBJECT_ID")]
    if rows and missing:
        for column in missing:
            findings.problem(path, "row 1", None, f"column {column} is missing or empty; {_hint(column, filled)}")
        return []
    return sets_of([(where, {"OBJECT_NAME": "", "OBJECT_ID": "", **row}) for where, row in rows], path, findings)


def _hint(column: str, present: set[str]) -> str:
    hint = nearest(column, present - set(MANDATORY))
    return hint if hint.startswith("did you mean") else "add it"
