"""The status file of the unattended run: what happened last, and when it last went well."""

from __future__ import annotations

import json
import os
import tempfile
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

NAME = "status.json"


def read_status(folder: Path) -> dict[str, Any]:
    """The status in ``folder``; empty where there is none or it cannot be read."""
    try:
        status = json.loads((folder / NAME).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return status if isinstance(status, dict) else {}


def write_status(folder: Path, status: dict[str, Any]) -> None:
    """Replace the status file in one step; raises OSError where it cannot be written."""
    descriptor, scratch = tempfile.mkstemp(prefix=f".{NAME}-", dir=folder)
    try:
        with os.fdopen(descriptor, "w", encoding="utf-8") as file:
            json.dump(status, file, indent=2, ensure_ascii=False)
            file.write("\n")
        Path(scratch).chmod(0o644)
        Path(scratch).replace(folder / NAME)
    except BaseException:
        Path(scratch).unlink(missing_ok=True)
        raise


def hours_since_good(status: dict[str, Any], now: datetime) -> float | None:
    """Hours since the last good run ended; None where there was none."""
    good = status.get("last_good_utc")
    if not isinstance(good, str):
        return None
    try:
        ended = datetime.fromisoformat(good)
    except ValueError:
        return None
    if ended.tzinfo is None:
        ended = ended.replace(tzinfo=UTC)
    return (now - ended).total_seconds() / 3600.0
