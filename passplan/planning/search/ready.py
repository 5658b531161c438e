"""Compiled code is made on the first use on a machine, which takes a while; whether it is ready in time."""

from __future__ import annotations

import threading

import numpy as np

from passplan.planning.clock import Clock
from passplan.planning.maps import storage_maps
from passplan.planning.option_table import build_options
from passplan.planning.problem import Antennas, Fleet, Problem, Windows
from passplan.planning.rules.terms import Lane, Terms
from passplan.planning.search.fill import fill_up
from passplan.planning.search.fleetarrays import fleet_arrays
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
                _exercise()
            except Exception as fault:  # whatever it is, it belongs to whoever waits
                _faults.append(fault)
                return
            _compiled.set()


def _exercise() -> None:
    """Call every compiled function once, on a problem of one spacecraft and one option."""
    one, zero = np.ones(1), np.zeros(1, dtype=np.int64)
    options = build_options([
        {"window": 0, "spacecraft": 0, "antenna": 0, "start_s": 0, "end_s": 60, "pieces": [(0, 60, 1.0)]}])
    windows = Windows(("w",), zero, zero, zero, zero + 60)
    problem = Problem(60, Fleet(("a",), one, one, one, one), Antennas(("b",)), windows, options)
    terms = Terms(lanes=(Lane("b", "antenna_busy", options.window, options.start_s, options.end_s),))
    arrays = fleet_arrays(problem, terms, storage_maps(problem))
    Sweeper(arrays)(one, 0.0)
    taken, size = np.zeros((1, arrays.most_contacts), dtype=np.int64), zero.copy()
    fill_up(arrays, np.zeros(0), taken, size, Clock(60.0))
    yes = np.ones(1, dtype=bool)
    ground = Ground(yes, yes, yes[:0], yes[:0])
    rebuild(arrays, 1, 1, 0.0, 2, 60, one, one, one[:0], one[:0], 0.0, ground, make_work(64), taken, size)
