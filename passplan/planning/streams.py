"""What a spacecraft generates, class by class, and its classes as layers that can be planned one by one.

A spacecraft sends the class that is worth most first, and when its storage is full it loses what is worth
least. Then the classes 1..k together (by falling weight) neither notice the classes below them nor care which
of them a MB belongs to: their joint amount follows the equations of a single class with their joint generation
and the whole capacity. With D(k) for what the classes 1..k deliver together, the worth is

    sum of w(k) (D(k) - D(k-1)) = sum of (w(k) - w(k+1)) D(k),   w after the last class = 0

so that a spacecraft with K classes is K independent storages, its layers: layer k holds the classes 1..k and is
worth w(k) - w(k+1) a MB; what overflows costs in the last one alone, which holds everything. (Own derivation;
``classes.py`` follows the classes themselves, and tests compare.)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Stream:
    """One class of data aboard: ``made_mb`` is generated up to ``time_s``, in straight lines from 0 to the horizon."""

    name: str
    weight: float
    start_mb: float
    time_s: Floats
    made_mb: Floats

    def __post_init__(self) -> None:
        _freeze(self)

    def made(self, time_s: Floats | float) -> Floats:
        """MB generated up to any times within the horizon."""
        return np.asarray(np.interp(time_s, self.time_s, self.made_mb))


@dataclass(frozen=True, eq=False)
class Layer:
    """One storage of the model: worth of a MB sent, cost of a MB lost, start fill, generation and capacity.

    Up to ``time_s`` (from 0 to the horizon) ``made_mb`` is generated, and there ``room_mb`` is the most it can hold;
    both in straight lines between.
    """

    weight: float
    spill_cost: float
    start_mb: float
    time_s: Floats
    made_mb: Floats
    room_mb: Floats

    def __post_init__(self) -> None:
        _freeze(self)

    def made(self, time_s: Floats | float) -> Floats:
        """MB generated up to any times within the horizon."""
        return np.asarray(np.interp(time_s, self.time_s, self.made_mb))

    def room(self, time_s: Floats | float) -> Floats:
        """The capacity [MB] at any times within the horizon."""
        return np.asarray(np.interp(time_s, self.time_s, self.room_mb))

    def inner_times(self) -> Floats:
        """Instants within the horizon at which a rate changes."""
        return self.time_s[1:-1]


def steady(name: str, weight: float, start_mb: float, mb_per_s: float, horizon_s: float) -> Stream:
    """A class that is generated at one rate."""
    return Stream(name, weight, start_mb, np.array([0.0, horizon_s]), np.array([0.0, mb_per_s * horizon_s]))


def layers_of(streams: Sequence[Stream], capacity_mb: float, spill_cost: float) -> tuple[Layer, ...]:
    """The layers of classes given by falling weight. Classes of equal weight share one."""
    layers = []
    for k, stream in enumerate(streams):
        last = k == len(streams) - 1
        weight = stream.weight - (0.0 if last else streams[k + 1].weight)
        if weight < 0.0:
            raise ValueError(f"{streams[k + 1].name} is worth more than {stream.name}; sort classes by falling weight")
        if weight == 0.0 and not last:
            continue
        inside = streams[: k + 1]
        time_s = np.unique(np.concatenate([one.time_s for one in inside]))
        made_mb = np.sum([one.made(time_s) for one in inside], axis=0)
        layers.append(Layer(
            weight, spill_cost if last else 0.0, float(sum(one.start_mb for one in inside)), time_s, made_mb,
            np.full(len(time_s), capacity_mb)))
    return tuple(layers)


def _freeze(record: Stream | Layer) -> None:
    for field in fields(record):
        value = getattr(record, field.name)
        if isinstance(value, np.ndarray):
            array = np.array(value, dtype=np.float64)
            array.flags.writeable = False
            object.__setattr__(record, field.name, array)
