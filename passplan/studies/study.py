"""What a study file says: a base run, some days, and variants of the ground network."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field

from passplan.inputs.crosscheck import check_ground
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.load import beside
from passplan.inputs.reader import Reader
from passplan.inputs.records import Label, Names, Record
from passplan.inputs.run import Run
from passplan.inputs.tables import checked, placed_records, read_toml, reject_unknown

BASE = "base"


class Variant(Record):
    """One change of the network: antennas to leave out, to add, or to alter (by name, with the keys that change)."""

    name: Label
    remove_antennas: Names = ()
    site: tuple[dict[str, Any], ...] = ()
    receiver: tuple[dict[str, Any], ...] = ()
    transmitter: tuple[dict[str, Any], ...] = ()
    add_antenna: tuple[dict[str, Any], ...] = ()
    change_antenna: tuple[dict[str, Any], ...] = ()


class _Head(Record):
    name: Label = "study"
    base: str
    days: Annotated[int, Field(ge=1, le=366)] = 3


@dataclass(frozen=True)
class Study:
    """A checked study. ``days`` days are planned one by one, from the base run's start on."""

    name: str
    base: Path
    days: int
    variants: tuple[Variant, ...]
    file: Path


def read_study(path: str | Path) -> Study:
    """Read and check a study file; raises :class:`~passplan.inputs.errors.InputError` with every fault found."""
    path = Path(path)
    findings = Findings()
    reader = Reader(path.parent)
    document = read_toml(path, reader, findings) or {}
    findings.raise_if_any()
    reject_unknown(document, ("name", "base", "days", "variant"), path, findings)
    head = checked(_Head, {k: document[k] for k in ("name", "base", "days") if k in document}, path, "", findings)
    placed = placed_records(document, "variant", path, reader, findings)
    variants = [checked(Variant, record, file, where, findings) for file, where, record in placed]
    if not placed:
        findings.problem(path, "variant", None, "the study has no variant; add at least one [[variant]]")
    names = [BASE, *(v.name for v in variants if v is not None)]
    for name in {n for n in names if names.count(n) > 1}:
        findings.problem(path, "variant.name", name, "this name is used twice ('base' is taken); rename one")
    findings.raise_if_any()
    return Study(head.name, beside(path, head.base), head.days, tuple(variants), path)


def apply(variant: Variant, run: Run, file: Path) -> Run:
    """``run`` with the variant's network. Raises InputError where the variant does not fit the run."""
    findings = Findings()
    place = f"variant {variant.name}"
    sites = _added(run.sites, Site, variant.site, f"{place}: site", file, findings)
    receivers = _added(run.receivers, Receiver, variant.receiver, f"{place}: receiver", file, findings)
    transmitters = _added(run.transmitters, Transmitter, variant.transmitter, f"{place}: transmitter", file, findings)
    antennas = dict(run.antennas)
    for name in variant.remove_antennas:
        if antennas.pop(name, None) is None:
            findings.problem(file, f"{place}: remove_antennas", name, f"not defined; {nearest(name, run.antennas)}")
    for i, change in enumerate(variant.change_antenna, start=1):
        name = str(change.get("name", ""))
        if name not in antennas:
            findings.problem(
                file, f"{place}: change_antenna[{i}].name", name, f"not defined; {nearest(name, antennas)}"
            )
            continue
        whole = {**antennas[name].model_dump(), **change}
        changed = checked(Antenna, whole, file, f"{place}: change_antenna[{i}]", findings)
        if changed is not None:
            antennas[name] = changed
    antennas = _added(antennas, Antenna, variant.add_antenna, f"{place}: add_antenna", file, findings)
    check_ground(antennas, sites, receivers, transmitters, file, findings)
    findings.raise_if_any()
    return replace(
        run, antennas=antennas, sites=sites, receivers=receivers, transmitters=transmitters,
        closures=tuple(closure for closure in run.closures if closure.antenna in antennas),
    )


def _added(
    known: Mapping[str, Any], model: Any, records: tuple[dict[str, Any], ...], where: str, file: Path,
    findings: Findings,
) -> dict[str, Any]:
    result = dict(known)
    for i, record in enumerate(records, start=1):
        item = checked(model, record, file, f"{where}[{i}]", findings)
        if item is None:
            continue
        if item.name in result:
            findings.problem(file, f"{where}[{i}].name", item.name, "already in the network; choose another name")
        result[item.name] = item
    return result
