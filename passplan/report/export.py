"""Every form in which a plan leaves the program, by kind: ``passplan export DIR --as KIND``."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime
from functools import cached_property
from pathlib import Path

from passplan.inputs.errors import InputError, Problem
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.calendars import write_calendars
from passplan.report.directory import DirectoryError, new_directory, read_plan, stored_run
from passplan.report.ephemerides import write_ephemerides
from passplan.report.expiry import settle_expiry
from passplan.report.page import write_page
from passplan.report.picture import picture_svg, write_png
from passplan.report.pointing_tables import Issue, write_pointing_tables
from passplan.report.table_files import write_csv_tables, write_json, write_parquet
from passplan.report.tracks import WindowTrack, window_tracks


@dataclass(frozen=True, eq=False)
class Wanted:
    """One export: the plan, the run behind it, its directory, and what the kinds ask for beyond that."""

    record: PlanRecord
    run: Run
    directory: Path
    step_s: float = 1.0
    expires: datetime | None = None

    @cached_property
    def tracks(self) -> list[WindowTrack]:
        return window_tracks(self.run, self.record.windows)

    @cached_property
    def picture(self) -> str:
        return picture_svg(self.record, self.run, self.tracks)


def _pointing(wanted: Wanted, place: Path) -> None:
    expiry = settle_expiry(wanted.directory, wanted.run, wanted.expires)
    write_pointing_tables(wanted.record, wanted.run, place, Issue(wanted.step_s, expiry))


def _svg(wanted: Wanted, place: Path) -> None:
    place.write_text(wanted.picture, encoding="utf-8")


FOLDERS: dict[str, tuple[str, Callable[[Wanted, Path], object]]] = {
    "csv": ("csv", lambda w, place: write_csv_tables(w.record, place)),
    "parquet": ("parquet", lambda w, place: write_parquet(w.record, place)),
    "calendar": ("calendars", lambda w, place: write_calendars(w.record, place)),
    "pointing": ("pointing", _pointing),
    "oem": ("ephemerides", lambda w, place: write_ephemerides(w.record, w.run, place)),
}
"""Kinds that fill a folder: its name within the plan directory, and what writes it."""
FILES: dict[str, tuple[str, Callable[[Wanted, Path], object]]] = {
    "json": ("tables.json", lambda w, place: write_json(w.record, place)),
    "page": ("report.html", lambda w, place: write_page(w.record, w.run, place, w.tracks)),
    "svg": ("timeline.svg", _svg),
    "png": ("timeline.png", lambda w, place: write_png(w.picture, place)),
}
"""Kinds that are one file."""
KINDS = (*FOLDERS, *FILES)


def export_plan(directory: str | Path, kind: str, out: str | Path | None = None) -> Path:
    """Write one kind of a plan directory, as ``passplan export DIR --as KIND`` does, and return where.

    ``kind`` is one of ``KINDS``; ValueError where it is not. Else as :func:`export`.
    """
    if kind not in KINDS:
        raise ValueError(f"kind {kind!r} is not one of {', '.join(KINDS)}")
    record = read_plan(Path(directory))
    wanted = Wanted(record, stored_run(Path(directory), record), Path(directory))
    return export(kind, wanted, None if out is None else Path(out))


def draw(wanted: Wanted, path: Path) -> None:
    """Draw the antennas' day to ``path``, as its ending says; raises :class:`InputError` for another ending."""
    kind = path.suffix.lower().lstrip(".")
    if kind not in ("svg", "png"):
        raise InputError([Problem("--picture", "", str(path), "the name must end in .svg or .png")])
    _write_file(FILES[kind][1], wanted, path)


def export(kind: str, wanted: Wanted, out: Path | None = None) -> Path:
    """Write one kind whole or not at all, and return where.

    Without ``out`` it goes into the plan directory, in place of what an earlier export of that kind left there.
    An ``out`` must not exist yet. Raises :class:`DirectoryError`, and what the kinds raise themselves:
    :class:`~passplan.report.expiry.ExpiredError`, :class:`~passplan.report.table_files.MissingLibraryError`.
    """
    name, write = FOLDERS[kind] if kind in FOLDERS else FILES[kind]
    place = wanted.directory / name if out is None else out
    if out is not None and place.exists():
        raise DirectoryError(f"{place}: already exists; choose another --out")
    if kind in FOLDERS:
        with new_directory(place) as made:
            write(wanted, made)
        return place
    _write_file(write, wanted, place)
    return place


def _write_file(write: Callable[[Wanted, Path], object], wanted: Wanted, place: Path) -> None:
    try:
        place.parent.mkdir(parents=True, exist_ok=True)
        scratch = place.with_name(f".{place.name}.part")
        try:
            write(wanted, scratch)
            scratch.replace(place)
        finally:
            scratch.unlink(missing_ok=True)
    except OSError as fault:
        raise DirectoryError(f"{place}: cannot be written ({fault.strerror or fault}); check the place") from fault
