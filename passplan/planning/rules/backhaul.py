"""The line that takes a site's data away: so much a day, and so fast.

What a contact can carry counts (its rates, for as long as it sends), not what happens to be aboard: that keeps
every limit linear in the contacts chosen, and errs on the safe side.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.inputs.run import Run
from passplan.inputs.site_rules import Backhaul
from passplan.planning.arrays import Floats, Integers
from passplan.planning.days import Day, days_of
from passplan.planning.hooks import Block, Draft
from passplan.planning.horizon import seconds_of
from passplan.planning.option_table import Options
from passplan.planning.problem import Problem
from passplan.planning.rules.rows import Row, at_the_same_time, rows_of
from passplan.planning.rules.terms import Terms


@dataclass(frozen=True, eq=False)
class BackhaulNeed:
    """The line of one site: its antennas, the MB that each day may bring, and the rate [MB/s] unless it buffers."""

    site: str
    antennas: Integers
    day_mb: tuple[tuple[Day, float], ...]
    rate_mb_per_s: float | None


def backhaul_blocks(run: Run) -> Iterator[Block]:
    """While the line of a site that does not buffer is closed there are no contacts: nothing goes either way."""
    for name, antenna in run.antennas.items():
        line = run.sites[antenna.site].backhaul
        if line is not None and not line.buffered:
            for start_s, end_s in _closed_spans(run, line):
                yield Block(
                    name, None, start_s, end_s, "backhaul_closed", f"the line of {antenna.site} is closed", setup=False)


def backhaul_needs(draft: Draft) -> Iterator[BackhaulNeed]:
    """One need for each site with a line that limits something."""
    run = draft.run
    for site in run.sites.values():
        line = site.backhaul
        if line is None:
            continue
        here = [k for k, name in enumerate(draft.problem.antennas.names) if run.antennas[name].site == site.name]
        closed = _closed_spans(run, line)
        rate = None if line.rate_mbps is None else line.rate_mbps / 8.0
        day_mb = []
        for day in days_of(run):
            limits = [] if line.mb_per_day is None else [line.mb_per_day]
            if line.buffered and rate is not None:
                shut_s = sum(max(0, min(b, day.end_s) - max(a, day.start_s)) for a, b in closed)
                limits.append(rate * (86_400 - shut_s))
            if limits:
                day_mb.append((day, min(limits)))
        yield BackhaulNeed(
            site.name, np.array(here, dtype=np.int64), tuple(day_mb), None if line.buffered else rate)


def backhaul(problem: Problem) -> Terms:
    """Rows on the volume of each day, and on the peak rates of contacts that send at the same time."""
    options, rows, needs = problem.options, [], problem.needs_of(BackhaulNeed)
    if not needs:
        return Terms()
    first, last, peak = _sending(options)
    for need in needs:
        mine = np.flatnonzero(np.isin(options.antenna, need.antennas) & (last > first))
        rows.append(rows_of("backhaul_full", _day_rows(options, need, mine)))
        if need.rate_mb_per_s is not None:
            rows.append(at_the_same_time(
                "backhaul_busy", f"the line of {need.site}", mine, first[mine], last[mine], need.rate_mb_per_s,
                peak[mine]))
    return Terms(rows=tuple(rows))


def _day_rows(options: Options, need: BackhaulNeed, mine: Integers) -> Iterator[Row]:
    for day, limit_mb in need.day_mb:
        volume = np.array([_carried_mb(options, o, day) for o in mine.tolist()], dtype=float)
        some = volume > 0.0
        yield f"the line of {need.site} on {day.date}", mine[some], volume[some], limit_mb


def _carried_mb(options: Options, option: int, day: Day) -> float:
    pieces = slice(int(options.piece_offset[option]), int(options.piece_offset[option + 1]))
    first_s, last_s = options.piece_start_s[pieces], options.piece_end_s[pieces]
    inside_s = np.clip(last_s, day.start_s, day.end_s) - np.clip(first_s, day.start_s, day.end_s)
    return float(inside_s @ options.piece_rate_mb_per_s[pieces])


def _sending(options: Options) -> tuple[Integers, Integers, Floats]:
    """When each option first and last sends, and its highest rate [MB/s]; an empty span where it does not send."""
    first, last, peak = options.start_s.copy(), options.start_s.copy(), np.zeros(len(options))
    for o in np.flatnonzero(np.diff(options.piece_offset) > 0).tolist():
        pieces = slice(int(options.piece_offset[o]), int(options.piece_offset[o + 1]))
        first[o], last[o] = options.piece_start_s[pieces][0], options.piece_end_s[pieces][-1]
        peak[o] = options.piece_rate_mb_per_s[pieces].max()
    return first, last, peak


def _closed_spans(run: Run, line: Backhaul) -> list[tuple[int, int]]:
    """Closures of a line as disjoint spans [s] in time order, rounded outward."""
    spans: list[tuple[int, int]] = []
    for one in sorted(line.closure, key=lambda closure: closure.start_utc):
        start_s, end_s = math.floor(seconds_of(run, one.start_utc)), math.ceil(seconds_of(run, one.end_utc))
        if spans and start_s <= spans[-1][1]:
            spans[-1] = spans[-1][0], max(spans[-1][1], end_s)
        else:
            spans.append((start_s, end_s))
    return spans
