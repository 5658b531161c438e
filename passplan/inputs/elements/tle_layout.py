"""The columns of the two-line element format: which characters may stand where, and the checksum.

Source of the layout: Spacetrack Report No. 3 and AIAA 2006-6753, appendix A; letter-coded catalogue
numbers as the catalogue publishes them since 2020 (from memory, as in the ``sgp4`` package).
"""

from __future__ import annotations

import re
from dataclasses import dataclass

LINE_LENGTH = 69
# I and O are left out: they look like 1 and 0.
_LETTERS = "ABCDEFGHJKLMNPQRSTUVWXYZ"


@dataclass(frozen=True)
class Column:
    """One field: its first and last column counted from 1, and the pattern its characters match."""

    name: str
    first: int
    last: int
    pattern: re.Pattern[str]

    def of(self, line: str) -> str:
        """The characters of this field in ``line``."""
        return line[self.first - 1 : self.last]


def _columns(*rows: tuple[str, int, int, str]) -> tuple[Column, ...]:
    return tuple(Column(name, first, last, re.compile(pattern)) for name, first, last, pattern in rows)


_NUMBER = r" *[0-9]*|[A-HJ-NP-Z][0-9]{4}"
_DECIMAL_POWER = r"[ +-][0-9 ]{4}[0-9][+ -][0-9]"
_ANGLE = r" *[0-9]+\.[0-9]{4}"
_WHOLE = r" *[0-9]*"

LINE_1 = _columns(
    ("line number", 1, 2, r"1 "),
    ("catalogue number", 3, 7, _NUMBER),
    ("classification", 8, 8, r"[A-Z ]"),
    ("blank", 9, 9, r" "),
    ("international designator", 10, 17, r"[ -~]*"),
    ("blank", 18, 18, r" "),
    ("epoch year", 19, 20, r"[0-9]{2}"),
    ("epoch day", 21, 32, r" *[0-9]+\.[0-9]{8}"),
    ("blank", 33, 33, r" "),
    ("mean motion derivative", 34, 43, r"[ 0+-]\.[0-9]{8}"),
    ("blank", 44, 44, r" "),
    ("second derivative", 45, 52, _DECIMAL_POWER),
    ("blank", 53, 53, r" "),
    ("BSTAR", 54, 61, _DECIMAL_POWER),
    ("blank", 62, 62, r" "),
    ("ephemeris type", 63, 63, r"[ 0-9]"),
    ("blank", 64, 64, r" "),
    ("element set number", 65, 68, _WHOLE),
)
LINE_2 = _columns(
    ("line number", 1, 2, r"2 "),
    ("catalogue number", 3, 7, _NUMBER),
    ("blank", 8, 8, r" "),
    ("inclination", 9, 16, _ANGLE),
    ("blank", 17, 17, r" "),
    ("right ascension of the node", 18, 25, _ANGLE),
    ("blank", 26, 26, r" "),
    ("eccentricity", 27, 33, r"[0-9]{7}"),
    ("blank", 34, 34, r" "),
    ("argument of perigee", 35, 42, _ANGLE),
    ("blank", 43, 43, r" "),
    ("mean anomaly", 44, 51, _ANGLE),
    ("blank", 52, 52, r" "),
    ("mean motion", 53, 63, r" *[0-9]+\.[0-9]{8}"),
    ("revolution", 64, 68, _WHOLE),
)

_FIRST_LINE = re.compile(r"1 [ 0-9A-Z][ 0-9]{4}[A-Z ] ")
_SECOND_LINE = re.compile(r"2 [ 0-9A-Z][ 0-9]{4} ")


def line_kind(line: str) -> int:
    """1 or 2 for a line that is meant as an element line, else 0 (a name, or something else).

    A name may begin with ``1 `` or ``2 `` too; it is short and its next characters are not a number.
    """
    for kind, pattern in ((1, _FIRST_LINE), (2, _SECOND_LINE)):
        if line.startswith(f"{kind} ") and (pattern.match(line) or len(line) > LINE_LENGTH // 2):
            return kind
    return 0


def checksum(line: str) -> int:
    """The digit that belongs in column 69: the digits of columns 1-68 added up, a minus as 1, modulo 10."""
    return sum(ord(c) - ord("0") if c in "0123456789" else c == "-" for c in line[: LINE_LENGTH - 1]) % 10


def layout_fault(line: str, columns: tuple[Column, ...]) -> tuple[str, str | None, str] | None:
    """The first fault of an element line as (columns, their content, remedy), or None if it is sound."""
    if len(line) != LINE_LENGTH:
        return "", None, f"has {len(line)} characters, an element line has {LINE_LENGTH}; copy the set again"
    expected = str(checksum(line))
    if line[-1] != expected:
        return ", column 69", line[-1], f"the checksum of this line is {expected}; copy the set again"
    for column in columns:
        if not column.pattern.fullmatch(column.of(line)):
            where = f", columns {column.first}-{column.last}"
            return where, column.of(line), f"not how the {column.name} is written; copy the set again"
    return None


def decoded_number(field: str) -> int | None:
    """The catalogue number of a sound field: ``    5`` is 5, ``A0000`` 100 000; None if blank or 0."""
    text = field.strip()
    if not text:
        return None
    tens = _LETTERS.find(text[0])
    number = int(text) if tens < 0 else (tens + 10) * 10_000 + int(text[1:])
    return number or None


def decimal_power(field: str) -> float:
    """``-11606-4`` is -0.11606e-4: sign, five digits after the point, sign and digit of the power of ten."""
    mantissa, power = field[:6].strip().replace(" ", ""), field[6:].strip().replace(" ", "")
    sign = "-" if mantissa.startswith("-") else ""
    return float(f"{sign}0.{mantissa.lstrip('+-').zfill(5)}e{power}")
