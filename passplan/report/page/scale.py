"""How a data rate becomes the height of a ribbon."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_WIDE = 8.0
# The label of a line lower than this would fall below the foot of the ribbon.
_LEAST_HEIGHT = 25


@dataclass(frozen=True)
class RateScale:
    """Height 0 to 100 of a rate: straight up to ``top_mbps``, or by decades from ``floor_mbps`` where they differ much.

    Linear (``floor_mbps`` 0) is the honest one, as areas are then volumes; it is given up only where the
    slow radios of an antenna would vanish beside its fast ones. No rate is always height 0.
    """

    top_mbps: float
    floor_mbps: float = 0.0

    @property
    def by_decades(self) -> bool:
        return self.floor_mbps > 0.0

    def height(self, rate_mbps: NDArray[np.float64]) -> NDArray[np.int64]:
        """Heights (n,) of rates (n,), whole numbers."""
        if self.top_mbps <= 0.0:
            return np.zeros(np.shape(rate_mbps), np.int64)
        if not self.by_decades:
            return np.rint(100.0 * rate_mbps / self.top_mbps).astype(np.int64)
        share = np.log(np.maximum(rate_mbps, self.floor_mbps) / self.floor_mbps) / np.log(
            self.top_mbps / self.floor_mbps
        )
        return np.where(rate_mbps > 0.0, np.rint(100.0 * share), 0.0).astype(np.int64)

    def ticks(self) -> list[tuple[float, int]]:
        """(rate, height) of the lines worth labelling."""
        if self.top_mbps <= 0.0:
            return []
        if not self.by_decades:
            return [(self.top_mbps, 100)]
        low, high = np.ceil(np.log10(self.floor_mbps)), np.floor(np.log10(self.top_mbps))
        rates = 10.0 ** np.arange(low, high + 1)
        marked = [(float(rate), int(self.height(np.array([rate]))[0])) for rate in rates if rate > self.floor_mbps]
        return [(rate, height) for rate, height in marked if height >= _LEAST_HEIGHT]


def scale_for(tops_mbps: Iterable[float]) -> RateScale:
    """The scale that shows all of ``tops_mbps``, the fastest rate of each spacecraft that shares it."""
    rates = [rate for rate in tops_mbps if rate > 0.0]
    if not rates:
        return RateScale(0.0)
    if max(rates) / min(rates) <= _WIDE:
        return RateScale(max(rates))
    return RateScale(max(rates), min(rates) / 8.0)
