"""The audit's front door."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import pandas as pd

from passplan.inputs.run import Run
from passplan.planning.audit.aboard import check_loaded, check_slots
from passplan.planning.audit.battery import check_batteries
from passplan.planning.audit.craft_limits import check_craft_limits
from passplan.planning.audit.decisions import check_forbids
from passplan.planning.audit.faults import Fault, differs
from passplan.planning.audit.interference import check_interference
from passplan.planning.audit.links import check_links
from passplan.planning.audit.mechanics import check_mechanics, check_turnarounds
from passplan.planning.audit.money import check_budget
from passplan.planning.audit.occupancy import check_closures, check_overlaps, check_times
from passplan.planning.audit.rented import check_rented
from passplan.planning.audit.requirements import check_requirements
from passplan.planning.audit.rows import Contact, read_rows
from passplan.planning.audit.sites import check_sites
from passplan.planning.audit.standby import check_standbys
from passplan.planning.audit.storage import check_storage
from passplan.planning.audit.tentative import check_tentative
from passplan.planning.audit.tiers import check_tiers
from passplan.planning.audit.visibility import check_visibility, sight_of


def audit_plan(
    run: Run, contacts: pd.DataFrame, segments: pd.DataFrame, summary: Mapping[str, Any]
) -> list[Fault]:
    """Check a finished plan by a path of its own; an empty list means that nothing is wrong with it.

    ``contacts`` and ``segments`` are the plan's tables (times as ``datetime64`` in UTC), ``summary`` the
    content of ``plan.json``: ``storage`` per spacecraft (``start_mb, generated_mb, delivered_mb, lost_mb,
    left_mb``), ``value``, ``volume_mb`` and ``shortfalls`` (``kind``, ``name``), and what rented antennas and
    tentative closures call for (``to_ask, awaited, give_back, tentative``). Elevations come straight
    from Skyfield; margins, modcods, usable times and volumes from the inputs; storage and value from a
    simulation of their own. Nothing is taken from the model, the search or the windows.
    """
    rows, faults = read_rows(run, contacts, segments)
    for contact in rows:
        faults.extend(_check_contact(run, contact))
    working = [contact for contact in rows if not contact.standby]
    faults.extend(check_standbys(rows))
    faults.extend(check_overlaps(run, rows))
    faults.extend(check_turnarounds(run, rows))
    faults.extend(check_interference(run, working))
    faults.extend(check_craft_limits(run, working))
    faults.extend(check_loaded(run, working))
    faults.extend(check_batteries(run, working, summary))
    faults.extend(check_storage(run, rows, summary))
    faults.extend(check_requirements(run, rows, summary))
    faults.extend(check_sites(run, rows))
    faults.extend(check_budget(run, rows))
    faults.extend(check_rented(run, rows, summary))
    faults.extend(check_tentative(run, rows, summary))
    faults.extend(check_tiers(run, rows, summary))
    return faults


def _check_contact(run: Run, contact: Contact) -> Iterator[Fault]:
    yield from check_times(run, contact)
    if contact.site != run.antennas[contact.antenna].site:
        sentence = f"the site of {contact.antenna} is {run.antennas[contact.antenna].site}, not {contact.site}"
        yield Fault("table", contact.place, sentence)
    if differs(contact.duration_s, contact.end_s - contact.start_s, 1e-3):
        yield Fault("table", contact.place, "its duration does not agree with its start and end")
    yield from check_closures(run, contact)
    yield from check_slots(run, contact)
    yield from check_forbids(run, contact)
    seen = sight_of(run, contact)
    visible = list(check_visibility(run, contact, seen))
    yield from visible
    # Below the mask the link is of no interest, and without an orbit there is none.
    if not visible:
        yield from check_mechanics(run, contact, seen)
        yield from check_links(run, contact, seen)
