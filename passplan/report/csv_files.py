"""Tables as CSV: the columns, the times and the numbers exactly as every other part expects them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

# Enough digits that a reader loses nothing that matters: a byte of volume, a ten-thousandth of a degree or dB.
_DECIMALS = {
    "_mb": 6, "_deg": 4, "_db": 4, "_km": 3, "_s": 3, "_mbps": 9, "_mhz": 6, "value": 6, "weight": 6, "cost": 6,
}
# A spreadsheet takes a cell that starts with one of these for a formula.
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")


def iso(times: pd.Series) -> pd.Series:
    """UTC instants as ISO 8601 text with milliseconds and ``Z``; missing ones as empty text."""
    text = np.datetime_as_string(times.to_numpy("datetime64[ms]"), unit="ms")
    return pd.Series(np.where(times.isna(), "", np.char.add(text, "Z")), index=times.index, dtype=object)


def printable(table: pd.DataFrame) -> pd.DataFrame:
    """``table`` as text cells: ISO times, fixed decimals, and no cell that a spreadsheet would run."""
    cells = {}
    for name in table.columns:
        column = table[name]
        if pd.api.types.is_datetime64_any_dtype(column):
            cells[name] = iso(column)
        elif pd.api.types.is_float_dtype(column):
            decimals = next((n for end, n in _DECIMALS.items() if name.endswith(end)), 6)
            cells[name] = column.map(lambda x, d=decimals: "" if pd.isna(x) else _fixed(x, d))
        elif pd.api.types.is_integer_dtype(column) or pd.api.types.is_bool_dtype(column):
            cells[name] = column.astype(str)
        else:
            cells[name] = column.map(lambda x: "" if pd.isna(x) else harmless(str(x)))
    return pd.DataFrame(cells, columns=list(table.columns))


def harmless(cell: str) -> str:
    """``cell`` with an apostrophe in front where a spreadsheet could take it for a formula."""
    return "'" + cell if cell.startswith(_FORMULA_STARTS) else cell


def write_csv(table: pd.DataFrame, path: Path) -> None:
    """Write ``table`` to ``path`` as UTF-8 CSV with ``\\n`` line ends; raises OSError if it cannot be written."""
    printable(table).to_csv(path, index=False, lineterminator="\n", encoding="utf-8")


def read_csv(path: Path) -> pd.DataFrame:
    """Read a table that :func:`write_csv` wrote: ``*_utc`` columns as datetime64[ms], the rest by content."""
    table = pd.read_csv(path, keep_default_na=False, na_values={}, dtype=str, encoding="utf-8")
    for name in table.columns:
        if name.endswith("_utc"):
            table[name] = pd.to_datetime(table[name].str.rstrip("Z"), format="ISO8601").astype("datetime64[ms]")
        elif any(name.endswith(end) for end in _DECIMALS):
            table[name] = pd.to_numeric(table[name])
        else:
            table[name] = table[name].map(lambda x: x[1:] if x[:1] == "'" and x[1:2] in _FORMULA_STARTS else x)
    return table


def _fixed(number: float, decimals: int) -> str:
    text = f"{number:.{decimals}f}"
    if "." in text:
        text = text.rstrip("0").rstrip(".")
    return "0" if text == "-0" else text
