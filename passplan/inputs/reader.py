"""Every byte a run reads goes through one door, so that a plan can carry its inputs exactly as read."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from passplan.inputs.errors import Findings

_MAX_BYTES = 512 * 1024 * 1024


@dataclass(frozen=True)
class ReadFile:
    """One file as read: its path relative to the config, its content, and the SHA-256 of the content."""

    path: str
    content: bytes

    @property
    def sha256(self) -> str:
        return hashlib.sha256(self.content).hexdigest()


class Reader:
    """Reads files once and remembers them by their path relative to ``base``, the folder of the config.

    With ``stored`` it reads the copies that a plan directory carries instead: a map from that relative
    path to the copy. A folder is remembered by the files read from it.
    """

    def __init__(self, base: Path, stored: Mapping[str, Path] | None = None) -> None:
        self._base = base
        self._stored = dict(stored) if stored is not None else None
        self._files: dict[str, ReadFile] = {}

    @property
    def files(self) -> tuple[ReadFile, ...]:
        """The files read so far, in the order of reading."""
        return tuple(self._files.values())

    def read(self, path: Path, findings: Findings, where: str = "") -> bytes | None:
        """The content of ``path``, or None with a problem noted if it cannot be read."""
        key = self._key(path)
        if key in self._files:
            return self._files[key].content
        actual = path if self._stored is None else self._stored.get(key)
        content = None
        if actual is None:
            findings.problem(path, where, None, "the plan directory does not carry this file; plan again")
        else:
            try:
                content = self._content(actual, path, where, findings)
            except FileNotFoundError:
                findings.problem(path, where, None, "no such file; correct the path (it is relative to the config)")
            except OSError as fault:
                findings.problem(path, where, None, f"cannot be read ({fault.strerror}); check its permissions")
        if content is not None:
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
            here = Path(self._key(folder))
            return sorted(folder / Path(key).name for key in self._stored if Path(key).parent == here)
        return sorted(item for item in folder.iterdir() if item.is_file() and not item.name.startswith("."))

    def is_folder(self, path: Path) -> bool:
        """Whether ``path`` is (or, in a stored plan, was) a folder."""
        if self._stored is not None:
            key = self._key(path)
            return key not in self._stored and any(Path(name).parent == Path(key) for name in self._stored)
        return path.is_dir()

    @staticmethod
    def _content(actual: Path, path: Path, where: str, findings: Findings) -> bytes | None:
        if actual.is_dir():
            findings.problem(path, where, None, "this is a folder; name a file")
            return None
        if actual.stat().st_size > _MAX_BYTES:
            findings.problem(path, where, None, "the file is larger than 512 MiB; split it")
            return None
        return actual.read_bytes()

    def _key(self, path: Path) -> str:
        return Path(os.path.relpath(path, self._base)).as_posix()
