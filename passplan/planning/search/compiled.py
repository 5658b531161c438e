"""The one place where numba is met: compiled on first use, kept on disk, free of the interpreter's lock.

What is kept on disk goes by the time stamp of a function's own file, so that after a change to a function its callers
would keep the old one. All of it is therefore dropped when any module of this package has changed.
"""

from __future__ import annotations

from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
from typing import Any, TypeVar, cast
from zlib import crc32

import numba

from passplan.planning.arrays import Floats, Integers

F = TypeVar("F", bound=Callable[..., Any])


def drop_stale(package: Path) -> None:
    """Remove compiled code that was made when the modules of ``package`` were others."""
    kept, now = package / "__pycache__", 0
    for module in sorted(package.glob("*.py")):
        now = crc32(module.read_bytes(), now)
    stamp = kept / "compiled-from.txt"
    # Where nothing can be written, numba keeps its code elsewhere.
    with suppress(OSError):
        if not stamp.exists() or stamp.read_text(encoding="ascii") != f"{now:08x}":
            for old in kept.glob("*.nb?"):
                old.unlink(missing_ok=True)
            kept.mkdir(exist_ok=True)
            stamp.write_text(f"{now:08x}", encoding="ascii")


drop_stale(Path(__file__).parent)
_OPTIONS: dict[str, Any] = {"cache": True, "nogil": True}
# Doors through which the interpreter calls; with tens of arrays they take as long to make as the function itself.
_NO_DOORS: dict[str, Any] = {"no_cpython_wrapper": True, "no_cfunc_wrapper": True}


def compiled(function: F) -> F:
    """Compile a function of arrays and numbers; it may run beside others in threads."""
    return cast(F, numba.njit(**_OPTIONS)(function))


def inner(function: F) -> F:
    """Compile a function that compiled ones alone call."""
    return cast(F, numba.njit(**_OPTIONS, **_NO_DOORS)(function))


def inlined(function: F) -> F:
    """Compile a small function into each of its callers: a call that hands on many arrays costs more than it does."""
    return cast(F, numba.njit(**_OPTIONS, **_NO_DOORS, forceinline=True)(function))


def came_from_disk(function: Callable[..., Any]) -> bool:
    """Whether a compiled function that has been called was found on disk."""
    return bool(cast(Any, function).stats.cache_hits)


@inlined
def move_to(target: Floats | Integers, at: int, source: Floats | Integers, low: int, high: int) -> None:
    """``target[at:] = source[low:high]``, a number at a time: numba takes seconds to compile the short way."""
    for k in range(high - low):
        target[at + k] = source[low + k]
