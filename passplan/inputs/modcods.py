"""Tables of modulation and coding: the built-in one and the user's own, read and checked."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Annotated

from pydantic import Field

from passplan.inputs.errors import Findings, nearest
from passplan.inputs.modcods_ccsds import CCSDS_SOURCE, ccsds_rows
from passplan.inputs.modcods_dvb_s2 import DVB_S2_ROWS, DVB_S2_SOURCE
from passplan.inputs.reader import Reader
from passplan.inputs.records import Record
from passplan.inputs.tables import checked, read_csv_records


@dataclass(frozen=True)
class Modcod:
    """One row: net bits per symbol after coding and framing, and the Es/N0 it needs at the reference."""

    name: str
    efficiency_bit_per_symbol: float
    required_esn0_db: float


@dataclass(frozen=True)
class ModcodTable:
    """Rows in the order of the file, with the source and the reference error rate in words."""

    name: str
    rows: tuple[Modcod, ...]
    source: str


class _Row(Record):
    modcod: Annotated[str, Field(min_length=1, max_length=40)]
    spectral_efficiency_bit_per_symbol: Annotated[float, Field(gt=0.0, le=16.0)]
    required_esn0_db: Annotated[float, Field(ge=-30.0, le=60.0)]


_Placed = tuple[str, Modcod]


def builtin_names() -> tuple[str, ...]:
    """The names that :func:`builtin_table` knows."""
    return ("dvb-s2", "ccsds")


def builtin_table(name: str) -> ModcodTable:
    """The built-in table ``name``; :class:`KeyError` that names the nearest one if there is none."""
    if name not in builtin_names():
        raise KeyError(f"no built-in modcod table {name!r}; {nearest(name, builtin_names())}")
    if name == "ccsds":
        return ModcodTable("ccsds", tuple(Modcod(*row) for row in ccsds_rows()), CCSDS_SOURCE)
    return ModcodTable("dvb-s2", tuple(Modcod(*row) for row in DVB_S2_ROWS), DVB_S2_SOURCE)


def read_modcod_table(path: Path, reader: Reader, findings: Findings) -> ModcodTable | None:
    """The user's own table, named by the file's stem, or None with every fault noted.

    The CSV file has the columns ``modcod, spectral_efficiency_bit_per_symbol, required_esn0_db``: net
    bits per symbol after coding and framing, and the Es/N0 [dB] needed at the error rate the user wants.
    Refused: a name that stands twice, more bits than Shannon's bound allows, and rows of one modulation
    (the name up to its first space, ``-`` or ``_``) whose efficiency and required Es/N0 do not both rise
    down the file. Different modulations may interleave, as they do in DVB-S2.
    """
    noted = len(findings.problems)
    placed: list[_Placed] = []
    for where, record in read_csv_records(path, reader, findings):
        row = checked(_Row, record, path, where, findings)
        if row is not None:
            placed.append(
                (where, Modcod(row.modcod, row.spectral_efficiency_bit_per_symbol, row.required_esn0_db))
            )
    _check_names(placed, path, findings)
    _check_shannon(placed, path, findings)
    _check_order(placed, path, findings)
    if not placed and len(findings.problems) == noted:
        findings.problem(path, "", None, "the table has no rows; write at least one modcod")
    if len(findings.problems) > noted:
        return None
    return ModcodTable(path.stem, tuple(modcod for _, modcod in placed), f"the user's table {path.name}")


def shannon_limit_bit_per_symbol(esn0_db: float) -> float:
    """The most bits a symbol can carry at an Es/N0 [dB]: log2(1 + Es/N0) (Shannon 1948)."""
    return math.log2(1.0 + 10.0 ** (esn0_db / 10.0))


def _check_names(placed: Sequence[_Placed], path: Path, findings: Findings) -> None:
    seen: dict[str, str] = {}
    for where, modcod in placed:
        if modcod.name in seen:
            remedy = f"already stands at {seen[modcod.name]}; rename or remove one"
            findings.problem(path, f"{where}.modcod", modcod.name, remedy)
        seen.setdefault(modcod.name, where)


def _check_shannon(placed: Sequence[_Placed], path: Path, findings: Findings) -> None:
    for where, modcod in placed:
        limit = shannon_limit_bit_per_symbol(modcod.required_esn0_db)
        if modcod.efficiency_bit_per_symbol > limit:
            findings.problem(
                path,
                f"{where}.spectral_efficiency_bit_per_symbol",
                modcod.efficiency_bit_per_symbol,
                f"beyond Shannon's bound of {limit:.3f} bit per symbol at {modcod.required_esn0_db:g} dB;"
                " correct the efficiency or the Es/N0",
            )


def _check_order(placed: Sequence[_Placed], path: Path, findings: Findings) -> None:
    families: dict[str, list[_Placed]] = {}
    for where, modcod in placed:
        families.setdefault(re.split(r"[ _-]", modcod.name)[0], []).append((where, modcod))
    # Names that share no modulation with another row ("M1", "M2") are one family together.
    alone = [members[0] for members in families.values() if len(members) == 1]
    several = [members for members in families.values() if len(members) > 1]
    for members in [*several, alone]:
        for (above, earlier), (where, later) in pairwise(members):
            more_bits = later.efficiency_bit_per_symbol > earlier.efficiency_bit_per_symbol
            if not (more_bits and later.required_esn0_db > earlier.required_esn0_db):
                findings.problem(
                    path,
                    where,
                    later.name,
                    f"out of order after {earlier.name!r} at {above}: efficiency and required Es/N0 must both"
                    " rise within a modulation; sort the rows or correct the numbers",
                )
