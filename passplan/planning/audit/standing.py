"""How a requirement fares in a plan."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Standing:
    """Surely missed, surely met, or so close that either may be said; and a sentence."""

    missed: bool
    met: bool
    sentence: str
