"""Lines of CCSDS keyword-value notation (KVN): ``KEY = value [unit]``."""

from __future__ import annotations


def key_value(line: str) -> tuple[str, str, str] | None:
    """The (key, value, unit) of a stripped line, or None if it has no equals sign; unit is "" if not stated.

    Source: CCSDS 502.0-B-3 section 7.4 (keywords upper case, one assignment a line, unit in brackets).
    """
    key, equals, value = line.partition("=")
    if not equals:
        return None
    value, unit = value.strip(), ""
    if value.endswith("]") and "[" in value:
        value, _, unit = value[:-1].rpartition("[")
    return key.strip(), value.strip(), unit.strip()


def is_comment(line: str) -> bool:
    """Whether a stripped line carries nothing to read: blank, or a COMMENT."""
    return not line or line == "COMMENT" or line.startswith("COMMENT ")
