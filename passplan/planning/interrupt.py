"""Ctrl-C while a plan is looked for: once asks for the best plan so far, twice ends the program as ever."""

from __future__ import annotations

import os
import signal
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType
from typing import NoReturn

from passplan.planning.clock import Clock


@contextmanager
def stops_by_hand(clock: Clock) -> Iterator[None]:
    """While the block runs, the first interrupt stops ``clock`` and the second raises ``KeyboardInterrupt``.

    Where the program has a handler of its own, or this is not the main thread (which alone may have one), nothing
    changes.
    """
    if (threading.current_thread() is not threading.main_thread()
            or signal.getsignal(signal.SIGINT) is not signal.default_int_handler):
        yield
        return

    def first(_signal: int, _frame: FrameType | None) -> None:
        clock.stop()
        signal.signal(signal.SIGINT, signal.default_int_handler)

    signal.signal(signal.SIGINT, first)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, signal.default_int_handler)


def leave(code: int) -> NoReturn:
    """End the program at once after a stop by hand: a solver that cannot be interrupted may still be at work behind.

    What was printed is printed; nothing else is tidied up.
    """
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(code)
