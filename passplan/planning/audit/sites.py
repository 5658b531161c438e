"""What the antennas of a site share: equipment, staff and their hours, the line to the outside."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import numpy as np

from passplan.inputs.ground import Site
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.inputs.site_rules import WEEKDAYS, Backhaul
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.occupancy import held, is_of_kind
from passplan.planning.audit.rows import Contact

# A sum of decimals may miss a limit by this part of it.
_ROUNDING = 1e-9
_DAY_S = 86_400.0


def check_sites(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Pools, staff, staffing hours and backhaul of every site."""
    for site in run.sites.values():
        here = [contact for contact in contacts if run.antennas[contact.antenna].site == site.name]
        yield from _check_pools(run, site, here)
        yield from _check_hours(run, site, here)
        if site.backhaul is not None:
            yield from _check_line(run, site, site.backhaul, here)


def _check_pools(run: Run, site: Site, here: Sequence[Contact]) -> Iterator[Fault]:
    for pool in site.pool:
        users = [contact for contact in here
                 if contact.antenna in (pool.antennas or (contact.antenna,)) and is_of_kind(run, contact, pool)]
        spans = [(*(held(run, one) if pool.with_setup else (one.start_s, one.end_s)), 1.0) for one in users]
        most = _most_at_once(spans)
        if most > pool.at_once:
            yield Fault("equipment", f"site {site.name}",
                        f"{most:g} contacts use {pool.name} at a time, there is enough for {pool.at_once}")
    if site.contacts_at_once is not None:
        most = _most_at_once([(*held(run, one), 1.0) for one in here])
        if most > site.contacts_at_once:
            yield Fault("staff", f"site {site.name}",
                        f"{most:g} contacts go on at a time, the staff can look after {site.contacts_at_once}")


def _most_at_once(spans: Iterable[tuple[float, float, float]]) -> float:
    """The largest sum of amounts over any instant of half-open spans (start, end, amount)."""
    steps = sorted([step for a, b, amount in spans for step in ((a, 1, amount), (b, 0, -amount))])
    level, most = 0.0, 0.0
    for _, _, amount in steps:
        level += amount
        most = max(most, level)
    return most


def _check_hours(run: Run, site: Site, here: Sequence[Contact]) -> Iterator[Fault]:
    """Every contact, with preparing and releasing, lies within joined hours of staffing."""
    if not site.staffed:
        return
    for contact in here:
        from_s, until_s = held(run, contact)
        instant = from_s
        # Walk from shift to shift: each takes over before or when the one before it ends.
        while instant < until_s:
            reached = max((end for start, end in _shifts_near(run, site, instant) if start <= instant < end),
                          default=instant)
            if reached == instant:
                break
            instant = reached
        if instant < until_s:
            yield Fault("staffing", contact.place, f"nobody is at {site.name} for all of it")


def _shifts_near(run: Run, site: Site, instant_s: float) -> Iterator[tuple[float, float]]:
    """Shifts [s from the start] of the days around an instant."""
    start: datetime = run.start_utc.astype("datetime64[ms]").astype(datetime).replace(tzinfo=UTC)
    for shift in site.staffed:
        zone = ZoneInfo(site.time_zone or "UTC") if shift.zone == "site" else ZoneInfo("UTC")
        today = (start + timedelta(seconds=instant_s)).astimezone(zone).date()
        for offset in range(-2, 3):
            day = today + timedelta(days=offset)
            if WEEKDAYS[day.weekday()] not in shift.days:
                continue
            closing_day = day if shift.closes > shift.opens else day + timedelta(days=1)
            yield _wall(start, day, shift.opens, zone), _wall(start, closing_day, shift.closes, zone)


def _wall(start: datetime, day: datetime | object, minutes: int, zone: ZoneInfo) -> float:
    """Seconds from the start of a time on the wall clock."""
    midnight = datetime.fromisoformat(f"{day}T00:00:00") + timedelta(minutes=minutes)
    return (midnight.replace(tzinfo=zone).astimezone(UTC) - start).total_seconds()


def _check_line(run: Run, site: Site, line: Backhaul, here: Sequence[Contact]) -> Iterator[Fault]:
    millisecond = np.timedelta64(1, "ms")
    closed = [[float((datetime64(edge) - run.start_utc) / millisecond) / 1e3 for edge in (one.start_utc, one.end_utc)]
              for one in line.closure]
    place = f"site {site.name}"
    if not line.buffered:
        for contact in here:
            if any(contact.start_s < b and a < contact.end_s for a, b in closed):
                yield Fault("backhaul", contact.place, f"the line of {site.name} is closed for a part of it")
        if line.rate_mbps is not None:
            sending = [(one.pieces[0].start_s, one.pieces[-1].end_s, max(piece.rate_mbps for piece in one.pieces))
                       for one in here if one.pieces]
            most = _most_at_once(sending)
            if most > line.rate_mbps * (1.0 + _ROUNDING) + 1e-6:
                yield Fault("backhaul", place,
                            f"contacts bring up to {most:.6g} Mbit/s at a time, the line carries {line.rate_mbps:g}")
    first = float((run.start_utc.astype("datetime64[D]") - run.start_utc) / np.timedelta64(1, "s"))
    for start_s in np.arange(first, run.horizon_s, _DAY_S).tolist():
        limits = [] if line.mb_per_day is None else [line.mb_per_day]
        if line.buffered and line.rate_mbps is not None:
            limits.append(line.rate_mbps / 8.0 * _open_s(closed, start_s))
        carried_mb = sum(
            piece.rate_mbps / 8.0 * max(0.0, min(piece.end_s, start_s + _DAY_S) - max(piece.start_s, start_s))
            for contact in here for piece in contact.pieces)
        if limits and carried_mb > min(limits) * (1.0 + _ROUNDING) + 1e-6:
            day = (run.start_utc + np.timedelta64(round(start_s), "s")).astype("datetime64[D]")
            yield Fault("backhaul", place, f"on {day} contacts can bring {carried_mb:.6g} MB, "
                                           f"the line takes {min(limits):.6g} MB")


def _open_s(closed: Iterable[Sequence[float]], start_s: float) -> float:
    """Seconds of a day that starts at ``start_s`` in which the line carries; closures are rounded outward."""
    shut = np.zeros(round(_DAY_S), dtype=bool)
    for a, b in closed:
        low, high = (int(np.clip(edge - start_s, 0, _DAY_S)) for edge in (np.floor(a), np.ceil(b)))
        shut[low:high] = True
    return _DAY_S - float(shut.sum())
