"""Arrays that planning counts in: their kinds, ragged groups, and records that cannot be changed."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Flags = NDArray[np.bool_]


def offsets_of(counts: Integers) -> Integers:
    """Where each group starts when groups of ``counts`` lie end to end; one entry more than groups."""
    return np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)


def ragged_ranges(first: Integers, counts: Integers) -> Integers:
    """``first[k], first[k] + 1, ...`` for ``counts[k]`` entries, for every k, end to end."""
    ends = np.cumsum(counts)
    return np.arange(int(ends[-1]) if len(ends) else 0, dtype=np.int64) + np.repeat(first - ends + counts, counts)


def freeze(record: object) -> None:
    """Give every array of a frozen record its dtype, its own copy if needed, and take write access away."""
    for f in fields(record):  # type: ignore[arg-type]
        value = getattr(record, f.name)
        if isinstance(value, np.ndarray):
            kind = {"Floats": np.float64, "Integers": np.int64, "Flags": np.bool_}[str(f.type)]
            array: NDArray[Any] = np.ascontiguousarray(value, dtype=kind).copy()
            array.flags.writeable = False
            object.__setattr__(record, f.name, array)
