"""The time limit of one plan: everything after windows and links are known counts against it."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager


class Clock:
    """Counts down from ``limit_s`` and notes how long each stage took. It can be stopped by hand before that."""

    def __init__(self, limit_s: float, whole: Clock | None = None) -> None:
        self._started = time.monotonic()
        self._limit_s = limit_s
        self._whole = whole
        self.seconds: dict[str, float] = {} if whole is None else whole.seconds
        self._stopped = False

    def stop(self) -> None:
        """Time is up from now on. Safe to call from a signal handler or another thread."""
        self._stopped = True

    @property
    def stopped(self) -> bool:
        """Whether it was stopped by hand, it or the clock that it is a part of."""
        return self._stopped or (self._whole is not None and self._whole.stopped)

    def part(self, limit_s: float) -> Clock:
        """A clock for a part of the work, of at most ``limit_s``, that is stopped with this one."""
        return Clock(min(limit_s, self.left_s()), self)

    def elapsed_s(self) -> float:
        """Seconds since the clock was made."""
        return time.monotonic() - self._started

    def left_s(self) -> float:
        """Seconds left, never negative; 0 once it was stopped."""
        return 0.0 if self.stopped else max(0.0, self._limit_s - self.elapsed_s())

    def expired(self) -> bool:
        """Whether the time is up."""
        return self.left_s() <= 0.0

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Add the time of a block to ``seconds[name]``."""
        began = time.monotonic()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.monotonic() - began
