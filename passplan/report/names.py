"""File names from the names of things: safe on every system, and never two alike."""

from __future__ import annotations

import re
from collections.abc import Iterable

_LONGEST = 80
_RESERVED = re.compile(r"(?i)^(con|prn|aux|nul|com\d|lpt\d)$")


def file_stems(names: Iterable[str]) -> dict[str, str]:
    """A file name without ending for each name; those that would differ by case alone are numbered."""
    stems: dict[str, str] = {}
    taken: set[str] = set()
    for name in names:
        plain = re.sub(r"[^\w.\-]+", "_", name).strip("._")[:_LONGEST] or "unnamed"
        plain = f"{plain}_" if _RESERVED.match(plain) else plain
        stem, number = plain, 2
        while stem.casefold() in taken:
            stem, number = f"{plain}~{number}", number + 1
        taken.add(stem.casefold())
        stems[name] = stem
    return stems
