"""Do spacecraft and missions get as many contacts, and contacts for as many MB, as they were promised?"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from passplan.inputs.run import Run
from passplan.planning.audit.making import made_mb
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.standing import Standing

_DAY_MS = 86_400_000
# Tables are rounded, and a plan that is this close to its need may call it met or missed.
_RELATIVE = 1e-6


def promised(run: Run, contacts: Sequence[Contact]) -> Iterator[tuple[tuple[str, str], Standing]]:
    """How each daily need of a spacecraft and each guarantee of a mission fares."""
    for name in run.orbits:
        craft = run.spacecraft[name]
        own = [c for c in contacts if c.spacecraft == name]
        yield from _spans(run, "daily", name, own, craft.least_contacts_per_day, craft.least_mb_per_day, 1)
    for item in run.policy.guarantee:
        own = [c for c in contacts if run.spacecraft[c.spacecraft].mission == item.mission]
        yield from _spans(run, "guarantee", f"mission {item.mission}", own, item.contacts, item.mb, item.days)


def shared(run: Run, contacts: Sequence[Contact], floor: float) -> Iterator[tuple[tuple[str, str], Standing]]:
    """Whether each mission has contacts for ``floor`` times what it has aboard and makes.

    A spacecraft of no mission stands for itself.
    """
    crews: dict[str, list[str]] = {}
    for name in run.orbits:
        crews.setdefault(run.spacecraft[name].mission or name, []).append(name)
    for mission, crew in crews.items():
        data_mb = sum(made_mb(run, name, 0.0, run.horizon_s) + sum(item.start_fill_mb for item in run.data_of(name))
                      for name in crew)
        if floor * data_mb > 0.0:
            got = sum(_mb(run, c) for c in contacts if c.spacecraft in crew)
            yield ("fair", f"share of {mission}"), _standing(got, floor * data_mb, "MB")


def _spans(
    run: Run, kind: str, whose: str, own: Sequence[Contact], contacts: int | None, mb: float | None, days: int,
) -> Iterator[tuple[tuple[str, str], Standing]]:
    """One standing per span of ``days`` days of UTC that the horizon shows all or part of."""
    day = run.start_utc.astype("datetime64[D]")
    while day < run.end_utc:
        following = day + days
        shown = min(following.astype("datetime64[ms]"), run.end_utc) - max(day.astype("datetime64[ms]"), run.start_utc)
        share = int(shown / np.timedelta64(1, "ms")) / (days * _DAY_MS)
        inside = [c for c in own if day <= run.start_utc + np.timedelta64(round(c.start_s * 1e3), "ms") < following]
        span = f"on {day}" if days == 1 else f"from {day} for {days} days"
        due = 0 if contacts is None else int(contacts * share + 1e-9)
        if due > 0:
            yield (kind, f"contacts of {whose} {span}"), _standing(len(inside), due, "contacts")
        if mb is not None:
            yield (kind, f"MB of {whose} {span}"), _standing(sum(_mb(run, c) for c in inside), mb * share, "MB")
        day = following


def _standing(got: float, need: float, unit: str) -> Standing:
    slack = _RELATIVE * need if unit == "MB" else 0.0
    return Standing(got < need - slack, got >= need + slack, f"{got:.6g} {unit} of {need:.6g}")


def _mb(run: Run, contact: Contact) -> float:
    """What the link of a contact carries, but no more than a full storage and what is made meanwhile [MB]."""
    craft = run.spacecraft[contact.spacecraft]
    carried = sum(piece.rate_mbps / 8.0 * (piece.end_s - piece.start_s) for piece in contact.pieces)
    return float(min(carried, craft.storage_mb + made_mb(run, contact.spacecraft, contact.start_s, contact.end_s)))
