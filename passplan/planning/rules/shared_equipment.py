"""Equipment that antennas of a site share, and people who look after them: so many contacts at a time."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Integers
from passplan.planning.hooks import Draft
from passplan.planning.problem import Problem
from passplan.planning.rules.rows import at_the_same_time
from passplan.planning.rules.terms import Terms
from passplan.planning.setup import means


@dataclass(frozen=True, eq=False)
class SharedNeed:
    """At most ``at_once`` of ``options`` hold their ``[start_s, end_s)`` at a time; ``reason`` says why.

    An option that holds two antennas is there twice.
    """

    name: str
    reason: str
    options: Integers
    start_s: Integers
    end_s: Integers
    at_once: int


def shared_needs(draft: Draft) -> Iterator[SharedNeed]:
    """One need for each pool, and one for each site that limits its contacts."""
    run, holds = draft.run, draft.problem.options.holds
    contacts = [one for candidate in draft.candidates for one in (candidate, *candidate.further)]
    names = draft.problem.antennas.names
    held_from_s, held_until_s = holds.start_s - holds.prepare_s, holds.end_s + holds.release_s
    for site in run.sites.values():
        here = {k for k, name in enumerate(names) if run.antennas[name].site == site.name}
        for pool in site.pool:
            sharing = {k for k in here if not pool.antennas or names[k] in pool.antennas}
            mine = np.array([
                k for k in np.flatnonzero(np.isin(holds.antenna, sorted(sharing))).tolist()
                if means(pool, contacts[k].service, contacts[k].carriers_mhz)], dtype=np.int64)
            start_s = (held_from_s if pool.with_setup else holds.start_s)[mine]
            end_s = (held_until_s if pool.with_setup else holds.end_s)[mine]
            yield SharedNeed(
                f"{pool.name} of {site.name}", "equipment_busy", holds.option[mine], start_s, end_s, pool.at_once)
        if site.contacts_at_once is not None:
            mine = np.flatnonzero(np.isin(holds.antenna, sorted(here)))
            yield SharedNeed(
                f"the staff of {site.name}", "staff_busy", holds.option[mine], held_from_s[mine], held_until_s[mine],
                site.contacts_at_once)


def shared_equipment(problem: Problem) -> Terms:
    """Rows for every instant at which more is wanted than there is."""
    return Terms(rows=tuple(
        at_the_same_time(need.reason, need.name, need.options, need.start_s, need.end_s, need.at_once)
        for need in problem.needs_of(SharedNeed)))
