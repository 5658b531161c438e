"""Compiled code where there is none yet: a plan does not wait for it longer than it may, the next one finds it."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

from passplan.planning.clock import Clock
from passplan.planning.search.compiled import drop_stale
from passplan.planning.search.ready import compiled_in_time

ASK = "from passplan.planning.clock import Clock; from passplan.planning.search.ready import compiled_in_time; "


def _ask(cache: Path, seconds: float) -> str:
    environment = os.environ | {"NUMBA_CACHE_DIR": str(cache)}
    code = f"{ASK} print(compiled_in_time(Clock({seconds})))"
    found = subprocess.run([sys.executable, "-c", code], env=environment, capture_output=True, text=True, check=True)
    return found.stdout.strip()


@pytest.mark.slow
def test_compiling_goes_on_when_the_time_of_a_plan_is_up_and_the_next_plan_finds_it(tmp_path: Path) -> None:
    assert _ask(tmp_path, 15.0) == "False"
    for _ in range(300):
        # The last one to be compiled.
        if any(tmp_path.rglob("rebuild.rebuild-*.nbc")):
            break
        time.sleep(1.0)
    assert _ask(tmp_path, 60.0) == "True"


def test_code_that_is_ready_needs_no_time() -> None:
    assert compiled_in_time(Clock(600.0))
    assert compiled_in_time(Clock(0.0))


def test_compiled_code_goes_when_a_module_changes_and_only_then(tmp_path: Path) -> None:
    module, code = tmp_path / "kernel.py", tmp_path / "__pycache__" / "kernel.best-7.py311.1.nbc"
    module.write_text("a = 1\n", encoding="utf-8")
    code.parent.mkdir()
    code.write_bytes(b"of unknown age")
    drop_stale(tmp_path)
    assert not code.exists()
    code.write_bytes(b"made now")
    drop_stale(tmp_path)
    assert code.exists()
    module.write_text("a = 2\n", encoding="utf-8")
    drop_stale(tmp_path)
    assert not code.exists()
