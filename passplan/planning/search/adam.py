"""The way and the size of a step for each of many prices."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats

_MEAN_MEMORY = 0.9
_SQUARE_MEMORY = 0.99
_LEAST_SIZE = 0.1


class Adam:
    """Steps scaled one by one by a running mean and mean square (Adam: Kingma and Ba 2015).

    This beats Polyak's step here, and needs no guess of the optimum.
    """

    def __init__(self, count: int) -> None:
        self._mean, self._square, self._steps = np.zeros(count), np.zeros(count), 0

    def direction(self, gradient: Floats) -> Floats:
        """Which way to go, each about 1 in size."""
        self._steps += 1
        self._mean = _MEAN_MEMORY * self._mean + (1.0 - _MEAN_MEMORY) * gradient
        self._square = _SQUARE_MEMORY * self._square + (1.0 - _SQUARE_MEMORY) * gradient**2
        mean = self._mean / (1.0 - _MEAN_MEMORY**self._steps)
        size = np.sqrt(self._square / (1.0 - _SQUARE_MEMORY**self._steps))
        return mean / (size + _LEAST_SIZE)

    def brake(self) -> None:
        """Forget which way it went."""
        self._mean = np.zeros(len(self._mean))
