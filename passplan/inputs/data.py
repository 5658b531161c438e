"""Classes of data: what a spacecraft holds in kinds of different worth."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Annotated

from pydantic import Field

from passplan.inputs.ageing import Ageing
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.fleet import Spacecraft
from passplan.inputs.generation import Generation, Series, read_series
from passplan.inputs.reader import Reader
from passplan.inputs.records import Name, Names
from passplan.inputs.tables import Placed

# The class of a spacecraft for which the user states none.
ONLY_CLASS = "data"
# Keys of a spacecraft that its classes state instead.
_OF_CLASSES = {"weight", "start_fill_mb", *Generation.model_fields, *Ageing.model_fields}


class DataClass(Ageing, Generation):
    """One class of data aboard each of ``spacecraft``. What is worth more goes down first and is lost last."""

    name: Name
    spacecraft: Names
    weight: Annotated[float, Field(ge=0.0, le=1e6)] = 1.0
    start_fill_mb: Annotated[float, Field(ge=0.0, le=1e9)] = 0.0


def classes_by_craft(
    placed: Iterable[tuple[Placed, DataClass]], spacecraft: Mapping[str, Spacecraft], findings: Findings
) -> dict[str, tuple[DataClass, ...]]:
    """The classes of each spacecraft that has any, by falling weight, equals in the order of the file."""
    found: dict[str, list[DataClass]] = {}
    places: dict[str, str] = {}
    for (file, where, _), item in placed:
        label = f"{where} ({item.name})"
        if not item.spacecraft:
            findings.problem(file, f"{label}.spacecraft", None, "names no spacecraft; say whose data this is")
        for name in item.spacecraft:
            own = found.setdefault(name, [])
            places.setdefault(name, file)
            if name not in spacecraft and name not in findings.unsound:
                findings.problem(file, f"{label}.spacecraft", name, f"no such spacecraft; {nearest(name, spacecraft)}")
            if any(other.name.casefold() == item.name.casefold() for other in own):
                remedy = f"{name} has a class of this name already; rename one"
                findings.problem(file, f"{label}.name", item.name, remedy)
            own.append(item)
    for name, craft in spacecraft.items():
        if name in found:
            _check_craft(craft, found[name], places[name], findings)
    return {name: tuple(sorted(own, key=lambda item: -item.weight)) for name, own in found.items()}


def _check_craft(craft: Spacecraft, classes: list[DataClass], file: str, findings: Findings) -> None:
    place = f"spacecraft {craft.name}"
    for key in sorted(_OF_CLASSES & craft.model_fields_set):
        remedy = "its data classes state this; remove it from the spacecraft"
        findings.problem(file, f"{place}: {key}", getattr(craft, key), remedy)
    total_mb = sum(item.start_fill_mb for item in classes)
    if total_mb > craft.storage_mb:
        remedy = f"the data classes together are above storage_mb {craft.storage_mb:g}; lower them"
        findings.problem(file, f"{place}: start_fill_mb", total_mb, remedy)


def only_class(craft: Spacecraft) -> DataClass:
    """The class of a spacecraft for which the user states none, made of its own keys."""
    shared = {key: getattr(craft, key) for key in (*Generation.model_fields, *Ageing.model_fields)}
    return DataClass(
        name=ONLY_CLASS, spacecraft=(craft.name,), weight=craft.weight, start_fill_mb=craft.start_fill_mb, **shared)


def read_all_series(
    stated: Iterable[Generation], fleet: Path, reader: Reader, findings: Findings
) -> dict[str, Series]:
    """Every generation file that is named, by the name as written; paths are relative to the fleet file."""
    found: dict[str, Series] = {}
    for name in dict.fromkeys(item.generation_file for item in stated):
        series = None if name is None else read_series(fleet.parent / name, reader, findings)
        if name is not None and series is not None:
            found[name] = series
    return found
