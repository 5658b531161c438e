"""What the audit found wrong, in plain words."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Fault:
    """One fault of a plan: its ``kind`` (a short code), the ``place`` (contact, spacecraft ...), a sentence."""

    kind: str
    place: str
    sentence: str

    def __str__(self) -> str:
        return f"{self.place}: {self.sentence}"


def differs(stated: float, expected: float, tolerance: float) -> bool:
    """Whether two figures disagree; a NaN or an infinity agrees with nothing."""
    return not abs(stated - expected) <= tolerance
