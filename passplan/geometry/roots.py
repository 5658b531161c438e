"""Bracketed Newton iteration for many roots at once."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import Floats

Indices = NDArray[np.int64]
# Called with the indices of the roots still sought and their x; returns value and derivative there.
Function = Callable[[Indices, Floats], tuple[Floats, Floats]]

_MOST_STEPS = 100


def solve(function: Function, low: Floats, high: Floats, guess: Floats, rising: NDArray[np.bool_], tolerance: float) -> Floats:
    """One root in each bracket [low, high], where the function rises (or falls) through zero; shapes (n,).

    A Newton step that would leave the bracket, or that does not halve it in two turns, is replaced by
    its middle, so the iteration always ends; ``tolerance`` is in x.
    """
    low, high, x = low.copy(), high.copy(), np.clip(guess, low, high)
    result = x.copy()
    active = np.arange(x.size)
    width = high - low
    for turn in range(_MOST_STEPS):
        if not active.size:
            break
        value, derivative = function(active, x)
        below = (value < 0.0) == rising
        low = np.where(below, x, low)
        high = np.where(below, high, x)
        with np.errstate(divide="ignore", invalid="ignore"):
            ahead = x - value / derivative
        inside = (ahead >= low) & (ahead <= high)
        if turn % 3 == 2:
            inside &= (high - low < 0.5 * width) | (np.abs(ahead - x) < tolerance)
            width = high - low
        ahead = np.where(inside, ahead, 0.5 * (low + high))
        done = (np.abs(ahead - x) <= tolerance) | (value == 0.0)
        result[active] = np.where(value == 0.0, x, ahead)
        if done.any():
            keep = ~done
            active, low, high, x, width = active[keep], low[keep], high[keep], ahead[keep], width[keep]
            rising = rising[keep]
        else:
            x = ahead
    return result
