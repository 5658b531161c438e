"""Ctrl-C: once for the best plan so far, twice to end."""

from __future__ import annotations

import signal
import subprocess
import sys
import threading
from pathlib import Path

import pytest
from planning_cases import problem_of

from passplan.planning.clock import Clock
from passplan.planning.interrupt import stops_by_hand
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits

# A network that no search finishes: 40 spacecraft with equal claims to 7 antennas. It says when it has begun.
SCRIPT = """
import sys
sys.path.insert(0, sys.argv[1])
from planning_cases import problem_of
from passplan.planning.interrupt import leave
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits
rows = [{"spacecraft": k % 40, "antenna": k % 7, "start_s": 60 * (k % 90), "end_s": 60 * (k % 90) + 480,
         "pieces": [(60 * (k % 90) + 30, 60 * (k % 90) + 480, 1.0 + k % 5 / 7)]} for k in range(1800)]
many = {name: (value,) * 40 for name, value in (
    ("weight", 1.0), ("generation", 0.4), ("capacity", 700.0), ("start", 200.0))}
problem = problem_of(rows, prepare_s=(60,) * 7, release_s=(0,) * 7, **many)
result = find_plan(problem, Limits(gap=0.0, time_limit_s=900.0, exact_options=int(sys.argv[2])),
                   progress=lambda *_: print("going", flush=True))
print("ended", result.status, result.stopped_by_hand, len(result.chosen), flush=True)
leave(0)
"""


# The same in a network of one contact that is at work for a minute after it has said so.
SLOW = """
import sys, time
sys.path.insert(0, sys.argv[1])
from planning_cases import problem_of
from passplan.planning.portfolio import find_plan
find_plan(problem_of([{"start_s": 600, "end_s": 900, "pieces": [(600, 900, 1.0)]}]),
          progress=lambda *_: (print("going", flush=True), time.sleep(60)))
"""


def started(exact_options: int, script: str = SCRIPT) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, "-c", script, str(Path(__file__).parent), str(exact_options)], stdout=subprocess.PIPE,
        stderr=subprocess.PIPE, text=True)


@pytest.mark.parametrize("exact_options", [0, 10_000], ids=["search", "exact"])
def test_the_first_interrupt_gives_the_best_plan_so_far(exact_options: int) -> None:
    process = started(exact_options)
    assert process.stdout is not None
    assert process.stdout.readline() == "going\n"
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=300)
    assert process.returncode == 0, err
    ended = out.splitlines()[-1].split()
    assert ended[:3] == ["ended", "stopped_by_limit", "True"]
    assert int(ended[3]) > 0


def test_the_second_interrupt_ends_the_process() -> None:
    process = started(0, SLOW)
    assert process.stdout is not None
    assert process.stdout.readline() == "going\n"
    process.send_signal(signal.SIGINT)
    # The first one asks for the best plan so far, and lets the work in hand go on.
    with pytest.raises(subprocess.TimeoutExpired):
        process.wait(timeout=1.0)
    process.send_signal(signal.SIGINT)
    _, err = process.communicate(timeout=30)
    assert process.returncode == -signal.SIGINT
    assert err.splitlines()[-1] == "KeyboardInterrupt"


def test_another_thread_leaves_the_handlers_alone() -> None:
    found = []
    problem = problem_of([{"start_s": 600, "end_s": 1_200, "pieces": [(630, 1_200, 2.0)]}])
    thread = threading.Thread(target=lambda: found.append(find_plan(problem, Limits(gap=0.0))))
    thread.start()
    thread.join()
    assert found[0].value == pytest.approx(570 * 2.0)


def test_the_second_interrupt_is_one_and_a_handler_that_is_there_stays() -> None:
    before = signal.getsignal(signal.SIGINT)
    try:
        signal.signal(signal.SIGINT, signal.default_int_handler)
        clock = Clock(60.0)
        with stops_by_hand(clock):
            signal.raise_signal(signal.SIGINT)
            assert clock.stopped
            with pytest.raises(KeyboardInterrupt):
                signal.raise_signal(signal.SIGINT)
        assert signal.getsignal(signal.SIGINT) is signal.default_int_handler
        signal.signal(signal.SIGINT, signal.SIG_IGN)
        with stops_by_hand(Clock(60.0)):
            assert signal.getsignal(signal.SIGINT) is signal.SIG_IGN
    finally:
        signal.signal(signal.SIGINT, before)
