"""Half-open spans of whole seconds, taken from one another."""

from __future__ import annotations

from collections.abc import Iterable

Span = tuple[int, int]


def without(span: Span, taken: Iterable[Span]) -> list[Span]:
    """What is left of ``span`` outside the spans ``taken``, in time order."""
    left, (reached, end_s) = [], span
    for a, b in sorted(taken):
        if a > reached:
            left.append((reached, min(a, end_s)))
        reached = max(reached, b)
    left.append((reached, end_s))
    return [(a, b) for a, b in left if b > a]
