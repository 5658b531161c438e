"""Ctrl-C during ``passplan plan``: the plan so far is audited, written and called what it is."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[2]
# The interrupt comes when the exact model is about to be solved, whatever the machine's speed.
SCRIPT = """
import signal
import passplan.planning.portfolio as portfolio
solve = portfolio.most_value

def interrupted(*given, **named):
    signal.raise_signal(signal.SIGINT)
    return solve(*given, **named)

portfolio.most_value = interrupted
from passplan.cli import main
main()
"""


def test_an_interrupted_plan_is_written_and_says_so(tmp_path: Path) -> None:
    out = tmp_path / "plan"
    done = subprocess.run(
        [sys.executable, "-c", SCRIPT, "plan", str(ROOT / "configs" / "daily.toml"), "--out", str(out), "--gap", "0",
         "--quiet"], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert "Stopped by hand" in done.stderr
    summary = json.loads((out / "plan.json").read_text())
    assert summary["stopped_by_hand"] is True
    assert summary["status"] == "stopped_by_limit"
    assert summary["contacts"] > 0
