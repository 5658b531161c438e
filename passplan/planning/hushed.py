"""Silence on standard output while a solver runs: HiGHS now and then prints a line there that no option turns off."""

from __future__ import annotations

import ctypes
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress

_STDOUT = 1


@contextmanager
def hushed() -> Iterator[None]:
    """What C code prints in this block goes nowhere. The whole process is hushed, so nobody may print meanwhile."""
    with suppress(OSError, ValueError):
        sys.stdout.flush()
    try:
        kept = os.dup(_STDOUT)
    except OSError:
        # There is no standard output that could be spoilt.
        yield
        return
    try:
        _flush_c()
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, _STDOUT)
        os.close(nowhere)
        yield
    finally:
        # What C code has printed may still wait in its buffer.
        _flush_c()
        os.dup2(kept, _STDOUT)
        os.close(kept)


def _flush_c() -> None:
    """Flush the buffers of the C library, where there is one to be found."""
    with suppress(OSError, TypeError, AttributeError):
        ctypes.CDLL(None).fflush(None)
