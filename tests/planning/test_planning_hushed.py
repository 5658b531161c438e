"""Standard output stays clean while a solver runs."""

from __future__ import annotations

import ctypes

import pytest

from passplan.planning.hushed import hushed


def test_what_c_code_prints_while_a_solver_runs_goes_nowhere(capfd: pytest.CaptureFixture[str]) -> None:
    library = ctypes.CDLL(None)
    with hushed():
        library.printf(b"a line of the solver\n")
    library.printf(b"a line of the program\n")
    library.fflush(None)
    assert capfd.readouterr().out == "a line of the program\n"
