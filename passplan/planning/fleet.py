"""The spacecraft of a run as arrays, with what each generates and when."""

from __future__ import annotations

import numpy as np

from passplan.geometry.revolutions import revolution_edges_s
from passplan.inputs.data import DataClass
from passplan.inputs.run import Run
from passplan.planning.arrays import Floats
from passplan.planning.problem import Fleet
from passplan.planning.streams import Keeping, Stream


def fleet_of(run: Run) -> Fleet:
    """The spacecraft that have an orbit, in the order of the run."""
    names = tuple(name for name in run.spacecraft if name in run.orbits)
    streams = tuple(_streams(run, name) for name in names)
    totals = np.array([_totals(run, name, own) for name, own in zip(names, streams, strict=True)]).reshape(-1, 3)
    return Fleet(
        names=names, weight=totals[:, 0], generation_mb_per_s=totals[:, 1],
        capacity_mb=np.array([run.spacecraft[name].storage_mb for name in names], dtype=float),
        start_fill_mb=totals[:, 2], streams=streams if any(streams) else (),
        keeping=tuple(_keeping(run, name) for name in names) if any(streams) else (),
        links=np.array([run.spacecraft[name].links for name in names], dtype=np.int64))


def _keeping(run: Run, name: str) -> Keeping:
    craft = run.spacecraft[name]
    return Keeping(craft.overflow == "newest", craft.acknowledged_by or "")


def _streams(run: Run, name: str) -> tuple[Stream, ...]:
    classes = run.data_of(name)
    one = classes[0]
    steady = not one.generation_mb_per_orbit and one.generation_file is None
    ages = one.deadline_h is not None or bool(one.freshness)
    plain = name not in run.data and steady and not ages and run.spacecraft[name].acknowledged_by is None
    return () if plain else tuple(_stream(run, name, item) for item in classes)


def _totals(run: Run, name: str, streams: tuple[Stream, ...]) -> tuple[float, float, float]:
    if not streams:
        craft = run.spacecraft[name]
        return craft.weight, craft.generation_mb_per_s, craft.start_fill_mb
    rate = sum(float(one.made_mb[-1]) for one in streams) / run.horizon_s
    return streams[0].weight, rate, sum(one.start_mb for one in streams)


def _stream(run: Run, name: str, item: DataClass) -> Stream:
    """One class with the sum of what its keys generate, as straight lines."""
    horizon_s = float(run.horizon_s)
    lines = [(np.array([0.0, horizon_s]), np.array([0.0, item.generation_mb_per_s * horizon_s]))]
    if item.generation_mb_per_orbit > 0.0:
        nodes = revolution_edges_s(run.orbits[name], run.start_utc, run.end_utc)
        low, high = (nodes[:-1] + share * np.diff(nodes) for share in item.generation_orbit_span)
        lines.append(_line(low, high, item.generation_mb_per_orbit / (high - low)))
    if item.generation_file is not None:
        series = run.series[item.generation_file]
        start_s, end_s = ((edge - run.start_utc) / np.timedelta64(1, "ms") / 1000.0
                          for edge in (series.start_utc, series.end_utc))
        inside = (end_s > 0.0) & (start_s < horizon_s)
        lines.append(_line(start_s[inside], end_s[inside], series.mb_per_s[inside]))
    edges = np.concatenate([time_s for time_s, _ in lines])
    time_s = np.unique(np.clip(edges, 0.0, horizon_s))
    made_mb = np.sum([np.interp(time_s, *line) - np.interp(0.0, *line) for line in lines], axis=0)
    ages, shares = zip(*(item.freshness or ((0.0, 1.0),)), strict=True)
    return Stream(
        item.name, item.weight, item.start_fill_mb, time_s, made_mb,
        deadline_s=np.inf if item.deadline_h is None else 3600.0 * item.deadline_h,
        start_age_s=start_age_s(item, float(made_mb[-1]) / horizon_s), fresh_age_s=3600.0 * np.array(ages),
        fresh_share=np.array(shares))


def start_age_s(item: DataClass, mb_per_s: float) -> float:
    """Age of the oldest of the start fill: as stated, or as long as making it takes, at most the deadline."""
    deadline_s = np.inf if item.deadline_h is None else 3600.0 * item.deadline_h
    if item.start_age_h is not None:
        return 3600.0 * item.start_age_h
    made_in_s = item.start_fill_mb / mb_per_s if mb_per_s > 0.0 else 0.0
    return float(min(made_in_s, deadline_s))


def _line(start_s: Floats, end_s: Floats, mb_per_s: Floats) -> tuple[Floats, Floats]:
    """What has come by each edge of spans that lie apart, in time order."""
    if len(start_s) == 0:
        return np.zeros(1), np.zeros(1)
    amount = np.cumsum(mb_per_s * (end_s - start_s))
    return np.column_stack([start_s, end_s]).ravel(), np.column_stack([np.append(0.0, amount[:-1]), amount]).ravel()
