"""What stands behind a plan's figures: its tiers, and what is still to be asked for, pinned or frozen."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

# Lists that a plan may carry, in the order they matter to whoever reviews it.
_LISTS = (
    ("contradictions", "Cannot all be met"), ("to_ask", "Bookings still to ask for"),
    ("awaited", "Bookings whose answer is awaited"), ("give_back", "Granted time that nobody uses"),
    ("pins", "Pinned and forbidden"), ("frozen", "Frozen"),
)

# From here on a gap says no more than that nothing is known.
_WIDE_GAP = 10.0


@dataclass(frozen=True)
class TierLine:
    """One tier as text: its name, which way is better, what is reached, what no plan can pass, and the gap."""

    name: str
    sense: str
    value: str
    bound: str
    gap: str


def tier_lines(summary: Mapping[str, Any]) -> list[TierLine]:
    """The tiers in the order they are solved, however many there are."""
    return [
        TierLine(
            tier["name"], "least" if tier["sense"] == "least" else "most", _figure(tier["value"]),
            _figure(tier["bound"]), _gap(tier["gap"]),
        )
        for tier in summary.get("tiers", ())
    ]


def standing_lists(summary: Mapping[str, Any]) -> list[tuple[str, list[str]]]:
    """Titles and sentences of the lists that the plan carries and that are not empty."""
    found = []
    for key, title in _LISTS:
        entries = summary.get(key)
        if isinstance(entries, list) and entries:
            found.append((title, [_sentence(entry) for entry in entries]))
    return found


def _sentence(entry: Any) -> str:
    """An entry in words: its own sentence where it brings one, else its fields."""
    if not isinstance(entry, Mapping):
        return str(entry)
    if "sentence" in entry:
        return f"{entry['name']}: {entry['sentence']}" if "name" in entry else str(entry["sentence"])
    facts = ((key.removesuffix("_utc").replace("_", " "), value) for key, value in entry.items())
    return ", ".join(f"{key} {value}" for key, value in facts if value not in (None, ""))


def _gap(gap: float | None) -> str:
    if gap is None:
        return "none"
    return f"{100.0 * gap:.2f} %" if gap < _WIDE_GAP else f"over {100.0 * _WIDE_GAP:.0f} %"


def _figure(number: float | None) -> str:
    if number is None:
        return ""
    return f"{number:,.0f}" if float(number).is_integer() else f"{number:,.1f}"
