"""What a class of data generates, as rates between instants: read off in the middle of each stretch."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from passplan.geometry.revolutions import revolution_edges_s
from passplan.inputs.data import DataClass
from passplan.inputs.run import Run

Rates = list[tuple[float, float, float]]
"""(start_s, end_s, mb_per_s) from end to end of the horizon."""


def rates_of(run: Run, name: str, item: DataClass) -> Rates:
    """The generation of one class of a spacecraft over the horizon."""
    spans: Rates = []
    if item.generation_mb_per_orbit > 0.0:
        low, high = item.generation_orbit_span
        for first, last in pairwise(revolution_edges_s(run.orbits[name], run.start_utc, run.end_utc)):
            length_s = float(last - first)
            start_s = float(first) + low * length_s
            rate = item.generation_mb_per_orbit / ((high - low) * length_s)
            spans.append((start_s, start_s + (high - low) * length_s, rate))
    if item.generation_file is not None:
        series = run.series[item.generation_file]
        for start, end, rate in zip(series.start_utc, series.end_utc, series.mb_per_s, strict=True):
            spans.append((_seconds(run, start), _seconds(run, end), float(rate)))
    spans.sort()
    edges = {0.0, float(run.horizon_s)} | {t for span in spans for t in span[:2] if 0.0 < t < run.horizon_s}
    found: Rates = []
    next_span, open_spans = 0, []
    for start_s, end_s in pairwise(sorted(edges)):
        middle_s = 0.5 * (start_s + end_s)
        while next_span < len(spans) and spans[next_span][0] <= middle_s:
            open_spans.append(spans[next_span])
            next_span += 1
        open_spans = [span for span in open_spans if span[1] > middle_s]
        found.append((start_s, end_s, item.generation_mb_per_s + sum(span[2] for span in open_spans)))
    return found


def made_mb(run: Run, name: str, from_s: float, until_s: float) -> float:
    """What all classes of a spacecraft generate in a span of time [MB]."""
    return sum(
        rate * max(0.0, min(end_s, until_s) - max(start_s, from_s))
        for item in run.data_of(name) for start_s, end_s, rate in rates_of(run, name, item))


def added(first: Rates, second: Rates) -> Rates:
    """Two generations together; an empty one is nothing."""
    if not first:
        return second
    edges = sorted({t for start_s, end_s, _ in (*first, *second) for t in (start_s, end_s)})
    found: Rates = []
    at = [0, 0]
    for start_s, end_s in pairwise(edges):
        total = 0.0
        for k, rates in enumerate((first, second)):
            while rates[at[k]][1] <= start_s:
                at[k] += 1
            total += rates[at[k]][2]
        found.append((start_s, end_s, total))
    return found


def _seconds(run: Run, instant: np.datetime64) -> float:
    return float((instant - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
