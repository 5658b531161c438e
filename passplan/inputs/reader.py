"""Every byte a run reads goes through one door, so that a plan can carry its inputs exactly as read."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from passplan.inputs.errors import Findings

_MAX_BYTES = 512 * 1024 * 1024


@dataclass(frozen=True)
class ReadFile:
    """One file as read: the path as the user wrote it, its content, and the SHA-256 of the content."""

    path: str
    content: bytes

    @property
    def sha256(self) -> str:
        return hashlib.sha256(self.content).hexdigest()


class Reader:
    """Reads files once and remembers them; with ``stored`` it reads the copies that a plan carries.

    ``stored`` maps the path as first read to the copy's path. A folder is remembered by its listing.
    """

    def __init__(self, stored: Mapping[str, Path] | None = None) -> None:
        self._stored = dict(stored) if stored is not None else None
        self._files: dict[str, ReadFile] = {}

    @property
    def files(self) -> tuple[ReadFile, ...]:
        """The files read so far, in the order of reading."""
        return tuple(self._files.values())

    def read(self, path: Path, findings: Findings, where: str = "") -> bytes | None:
        """The content of ``path``, or None with a problem noted if it cannot be read."""
        key = str(path)
        if key in self._files:
            return self._files[key].content
        actual = path
        if self._stored is not None:
            if key not in self._stored:
                findings.problem(key, where, None, "the plan directory does not carry this file; plan again")
                return None
            actual = self._stored[key]
        try:
            if actual.is_dir():
                findings.problem(key, where, None, "this is a folder; name a file")
                return None
            if actual.stat().st_size > _MAX_BYTES:
                findings.problem(key, where, None, "the file is larger than 512 MiB; split it")
                return None
            content = actual.read_bytes()
        except FileNotFoundError:
            findings.problem(key, where, None, "no such file; correct the path (paths are relative to the config)")
            return None
        except OSError as fault:
            findings.problem(key, where, None, f"cannot be read ({fault.strerror}); check its permissions")
            return None
        self._files[key] = ReadFile(key, content)
        return content

    def text(self, path: Path, findings: Findings, where: str = "") -> str | None:
        """The content as UTF-8 text (a byte-order mark is dropped), or None with a problem noted."""
        content = self.read(path, findings, where)
        if content is None:
            return None
        try:
            return content.decode("utf-8-sig")
        except UnicodeDecodeError as fault:
            findings.problem(path, f"byte {fault.start}", None, "not UTF-8 text; save the file as UTF-8")
            return None

    def listing(self, folder: Path) -> list[Path]:
        """The files in ``folder``, sorted by name; of a stored plan, those that were read from it."""
        if self._stored is not None:
            return sorted(Path(key) for key in self._stored if Path(key).parent == folder)
        return sorted(item for item in folder.iterdir() if item.is_file() and not item.name.startswith("."))

    def is_folder(self, path: Path) -> bool:
        """Whether ``path`` is (or, in a stored plan, was) a folder."""
        if self._stored is not None:
            return str(path) not in self._stored and any(Path(key).parent == path for key in self._stored)
        return path.is_dir()
