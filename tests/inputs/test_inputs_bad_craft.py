"""Faults in what the user says of a spacecraft's limits: one line each, with file, key, value and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

FLEET = "sample_fleet/fleet.toml"
STORAGE = "storage_mb = 16000"


@pytest.mark.parametrize(
    ("written", "parts"),
    [
        ("contact_gap_s = -1", ("contact_gap_s", "-1", "must be at least 0")),
        ("contact_gap = 60", ("contact_gap", "did you mean 'contact_gap_s'?")),
        ("cool_down_s = 100000", ("cool_down_s", "100000", "must be at most 86400")),
        ('cool_down_s = "long"', ("cool_down_s", "long", "write a number")),
    ],
)
def test_limits_of_spacecraft(
    edit: Callable[[str, str, str], Path], lines_of: Callable[[], list[str]], written: str, parts: tuple[str, ...]
) -> None:
    edit(FLEET, STORAGE, f"{STORAGE}\n{written}")
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in ("fleet.toml", "spacecraft[1] (Ambril-1)", *parts):
        assert part in lines[0], (part, lines[0])
