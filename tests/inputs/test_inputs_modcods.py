from __future__ import annotations

from pathlib import Path

import pytest

from passplan.inputs.errors import Findings
from passplan.inputs.modcods import (
    ModcodTable,
    builtin_names,
    builtin_table,
    read_modcod_table,
    shannon_limit_bit_per_symbol,
)
from passplan.inputs.reader import Reader

HEADER = "modcod,spectral_efficiency_bit_per_symbol,required_esn0_db\n"


def _read(tmp_path: Path, rows: str, header: str = HEADER) -> tuple[ModcodTable | None, list[str]]:
    path = tmp_path / "mine.csv"
    path.write_text(header + rows, encoding="utf-8")
    findings = Findings()
    table = read_modcod_table(path, Reader(tmp_path), findings)
    return table, [str(problem) for problem in findings.problems]


def test_the_built_in_table() -> None:
    table = builtin_table("dvb-s2")
    assert builtin_names() == ("dvb-s2", "ccsds")
    assert len(table.rows) == 28
    assert len({row.name for row in table.rows}) == 28
    assert "EN 302 307-1" in table.source


def test_an_unknown_table_names_the_nearest() -> None:
    with pytest.raises(KeyError, match="did you mean 'dvb-s2'"):
        builtin_table("dvb-s")


def test_a_table_of_the_user_s(tmp_path: Path) -> None:
    table, problems = _read(tmp_path, "BPSK 1/2,0.5,-1.5\nQPSK 1/2,0.98,1.2\nQPSK 3/4,1.48,4.2\n")
    assert problems == []
    assert table is not None
    assert table.name == "mine"
    assert [row.required_esn0_db for row in table.rows] == [-1.5, 1.2, 4.2]
    assert "mine.csv" in table.source


def test_the_built_in_table_read_from_a_file_is_in_order(tmp_path: Path) -> None:
    rows = "".join(
        f"{row.name},{row.efficiency_bit_per_symbol},{row.required_esn0_db}\n" for row in builtin_table("dvb-s2").rows
    )
    table, problems = _read(tmp_path, rows)
    assert problems == []
    assert table is not None
    assert table.rows == builtin_table("dvb-s2").rows


@pytest.mark.parametrize(
    ("rows", "place", "words"),
    [
        ("QPSK 1/2,0.98,1.2\nQPSK 1/2,1.2,2.2\n", "row 3.modcod", "already stands at row 2"),
        ("QPSK 1/2,2.5,1.2\n", "row 2.spectral_efficiency", "beyond Shannon's bound of 1.21"),
        ("QPSK 3/4,1.48,4.2\nQPSK 1/2,0.98,1.2\n", "row 3", "out of order after 'QPSK 3/4' at row 2"),
        ("QPSK 1/2,0.98,4.2\nQPSK 3/4,1.48,4.0\n", "row 3", "must both rise"),
        ("M1,1.48,4.2\nM2,0.98,1.2\n", "row 3", "out of order"),
        ("QPSK 1/2,0,1.2\n", "row 2.spectral_efficiency_bit_per_symbol", "above 0"),
        ("QPSK 1/2,much,1.2\n", "row 2.spectral_efficiency_bit_per_symbol", "write a number"),
        ("QPSK 1/2,0.98\n", "row 2", "cells"),
        ("", "", "no rows"),
    ],
)
def test_faults_are_one_clear_line_each(tmp_path: Path, rows: str, place: str, words: str) -> None:
    table, problems = _read(tmp_path, rows)
    assert table is None
    assert len(problems) == 1
    assert place in problems[0]
    assert words in problems[0]


def test_an_unknown_column_names_the_nearest(tmp_path: Path) -> None:
    table, problems = _read(tmp_path, "QPSK 1/2,0.98,1.2,3\n", HEADER.strip() + ",required_esno_db\n")
    assert table is None
    assert "required_esn0_db" in problems[0]


def test_a_missing_file(tmp_path: Path) -> None:
    findings = Findings()
    assert read_modcod_table(tmp_path / "gone.csv", Reader(tmp_path), findings) is None
    assert "no such file" in str(findings.problems[0])


def test_shannon_s_bound() -> None:
    # log2(1 + 1) at 0 dB and log2(1 + 10) at 10 dB.
    assert shannon_limit_bit_per_symbol(0.0) == pytest.approx(1.0)
    assert shannon_limit_bit_per_symbol(10.0) == pytest.approx(3.459, abs=1e-3)
