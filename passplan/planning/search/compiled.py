"""The one place where numba is met: compiled on first use, kept on disk, free of the interpreter's lock.

What is kept on disk goes by the time stamp of a function's own file. After a change to a function that others
call, remove ``search/__pycache__/*.nb?``, or the callers keep the old one.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba

from passplan.planning.arrays import Floats, Integers

F = TypeVar("F", bound=Callable[..., Any])


def compiled(function: F) -> F:
    """Compile a function of arrays and numbers; it may run beside others in threads."""
    return cast(F, numba.njit(cache=True, nogil=True)(function))


def inner(function: F) -> F:
    """Compile a function that compiled ones alone call: without a door for the interpreter, which takes long to make."""
    return cast(F, numba.njit(cache=True, nogil=True, no_cpython_wrapper=True, no_cfunc_wrapper=True)(function))


def inlined(function: F) -> F:
    """Compile a small function into each of its callers: a call that hands on many arrays costs more than it does."""
    return cast(F, numba.njit(
        cache=True, nogil=True, forceinline=True, no_cpython_wrapper=True, no_cfunc_wrapper=True)(function))


@inlined
def move_to(target: Floats | Integers, at: int, source: Floats | Integers, low: int, high: int) -> None:
    """``target[at:] = source[low:high]``, a number at a time: numba takes seconds to compile the short way."""
    for k in range(high - low):
        target[at + k] = source[low + k]
