"""Bracketed Newton iteration for many roots at once."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import Floats

Indices = NDArray[np.int64]
Flags = NDArray[np.bool_]
# Called with x (n,) and the data of the roots still sought; returns value and derivative at x.
Function = Callable[..., tuple[Floats, Floats]]

_MOST_STEPS = 100
_FORETOLD = 0.01


def solve(
    function: Function,
    data: Sequence[Floats],
    low: Floats,
    high: Floats,
    guess: Floats,
    rising: Flags | bool,
    tolerance: float,
) -> Floats:
    """One root in each bracket [low, high], where ``function(x, *data)`` rises (or falls) through zero.

    ``low, high, guess`` are (n,), ``rising`` too or one for all; arrays of ``data`` have n along the last
    axis. A Newton step that would leave the bracket, or is not half as long as the step before, is replaced by
    one to the middle of the bracket, so the iteration always ends (Press et al., Numerical Recipes, rtsafe).
    It ends when a step is below ``tolerance`` in x, or when the next one would be below a hundredth of it, as
    Newton's quadratic convergence foretells from the last two: next / last = (last / before)^2. Roots that
    have settled stay in the arrays until half of them have: sorting them out costs as much as a turn.
    """
    if not guess.size:
        return guess.copy()
    x = np.minimum(np.maximum(guess, low), high)
    result = x.copy()
    active: Indices | None = None
    upward: Flags = np.broadcast_to(np.asarray(rising), x.shape)
    last = high - low
    newton = np.zeros(x.size, bool)
    with np.errstate(divide="ignore", invalid="ignore"):
        for _ in range(_MOST_STEPS):
            value, derivative = function(x, *data)
            below = (value < 0.0) == upward
            low, high = np.where(below, x, low), np.where(below, high, x)
            step = value / derivative
            ahead = x - step
            good = (np.abs(step) <= 0.5 * last) & (ahead >= low) & (ahead <= high)
            ahead = np.where(good, ahead, 0.5 * (low + high))
            size = np.abs(ahead - x)
            foretold = size * np.square(size / last)
            unsettled = (size > tolerance) & ((foretold > _FORETOLD * tolerance) | ~(good & newton))
            newton, last, x = good, size, ahead
            result[slice(None) if active is None else active] = x
            left = int(np.count_nonzero(unsettled))
            if left == 0:
                break
            if 2 * left < x.size:
                keep = np.flatnonzero(unsettled)
                active = keep if active is None else active[keep]
                data = [part.take(keep, axis=-1) for part in data]
                low, high, x, last = low[keep], high[keep], x[keep], last[keep]
                upward, newton = upward[keep], newton[keep]
    return result
