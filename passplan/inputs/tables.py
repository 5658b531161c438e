"""Rows of CSV files and tables of TOML files, turned into checked records with every fault in one line."""

from __future__ import annotations

import csv
import io
import tomllib
from collections import Counter
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, TypeAdapter, ValidationError

from passplan.inputs.errors import Findings, nearest
from passplan.inputs.reader import Reader
from passplan.inputs.records import NAME_PATTERN

Model = TypeVar("Model", bound=BaseModel)
Placed = tuple[str, str, dict[str, Any]]
"""A record with its place: (file, where in it, the record itself)."""


def read_toml(path: Path, reader: Reader, findings: Findings, where: str = "") -> dict[str, Any] | None:
    """The content of a TOML file, or None with a problem noted."""
    text = reader.text(path, findings, where)
    if text is None:
        return None
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as fault:
        findings.problem(path, "", None, f"not valid TOML: {fault}; correct it there")
        return None


def read_csv_records(path: Path, reader: Reader, findings: Findings) -> list[tuple[str, dict[str, str]]]:
    """The rows of a CSV file as (``row N``, {column: cell}); empty cells are left out, blank rows skipped.

    ``N`` counts lines as an editor shows them, the header being row 1.
    """
    text = reader.text(path, findings)
    if text is None:
        return []
    rows = csv.reader(io.StringIO(text, newline=""), strict=True)
    records: list[tuple[str, dict[str, str]]] = []
    header: list[str] = []
    try:
        for row in rows:
            cells = [cell.strip() for cell in row]
            if not any(cells):
                continue
            if not header:
                header = cells
                if not _header_is_sound(path, header, findings):
                    return []
                continue
            where = f"row {rows.line_num}"
            if len(cells) != len(header):
                remedy = f"has {len(cells)} cells, the header {len(header)}; make them agree"
                findings.problem(path, where, None, remedy)
                continue
            records.append((where, {key: cell for key, cell in zip(header, cells, strict=True) if cell}))
    except csv.Error as fault:
        findings.problem(path, f"row {rows.line_num}", None, f"not valid CSV ({fault}); correct the quoting")
    if not header:
        findings.problem(path, "row 1", None, "the file is empty; write a header and rows")
    return records


def placed_records(
    document: Mapping[str, Any], key: str, file: Path, reader: Reader, findings: Findings
) -> list[Placed]:
    """The records under ``key``: a TOML array of tables, or the name of a CSV file beside ``file``."""
    value = document.get(key, [])
    if isinstance(value, str):
        table = file.parent / value
        return [(str(table), where, dict(record)) for where, record in read_csv_records(table, reader, findings)]
    if not isinstance(value, list) or not all(isinstance(item, dict) for item in value):
        findings.problem(file, key, None, f"write [[{key}]] tables, or {key} = \"file.csv\"")
        return []
    return [(str(file), f"{key}[{i}]", item) for i, item in enumerate(value, start=1)]


def placed_in_files(
    files: Iterable[Path], key: str, what: str, reader: Reader, findings: Findings
) -> list[Placed]:
    """Records of TOML files with ``[[key]]`` tables, or of CSV files; ``what`` names the config key that lists them."""
    placed: list[Placed] = []
    for file in files:
        if file.suffix.lower() == ".csv":
            placed += placed_records({key: file.name}, key, file, reader, findings)
            continue
        document = read_toml(file, reader, findings, what)
        if document is not None:
            reject_unknown(document, (key,), file, findings)
            placed += placed_records(document, key, file, reader, findings)
    return placed


def checked(
    model: type[Model] | TypeAdapter[Any], record: Mapping[str, Any], file: str | Path, where: str, findings: Findings
) -> Any:
    """``record`` as a validated ``model``, or None with a problem noted for each fault."""
    try:
        if isinstance(model, TypeAdapter):
            return model.validate_python(dict(record))
        return model.model_validate(dict(record))
    except ValidationError as fault:
        label = f"{where} ({record['name']})" if where and isinstance(record.get("name"), str) else where
        for error in fault.errors():
            _note(error, model, record, str(file), label, findings)
        return None


def unique(
    records: list[tuple[Placed, Any]], what: str, findings: Findings
) -> dict[str, Any]:
    """Records by name; a name that is used twice is a problem that names both places."""
    found: dict[str, Any] = {}
    places: dict[str, str] = {}
    for (file, where, _), item in records:
        key = item.name.casefold().replace(" ", "_")
        if key in places:
            remedy = f"this {what} name is already used at {places[key]}; rename one"
            findings.problem(file, f"{where}.name", item.name, remedy)
            continue
        places[key] = where
        found[item.name] = item
    return found


def reject_unknown(document: Mapping[str, Any], known: tuple[str, ...], file: Path, findings: Findings) -> None:
    """Note a problem for each key of a document's top level that is not known."""
    for key in document:
        if key not in known:
            findings.problem(file, key, None, f"unknown key; {nearest(key, known)}")


def _header_is_sound(path: Path, header: list[str], findings: Findings) -> bool:
    repeated = [name for name, count in Counter(header).items() if count > 1]
    if "" in header or repeated:
        what = f"column {repeated[0]!r} stands twice" if repeated and repeated[0] else "a column has no name"
        findings.problem(path, "row 1", None, f"{what}; give each column its own name")
        return False
    return True


def _note(error: Any, model: Any, record: Mapping[str, Any], file: str, where: str, findings: Findings) -> None:
    """One pydantic error as one line in the user's words."""
    # A discriminated union puts its tag first; the user knows the key, not the tag.
    path = [part for part in error["loc"] if part not in ("downlink", "command") or part in record]
    place = ".".join([*([where] if where else []), *(str(part) for part in path)])
    kind, value = error["type"], error.get("input")
    if kind == "extra_forbidden":
        findings.problem(file, place, None, f"unknown key; {nearest(str(path[-1]), _keys(model))}")
    elif kind == "missing":
        findings.problem(file, place, None, "missing; add this key")
    elif kind in ("union_tag_invalid", "union_tag_not_found"):
        findings.problem(file, f"{where}.direction", record.get("direction"), "write 'downlink' or 'command'")
    else:
        message = str(error["ctx"]["error"]) if kind == "value_error" else _plain(error)
        findings.problem(file, place, None if isinstance(value, dict) else value, message)


def _plain(error: Any) -> str:
    context, kind = error.get("ctx", {}), error["type"]
    limits = {
        "greater_than": "must be above {gt}",
        "greater_than_equal": "must be at least {ge}",
        "less_than": "must be below {lt}",
        "less_than_equal": "must be at most {le}",
        "literal_error": "write one of {expected}",
        "float_parsing": "write a number",
        "float_type": "write a number",
        "bool_type": "write true or false",
        "bool_parsing": "write true or false",
        "int_parsing": "write a whole number",
        "int_type": "write a whole number",
        "int_from_float": "write a whole number",
        "finite_number": "write a finite number",
        "string_type": "write text in quotes",
    }
    if kind == "string_pattern_mismatch":
        if context["pattern"] == NAME_PATTERN:
            return "use letters, digits, spaces, '_' and '-', starting with a letter or digit"
        return "use printable characters only"
    if kind in limits:
        return limits[kind].format(**context) + ("; check the unit" if kind.startswith(("greater", "less")) else "")
    return str(error["msg"][0].lower() + error["msg"][1:])


def _keys(model: Any) -> set[str]:
    if isinstance(model, TypeAdapter):
        from passplan.inputs.fleet import CommandRadio, DownlinkRadio

        return set(DownlinkRadio.model_fields) | set(CommandRadio.model_fields)
    return set(model.model_fields)
