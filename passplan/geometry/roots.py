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


def solve(
    function: Function,
    data: Sequence[Floats],
    low: Floats,
    high: Floats,
    guess: Floats,
    rising: Flags,
    tolerance: float,
) -> Floats:
    """One root in each bracket [low, high], where ``function(x, *data)`` rises (or falls) through zero.

    ``low, high, guess, rising`` are (n,); every array of ``data`` has n along its last axis. A Newton step
    that would leave the bracket, or is not half as long as the step before, is replaced by one to the
    middle of the bracket, so the iteration always ends (Press et al., Numerical Recipes, rtsafe).
    ``tolerance`` in x bounds the next step, as Newton's quadratic convergence foretells it from the last two:
    next / last = (last / before)^2. Roots that have settled stay in the arrays until half of them
    have: sorting them out costs as much as a turn.
    """
    low, high = low.copy(), high.copy()
    x = np.minimum(np.maximum(guess, low), high)
    result = x.copy()
    last = high - low
    newton = np.zeros(x.size, bool)
    active: Indices | None = None
    with np.errstate(divide="ignore", invalid="ignore"):
        for _ in range(_MOST_STEPS):
            value, derivative = function(x, *data)
            below = (value < 0.0) == rising
            np.copyto(low, x, where=below)
            np.copyto(high, x, where=~below)
            step = value / derivative
            ahead = x - step
            good = (ahead >= low) & (ahead <= high) & (np.abs(step) <= 0.5 * last)
            ahead = np.where(good, ahead, 0.5 * (low + high))
            np.copyto(ahead, x, where=value == 0.0)
            size = np.abs(ahead - x)
            foretold = size * np.square(size / last)
            unsettled = (size > tolerance) & ((foretold > tolerance) | ~(good & newton))
            newton = good
            last = size
            x = ahead
            result[slice(None) if active is None else active] = x
            left = int(np.count_nonzero(unsettled))
            if left == 0:
                break
            if 2 * left < x.size:
                keep = np.flatnonzero(unsettled)
                active = keep if active is None else active[keep]
                data = [part.take(keep, axis=-1) for part in data]
                low, high, x, last = low[keep], high[keep], x[keep], last[keep]
                rising, newton = rising[keep], newton[keep]
    return result
