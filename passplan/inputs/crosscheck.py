"""Checks between records: every name that is used exists, and every radio has an antenna that can serve it."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path

from passplan.inputs.calendar_records import Request
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.fleet import CommandRadio, DownlinkRadio, Spacecraft
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.modcods import ModcodTable
from passplan.inputs.mounts import Mount
from passplan.inputs.policy import Policy
from passplan.inputs.records import MaskPoints
from passplan.inputs.tables import Placed

# More than half of the horizon.
_SILENT_DEG = 180.0

Radios = Mapping[str, DownlinkRadio | CommandRadio]


def check_fleet(
    spacecraft: Mapping[str, Spacecraft], radios: Radios, tables: Mapping[str, ModcodTable], file: Path,
    findings: Findings,
) -> None:
    """Radios that spacecraft name, modcods that radios name, and catalogue numbers used twice."""
    seen: dict[int, str] = {}
    for item in spacecraft.values():
        place = f"spacecraft {item.name}"
        _known(item.radios, radios, file, f"{place}: radios", findings)
        for direction in ("downlink", "command"):
            chosen = [name for name in item.radios if name in radios and radios[name].direction == direction]
            if len(chosen) > 1 and direction == "command":
                findings.problem(file, f"{place}: radios", chosen, "more than one command radio; name one")
        number = item.catalogue_number
        if number is not None and seen.setdefault(number, item.name) != item.name:
            remedy = f"{seen[number]} has this number too; correct one"
            findings.problem(file, f"{place}: catalogue_number", number, remedy)
    for radio in radios.values():
        if isinstance(radio, DownlinkRadio) and radio.modcod_table in tables:
            known = [row.name for row in tables[radio.modcod_table].rows]
            _known(radio.modcods, known, file, f"radio {radio.name}: modcods", findings)


def check_ground(
    antennas: Mapping[str, Antenna], sites: Mapping[str, Site], receivers: Mapping[str, Receiver],
    transmitters: Mapping[str, Transmitter], file: Path, findings: Findings,
) -> None:
    """Sites and chains that antennas name, and antennas that have no chain at all."""
    for item in antennas.values():
        place = f"antenna {item.name}"
        _known((item.site,), sites, file, f"{place}: site", findings)
        _known(item.receivers, receivers, file, f"{place}: receivers", findings)
        _known(item.transmitters, transmitters, file, f"{place}: transmitters", findings)
        if not item.receivers and not item.transmitters:
            findings.problem(file, place, None, "has neither receivers nor transmitters; name at least one")
        for key, points in (("mask", item.mask), ("transmit_mask", item.transmit_mask)):
            _warn_of_gap(points, f"{file}: {place}: {key}", findings)
    for site in sites.values():
        here = [item.name for item in antennas.values() if item.site == site.name]
        for pool in site.pool:
            _known(pool.antennas, here, file, f"site {site.name}: pool {pool.name}: antennas", findings)


def _warn_of_gap(points: MaskPoints, place: str, findings: Findings) -> None:
    """A mask that is a slope over more than half of the horizon has not been surveyed there, or points are missing."""
    for (last, low), (first, high) in zip(points, (*points[1:], *points[:1]), strict=True):
        silent_deg = (first - last) % 360.0
        if silent_deg > _SILENT_DEG and abs(high - low) > 1.0:
            findings.warn(
                f"{place} says nothing from {last:g} to {first:g} deg of azimuth; a straight line from {low:g} to "
                f"{high:g} deg of elevation stands for it, so add the points in between")


def check_mounts(
    antennas: Mapping[str, Antenna], mounts: Mapping[str, Mount], file: Path, findings: Findings
) -> None:
    """Mounts that antennas name, the beam that a limited mount needs, several beams, and limits that leave nothing."""
    for item in antennas.values():
        place = f"antenna {item.name}"
        if item.mount is None:
            if item.beams > 1:
                remedy = "several beams need an aperture that does not turn; name its mount, of kind fixed"
                findings.problem(file, f"{place}: beams", item.beams, remedy)
            continue
        _known((item.mount,), mounts, file, f"{place}: mount", findings)
        mount = mounts.get(item.mount)
        if mount is None:
            continue
        if mount.moves and item.beamwidth_deg is None:
            remedy = f"missing; mount {mount.name} has limited rates, so add the half-power width of the beam"
            findings.problem(file, f"{place}: beamwidth_deg", None, remedy)
        if item.beams > 1 and mount.kind != "fixed":
            remedy = f"mount {mount.name} turns all its beams together; give 1, or a mount of kind fixed"
            findings.problem(file, f"{place}: beams", item.beams, remedy)
        highest = mount.upper_to_deg if mount.kind == "az_el" else None
        if highest is not None and highest <= item.min_elevation_deg:
            remedy = f"mount {mount.name} reaches only {highest:g} deg, so nothing is left to see; lower it"
            findings.problem(file, f"{place}: min_elevation_deg", item.min_elevation_deg, remedy)


def check_matches(
    spacecraft: Mapping[str, Spacecraft], radios: Radios, antennas: Mapping[str, Antenna],
    receivers: Mapping[str, Receiver], transmitters: Mapping[str, Transmitter], file: Path, findings: Findings,
) -> None:
    """A radio aboard that no antenna can serve is a fault; a radio that no spacecraft carries is worth a warning."""
    chains: dict[str, Receiver | Transmitter] = {**{f"r:{k}": v for k, v in receivers.items()},
                                                 **{f"t:{k}": v for k, v in transmitters.items()}}
    fitted = {f"r:{name}" for a in antennas.values() for name in a.receivers}
    fitted |= {f"t:{name}" for a in antennas.values() for name in a.transmitters}
    # With a chain that could not be read nobody knows what it would have served.
    fitted_unsound = any(key[2:] in findings.unsound for key in fitted)
    carried: dict[str, list[str]] = {}
    for item in spacecraft.values():
        for name in item.radios:
            carried.setdefault(name, []).append(item.name)
    for name, radio in radios.items():
        if name not in carried:
            findings.warn(f"{file}: radio {name} is carried by no spacecraft")
        elif antennas and not fitted_unsound and not any(
            matching_loss_db(radio, chains[key]) is not None for key in fitted if key in chains
        ):
            verb = "receive" if radio.direction == "downlink" else "command"
            owners = ", ".join(carried[name][:3]) + (", ..." if len(carried[name]) > 3 else "")
            findings.problem(
                file, f"radio {name}: frequency_mhz", radio.frequency_mhz,
                f"no antenna can {verb} it ({radio.polarisation}, aboard {owners}); "
                f"correct the band, or fit an antenna with a matching chain",
            )


def check_guarantees(policy: Policy, spacecraft: Mapping[str, Spacecraft], file: Path, findings: Findings) -> None:
    """Missions that guarantees name."""
    missions = {craft.mission for craft in spacecraft.values() if craft.mission}
    for i, item in enumerate(policy.guarantee, start=1):
        if spacecraft:
            _known((item.mission,), missions, file, f"guarantee[{i}].mission", findings)


def check_requests(
    requests: Iterable[tuple[Placed, Request]], spacecraft: Mapping[str, Spacecraft],
    antennas: Mapping[str, Antenna], sites: Mapping[str, Site], findings: Findings,
) -> None:
    """Spacecraft, antennas and sites that requests name, and what those must be able to do."""
    for (file, where, _), item in requests:
        place = f"{where} ({item.name})"
        if spacecraft:
            _known((item.spacecraft,), spacecraft, file, f"{place}.spacecraft", findings)
        if item.antenna is not None and antennas:
            _known((item.antenna,), antennas, file, f"{place}.antenna", findings)
        if item.site is not None and sites:
            _known((item.site,), sites, file, f"{place}.site", findings)
        able = [a for a in antennas.values() if item.antenna in (None, a.name) and item.site in (None, a.site)]
        if item.service == "ranging" and able and not any(a.ranging for a in able):
            remedy = "no antenna that may serve it offers ranging; set ranging = true where one does"
            findings.problem(file, f"{place}.service", item.service, remedy)
        craft = spacecraft.get(item.spacecraft)
        if item.handover_overlap_s is not None and craft is not None and craft.links == 1:
            remedy = f"{craft.name} is in one contact at a time; give it links = 2, or drop the overlap"
            findings.problem(file, f"{place}.handover_overlap_s", item.handover_overlap_s, remedy)


def _known(names: Iterable[str], known: Iterable[str], file: str | Path, where: str, findings: Findings) -> None:
    known = list(known)
    for name in names:
        if name not in known and name not in findings.unsound:
            findings.problem(file, where, name, f"not defined; {nearest(name, known)}")
