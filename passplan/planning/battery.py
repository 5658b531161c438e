"""The state of charge of the batteries: what the sunlight gives, and what a plan leaves in them."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from passplan.geometry.eclipse import eclipses
from passplan.inputs.run import Run
from passplan.planning.arrays import Floats
from passplan.planning.hooks import Draft
from passplan.planning.horizon import instants_of
from passplan.planning.on_air import OnAir
from passplan.planning.problem import Problem


@dataclass(frozen=True, eq=False)
class PowerNeed:
    """A battery [Wh] and the power that goes into it without any sending.

    ``net_w[k]`` flows from ``edges_s[k]`` to ``edges_s[k + 1]``; the edges run from 0 to the horizon's end.
    """

    spacecraft: int
    capacity_wh: float
    floor_wh: float
    start_wh: float
    edges_s: Floats
    net_w: Floats

    def gained_wh(self, at_s: Floats) -> Floats:
        """What flows in from the start to ``at_s``, were the battery never full."""
        sums = np.concatenate([[0.0], np.cumsum(self.net_w * np.diff(self.edges_s))]) / 3600.0
        return np.asarray(np.interp(at_s, self.edges_s, sums))

    def charge_wh(self, start_s: Floats, end_s: Floats, load_w: Floats) -> tuple[Floats, Floats]:
        """Instants [s] and the charge at them, if ``load_w`` is drawn in each of the intervals.

        Between two of the instants the charge moves in a straight line, or is full from some moment on.
        """
        times = np.unique(np.concatenate([self.edges_s, start_s, end_s]))
        inside = (times[:-1, None] >= start_s) & (times[:-1, None] < end_s)
        gains = np.diff(self.gained_wh(times)) - (inside @ load_w) * np.diff(times) / 3600.0
        levels = [self.start_wh]
        for gain in gains.tolist():
            levels.append(min(self.capacity_wh, levels[-1] + gain))
        return times, np.array(levels)

    def idle_wh(self) -> tuple[Floats, Floats]:
        """As :meth:`charge_wh`, if nothing is sent."""
        nothing = np.zeros(0)
        return self.charge_wh(nothing, nothing, nothing)

    def idle_at_wh(self, at_s: Floats) -> Floats:
        """The charge at any instants, if nothing is sent."""
        times, levels = self.idle_wh()
        part = np.clip(np.searchsorted(times, at_s, side="right") - 1, 0, len(self.net_w) - 1)
        return np.minimum(self.capacity_wh, levels[part] + self.net_w[part] * (at_s - times[part]) / 3600.0)


def power_needs(draft: Draft) -> Iterator[PowerNeed]:
    """One record per spacecraft that states its battery. In eclipse the Sun's centre is hidden."""
    run = draft.run
    for k, name in enumerate(draft.problem.fleet.names):
        craft = run.spacecraft[name]
        if craft.battery_wh is None:
            continue
        dark = eclipses(run.orbits[name], run.start_utc, run.end_utc)
        edges_s = np.unique(np.concatenate(
            [[0.0, float(run.horizon_s)], ((dark - run.start_utc) / np.timedelta64(1, "ms") / 1e3).ravel()]))
        middle = run.start_utc + (500.0 * (edges_s[:-1] + edges_s[1:])).astype("timedelta64[ms]")
        lit = ~np.any((middle[:, None] >= dark[:, 0]) & (middle[:, None] < dark[:, 1]), axis=1)
        yield PowerNeed(
            k, craft.battery_wh, craft.battery_wh * craft.battery_floor_percent / 100.0,
            craft.battery_wh * craft.battery_start_percent / 100.0, edges_s,
            (craft.solar_w or 0.0) * lit - (craft.base_load_w or 0.0))


def battery_summary(run: Run, problem: Problem, chosen: Iterable[int]) -> dict[str, dict[str, Any]]:
    """For ``plan.json``: capacity, floor, start, and the lowest charge with its instant, by spacecraft."""
    found = {}
    picked = np.array(sorted(chosen), dtype=np.int64)
    for need in problem.needs_of(PowerNeed):
        (on_air,) = problem.needs_of(OnAir)
        mine = picked[problem.options.spacecraft[picked] == need.spacecraft]
        times, levels = need.charge_wh(
            on_air.start_s[mine].astype(float), on_air.end_s[mine].astype(float), on_air.load_w[mine])
        lowest = int(np.argmin(levels))
        found[problem.fleet.names[need.spacecraft]] = {
            "capacity_wh": need.capacity_wh, "floor_wh": need.floor_wh, "start_wh": need.start_wh,
            "lowest_wh": max(0.0, float(levels[lowest])), "left_wh": max(0.0, float(levels[-1])),
            "lowest_utc": f"{instants_of(run, np.floor(times[lowest]))}Z"}
    return found


def battery_warnings(run: Run, problem: Problem) -> list[str]:
    """A sentence for each battery that falls under its floor although nothing is sent."""
    found = []
    for need in problem.needs_of(PowerNeed):
        times, levels = need.idle_wh()
        low = np.flatnonzero(levels < need.floor_wh - 1e-9 * need.capacity_wh)
        if len(low) == 0:
            continue
        name, floor = problem.fleet.names[need.spacecraft], f"its floor of {need.floor_wh:.4g} Wh"
        if low[0] == 0:
            found.append(f"{name}: its battery starts with {need.start_wh:.4g} Wh, under {floor}; "
                         "it sends nothing before it has recovered")
        else:
            at = str(instants_of(run, np.floor(times[low[0]])))[:16].replace("T", " ")
            found.append(f"{name}: its base load alone takes its battery under {floor} by {at} UTC, to "
                         f"{max(0.0, float(levels.min())):.4g} Wh; it sends nothing that would make this worse")
    return found
