"""Reads a run: config, fleet, ground, calendars, requests, policy and orbits, with every fault reported at once."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from pathlib import Path
from typing import Any

import numpy as np
from pydantic import TypeAdapter

from passplan.inputs.aboard import read_slots
from passplan.inputs.bookings import read_bookings
from passplan.inputs.calendar_records import Closure, Request
from passplan.inputs.closures import ClosureSource, read_closures
from passplan.inputs.config import RunConfig, read_config
from passplan.inputs.crosscheck import (
    check_fleet,
    check_ground,
    check_guarantees,
    check_matches,
    check_mounts,
    check_requests,
)
from passplan.inputs.data import DataClass, classes_by_craft, read_all_series
from passplan.inputs.decisions import read_decisions, read_published, with_last_commands
from passplan.inputs.elements.resolve import ElementsError, resolve_orbits
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.fleet import CommandRadio, DownlinkRadio, Radio, Spacecraft
from passplan.inputs.generation import Series
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.modcods import ModcodTable, builtin_names, builtin_table, read_modcod_table
from passplan.inputs.mounts import Mount
from passplan.inputs.pfd import PfdLimit, builtin_pfd_limits, read_pfd_limits
from passplan.inputs.policy import Policy
from passplan.inputs.reader import Reader
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.inputs.tables import checked, placed_in_files, placed_records, read_toml, reject_unknown, unique

_RADIO: TypeAdapter[DownlinkRadio | CommandRadio] = TypeAdapter(Radio)


@dataclass(frozen=True)
class _Fleet:
    spacecraft: dict[str, Spacecraft]
    radios: dict[str, DownlinkRadio | CommandRadio]
    tables: dict[str, ModcodTable]
    data: dict[str, tuple[DataClass, ...]]
    series: dict[str, Series]


@dataclass(frozen=True)
class _Ground:
    sites: dict[str, Site]
    antennas: dict[str, Antenna]
    receivers: dict[str, Receiver]
    transmitters: dict[str, Transmitter]
    mounts: dict[str, Mount]


def load_run(
    config: str | Path,
    *,
    start: datetime | None = None,
    policy: Mapping[str, Any] | None = None,
    stored: Mapping[str, Path] | None = None,
) -> Run:
    """Read and check everything that ``config`` names.

    ``start`` (zoned) replaces the config's start; ``policy`` replaces single keys of its policy;
    ``stored`` maps the inputs' paths to the copies that a plan directory carries. Raises
    :class:`~passplan.inputs.errors.InputError` with every fault found, and
    :class:`~passplan.inputs.elements.resolve.ElementsError` where the policy refuses to go on without
    usable orbits.
    """
    path = Path(config)
    reader, findings = Reader(path.parent, stored), Findings()
    settings = read_config(path, reader, findings)
    if settings is None:
        findings.raise_if_any()
        raise AssertionError("a config that cannot be read notes a problem")  # pragma: no cover
    start_utc, end_utc = _horizon(settings, start, path, findings)
    rules = _read_policy(settings, policy or {}, path, reader, findings)
    fleet = _read_fleet(beside(path, settings.fleet), reader, findings)
    ground = _read_ground(beside(path, settings.ground), reader, findings)
    if settings.last_commands is not None:
        crafts = with_last_commands(beside(path, settings.last_commands), fleet.spacecraft, reader, findings)
        fleet = replace(fleet, spacecraft=crafts)
    decisions = read_decisions([beside(path, name) for name in settings.decisions], fleet.spacecraft, ground.antennas,
                               reader, findings)
    published = () if settings.published is None else read_published(
        beside(path, settings.published), fleet.spacecraft, ground.antennas, reader, findings)
    loaded = () if settings.loaded is None else read_published(
        beside(path, settings.loaded), fleet.spacecraft, ground.antennas, reader, findings, what="loaded")
    slots = read_slots([beside(path, name) for name in settings.slots], fleet.spacecraft, reader, findings)
    named = beside(path, settings.policy) if isinstance(settings.policy, str) else path
    check_guarantees(rules, fleet.spacecraft, named, findings)
    sites = _rained_on(ground.sites, settings, path, findings)
    limits: tuple[PfdLimit, ...] = builtin_pfd_limits()
    if settings.pfd_limits is not None:
        limits = read_pfd_limits(beside(path, settings.pfd_limits), reader, findings)
    requests = _read_requests(settings, path, fleet, ground, reader, findings)
    check_matches(fleet.spacecraft, fleet.radios, ground.antennas, ground.receivers, ground.transmitters,
                  beside(path, settings.fleet), findings)
    closures: tuple[Closure, ...] = ()
    if ground.antennas:
        sources = [ClosureSource(beside(path, c.file), c.antenna, c.site) for c in settings.closures]
        closures = read_closures(sources, ground.antennas, start_utc, end_utc, reader, findings)
    bookings = read_bookings([beside(path, name) for name in settings.bookings], ground.antennas, reader, findings)
    try:
        orbits = resolve_orbits(
            fleet.spacecraft, [beside(path, item) for item in settings.elements], beside(path, settings.fleet).parent,
            start_utc, end_utc, rules, reader, findings,
        )
    except ElementsError:
        findings.raise_if_any()  # a fault in the files explains more than the orbits that went missing with it
        raise
    findings.raise_if_any()
    return Run(
        name=settings.name, start_utc=start_utc, end_utc=end_utc, spacecraft=fleet.spacecraft, radios=fleet.radios,
        sites=sites, antennas=ground.antennas, receivers=ground.receivers, transmitters=ground.transmitters,
        bookings=bookings, asking_utc=_asking(settings, start),
        mounts=ground.mounts, modcod_tables=fleet.tables, closures=closures, policy=rules,
        data=fleet.data, series=fleet.series,
        # A request file holds many days; one whose span misses this horizon is another day's business.
        requests=tuple(
            r
            for r in requests.values()
            if datetime64(r.latest_utc) > start_utc and datetime64(r.earliest_utc) < end_utc
        ),
        # Decisions and the published plan, too, may reach beyond this horizon.
        decisions=tuple(d for d in decisions if d.start_utc is None or d.end_utc is None or (
            datetime64(d.end_utc) > start_utc and datetime64(d.start_utc) < end_utc)),
        published=tuple(
            p for p in published if datetime64(p.end_utc) > start_utc and datetime64(p.start_utc) < end_utc),
        loaded=tuple(c for c in loaded if datetime64(c.end_utc) > start_utc and datetime64(c.start_utc) < end_utc),
        slots=tuple(s for s in slots if datetime64(s.end_utc) > start_utc and datetime64(s.start_utc) < end_utc),
        orbits=orbits.orbits, left_out=orbits.left_out, elements=orbits.elements,
        pfd_limits=limits, warnings=tuple(findings.warnings), files=reader.files,
    )


def beside(path: Path, name: str) -> Path:
    """The path that ``name`` means when it stands in the file at ``path``, without detours through ``..``."""
    return Path(os.path.normpath(path.parent / name))


def _rained_on(sites: dict[str, Site], settings: RunConfig, path: Path, findings: Findings) -> dict[str, Site]:
    """The sites with the rain rate of the day where the config states one."""
    for name in settings.rain_mm_per_h:
        if name not in sites and sites:
            findings.problem(path, f"rain_mm_per_h.{name}", name, f"not a site; {nearest(name, sites)}")
    return {
        name: site.model_copy(update={"rain_rate_mm_per_h": settings.rain_mm_per_h[name]})
        if name in settings.rain_mm_per_h else site
        for name, site in sites.items()
    }


def _horizon(
    settings: RunConfig, start: datetime | None, path: Path, findings: Findings
) -> tuple[np.datetime64, np.datetime64]:
    begin = start or settings.start
    if begin is None:
        findings.problem(path, "start", None, "missing; add start = 2027-03-09T00:00:00Z, or pass --start")
        findings.raise_if_any()
    assert begin is not None
    # A start given on the command line moves the whole horizon, so an end in the config keeps its distance.
    if settings.end is not None:
        end = begin + (settings.end - settings.start) if settings.start is not None else settings.end
    else:
        end = begin + timedelta(seconds=round((settings.hours or 24.0) * 3600.0))
    if end <= begin:
        findings.problem(path, "end", None, "end is not after start; the horizon must have a length")
    return datetime64(begin), datetime64(end)


def _asking(settings: RunConfig, start: datetime | None) -> np.datetime64 | None:
    """The config's ``now``; where the horizon is moved it keeps its distance from the start."""
    if settings.now is None:
        return None
    moved = start - settings.start if start is not None and settings.start is not None else timedelta(0)
    return datetime64(settings.now + moved)


def _read_policy(
    settings: RunConfig, changes: Mapping[str, Any], path: Path, reader: Reader, findings: Findings
) -> Policy:
    where, written = path, settings.policy
    if isinstance(written, str):
        where = beside(path, written)
        written = read_toml(where, reader, findings, "policy") or {}
        prefix = ""
    else:
        prefix = "policy"
    return checked(Policy, {**written, **changes}, where, prefix, findings) or Policy()


def _read_fleet(path: Path, reader: Reader, findings: Findings) -> _Fleet:
    document = read_toml(path, reader, findings, "fleet")
    if document is None:
        return _Fleet({}, {}, {}, {}, {})
    reject_unknown(document, ("operator", "radio", "spacecraft", "data"), path, findings)
    radios = _records(document, "radio", _RADIO, path, reader, findings)
    spacecraft = _records(document, "spacecraft", Spacecraft, path, reader, findings)
    if not document.get("spacecraft"):
        findings.problem(path, "spacecraft", None, "the fleet is empty; add at least one [[spacecraft]]")
    tables: dict[str, ModcodTable] = {}
    for radio in radios.values():
        if isinstance(radio, DownlinkRadio) and radio.modcod_table not in tables:
            named = radio.modcod_table
            table = (builtin_table(named) if named in builtin_names()
                     else read_modcod_table(beside(path, named), reader, findings))
            if table is not None:
                tables[named] = table
    check_fleet(spacecraft, radios, tables, path, findings)
    placed = placed_records(document, "data", path, reader, findings)
    items = [(place, checked(DataClass, place[2], place[0], place[1], findings)) for place in placed]
    data = classes_by_craft([(place, item) for place, item in items if item is not None], spacecraft, findings)
    stated = [*spacecraft.values(), *(item for own in data.values() for item in own)]
    series = read_all_series(stated, path, reader, findings)
    return _Fleet(spacecraft, radios, tables, data, series)


def _read_ground(path: Path, reader: Reader, findings: Findings) -> _Ground:
    document = read_toml(path, reader, findings, "ground")
    if document is None:
        return _Ground({}, {}, {}, {}, {})
    reject_unknown(document, ("operator", "site", "receiver", "transmitter", "mount", "antenna"), path, findings)
    ground = _Ground(
        sites=_records(document, "site", Site, path, reader, findings),
        receivers=_records(document, "receiver", Receiver, path, reader, findings),
        transmitters=_records(document, "transmitter", Transmitter, path, reader, findings),
        antennas=_records(document, "antenna", Antenna, path, reader, findings),
        mounts=_records(document, "mount", Mount, path, reader, findings),
    )
    if not document.get("antenna"):
        findings.problem(path, "antenna", None, "the ground has no antenna; add at least one [[antenna]]")
    check_ground(ground.antennas, ground.sites, ground.receivers, ground.transmitters, path, findings)
    check_mounts(ground.antennas, ground.mounts, path, findings)
    return ground


def _read_requests(
    settings: RunConfig, path: Path, fleet: _Fleet, ground: _Ground, reader: Reader, findings: Findings
) -> dict[str, Request]:
    files = [beside(path, name) for name in settings.requests]
    placed = placed_in_files(files, "request", "requests", reader, findings)
    requests = [(place, checked(Request, place[2], place[0], place[1], findings)) for place in placed]
    sound = [(place, request) for place, request in requests if request is not None]
    check_requests(sound, fleet.spacecraft, ground.antennas, ground.sites, findings)
    return unique(sound, "request", findings)


def _records(
    document: dict[str, Any], key: str, model: Any, path: Path, reader: Reader, findings: Findings
) -> dict[str, Any]:
    """Checked records by name, from TOML tables or the CSV file that the key names."""
    placed = placed_records(document, key, path, reader, findings)
    items = [(place, checked(model, place[2], place[0], place[1], findings)) for place in placed]
    findings.unsound.update(str(place[2].get("name")) for place, item in items if item is None)
    return unique([(place, item) for place, item in items if item is not None], key, findings)
