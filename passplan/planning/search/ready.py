"""Compiled code is made on the first use on a machine, which takes a while; whether it is ready in time.

It is made by a process of its own, as the compiler would hold up whatever else a program does, and kept on disk. That
process goes on where the plan's time is up before, so that the next plan finds the code. One of them works at a time.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import threading
from pathlib import Path
from zlib import crc32

import numpy as np
from filelock import FileLock

from passplan.planning.clock import Clock
from passplan.planning.maps import storage_maps
from passplan.planning.option_table import build_options
from passplan.planning.problem import Antennas, Fleet, Problem, Windows
from passplan.planning.rules.terms import Lane, Terms
from passplan.planning.search.clash import find_clashes
from passplan.planning.search.compiled import came_from_disk
from passplan.planning.search.fill import fill_up
from passplan.planning.search.fleetarrays import FleetArrays, fleet_arrays
from passplan.planning.search.labels import make_work
from passplan.planning.search.rebuild import Ground, rebuild
from passplan.planning.search.sweep import Sweeper

_compiled = threading.Event()
_faults: list[Exception] = []
_compiling = threading.Lock()
# How often the clock is looked at while waiting: it may be stopped by hand.
_LOOK_S = 0.1


def compiled_in_time(clock: Clock) -> bool:
    """Wait until all compiled code is ready; False if time is up before. It then goes on behind."""
    if not _compiled.is_set():
        threading.Thread(target=_compile_all, daemon=True).start()
        while not _compiled.wait(_LOOK_S) and not clock.expired():
            if _faults:
                raise _faults[0]
    return _compiled.is_set()


def _compile_all() -> None:
    with _compiling:
        if not _compiled.is_set():
            try:
                arrays = _smallest()
                # That has called the least of the compiled functions.
                if not came_from_disk(find_clashes):
                    _compile_apart()
                _exercise(arrays)
            except Exception as fault:  # whatever it is, it belongs to whoever waits
                _faults.append(fault)
                return
            _compiled.set()


def _compile_apart() -> None:
    """Compile in another process; where that fails, whoever calls next compiles here."""
    if sys.executable:
        silent = subprocess.DEVNULL
        # A session of its own: it is neither interrupted nor ended with this one.
        subprocess.run([sys.executable, "-m", __name__], check=False, stdin=silent, stdout=silent, stderr=silent,
                       start_new_session=True)


def _smallest() -> FleetArrays:
    """A problem of one spacecraft and one option."""
    one, zero = np.ones(1), np.zeros(1, dtype=np.int64)
    options = build_options([
        {"window": 0, "spacecraft": 0, "antenna": 0, "start_s": 0, "end_s": 60, "pieces": [(0, 60, 1.0)]}])
    windows = Windows(("w",), zero, zero, zero, zero + 60)
    problem = Problem(60, Fleet(("a",), one, one, one, one), Antennas(("b",)), windows, options)
    terms = Terms(lanes=(Lane("b", "antenna_busy", options.window, options.start_s, options.end_s),))
    return fleet_arrays(problem, terms, storage_maps(problem))


def _exercise(arrays: FleetArrays) -> None:
    """Call every compiled function once."""
    one, zero = np.ones(1), np.zeros(1, dtype=np.int64)
    Sweeper(arrays)(one, 0.0)
    taken, size = np.zeros((1, arrays.most_contacts), dtype=np.int64), zero.copy()
    fill_up(arrays, np.zeros(0), taken, size, Clock(60.0))
    yes = np.ones(1, dtype=bool)
    ground = Ground(yes, yes, yes[:0], yes[:0])
    rebuild(arrays, 1, 1, 0.0, 2, 60, one, one, one[:0], one[:0], 0.0, ground, make_work(64), taken, size)


def _in_turn() -> None:
    """Compile when nobody else does, for this user and copy of the program; who comes later finds it all on disk."""
    whose = crc32(f"{Path.home()} {Path(__file__).resolve()}".encode())
    with FileLock(Path(tempfile.gettempdir()) / f"passplan-compiler-{whose:08x}.lock"):
        _exercise(_smallest())


if __name__ == "__main__":
    _in_turn()
