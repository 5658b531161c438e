"""Two-line element sets, with or without a name line above them."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from pathlib import Path

from passplan.inputs.elements.mean import MeanElements, element_set, fault_of, four_digit_year
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.tle_layout import (
    LINE_1,
    LINE_2,
    LINE_LENGTH,
    Column,
    decimal_power,
    decoded_number,
    layout_fault,
    line_kind,
)
from passplan.inputs.errors import Findings
from passplan.inputs.lines import numbered_lines, shortened

_DAY_ZERO = date(2000, 1, 1).toordinal()
_SGP4_TYPES = (" ", "0", "2")


@dataclass
class _Half:
    """A name line or a first line that still waits for what belongs below it."""

    number: int
    text: str
    sound: bool = True


def parse_tle(text: str, file: str | Path, findings: Findings) -> list[ElementSet]:
    """All sound element sets in ``text``; each faulty line is noted as a problem and reading goes on.

    Taken are two-line and three-line sets in any mixture, names with and without a leading ``0 ``,
    letter-coded catalogue numbers (``A0000`` is 100 000), any line endings, blank lines, and comment
    lines that begin with ``#``. Checksums and every column are checked. Epochs are UTC.
    """
    sets: list[ElementSet] = []
    name: _Half | None = None
    first: _Half | None = None
    for number, raw in numbered_lines(text):
        line = raw.strip()
        if not line or line.startswith("#"):
            continue
        kind = line_kind(line)
        if kind == 0:
            _note_unfinished(name, first, file, findings)
            name, first = _name_line(number, line, file, findings), None
        elif kind == 1:
            if first is not None:
                _note_unfinished(None, first, file, findings)
                name = None
            first = _Half(number, line, _is_sound(number, line, LINE_1, file, findings))
        else:
            second = _Half(number, line, _is_sound(number, line, LINE_2, file, findings))
            if first is None:
                findings.problem(file, f"line {number}", None, "no first line stands above this second line; add it")
            elif first.sound and second.sound:
                sets.extend(_joined(name, first, second, file, findings))
            name = first = None
    _note_unfinished(name, first, file, findings)
    return sets


def _is_sound(number: int, line: str, columns: tuple[Column, ...], file: str | Path, findings: Findings) -> bool:
    fault = layout_fault(line, columns)
    if fault is None:
        return True
    where, value, remedy = fault
    findings.problem(file, f"line {number}{where}", value, remedy)
    return False


def _name_line(number: int, line: str, file: str | Path, findings: Findings) -> _Half | None:
    if len(line) > LINE_LENGTH or not line.isprintable():
        remedy = "neither a name nor an element line; remove it, or save the sets as plain text"
        findings.problem(file, f"line {number}", shortened(line), remedy)
        return None
    return _Half(number, line[2:].strip() if line.startswith("0 ") else line)


def _note_unfinished(name: _Half | None, first: _Half | None, file: str | Path, findings: Findings) -> None:
    if first is not None:
        findings.problem(file, f"line {first.number}", None, "no second line follows this first line; add it")
    elif name is not None:
        findings.problem(
            file, f"line {name.number}", name.text, "no element lines follow this name; add them or remove the line"
        )


def _joined(name: _Half | None, first: _Half, second: _Half, file: str | Path, findings: Findings) -> list[ElementSet]:
    one = {column.name: column.of(first.text) for column in LINE_1}
    two = {column.name: column.of(second.text) for column in LINE_2}
    lines = f"lines {first.number}-{second.number}"
    if one["catalogue number"] != two["catalogue number"]:
        findings.problem(
            file,
            f"line {second.number}, columns 3-7",
            two["catalogue number"],
            f"line {first.number} is of {one['catalogue number'].strip()!r}; put lines of one object together",
        )
        return []
    if one["ephemeris type"] not in _SGP4_TYPES:
        findings.problem(
            file,
            f"line {first.number}, column 63",
            one["ephemeris type"],
            "not an SGP4 set (type 0); fetch the SGP4 set",
        )
        return []
    day = float(one["epoch day"])
    if not 1.0 <= day < 367.0:
        findings.problem(
            file, f"line {first.number}, columns 21-32", one["epoch day"], "no such day of the year; correct it"
        )
        return []
    mean = _mean_elements(name.text if name else "", one, two)
    fault = fault_of(mean)
    if fault is not None:
        findings.problem(file, lines, None, fault)
        return []
    return [element_set(mean, Path(file), lines)]


def _mean_elements(name: str, one: dict[str, str], two: dict[str, str]) -> MeanElements:
    # Day and fraction apart: added up with the day they would lose the last digit of the fraction.
    day, _, fraction = one["epoch day"].strip().partition(".")
    year_start = date(four_digit_year(int(one["epoch year"])), 1, 1).toordinal() - _DAY_ZERO
    return MeanElements(
        name=name,
        catalogue_number=decoded_number(one["catalogue number"]),
        international_designator=one["international designator"].strip(),
        epoch_days=year_start + int(day) - 1,
        epoch_s=int(fraction) * 86_400 / 10 ** len(fraction),
        mean_motion_rev_per_day=float(two["mean motion"]),
        eccentricity=float(f"0.{two['eccentricity']}"),
        inclination_deg=float(two["inclination"]),
        raan_deg=float(two["right ascension of the node"]),
        argument_of_perigee_deg=float(two["argument of perigee"]),
        mean_anomaly_deg=float(two["mean anomaly"]),
        bstar_per_earth_radius=decimal_power(one["BSTAR"]),
        mean_motion_dot_rev_per_day2=float(one["mean motion derivative"].replace(" ", "")),
        mean_motion_ddot_rev_per_day3=decimal_power(one["second derivative"]),
        classification=one["classification"].strip() or "U",
        element_set_number=int(one["element set number"].strip() or 0),
        revolution=int(two["revolution"].strip() or 0),
    )
