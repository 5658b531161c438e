"""Rules on what contacts are made with: antennas, sites, and the spacecraft themselves."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from house_yard import HOUR_S, ORBIT_S, Put, Yard

from passplan.planning.battery import PowerNeed
from passplan.planning.problem import Antennas
from passplan.planning.rules.backhaul import BackhaulNeed
from passplan.planning.rules.contact_counts import CountNeed
from passplan.planning.rules.contact_gaps import GapNeed
from passplan.planning.rules.sending_time import OrbitSendingNeed, SpanSendingNeed


class GroundRules(Yard):
    """Rules on antennas and sites."""

    def setup_by_antenna(self) -> Put:
        """Every second antenna takes half a minute more to prepare, and twenty seconds to release."""
        options = self.base.options
        further, slow, late = options.further, options.antenna % 2 == 1, options.further.antenna % 2 == 1
        return lambda p: replace(p, options=replace(
            p.options, prepare_s=options.prepare_s + 30 * slow, release_s=options.release_s + 20 * slow,
            further=replace(further, prepare_s=further.prepare_s + 30 * late, release_s=further.release_s + 20 * late)))

    def beams(self) -> Put:
        """The first antenna serves two at once."""
        beams = np.ones(len(self.base.antennas), dtype=np.int64)
        beams[0] = 2
        return lambda p: replace(p, antennas=Antennas(p.antennas.names, beams))

    def slew(self) -> Put:
        """The second antenna needs two minutes more from some spacecraft to some others, not the other way round."""
        options = self.base.options
        mine = np.flatnonzero(options.antenna == 1)
        begins = mine[np.argsort(options.start_s[mine], kind="stable")]
        low = np.searchsorted(options.start_s[begins], options.end_s[mine])
        high = np.searchsorted(options.start_s[begins], options.end_s[mine] + 180)
        pairs = [(a, b) for a, i, j in zip(mine.tolist(), low.tolist(), high.tolist(), strict=True)
                 for b in begins[i:j].tolist() if (3 * options.spacecraft[a] + options.spacecraft[b]) % 7 == 0]
        return lambda p: replace(p, too_tight=np.array(pairs, dtype=np.int64).reshape(-1, 2))

    def closures(self) -> Put:
        """Each antenna is closed for an hour and a half."""
        antennas = self._antennas()
        from_s = self.rng.integers(0, self.base.horizon_s - 2 * HOUR_S, len(antennas))
        return self._closed(self._held(antennas >= 0, from_s, from_s + 5_400), "closed")

    def rented(self) -> Put:
        """Every third antenna is rented, and four hours of it were declined."""
        antennas = self._antennas()
        from_s = self.rng.integers(4 * HOUR_S, 16 * HOUR_S, len(antennas))
        return self._closed(self._held(antennas % 3 == 2, from_s, from_s + 4 * HOUR_S), "declined")

    def staffing_hours(self) -> Put:
        """Nobody is at the last antenna from 22 h to 5 h."""
        antennas = self._antennas()
        last, no = antennas == antennas[-1], np.zeros_like(antennas)
        night = self._held(last, no, no + 5 * HOUR_S) | self._held(last, no + 22 * HOUR_S, no + 24 * HOUR_S)
        return self._closed(night, "nobody there")

    def pool(self) -> Put:
        """One radio chain for the third and the fourth antenna."""
        return self._shared("equipment_busy", (2, 3), 1)

    def staff(self) -> Put:
        """People for two contacts at a time at the first three antennas."""
        return self._shared("staff_busy", (0, 1, 2), 2)

    def backhaul_day(self) -> Put:
        """The line of two antennas takes a tenth less a day than the plan without rules would bring."""
        antennas = np.array([3, 4], dtype=np.int64) % len(self.base.antennas)
        chosen = self.free[np.isin(self.base.options.antenna[self.free], antennas)]
        most_mb = 0.9 * float(self._link_mb()[chosen].sum())
        return self._needs(BackhaulNeed("east", antennas, ((self._day(), most_mb),), None))

    def backhaul_rate(self) -> Put:
        """The line of the first and the last antenna takes as much as one contact at its best, and a little more."""
        antennas = np.array([0, len(self.base.antennas) - 1], dtype=np.int64)
        return self._needs(BackhaulNeed(
            "west", antennas, (), 1.2 * float(self.base.options.piece_rate_mb_per_s.max(initial=0.0))))


class CraftRules(Yard):
    """Rules on single spacecraft."""

    def contact_gap(self) -> Put:
        """Twenty minutes between contacts."""
        return self._needs(*(GapNeed(k, 1_200, 0) for k in self._every(4, 0)))

    def cool_down(self) -> Put:
        """Half an hour between sendings."""
        return self._needs(*(GapNeed(k, 0, 1_800) for k in self._every(4, 1)))

    def counts_per_orbit(self) -> Put:
        """One contact an orbit."""
        edges = tuple(map(float, range(ORBIT_S, self.base.horizon_s, ORBIT_S)))
        return self._needs(*(CountNeed(k, "orbit", edges, 1) for k in self._every(5, 2)))

    def counts_per_day(self) -> Put:
        """One contact less than the plan without rules has."""
        return self._needs(*(CountNeed(k, "day", (float(self.base.horizon_s),), max(1, len(self._free_of(k)) - 1))
                             for k in self._every(5, 3)))

    def sending_per_contact(self) -> Put:
        """No more than six minutes and a half."""
        options = self.base.options
        mine = np.isin(options.spacecraft, self._every(5, 4))
        return self._closed(mine & (options.end_s - options.start_s > 390), "too long")

    def sending_per_orbit(self) -> Put:
        """Eight minutes an orbit."""
        edges = tuple(map(float, range(ORBIT_S, self.base.horizon_s, ORBIT_S)))
        return self._needs(*(OrbitSendingNeed(k, edges, 480.0) for k in self._every(6, 0)))

    def sending_per_span(self) -> Put:
        """In any eight hours a little over a third of what the plan without rules sends a day."""
        options = self.base.options
        day_s = options.end_s - options.start_s
        return self._needs(*(SpanSendingNeed(k, 8.0 * HOUR_S, max(300.0, 0.4 * float(day_s[self._free_of(k)].sum())))
                             for k in self._every(6, 1)))

    def battery(self) -> Put:
        """A battery that a contact in the dark takes to its floor."""
        edges = np.unique(np.minimum(np.concatenate([
            np.arange(0, self.base.horizon_s + 1, ORBIT_S), np.arange(3_600, self.base.horizon_s, ORBIT_S),
            [self.base.horizon_s]]), self.base.horizon_s)).astype(float)
        lit = edges[:-1] % ORBIT_S < 3_600
        return self._needs(*(PowerNeed(k, 30.0, 12.0, 24.0, edges, 26.0 * lit - 15.0) for k in self._every(8, 5)))

    def slots(self) -> Put:
        """Images are taken for an hour and a half."""
        options, crafts = self.base.options, len(self.base.fleet)
        from_s = self.rng.integers(0, self.base.horizon_s - 2 * HOUR_S, crafts)[options.spacecraft]
        mine = (options.start_s < from_s + 5_400) & (options.end_s > from_s) & (options.spacecraft % 3 == 0)
        return self._closed(mine, "takes images")

    def loaded(self) -> Put:
        """A schedule aboard of one contact that the plan without rules has not, and no other for three hours."""
        options = self.base.options
        early = options.start_s < 3 * HOUR_S
        craft = next(k for k in range(len(self.base.fleet)) if np.any(early & (options.spacecraft == k)))
        mine = np.flatnonzero(early & (options.spacecraft == craft))
        kept = next((o for o in mine.tolist() if o not in set(self.free.tolist())), int(mine[0]))
        silent, decided = self._chosen(mine[mine != kept]), self._needs(self._decided("loaded", "aboard", [kept]))
        closed = self._closed(silent, "sends as the schedule aboard says")
        return lambda p: decided(closed(p))

    def links(self) -> Put:
        """The spacecraft that is to be handed over has two links."""
        links = np.ones(len(self.base.fleet), dtype=np.int64)
        links[max(self._seams())[1]] = 2
        return lambda p: replace(p, fleet=replace(p.fleet, links=links))
