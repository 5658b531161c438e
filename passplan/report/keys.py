"""A short key for each spacecraft, so that a contact fits into one character of a timeline."""

from __future__ import annotations

import string
from collections.abc import Iterable

_KEYS = string.ascii_uppercase + string.ascii_lowercase + string.digits


def spacecraft_keys(names: Iterable[str]) -> dict[str, str]:
    """One character for each name, in the order given; beyond 62 names all share ``*``."""
    listed = list(dict.fromkeys(names))
    if len(listed) > len(_KEYS):
        return dict.fromkeys(listed, "*")
    return dict(zip(listed, _KEYS, strict=False))
