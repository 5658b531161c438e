"""Tables of rain, cloud and scintillation on disk, one small file per path.

As with the gas cache, a file that is missing, cut short, altered, of another version or not writable is
treated as missing, and the run goes on.

    file    = digest (32 bytes) | numbers (little-endian float64)
    digest  = SHA-256 of the stamp (format and package version), the key and the numbers
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import tempfile
from dataclasses import astuple
from pathlib import Path

import numpy as np

from passplan.link.gas_cache import cache_folder, package_stamp
from passplan.link.weather import NODES_DEG, SiteConstants, WeatherPath, WeatherTable, weather_table

_FORMAT = 2
_DIGEST_BYTES = 32
_SHAPE = (3, NODES_DEG.size)


def cached_weather(path: WeatherPath) -> WeatherTable:
    """The table of a path from the cache, else from the propagation package, and then kept."""
    folder = cache_folder()
    if folder is None:
        return weather_table(path)
    file = folder / "weather" / f"{hashlib.sha256(_key(path)).hexdigest()[:40]}.bin"
    found = _load(file, path)
    if found is None:
        found = weather_table(path)
        _save(file, path, found)
    return found


def _load(file: Path, path: WeatherPath) -> WeatherTable | None:
    try:
        content = file.read_bytes()
    except OSError:
        return None
    digest, numbers = content[:_DIGEST_BYTES], content[_DIGEST_BYTES:]
    size = len(SiteConstants._fields) + _SHAPE[0] * _SHAPE[1]
    if len(numbers) != 8 * size or digest != _digest(path, numbers):
        return None
    values = np.frombuffer(numbers, "<f8").astype(np.float64)
    constants = SiteConstants(*values[: len(SiteConstants._fields)].tolist())
    return WeatherTable(values[len(SiteConstants._fields) :].reshape(_SHAPE), constants)


def _save(file: Path, path: WeatherPath, table: WeatherTable) -> None:
    numbers = np.concatenate((np.array(table.constants), table.nodes_db.ravel())).astype("<f8").tobytes()
    draft: str | None = None
    try:
        file.parent.mkdir(parents=True, exist_ok=True)
        handle, draft = tempfile.mkstemp(dir=file.parent, prefix="new-", suffix=".part")
        with os.fdopen(handle, "wb") as stream:
            stream.write(_digest(path, numbers) + numbers)
        Path(draft).replace(file)
    except OSError:
        if draft is not None:
            with contextlib.suppress(OSError):
                Path(draft).unlink()


def _digest(path: WeatherPath, numbers: bytes) -> bytes:
    return hashlib.sha256(_key(path) + numbers).digest()


def _key(path: WeatherPath) -> bytes:
    return f"weather format {_FORMAT}, {package_stamp()}, {astuple(path)!r};".encode()
