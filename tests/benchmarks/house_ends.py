"""Rules on what contacts are for: what must be in the plan or must not, disturbance, money, classes, fairness."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from house_yard import HOUR_S, Put, Yard

from passplan.planning.problem import CommandNeed, Conflict, Crowd, RequestNeed
from passplan.planning.rules.budget import BudgetNeed
from passplan.planning.rules.guarantees import carries_mb
from passplan.planning.rules.handovers import HandoverNeed
from passplan.planning.streams import Keeping, Stream, steady


class DemandRules(Yard):
    """What must be in the plan, or must not."""

    def handover(self) -> Put:
        """Contacts that follow a spacecraft from one antenna to another, half a minute on both."""
        _, craft, start_s, end_s = max(self._seams())
        asked = RequestNeed(
            "followed", self.base.fleet.names[craft], craft, frozenset(range(len(self.base.antennas))), "downlink",
            start_s, end_s, 60)
        return self._needs(HandoverNeed(asked, 30))

    def commands(self) -> Put:
        """A command contact every eight hours, on every second antenna."""
        options = self.base.options
        needs = tuple(CommandNeed(k, 8 * HOUR_S, -2 * HOUR_S) for k in self._every(4, 3))
        return lambda p: replace(
            p, commands=needs, options=replace(p.options, command=options.antenna % 2 == 0))

    def requests(self) -> Put:
        """A contact of five minutes, within the four hours of the day in which the plan without rules has none so long.

        Each spacecraft is asked for where one would fit.
        """
        options, fleet, needs = self.base.options, self.base.fleet, list[RequestNeed]()
        antennas, length_s = frozenset(range(len(self.base.antennas))), options.end_s - options.start_s
        for k in self._every(9, 4):
            mine, free = np.flatnonzero((options.spacecraft == k) & (length_s >= 300)), self._free_of(k)
            has = free[length_s[free] >= 300]
            for from_s in range(0, self.base.horizon_s - 4 * HOUR_S, HOUR_S):
                inside = (options.start_s >= from_s) & (options.end_s <= from_s + 4 * HOUR_S)
                if np.any(inside[mine]) and not np.any(inside[has]):
                    needs.append(RequestNeed(f"asked-{k}", fleet.names[k], k, antennas, "downlink", from_s,
                                             from_s + 4 * HOUR_S, 300))
                    break
        return lambda p: replace(p, requests=(*p.requests, *needs))

    def standby(self) -> Put:
        """A contact with a second antenna at the ready, for each spacecraft that has such contacts to choose from."""
        options, names = self.base.options, self.base.fleet.names
        antennas, needs = frozenset(range(len(self.base.antennas))), list[RequestNeed]()
        for k in np.unique(options.spacecraft[options.further.option]).tolist():
            mine = options.further.option[options.spacecraft[options.further.option] == k]
            needs.append(RequestNeed(
                f"backed-{k}", names[k], k, antennas, "downlink", int(options.start_s[mine].min()),
                int(options.end_s[mine].max()), 180, standbys=antennas))
        return lambda p: replace(p, requests=(*p.requests, *needs))

    def pins(self) -> Put:
        """Three contacts that the plan without rules has not, and that the rules before leave."""
        some = self.rng.choice(np.flatnonzero(~(self.shut | self._chosen(self.free))), 3, replace=False)
        return self._needs(*(self._decided("pin", f"pin {o}", [o]) for o in some.tolist()))

    def forbids(self) -> Put:
        """A tenth of the windows that the plan without rules uses."""
        used = np.unique(self.base.options.window[self.free])
        return self._closed(np.isin(
            self.base.options.window, self.rng.choice(used, -(-len(used) // 10), replace=False)), "forbidden")

    def emergency(self) -> Put:
        """One spacecraft within the hour after it is first in view."""
        options = self.base.options
        order = np.argsort(options.start_s, kind="stable")
        craft = next(int(options.spacecraft[o]) for o in order if options.spacecraft[o] not in (
            options.spacecraft[self.free[options.start_s[self.free] < 2 * HOUR_S]]))
        mine = np.flatnonzero(options.spacecraft == craft)
        first_s = int(options.start_s[mine].min())
        return self._needs(self._decided(
            "emergency", "safe mode", mine[options.start_s[mine] < first_s + HOUR_S].tolist()))

    def daily_contacts(self) -> Put:
        """One contact more than the plan without rules has."""
        return self._needs(*(self._guarantee("contacts", [k], len(self._free_of(k)) + 1.0) for k in self._every(25, 6)))

    def daily_mb(self) -> Put:
        """A fifth more than the plan without rules can bring down."""
        carried = carries_mb(self.base)
        return self._needs(*(self._guarantee("MB", [k], 1.2 * float(carried[self._free_of(k)].sum()) + 100.0)
                             for k in self._every(25, 7)))

    def mission(self) -> Put:
        """For the spacecraft that count least, a tenth more than the plan without rules can bring down."""
        crew = np.flatnonzero(self.base.fleet.weight == self.base.fleet.weight.min())[:8].tolist()
        carried = carries_mb(self.base)
        total = sum(float(carried[self._free_of(k)].sum()) for k in crew)
        return self._needs(self._guarantee("MB", crew, 1.1 * total + 100.0))


class FleetRules(Yard):
    """Rules between spacecraft, on money, on data."""

    def interference(self) -> Put:
        """Some pairs that the plan without rules has at the same time disturb each other."""
        found = tuple(
            Conflict(f"{a} and {b}", int(craft[a]), int(self.base.options.antenna[a]), int(craft[b]), low, high)
            for craft in (self.base.options.spacecraft,) for a, b, low, high in self._together()[:20:2])
        return lambda p: replace(p, conflicts=found)

    def crowd(self) -> Put:
        """Some are disturbed by two others that send at the same time."""
        craft, antenna, found = self.base.options.spacecraft, self.base.options.antenna, list[Crowd]()
        pairs = self._together()
        for a, b, low, high in pairs:
            third = next((d for c, d, from_s, to_s in pairs
                          if c == a and craft[d] != craft[b] and from_s < high and to_s > low), None)
            if third is not None and len(found) < 5:
                found.append(Crowd(f"crowd {len(found)}", int(craft[a]), int(antenna[a]),
                                   (int(craft[b]), int(craft[third])), (0.6, 0.7), low, high))
        return lambda p: replace(p, crowds=tuple(found))

    def budget(self) -> Put:
        """Four fifths of what the plan without rules costs."""
        return self._needs(BudgetNeed(0.8 * float(self.base.options.cost[self.free].sum()), (self._day(),)))

    def classes(self) -> Put:
        """Alerts that fade within four hours, frames with a deadline of five, and calibration that hardly counts."""
        fleet, horizon_s = self.base.fleet, float(self.base.horizon_s)
        mine = set(self._every(5, 0))

        def part(craft: int, name: str, worth: float, share: float) -> Stream:
            rate = share * float(fleet.generation_mb_per_s[craft])
            return steady(name, worth * float(fleet.weight[craft]), share * float(fleet.start_fill_mb[craft]), rate,
                          horizon_s)

        streams = tuple(() if k not in mine else (
            replace(part(k, "alerts", 2.0, 0.1), fresh_age_s=np.array([0.0, 4.0 * HOUR_S]),
                    fresh_share=np.array([1.0, 0.5])),
            replace(part(k, "frames", 1.0, 0.7), deadline_s=5.0 * HOUR_S, start_age_s=2.0 * HOUR_S),
            part(k, "calibration", 0.3, 0.2)) for k in range(len(fleet)))
        keeping = tuple(Keeping(k % 10 == 5, "contact" if k % 10 == 0 and k in mine else "")
                        for k in range(len(fleet)))
        weight = fleet.weight * np.where(np.isin(np.arange(len(fleet)), list(mine)), 2.0, 1.0)
        return lambda p: replace(p, fleet=replace(p.fleet, weight=weight, streams=streams, keeping=keeping))

    def fairness(self) -> Put:
        """Five missions, each promised a little more than the least that the plan without rules has for any of them.

        It is what their contacts carry for each MB that they have, which may be more than one.
        """
        fleet, carried = self.base.fleet, carries_mb(self.base)
        data_mb = fleet.start_fill_mb + fleet.generation_mb_per_s * self.base.horizon_s
        crews = [self._every(5, k) for k in range(5)]
        floor = 1.02 * min(
            sum(float(carried[self._free_of(k)].sum()) for k in crew) / float(data_mb[crew].sum()) for crew in crews)
        return self._needs(*(self._guarantee("MB", crew, floor * float(data_mb[crew].sum())) for crew in crews))
