"""The chart of a link in the terminal: what is drawn stands for the numbers, without colour and at any width."""

from __future__ import annotations

import io

import numpy as np
import pandas as pd
import pytest
from rich.console import Console

from passplan.report.link_chart import chart_columns, link_chart


def _along(width: int, margins: list[float], modcods: list[str], direction: str = "downlink") -> pd.DataFrame:
    count = chart_columns(width)
    place = np.linspace(0, len(margins) - 1e-6, count).astype(int)
    rates = {name: 50.0 * k for k, name in enumerate(dict.fromkeys(["", *modcods]))}
    return pd.DataFrame({
        "utc": np.datetime64("2027-03-09T06:00:00", "ms") + (6_000 * np.arange(count)).astype("timedelta64[ms]"),
        "direction": direction, "margin_db": np.array(margins)[place], "elevation_deg": np.linspace(5.0, 85.0, count),
        "modcod": [modcods[k] for k in place], "rate_mbps": [rates[modcods[k]] for k in place],
    })


def _lines(along: pd.DataFrame, width: int) -> list[str]:
    out = io.StringIO()
    Console(file=out, width=width, color_system=None).print(link_chart(along, 3.0))
    return out.getvalue().splitlines()


@pytest.mark.parametrize("width", [60, 80, 100, 140])
def test_the_chart_fits_and_names_the_modcods(width: int) -> None:
    lines = _lines(_along(width, [1.0, 3.5, 6.0, 12.0], ["", "QPSK 1/2", "8PSK 2/3", "8PSK 2/3"]), width)
    assert max(len(line.rstrip()) for line in lines) <= width
    # A third of the columns and more hold each: nothing, QPSK, and twice as much of 8PSK.
    named = next(line for line in lines if "│" in line)
    assert [name for name in ("none", "QPSK 1/2", "8PSK 2/3") if name in named] == ["none", "QPSK 1/2", "8PSK 2/3"]
    assert "06:00:00" in next(line for line in lines if line.strip().startswith("UTC"))
    assert any("5°" in line for line in lines if line.strip().startswith("elev."))


def test_columns_are_as_high_as_the_margin() -> None:
    lines = _lines(_along(100, [2.0, 12.0], ["", "QPSK 1/2"]), 100)
    rows = [line[9:].ljust(90) for line in lines[1:7]]
    low, high = [row[10] for row in rows], [row[80] for row in rows]
    # Rows of 2 dB: 12 dB fill all six, 2 dB the lowest, marked as not held; the row of the 3 dB asked is dashed.
    assert high == ["█"] * 6
    assert low == [" ", " ", " ", " ", "┄", "░"]
    assert lines[5].strip().startswith("≥3")


def test_a_command_link_has_no_rates_and_many_steps_are_counted() -> None:
    command = "\n".join(_lines(_along(100, [10.0], ["command"], "command"), 100))
    assert "Mbit/s" not in command
    many = _lines(_along(100, [3.0] * 30, [f"modcod {k}" for k in range(30)]), 100)
    assert "29 changes between 30 modcods" in many[-1]
