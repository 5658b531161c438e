"""Bad input about antennas, sites and money: each fault is one line that says what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

GROUND = "sample_fleet/ground.toml"


@pytest.mark.parametrize(("keys", "parts"), [
    ('service = "downlink"', ("antenna[1]", "setup", "give prepare_s or release_s")),
    ("prepare_s = 90", ("antenna[1]", "say which contacts are meant")),
    ("low_mhz = 8000\nprepare_s = 90", ("antenna[1]", "both low_mhz and high_mhz")),
    ("low_mhz = 9000\nhigh_mhz = 8000\nprepare_s = 90", ("low_mhz 9000 is above high_mhz 8000", "swap")),
    ('service = "uplink"\nprepare_s = 90', ("service", "uplink", "downlink")),
    ('service = "both"\nprepare_s = -9', ("prepare_s", "-9", "at least 0")),
])
def test_setup_times(edit: Edit, lines_of: Lines, keys: str, parts: tuple[str, ...]) -> None:
    edit(GROUND, "\n# Receive only, under a radome.", f"[[antenna.setup]]\n{keys}\n\n# Receive only, under a radome.")
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines
