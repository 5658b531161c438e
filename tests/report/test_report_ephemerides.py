"""Ephemeris messages, read back by our own reader and compared with where they came from."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from passplan.geometry.oem_states import ephemeris_itrf
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.errors import Findings
from passplan.inputs.oem import parse_oem
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.ephemerides import oem_text, write_ephemerides


@pytest.fixture(scope="module")
def messages(short_plan: PlanRecord, short_run: Run, tmp_path_factory: pytest.TempPathFactory) -> dict[str, Ephemeris]:
    folder = tmp_path_factory.mktemp("oem")
    found = {}
    for path in write_ephemerides(short_plan, short_run, folder):
        findings = Findings()
        message = parse_oem(path.read_bytes(), path, findings)
        findings.raise_if_any()
        assert findings.warnings == []
        assert message is not None
        found[path.stem] = message
    return found


def test_one_for_each_planned_spacecraft(messages: dict[str, Ephemeris], short_plan: PlanRecord) -> None:
    assert set(messages) == set(short_plan.summary["spacecraft"])
    for name, message in messages.items():
        assert message.object_name == name
        assert message.object_id.startswith("20")
        assert "-" in message.object_id


def test_states_between_the_nodes_agree_to_a_centimetre(messages: dict[str, Ephemeris], short_run: Run) -> None:
    first, last = float(utc_seconds(short_run.start_utc)), float(utc_seconds(short_run.end_utc))
    times = np.linspace(first, last, 4_001)
    for name, message in messages.items():
        positions, velocities = states_itrf(short_run.orbits[name], times)
        back, speeds = ephemeris_itrf(message, times)
        assert np.linalg.norm(back - positions, axis=1).max() < 1e-5, name
        assert np.linalg.norm(speeds - velocities, axis=1).max() < 1e-7, name


def test_the_usable_span_is_the_horizon(messages: dict[str, Ephemeris], short_run: Run) -> None:
    for message in messages.values():
        (segment,) = message.segments
        assert segment.usable_start == float(utc_seconds(short_run.start_utc))
        assert segment.usable_stop == float(utc_seconds(short_run.end_utc))


def test_an_ephemeris_with_a_gap_becomes_segments(
    messages: dict[str, Ephemeris], short_run: Run, tmp_path: Path
) -> None:
    whole = messages["Ambril-1"]
    (segment,) = whole.segments
    cuts = (slice(0, 200), slice(260, segment.epochs.size))
    parts = tuple(
        type(segment)(
            segment.frame,
            segment.time_system,
            segment.epochs[cut],
            segment.positions_km[cut],
            segment.velocities_km_s[cut],
            float(segment.epochs[cut][0]),
            float(segment.epochs[cut][-1]),
            segment.interpolation,
            segment.interpolation_degree,
        )
        for cut in cuts
    )
    gappy = Ephemeris(whole.object_name, whole.object_id, parts, tmp_path)
    text = oem_text("Ambril-1", gappy, short_run.start_utc, short_run.end_utc, 60.0, "x")
    assert text.count("META_START") == 2
    findings = Findings()
    back = parse_oem(text.encode(), "x.oem", findings)
    assert back is not None
    assert len(back.segments) == 2
    assert len(findings.warnings) == 1
    assert "no states for" in findings.warnings[0]


@pytest.mark.parametrize(
    ("name", "written"),
    [
        ("Ambril-1", "Ambril-1"),
        ("Ærø Küste №3", "\\xc6r\\xf8 Kuste No3"),
        ("צופה-1", "\\u05e6\\u05d5\\u05e4\\u05d4-1"),
        ("x" * 400, "x" * 200),
        ("tab\tand\u202ebent\nline", "tab andbent line"),
    ],
)
def test_lines_are_short_and_of_printable_ascii_whatever_the_name(short_run: Run, name: str, written: str) -> None:
    # CCSDS 502.0-B-3, 7.3 and 7.4 (from memory): at most 254 characters in a line, printable ASCII and blanks.
    text = oem_text(name, short_run.orbits["Ambril-1"], short_run.start_utc, short_run.end_utc, 600.0, "x")
    lines = text.splitlines()
    assert f"OBJECT_NAME = {written}" in lines
    assert all(len(line) <= 254 for line in lines)
    assert all(" " <= one <= "~" for line in lines for one in line)
    back = parse_oem(text.encode("ascii"), "x.oem", Findings())
    assert back is not None
    assert back.object_name == written


def test_an_orbit_without_states_gives_no_message(messages: dict[str, Ephemeris], short_run: Run) -> None:
    late = short_run.end_utc + np.timedelta64(30, "D")
    assert oem_text("Ambril-1", messages["Ambril-1"], late, late + np.timedelta64(1, "D"), 60.0, "x") == ""
