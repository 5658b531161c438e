"""Bad requirements: each fault is one line that says file, key or row, value and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

REQUESTS = "sample_fleet/requests.toml"
LENGTH = "min_duration_s = 300"


@pytest.mark.parametrize(
    ("file", "old", "new", "parts"),
    [
        (REQUESTS, LENGTH, "points = 0", ("request[1]", "points", "must be above 0")),
        (REQUESTS, LENGTH, "points = 11", ("request[1]", "points", "at most 10")),
        (REQUESTS, LENGTH, "fixed = 3", ("request[1]", "fixed", "write true or false")),
        (REQUESTS, 'service = "both"', 'service = "rangin"', ("service", "write one of", "'ranging'")),
        (REQUESTS, 'service = "both"', 'service = "ranging"', ("service", "set ranging = true")),
    ],
)
def test_requirements_that_make_no_sense(
    edit: Edit, lines_of: Lines, file: str, old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(file, old, new)
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in parts:
        assert part in lines[0], (part, lines[0])
