"""A small file of gas attenuations in the user's cache folder.

It only ever saves time: the propagation package takes seconds to import. A file that is missing, cut
short, altered, of another version or not writable is treated as empty, and the run goes on.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import math
import os
import tempfile
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

_FORMAT = 1

Row = tuple[float, float, float, float]


def cache_folder() -> Path | None:
    """``$XDG_CACHE_HOME/passplan``, else ``~/.cache/passplan``; None where there is no home.

    Source: XDG Base Directory Specification (a relative value is to be ignored).
    """
    stated = os.environ.get("XDG_CACHE_HOME", "")
    if stated and Path(stated).is_absolute():
        return Path(stated) / "passplan"
    try:
        return Path.home() / ".cache" / "passplan"
    except RuntimeError:
        return None


def load_rows() -> dict[str, Row]:
    """The rows on disk, or none where the file is not exactly what this version wrote."""
    folder = cache_folder()
    if folder is None:
        return {}
    try:
        document = json.loads((folder / "gas.json").read_text(encoding="utf-8"))
        rows = document["rows"]
        if document["stamp"] != _stamp() or document["sha256"] != _digest(rows):
            return {}
        return {key: _row(values) for key, values in rows.items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError, RecursionError):
        return {}


def save_rows(rows: dict[str, Row]) -> bool:
    """Write the rows, whole or not at all; False where the folder cannot be written."""
    folder = cache_folder()
    if folder is None:
        return False
    listed = {key: list(rows[key]) for key in sorted(rows)}
    document = {"stamp": _stamp(), "sha256": _digest(listed), "rows": listed}
    draft: str | None = None
    try:
        folder.mkdir(parents=True, exist_ok=True)
        handle, draft = tempfile.mkstemp(dir=folder, prefix="gas-", suffix=".part")
        with os.fdopen(handle, "w", encoding="utf-8") as stream:
            json.dump(document, stream, indent=1)
        Path(draft).replace(folder / "gas.json")
    except OSError:
        if draft is not None:
            with contextlib.suppress(OSError):
                Path(draft).unlink()
        return False
    return True


def package_stamp() -> str:
    """The propagation package and its version, as caches write it down."""
    try:
        return f"itur {version('itur')}"
    except PackageNotFoundError:
        return "itur none"


def _stamp() -> str:
    return f"format {_FORMAT}, {package_stamp()}"


def _digest(rows: object) -> str:
    return hashlib.sha256(json.dumps(rows, sort_keys=True).encode()).hexdigest()


def _row(values: object) -> Row:
    if not isinstance(values, list) or len(values) != 4:
        raise ValueError("a row holds four numbers")
    first, second, third, fourth = map(float, values)
    if not all(math.isfinite(value) for value in (first, second, third, fourth)):
        raise ValueError("a row holds finite numbers")
    return first, second, third, fourth
