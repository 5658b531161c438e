"""Tables as plain rows: what is read row by row is many times faster so than through a DataFrame."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from typing import Any

import pandas as pd

Row = dict[Any, Any]


def rows(table: pd.DataFrame) -> list[Row]:
    """The rows in order, each with its position in the table under ``number``."""
    found: list[Row] = table.to_dict("records")
    for number, row in enumerate(found):
        row["number"] = number
    return found


def grouped(listed: Sequence[Row], key: str) -> dict[Any, list[Row]]:
    """Rows by the value of one column, in order."""
    found: defaultdict[Any, list[Row]] = defaultdict(list)
    for row in listed:
        found[row[key]].append(row)
    return found
