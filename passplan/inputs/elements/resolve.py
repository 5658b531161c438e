"""From the spacecraft of a fleet and the element files of a run to one orbit source for each."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pandas as pd

from passplan.inputs.elements.choose import (
    Choice,
    ChoosingRule,
    age_words,
    choose,
    sgp4_fault,
    successive_jump_km,
    valid_span,
)
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.own_file import own_element_set, own_ephemeris
from passplan.inputs.elements.read import read_elements
from passplan.inputs.elements.table import ElementRow, elements_table
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.errors import Findings, PassplanError
from passplan.inputs.fleet import Spacecraft
from passplan.inputs.policy import Policy
from passplan.inputs.reader import Reader
from passplan.inputs.records import datetime64

_JUMP_WARN_KM = 20.0


class ElementsError(PassplanError):
    """Element sets are missing or too old and the policy does not let the run go on.

    ``lines`` holds one sentence for each spacecraft.
    """

    exit_code = 3

    def __init__(self, lines: Iterable[str]) -> None:
        self.lines = tuple(lines)
        super().__init__("\n".join(self.lines))


@dataclass(frozen=True)
class Resolution:
    """Orbit sources by spacecraft, the spacecraft left out with the reason, and the table of element sets."""

    orbits: Mapping[str, ElementSet | Ephemeris]
    left_out: Mapping[str, str]
    elements: pd.DataFrame


@dataclass
class _Horizon:
    """What every look at a spacecraft needs, and what is gathered on the way."""

    start_utc: np.datetime64
    end_utc: np.datetime64
    policy: Policy
    findings: Findings
    rows: list[ElementRow] = field(default_factory=list)


def resolve_orbits(
    spacecraft: Mapping[str, Spacecraft],
    element_paths: Sequence[Path],
    folder_of: Path,
    start_utc: np.datetime64,
    end_utc: np.datetime64,
    policy: Policy,
    reader: Reader,
    findings: Findings,
) -> Resolution:
    """One orbit source for each spacecraft.

    ``ephemeris_file`` goes before ``elements_file`` (both relative to ``folder_of``), and that before the
    sets of ``element_paths`` with the spacecraft's catalogue number; names are never compared. Of several
    sets :func:`~passplan.inputs.elements.choose.choose` takes one: the nearest to the start, or from a
    drop folder the newest. Ages beyond the warning limit, and a jump of more than 20 km between the
    chosen set and the one before it, are warned of. A spacecraft without a usable source is left out
    with a warning.

    Raises :class:`ElementsError` if a source fails and the policy says ``stop``, or if none is left;
    faults in the files come first, as :class:`~passplan.inputs.errors.InputError`.
    """
    horizon = _Horizon(start_utc, end_utc, policy, findings)
    sets = _sets_by_number(spacecraft.values(), element_paths, reader, findings)
    _warn_of_shared_numbers(spacecraft.values(), findings)
    orbits: dict[str, ElementSet | Ephemeris] = {}
    left_out: dict[str, str] = {}
    source: ElementSet | Ephemeris | None
    for name, craft in spacecraft.items():
        if craft.ephemeris_file:
            source, reason = _ephemeris(craft, folder_of, reader, horizon)
        elif craft.elements_file:
            own = own_element_set(craft, folder_of, reader, findings)
            source, reason = _chosen(craft, [own] if own else [], "nearest", horizon)
        else:
            found, rule = sets.get(craft.catalogue_number or 0, ([], "nearest"))
            source, reason = _chosen(craft, found, rule, horizon)
            if not found:
                reason = _nowhere(craft, element_paths)
        if source is not None:
            orbits[name] = source
        else:
            left_out[name] = reason
    _settle(orbits, left_out, policy, findings)
    return Resolution(orbits, left_out, elements_table(horizon.rows))


def _sets_by_number(
    fleet: Iterable[Spacecraft], paths: Sequence[Path], reader: Reader, findings: Findings
) -> dict[int, tuple[list[ElementSet], ChoosingRule]]:
    """The sets of the fleet's numbers in the order of reading; a number met in a drop folder: newest wins."""
    wanted = {craft.catalogue_number for craft in fleet} - {None}
    sets: dict[int, list[ElementSet]] = {}
    dropped: set[int] = set()
    for path in paths:
        is_folder = reader.is_folder(path)
        for one in read_elements(path, reader, findings):
            number = one.catalogue_number
            if number is not None and number in wanted:
                sets.setdefault(number, []).append(one)
                if is_folder:
                    dropped.add(number)
    return {number: (found, "newest" if number in dropped else "nearest") for number, found in sets.items()}


def _chosen(
    craft: Spacecraft, sets: Sequence[ElementSet], rule: ChoosingRule, horizon: _Horizon
) -> tuple[ElementSet | None, str]:
    policy = horizon.policy
    refuse_days = craft.element_refuse_age_days or policy.element_refuse_age_days
    warn_days = craft.element_warn_age_days or policy.element_warn_age_days
    manoeuvres = [datetime64(instant) for instant in craft.manoeuvres_utc]
    choice = choose(sets, horizon.start_utc, horizon.end_utc, refuse_days, rule=rule, manoeuvres=manoeuvres)
    horizon.rows.extend(_row(craft, choice))
    chosen = choice.chosen
    if chosen is None:
        return None, choice.reason
    age_days = chosen.age_days(horizon.start_utc)
    if abs(age_days) > warn_days:
        horizon.findings.warn(
            f"{craft.name}: {age_words(age_days)}, more than {warn_days:g} days; fetch a fresh element set"
        )
    fault = sgp4_fault(chosen, horizon.start_utc, horizon.end_utc)
    if fault is not None:
        horizon.findings.warn(f"{craft.name}: SGP4 fails within the horizon ({fault}); no contacts from there on")
    _warn_of_jump(craft, choice, horizon.findings)
    first, last = valid_span(chosen, manoeuvres)
    for instant, word in ((last, "after"), (first, "before")):
        if horizon.start_utc < instant < horizon.end_utc:
            when = str(instant.astype("datetime64[s]")).replace("T", " ")
            side = "after" if word == "before" else "before"
            horizon.findings.warn(
                f"{craft.name}: no contacts {word} its manoeuvre of {when} UTC, as the element set is from {side} it"
            )
    return chosen, ""


def _warn_of_jump(craft: Spacecraft, choice: Choice, findings: Findings) -> None:
    older, newer = choice.predecessor, choice.chosen
    if older is None or newer is None:
        return
    jump_km = successive_jump_km(older, newer)
    if jump_km > _JUMP_WARN_KM:
        apart_days = older.age_days(newer.epoch_utc)
        findings.warn(
            f"{craft.name}: its element set jumps by {jump_km:.0f} km against the one {apart_days:.1f} days before "
            f"({newer.source}, {newer.place}); a manoeuvre, or a mix-up of objects"
        )


def _ephemeris(craft: Spacecraft, folder: Path, reader: Reader, horizon: _Horizon) -> tuple[Ephemeris | None, str]:
    found = own_ephemeris(craft, folder, reader, horizon.start_utc, horizon.end_utc, horizon.findings)
    if found.ephemeris is not None:
        use = "chosen" if found.usable else "unusable"
        horizon.rows.append(
            ElementRow(
                craft.name,
                craft.catalogue_number,
                found.ephemeris.object_name,
                np.datetime64("NaT", "ms"),
                float("nan"),
                use,
                str(found.ephemeris.source),
                "",
            )
        )
    return (found.ephemeris if found.usable else None), found.reason


def _row(craft: Spacecraft, choice: Choice) -> list[ElementRow]:
    return [
        ElementRow(
            craft.name,
            one.element_set.catalogue_number,
            one.element_set.name,
            one.element_set.epoch_utc,
            one.age_days,
            one.use,
            str(one.element_set.source),
            one.element_set.place,
        )
        for one in choice.candidates
    ]


def _warn_of_shared_numbers(fleet: Iterable[Spacecraft], findings: Findings) -> None:
    owners: dict[int, str] = {}
    for craft in fleet:
        number = craft.catalogue_number
        if number is not None and owners.setdefault(number, craft.name) != craft.name:
            findings.warn(f"{owners[number]} and {craft.name} have the same catalogue number {number}; check the fleet")


def _nowhere(craft: Spacecraft, paths: Sequence[Path]) -> str:
    files = ", ".join(map(str, paths)) or "(no element files are named)"
    return f"catalogue number {craft.catalogue_number} is in none of the element files: {files}"


def _settle(orbits: Mapping[str, object], left_out: Mapping[str, str], policy: Policy, findings: Findings) -> None:
    """Warn of those left out, or stop the run."""
    lines = [f"{name}: {reason}" for name, reason in left_out.items()]
    if lines and (policy.when_elements_fail == "stop" or not orbits):
        findings.raise_if_any()
        raise ElementsError([f"{line}; fetch fresh element sets, or correct the fleet" for line in lines])
    for line in lines:
        findings.warn(f"{line}; left out of this run")
