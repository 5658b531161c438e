"""Every rule of the house on a yardstick instance: one function each, which puts it on a problem.

All are seeded, and scaled by a plan made without any of them (``free``), so that each of them gets in its way. Options
keep their numbers, so that rules can be put on and left off in any combination.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from passplan.planning.arrays import Flags, Integers
from passplan.planning.battery import PowerNeed
from passplan.planning.change_cost import ChangeNeed
from passplan.planning.days import Day
from passplan.planning.on_air import OnAir
from passplan.planning.problem import Antennas, CommandNeed, Conflict, Crowd, Problem, RequestNeed
from passplan.planning.rules.backhaul import BackhaulNeed
from passplan.planning.rules.budget import BudgetNeed
from passplan.planning.rules.contact_counts import CountNeed
from passplan.planning.rules.contact_gaps import GapNeed
from passplan.planning.rules.decisions import DecidedContact, ForbiddenWindow
from passplan.planning.rules.guarantees import GuaranteeNeed, carries_mb
from passplan.planning.rules.handovers import HandoverNeed
from passplan.planning.rules.sending_time import OrbitSendingNeed, SpanSendingNeed
from passplan.planning.rules.shared_equipment import SharedNeed
from passplan.planning.streams import Keeping, Stream, steady

_ORBIT_S = 5_700
_HOUR_S = 3_600


@dataclass(frozen=True, eq=False)
class House:
    """Rules for one instance. ``free`` is a plan without them; antennas and spacecraft take turns in having one."""

    base: Problem
    free: Integers
    rng: np.random.Generator

    def rules(self) -> dict[str, Callable[[Problem], Problem]]:
        """All of them by name, in the order in which they are put on. Each draws from a generator of its own."""
        makers = (
            self.setup_by_antenna, self.beams, self.slew, self.closures, self.rented, self.staffing_hours, self.pool,
            self.staff, self.backhaul_day, self.backhaul_rate, self.contact_gap, self.cool_down, self.counts_per_orbit,
            self.counts_per_day, self.sending_per_contact, self.sending_per_orbit, self.sending_per_span, self.battery,
            self.slots, self.loaded, self.commands, self.requests, self.pins, self.forbids, self.emergency,
            self.daily_contacts, self.daily_mb, self.mission, self.interference, self.crowd, self.budget, self.classes,
            self.fairness, *((self.links, self.handover) if self._seams() else ()))
        return {maker.__name__.replace("_", " "): maker() for maker in makers}

    # Antennas and sites.

    def setup_by_antenna(self) -> Callable[[Problem], Problem]:
        """Every second antenna takes half a minute more to prepare, and twenty seconds to release."""
        options = self.base.options
        slow = options.antenna % 2 == 1
        return lambda p: replace(p, options=replace(
            p.options, prepare_s=options.prepare_s + 30 * slow, release_s=options.release_s + 20 * slow))

    def beams(self) -> Callable[[Problem], Problem]:
        """The first antenna serves two at once."""
        beams = np.ones(len(self.base.antennas), dtype=np.int64)
        beams[0] = 2
        return lambda p: replace(p, antennas=Antennas(p.antennas.names, beams))

    def slew(self) -> Callable[[Problem], Problem]:
        """The second antenna needs two minutes more from some spacecraft to some others, not the other way round."""
        options = self.base.options
        mine = np.flatnonzero(options.antenna == 1)
        begins = mine[np.argsort(options.start_s[mine], kind="stable")]
        low = np.searchsorted(options.start_s[begins], options.end_s[mine])
        high = np.searchsorted(options.start_s[begins], options.end_s[mine] + 180)
        pairs = [(a, b) for a, i, j in zip(mine.tolist(), low.tolist(), high.tolist(), strict=True)
                 for b in begins[i:j].tolist() if (3 * options.spacecraft[a] + options.spacecraft[b]) % 7 == 0]
        return lambda p: replace(p, too_tight=np.array(pairs, dtype=np.int64).reshape(-1, 2))

    def closures(self) -> Callable[[Problem], Problem]:
        """Each antenna is closed for an hour and a half."""
        options, horizon_s = self.base.options, self.base.horizon_s
        from_s = self.rng.integers(0, horizon_s - 2 * _HOUR_S, len(self.base.antennas))[options.antenna]
        return self._closed(self._held(from_s, from_s + 5_400), "closed")

    def rented(self) -> Callable[[Problem], Problem]:
        """Every third antenna is rented, and four hours of it were declined."""
        options = self.base.options
        from_s = self.rng.integers(4 * _HOUR_S, 16 * _HOUR_S, len(self.base.antennas))[options.antenna]
        return self._closed(self._held(from_s, from_s + 4 * _HOUR_S) & (options.antenna % 3 == 2), "declined")

    def staffing_hours(self) -> Callable[[Problem], Problem]:
        """Nobody is at the last antenna from 22 h to 5 h."""
        options = self.base.options
        night = self._held(0, 5 * _HOUR_S) | self._held(22 * _HOUR_S, 24 * _HOUR_S)
        return self._closed(night & (options.antenna == len(self.base.antennas) - 1), "nobody there")

    def pool(self) -> Callable[[Problem], Problem]:
        """One radio chain for the third and the fourth antenna."""
        return self._shared("equipment_busy", (2, 3), 1)

    def staff(self) -> Callable[[Problem], Problem]:
        """People for two contacts at a time at the first three antennas."""
        return self._shared("staff_busy", (0, 1, 2), 2)

    def backhaul_day(self) -> Callable[[Problem], Problem]:
        """The line of two antennas takes a tenth less a day than the plan without rules would bring."""
        antennas = np.array([3, 4], dtype=np.int64) % len(self.base.antennas)
        chosen = self.free[np.isin(self.base.options.antenna[self.free], antennas)]
        most_mb = 0.9 * float(self._link_mb()[chosen].sum())
        return self._needs(BackhaulNeed("east", antennas, ((self._day(), most_mb),), None))

    def backhaul_rate(self) -> Callable[[Problem], Problem]:
        """The line of the first and the last antenna takes as much as one contact at its best, and a little more."""
        antennas = np.array([0, len(self.base.antennas) - 1], dtype=np.int64)
        return self._needs(BackhaulNeed(
            "west", antennas, (), 1.2 * float(self.base.options.piece_rate_mb_per_s.max(initial=0.0))))

    # Spacecraft.

    def contact_gap(self) -> Callable[[Problem], Problem]:
        """Twenty minutes between contacts."""
        return self._needs(*(GapNeed(k, 1_200, 0) for k in self._every(4, 0)))

    def cool_down(self) -> Callable[[Problem], Problem]:
        """Half an hour between sendings."""
        return self._needs(*(GapNeed(k, 0, 1_800) for k in self._every(4, 1)))

    def counts_per_orbit(self) -> Callable[[Problem], Problem]:
        """One contact an orbit."""
        edges = tuple(map(float, range(_ORBIT_S, self.base.horizon_s, _ORBIT_S)))
        return self._needs(*(CountNeed(k, "orbit", edges, 1) for k in self._every(5, 2)))

    def counts_per_day(self) -> Callable[[Problem], Problem]:
        """One contact less than the plan without rules has."""
        return self._needs(*(CountNeed(k, "day", (float(self.base.horizon_s),), max(1, len(self._free_of(k)) - 1))
                             for k in self._every(5, 3)))

    def sending_per_contact(self) -> Callable[[Problem], Problem]:
        """No more than six minutes and a half."""
        options = self.base.options
        mine = np.isin(options.spacecraft, self._every(5, 4))
        return self._closed(mine & (options.end_s - options.start_s > 390), "too long")

    def sending_per_orbit(self) -> Callable[[Problem], Problem]:
        """Eight minutes an orbit."""
        edges = tuple(map(float, range(_ORBIT_S, self.base.horizon_s, _ORBIT_S)))
        return self._needs(*(OrbitSendingNeed(k, edges, 480.0) for k in self._every(6, 0)))

    def sending_per_span(self) -> Callable[[Problem], Problem]:
        """In any eight hours a little over a third of what the plan without rules sends a day."""
        options = self.base.options
        day_s = options.end_s - options.start_s
        return self._needs(*(SpanSendingNeed(k, 8.0 * _HOUR_S, max(300.0, 0.4 * float(day_s[self._free_of(k)].sum())))
                             for k in self._every(6, 1)))

    def battery(self) -> Callable[[Problem], Problem]:
        """A battery that a contact in the dark takes to its floor."""
        edges = np.unique(np.minimum(np.concatenate([
            np.arange(0, self.base.horizon_s + 1, _ORBIT_S), np.arange(3_600, self.base.horizon_s, _ORBIT_S),
            [self.base.horizon_s]]), self.base.horizon_s)).astype(float)
        lit = edges[:-1] % _ORBIT_S < 3_600
        return self._needs(*(PowerNeed(k, 30.0, 12.0, 24.0, edges, 26.0 * lit - 15.0) for k in self._every(8, 5)))

    def slots(self) -> Callable[[Problem], Problem]:
        """Images are taken for an hour and a half."""
        options, crafts = self.base.options, len(self.base.fleet)
        from_s = self.rng.integers(0, self.base.horizon_s - 2 * _HOUR_S, crafts)[options.spacecraft]
        mine = (options.start_s < from_s + 5_400) & (options.end_s > from_s) & (options.spacecraft % 3 == 0)
        return self._closed(mine, "takes images")

    def loaded(self) -> Callable[[Problem], Problem]:
        """A schedule aboard of one contact that the plan without rules has not, and no other for three hours."""
        options = self.base.options
        early = options.start_s < 3 * _HOUR_S
        craft = next(k for k in range(len(self.base.fleet)) if np.any(early & (options.spacecraft == k)))
        mine = np.flatnonzero(early & (options.spacecraft == craft))
        kept = next((o for o in mine.tolist() if o not in set(self.free.tolist())), int(mine[0]))
        silent = ForbiddenWindow(mine[mine != kept], "sends as the schedule aboard says")
        return self._needs(silent, self._decided("loaded", "aboard", [kept]))

    def links(self) -> Callable[[Problem], Problem]:
        """The spacecraft that is to be handed over has two links."""
        links = np.ones(len(self.base.fleet), dtype=np.int64)
        links[max(self._seams())[1]] = 2
        return lambda p: replace(p, fleet=replace(p.fleet, links=links))

    # What must be in the plan, or must not.

    def handover(self) -> Callable[[Problem], Problem]:
        """Contacts that follow a spacecraft from one antenna to another, half a minute on both."""
        _, craft, start_s, end_s = max(self._seams())
        asked = RequestNeed(
            "followed", self.base.fleet.names[craft], craft, frozenset(range(len(self.base.antennas))), "downlink",
            start_s, end_s, 60)
        return self._needs(HandoverNeed(asked, 30))

    def commands(self) -> Callable[[Problem], Problem]:
        """A command contact every eight hours, on every second antenna."""
        options = self.base.options
        needs = tuple(CommandNeed(k, 8 * _HOUR_S, -2 * _HOUR_S) for k in self._every(4, 3))
        return lambda p: replace(
            p, commands=needs, options=replace(p.options, command=options.antenna % 2 == 0))

    def requests(self) -> Callable[[Problem], Problem]:
        """A contact of five minutes, within the four hours of the day in which the plan without rules has none so long.

        Each spacecraft is asked for where one would fit.
        """
        options, fleet, needs = self.base.options, self.base.fleet, list[RequestNeed]()
        antennas, length_s = frozenset(range(len(self.base.antennas))), options.end_s - options.start_s
        for k in self._every(9, 4):
            mine, free = np.flatnonzero((options.spacecraft == k) & (length_s >= 300)), self._free_of(k)
            has = free[length_s[free] >= 300]
            for from_s in range(0, self.base.horizon_s - 4 * _HOUR_S, _HOUR_S):
                inside = (options.start_s >= from_s) & (options.end_s <= from_s + 4 * _HOUR_S)
                if np.any(inside[mine]) and not np.any(inside[has]):
                    needs.append(RequestNeed(f"asked-{k}", fleet.names[k], k, antennas, "downlink", from_s,
                                             from_s + 4 * _HOUR_S, 300))
                    break
        return lambda p: replace(p, requests=(*p.requests, *needs))

    def pins(self) -> Callable[[Problem], Problem]:
        """Three contacts that the plan without rules has not."""
        some = self.rng.choice(np.setdiff1d(np.arange(len(self.base.options)), self.free), 3, replace=False)
        return self._needs(*(self._decided("pin", f"pin {o}", [o]) for o in some.tolist()))

    def forbids(self) -> Callable[[Problem], Problem]:
        """A tenth of the windows that the plan without rules uses."""
        used = np.unique(self.base.options.window[self.free])
        return self._closed(np.isin(
            self.base.options.window, self.rng.choice(used, -(-len(used) // 10), replace=False)), "forbidden")

    def emergency(self) -> Callable[[Problem], Problem]:
        """One spacecraft within the hour after it is first in view."""
        options = self.base.options
        order = np.argsort(options.start_s, kind="stable")
        craft = next(int(options.spacecraft[o]) for o in order if options.spacecraft[o] not in (
            options.spacecraft[self.free[options.start_s[self.free] < 2 * _HOUR_S]]))
        mine = np.flatnonzero(options.spacecraft == craft)
        first_s = int(options.start_s[mine].min())
        return self._needs(self._decided(
            "emergency", "safe mode", mine[options.start_s[mine] < first_s + _HOUR_S].tolist()))

    def daily_contacts(self) -> Callable[[Problem], Problem]:
        """One contact more than the plan without rules has."""
        return self._needs(*(self._guarantee("contacts", [k], len(self._free_of(k)) + 1.0) for k in self._every(25, 6)))

    def daily_mb(self) -> Callable[[Problem], Problem]:
        """A fifth more than the plan without rules can bring down."""
        carried = carries_mb(self.base)
        return self._needs(*(self._guarantee("MB", [k], 1.2 * float(carried[self._free_of(k)].sum()) + 100.0)
                             for k in self._every(25, 7)))

    def mission(self) -> Callable[[Problem], Problem]:
        """For the spacecraft that count least, a tenth more than the plan without rules can bring down."""
        crew = np.flatnonzero(self.base.fleet.weight == self.base.fleet.weight.min())[:8].tolist()
        carried = carries_mb(self.base)
        total = sum(float(carried[self._free_of(k)].sum()) for k in crew)
        return self._needs(self._guarantee("MB", crew, 1.1 * total + 100.0))

    # Between spacecraft, and money.

    def interference(self) -> Callable[[Problem], Problem]:
        """Some pairs that the plan without rules has at the same time disturb each other."""
        found = tuple(
            Conflict(f"{a} and {b}", int(craft[a]), int(self.base.options.antenna[a]), int(craft[b]), low, high)
            for craft in (self.base.options.spacecraft,) for a, b, low, high in self._together()[:20:2])
        return lambda p: replace(p, conflicts=found)

    def crowd(self) -> Callable[[Problem], Problem]:
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

    def budget(self) -> Callable[[Problem], Problem]:
        """Four fifths of what the plan without rules costs."""
        return self._needs(BudgetNeed(0.8 * float(self.base.options.cost[self.free].sum()), (self._day(),)))

    # Data and fairness.

    def classes(self) -> Callable[[Problem], Problem]:
        """Alerts that fade within four hours, frames with a deadline of five, and calibration that hardly counts."""
        fleet, horizon_s = self.base.fleet, float(self.base.horizon_s)
        mine = set(self._every(5, 0))

        def part(craft: int, name: str, worth: float, share: float) -> Stream:
            rate = share * float(fleet.generation_mb_per_s[craft])
            return steady(name, worth * float(fleet.weight[craft]), share * float(fleet.start_fill_mb[craft]), rate,
                          horizon_s)

        streams = tuple(() if k not in mine else (
            replace(part(k, "alerts", 2.0, 0.1), fresh_age_s=np.array([0.0, 4.0 * _HOUR_S]),
                    fresh_share=np.array([1.0, 0.5])),
            replace(part(k, "frames", 1.0, 0.7), deadline_s=5.0 * _HOUR_S, start_age_s=2.0 * _HOUR_S),
            part(k, "calibration", 0.3, 0.2)) for k in range(len(fleet)))
        keeping = tuple(Keeping(k % 10 == 5, "contact" if k % 10 == 0 and k in mine else "")
                        for k in range(len(fleet)))
        weight = fleet.weight * np.where(np.isin(np.arange(len(fleet)), list(mine)), 2.0, 1.0)
        return lambda p: replace(p, fleet=replace(p.fleet, weight=weight, streams=streams, keeping=keeping))

    def fairness(self) -> Callable[[Problem], Problem]:
        """Five missions, each promised a little more than the least share that the plan without rules brings any."""
        fleet, carried = self.base.fleet, carries_mb(self.base)
        data_mb = fleet.start_fill_mb + fleet.generation_mb_per_s * self.base.horizon_s
        crews = [self._every(5, k) for k in range(5)]
        floor = 1.02 * min(
            sum(float(carried[self._free_of(k)].sum()) for k in crew) / float(data_mb[crew].sum()) for crew in crews)
        return self._needs(*(self._guarantee("MB", crew, min(1.0, floor) * float(data_mb[crew].sum()))
                             for crew in crews))

    # What they are made of.

    def _needs(self, *needs: object) -> Callable[[Problem], Problem]:
        return lambda p: replace(p, needs=(*p.needs, *needs))

    def _closed(self, options: Flags, detail: str) -> Callable[[Problem], Problem]:
        return self._needs(ForbiddenWindow(np.flatnonzero(options), detail))

    def _held(self, from_s: Integers | int, until_s: Integers | int) -> Flags:
        o = self.base.options
        return np.asarray((o.start_s - o.prepare_s < until_s) & (o.end_s + o.release_s > from_s))

    def _shared(self, reason: str, antennas: Sequence[int], at_once: int) -> Callable[[Problem], Problem]:
        options = self.base.options
        mine = np.flatnonzero(np.isin(options.antenna, antennas))
        return self._needs(SharedNeed(
            reason, reason, mine, options.start_s[mine] - options.prepare_s[mine], options.end_s[mine], at_once))

    def _decided(self, kind: str, name: str, options: Sequence[int]) -> DecidedContact:
        owner = self.base.fleet.names[int(self.base.options.spacecraft[options[0]])]
        return DecidedContact(kind, name, owner, np.array(options, dtype=np.int64), "")  # type: ignore[arg-type]

    def _guarantee(self, unit: str, crew: Sequence[int], need: float) -> GuaranteeNeed:
        return GuaranteeNeed(
            "daily" if len(crew) == 1 else "guarantee", f"{unit} of {crew}", frozenset(crew), unit, need, 0,
            self.base.horizon_s)

    def _every(self, step: int, first: int) -> list[int]:
        return list(range(first, len(self.base.fleet), step))

    def _free_of(self, craft: int) -> Integers:
        return self.free[self.base.options.spacecraft[self.free] == craft]

    def _seams(self) -> list[tuple[int, int, int, int]]:
        """Where two antennas see a spacecraft one after the other, together between: how long, which, from, until."""
        w = self.base.windows
        return [
            (int(w.end_s[b] - w.start_s[a]), int(w.spacecraft[a]), int(w.start_s[a]), int(w.end_s[b]))
            for craft in range(len(self.base.fleet)) for mine in [np.flatnonzero(w.spacecraft == craft).tolist()]
            for a in mine for b in mine
            if w.start_s[a] + 120 < w.start_s[b] and w.start_s[b] + 120 < w.end_s[a] and w.end_s[a] + 120 < w.end_s[b]]

    def _day(self) -> Day:
        return Day("the day", 0, self.base.horizon_s)

    def _link_mb(self) -> np.ndarray:
        options = self.base.options
        carried = np.zeros(len(options))
        np.add.at(carried, np.repeat(np.arange(len(options)), np.diff(options.piece_offset)),
                  options.piece_rate_mb_per_s * (options.piece_end_s - options.piece_start_s))
        return carried

    def _together(self) -> list[tuple[int, int, int, int]]:
        """Pairs of contacts of the free plan that overlap, in time order, with the overlap."""
        options, free = self.base.options, self.free.tolist()
        found = [(a, b, max(int(options.start_s[a]), int(options.start_s[b])),
                  min(int(options.end_s[a]), int(options.end_s[b]))) for a in free for b in free if a != b]
        return sorted((row for row in found if row[2] < row[3]), key=lambda row: (row[2], row[0], row[1]))


def priced(problem: Problem) -> Problem:
    """The problem with prices on every third antenna (2 a minute, 12 at least), and the time on air."""
    options = problem.options
    minutes = np.ceil((options.end_s - options.start_s) / 60.0)
    cost = np.where(options.antenna % 3 == 2, np.maximum(12.0, 2.0 * minutes), 0.0)
    on_air = OnAir(options.start_s, options.end_s, np.full(len(options), 60.0))
    return replace(problem, options=replace(options, cost=cost), needs=(on_air,))


def published(problem: Problem, plan: Integers) -> Problem:
    """The problem in order, with ``plan`` as the published one: changes cost, the first two hours are frozen."""
    options, fleet = problem.options, problem.fleet
    keeps = np.full(len(options), -1, dtype=np.int64)
    for k, o in enumerate(plan.tolist()):
        same = (options.window == options.window[o]) & (np.abs(options.start_s - options.start_s[o]) <= 60)
        keeps[same & (np.abs(options.end_s - options.end_s[o]) <= 60)] = k
    cost = 200.0 * 0.5 ** (options.start_s[plan] / (6.0 * _HOUR_S))
    frozen = tuple(DecidedContact(
        "frozen", f"frozen {o}", fleet.names[int(options.spacecraft[o])], np.array([o], dtype=np.int64), "")
        for o in plan[options.start_s[plan] < 2 * _HOUR_S].tolist())
    return replace(
        problem, in_order=True, spill_cost_per_mb=0.0, worth_per_money=0.0, base_worth=-float(cost.sum()),
        extra_price=-np.where(keeps >= 0, cost[keeps], 0.0), needs=(*problem.needs, ChangeNeed(keeps, cost), *frozen))
