"""CSV cells: times, decimals, harmless text, and the way back."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
from hypothesis import given
from hypothesis import strategies as st

from passplan.report.csv_files import harmless, iso, printable, read_csv, write_csv


def test_times_are_iso_with_milliseconds_and_z() -> None:
    times = pd.Series(np.array(["2027-03-09T01:02:03.004", "NaT"], "datetime64[ms]"))
    assert list(iso(times)) == ["2027-03-09T01:02:03.004Z", ""]


def test_numbers_have_fixed_decimals_and_no_exponent() -> None:
    table = pd.DataFrame({"volume_mb": [1e-6, 123456789.0000004, -0.0], "peak_elevation_deg": [89.99996, 5.0, np.nan]})
    cells = printable(table)
    assert list(cells["volume_mb"]) == ["0.000001", "123456789", "0"]
    assert list(cells["peak_elevation_deg"]) == ["90", "5", ""]


def test_text_that_a_spreadsheet_would_run_is_made_harmless() -> None:
    for start in "=+-@":
        assert harmless(f"{start}1+1") == f"'{start}1+1"
    assert harmless("Ambril-1") == "Ambril-1"


@given(st.lists(st.text(st.characters(blacklist_categories=("Cs", "Cc"))), min_size=1, max_size=5))
def test_text_comes_back_as_it_went(cells: list[str]) -> None:
    path = Path("/dev/shm" if Path("/dev/shm").is_dir() else ".") / "passplan-cells.csv"
    try:
        write_csv(pd.DataFrame({"note": pd.Series(cells, dtype=object), "n": range(len(cells))}), path)
        assert list(read_csv(path)["note"]) == cells
    finally:
        path.unlink(missing_ok=True)


def test_a_table_comes_back(short_plan, tmp_path: Path) -> None:  # type: ignore[no-untyped-def]
    for name in ("windows", "contacts", "segments", "unused"):
        table = getattr(short_plan, name)
        write_csv(table, tmp_path / f"{name}.csv")
        back = read_csv(tmp_path / f"{name}.csv")
        assert list(back.columns) == list(table.columns)
        assert len(back) == len(table)
        for column in table.columns:
            if column.endswith("_utc"):
                assert (back[column].to_numpy("datetime64[ms]") == table[column].to_numpy("datetime64[ms]")).all()
            elif pd.api.types.is_float_dtype(table[column]):
                np.testing.assert_allclose(back[column], table[column], atol=6e-4)
            else:
                assert list(back[column].astype(str)) == list(table[column].astype(str)), column
