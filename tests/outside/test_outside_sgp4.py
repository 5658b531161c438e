"""Our element set reader over the SGP4 verification set.

Source: Vallado, Crawford, Hujsak and Kelso, "Revisiting Spacetrack Report #3", AIAA 2006-6753, revised
edition: the element sets ``SGP4-VER.TLE`` and the states ``tcppver.out`` that ship inside ``sgp4``.
"""

from __future__ import annotations

import math
from importlib.resources import files

import pytest
from sgp4.io import fix_checksum

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.errors import Findings

# The paper edited these sets to provoke errors and left their checksums as they were.
EDITED = (33_333, 33_334, 33_335)


def verification_text() -> str:
    """The sets without what the file adds to them: start, stop and step after column 69."""
    lines = (files("sgp4") / "SGP4-VER.TLE").read_text(encoding="ascii").splitlines()
    return "\n".join(_restored(line) for line in lines)


def _restored(line: str) -> str:
    if not line.startswith(("1 ", "2 ")):
        return line
    return fix_checksum(line) if int(line[2:7]) in EDITED else line[:69]


def expected() -> list[tuple[int, list[list[float]]]]:
    """(catalogue number, rows of minutes since epoch, km, km, km, km/s, km/s, km/s) in the order of the file."""
    blocks: list[tuple[int, list[list[float]]]] = []
    for line in (files("sgp4") / "tcppver.out").read_text(encoding="ascii").splitlines():
        words = line.split()
        if words[-1] == "xx":
            blocks.append((int(words[0]), []))
        else:
            blocks[-1][1].append([float(word) for word in words[:7]])
    return blocks


@pytest.fixture(scope="module")
def sets() -> list[ElementSet]:
    findings = Findings()
    found = parse_tle(verification_text(), "SGP4-VER.TLE", findings)
    assert not findings.problems
    return found


def test_every_set_is_read_in_order(sets):
    assert len(sets) == 33
    assert [one.catalogue_number for one in sets] == [number for number, _ in expected()]


def test_every_state_is_the_published_one(sets):
    # The reference programme holds the epoch as one Julian date (to 0.04 ms), we to less than a microsecond.
    # Sun and Moon turn that into 4 mm on the one object beyond the Moon, and less elsewhere.
    apart_km: list[float] = []
    refused: list[tuple[int, float]] = []
    for one, (number, rows) in zip(sets, expected(), strict=True):
        for minutes, *state in rows:
            fault, position_km, velocity_km_s = one.satrec.sgp4_tsince(minutes)
            if fault != 0:
                refused.append((number, minutes))
            else:
                apart_km.append(math.dist(position_km, state[:3]))
                assert math.dist(velocity_km_s, state[3:]) < 1e-8, (number, minutes)
    # The set that the paper edited "to check error code 2": the library refuses the row that the file prints.
    assert refused == [(33_334, 0.0)]
    assert len(apart_km) == 666
    assert max(apart_km) < 5e-6
    assert sum(apart < 2e-7 for apart in apart_km) > 600


def test_the_checksums_of_the_edited_sets_are_caught():
    findings = Findings()
    text = "\n".join(line[:69] for line in (files("sgp4") / "SGP4-VER.TLE").read_text("ascii").splitlines())
    found = parse_tle(text, "SGP4-VER.TLE", findings)
    assert not {one.catalogue_number for one in found} & set(EDITED)
    assert len(findings.problems) == 5
    assert all("checksum" in str(problem) for problem in findings.problems)
