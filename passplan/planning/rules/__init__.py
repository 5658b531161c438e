"""One module per operational rule; ``RULES`` lists those that are in force.

To add a rule, write a module with a function that takes a :class:`~passplan.planning.problem.Problem` and
returns :class:`~passplan.planning.rules.terms.Terms`, and list it in ``RULES``. A rule that has something to say
earlier lists more functions: in ``BLOCKS``, ``WISHES``, ``STANDBYS``, ``CAPS`` and ``SILENCES`` before there are
options, in ``NEEDS`` to read what it wants of the run into records of its own (see ``hooks.py``). Nothing else changes.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

from passplan.inputs.run import Run
from passplan.planning.battery import power_needs
from passplan.planning.hooks import Block, Cap, Draft, Silence, Standby, Wish
from passplan.planning.on_air import on_air_needs
from passplan.planning.problem import Problem
from passplan.planning.rules.aboard import loaded_needs, loaded_wishes, silences
from passplan.planning.rules.antenna_time import antenna_time
from passplan.planning.rules.backhaul import backhaul, backhaul_blocks, backhaul_needs
from passplan.planning.rules.beams import beams
from passplan.planning.rules.budget import budget, budget_needs
from passplan.planning.rules.closures import closure_blocks
from passplan.planning.rules.command_interval import command_interval
from passplan.planning.rules.contact_counts import contact_counts, count_needs
from passplan.planning.rules.contact_gaps import contact_gaps, gap_needs
from passplan.planning.rules.decisions import (
    decision_needs,
    decision_standbys,
    decision_wishes,
    decisions,
    forbid_blocks,
)
from passplan.planning.rules.energy import energy
from passplan.planning.rules.guarantees import guarantee_needs, guarantees
from passplan.planning.rules.handovers import handover_needs, handovers
from passplan.planning.rules.interference import interference
from passplan.planning.rules.rented import rented_blocks
from passplan.planning.rules.requests import request_standbys, request_wishes, requests
from passplan.planning.rules.sending_time import sending_caps, sending_needs, sending_time
from passplan.planning.rules.shared_equipment import shared_equipment, shared_needs
from passplan.planning.rules.slew_time import slew_time
from passplan.planning.rules.slots import slot_blocks
from passplan.planning.rules.spacecraft_time import spacecraft_time
from passplan.planning.rules.staffing import staffing_blocks
from passplan.planning.rules.terms import Rule, Terms

RULES: tuple[Rule, ...] = (
    antenna_time,
    beams,
    slew_time,
    spacecraft_time,
    contact_gaps,
    contact_counts,
    sending_time,
    energy,
    requests,
    command_interval,
    handovers,
    interference,
    decisions,
    guarantees,
    shared_equipment,
    backhaul,
    budget,
)
BLOCKS: tuple[Callable[[Run], Iterable[Block]], ...] = (
    closure_blocks,
    forbid_blocks,
    staffing_blocks,
    rented_blocks,
    backhaul_blocks,
    slot_blocks,
)
WISHES: tuple[Callable[[Run], Iterable[Wish]], ...] = (
    request_wishes,
    decision_wishes,
    loaded_wishes,
)
STANDBYS: tuple[Callable[[Run], Iterable[Standby]], ...] = (
    request_standbys,
    decision_standbys,
)
SILENCES: tuple[Callable[[Run], Iterable[Silence]], ...] = (silences,)
CAPS: tuple[Callable[[Run], Iterable[Cap]], ...] = (sending_caps,)
NEEDS: tuple[Callable[[Draft], Iterable[object]], ...] = (
    gap_needs,
    count_needs,
    on_air_needs,
    sending_needs,
    power_needs,
    handover_needs,
    decision_needs,
    loaded_needs,
    guarantee_needs,
    shared_needs,
    backhaul_needs,
    budget_needs,
)


def all_terms(problem: Problem, rules: tuple[Rule, ...] = RULES) -> Terms:
    """What all rules ask for, added up in their order."""
    terms = Terms()
    for rule in rules:
        terms += rule(problem)
    return terms
