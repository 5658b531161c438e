"""Tables of modulation and coding: the built-in one and the user's own, read and checked."""

from __future__ import annotations

from dataclasses import dataclass


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
