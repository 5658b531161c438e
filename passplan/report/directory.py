"""A plan directory: written whole or not at all, and read back."""

from __future__ import annotations

import json
import os
import shutil
import tempfile
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path
from typing import Any

import pandas as pd

from passplan.inputs.errors import PassplanError
from passplan.inputs.load import load_run
from passplan.inputs.reader import ReadFile
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.csv_files import read_csv, write_csv
from passplan.report.page import PAGE, write_page

TABLES = ("windows", "contacts", "segments", "unused")


class DirectoryError(PassplanError):
    """A plan directory could not be written or read; the message says which and why."""

    exit_code = 7


def write_plan(record: PlanRecord, out: Path, *, replace: bool = False, run: Run | None = None) -> Path:
    """Write ``record`` to the new directory ``out`` and return it.

    Beside the tables and the inputs stands the page (``report.html``). It is made from what the directory
    holds; where that does not give the run again, because it was altered in memory, pass it as ``run``, or
    there is no page.
    Everything is written beside ``out`` first and then renamed, so that no half-written plan is ever
    seen. An ``out`` that exists is refused unless ``replace`` is true and it is a plan directory.
    Raises :class:`DirectoryError`.
    """
    out = Path(out)
    check_free(out, replace=replace)
    with new_directory(out) as made:
        _fill(record, made)
        behind = run or _run_again(made, record)
        if behind is not None:
            write_page(record, behind, made / PAGE)
    return out


def check_free(out: Path, *, replace: bool = False) -> None:
    """Refuse, before any work is done, an ``out`` that a later :func:`write_plan` would refuse."""
    if not out.exists():
        return
    is_plan = (out / "plan.json").is_file()
    if not (replace and is_plan):
        hint = "choose another --out, or pass --replace" if is_plan else "choose another --out"
        raise DirectoryError(f"{out}: already exists; {hint}")


@contextmanager
def new_directory(out: Path) -> Iterator[Path]:
    """An empty directory that takes the name ``out`` when the block ends well, and vanishes when it does not."""
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryDirectory(prefix=f".{out.name}-", dir=out.parent) as scratch:
            made = Path(scratch) / "made"
            made.mkdir()
            yield made
            _swap(made, out, Path(scratch))
    except OSError as fault:
        why = fault.strerror or fault
        raise DirectoryError(f"{out}: cannot be written ({why}); check the place and its space") from fault


def write_file(table: pd.DataFrame, out: Path) -> None:
    """Write one table to the CSV file ``out``, whole or not at all. Raises :class:`DirectoryError`."""
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        scratch = out.parent / f".{out.name}.part"
        write_csv(table, scratch)
        scratch.replace(out)
    except OSError as fault:
        raise DirectoryError(f"{out}: cannot be written ({fault.strerror or fault}); check the place") from fault


def changed_inputs(record: PlanRecord, files: Iterable[ReadFile]) -> list[str]:
    """Lines that name each input that differs from what the plan was made from."""
    planned = {entry["path"]: entry["sha256"] for entry in record.summary["inputs"]}
    now = {file.path: file.sha256 for file in files}
    changed = [path for path in planned if path in now and now[path] != planned[path]]
    lines = [f"{path}: changed since the plan was made" for path in changed]
    lines += [f"{path}: the plan was made with it, this run does not read it" for path in planned if path not in now]
    lines += [f"{path}: this run reads it, the plan was made without it" for path in now if path not in planned]
    return lines


def read_plan(directory: Path) -> PlanRecord:
    """Read a plan directory back. Raises :class:`DirectoryError` where something is missing or broken."""
    directory = Path(directory)
    try:
        summary = json.loads((directory / "plan.json").read_text(encoding="utf-8"))
        tables = {name: read_csv(directory / f"{name}.csv") for name in TABLES}
        files = tuple(
            ReadFile(entry["path"], (directory / entry["stored"]).read_bytes()) for entry in summary["inputs"]
        )
    except FileNotFoundError as fault:
        raise DirectoryError(f"{fault.filename}: no such file; name a directory that passplan plan wrote") from fault
    except (OSError, ValueError, KeyError, TypeError) as fault:
        raise DirectoryError(f"{directory}: not a readable plan directory ({fault}); plan again") from fault
    return PlanRecord(summary=summary, files=files, **tables)


def stored_config(directory: Path, summary: Mapping[str, Any]) -> tuple[Path, dict[str, Path]]:
    """Where to load a plan's own inputs from: the config's path and the map that ``load_run`` takes as ``stored``."""
    stored = {entry["path"]: directory / entry["stored"] for entry in summary["inputs"]}
    # The config is read first; the other paths are relative to the folder it was read from.
    return directory / "inputs" / summary["inputs"][0]["path"], stored


def stored_run(directory: Path, record: PlanRecord) -> Run:
    """The run that a plan directory was made from, loaded from the inputs that it carries."""
    config, stored = stored_config(directory, record.summary)
    return load_run(config, start=datetime.fromisoformat(record.summary["horizon_start_utc"]), stored=stored)


def _run_again(made: Path, record: PlanRecord) -> Run | None:
    """The run from the stored inputs, or None where they are not those that the plan's names come from."""
    try:
        run = stored_run(made, record)
    except PassplanError:
        return None
    named = (("spacecraft", run.orbits), ("antennas", run.antennas))
    return run if all(set(record.summary[key]) <= set(known) for key, known in named) else None


def _fill(record: PlanRecord, made: Path) -> None:
    (made / "inputs").mkdir()
    for entry, file in zip(record.summary["inputs"], record.files, strict=True):
        (made / entry["stored"]).write_bytes(file.content)
    for name in TABLES:
        write_csv(getattr(record, name), made / f"{name}.csv")
    text = json.dumps(record.summary, indent=2, ensure_ascii=False, allow_nan=False)
    (made / "plan.json").write_text(text + "\n", encoding="utf-8")


def _swap(made: Path, out: Path, scratch: Path) -> None:
    """Put ``made`` in the place of ``out``; an old plan goes only once the new one stands complete beside it."""
    if out.exists():
        old = scratch / "old"
        out.rename(old)
        try:
            made.rename(out)
        except OSError:
            old.rename(out)
            raise
        shutil.rmtree(old)
    else:
        os.replace(made, out)  # noqa: PTH105 - refuses to replace a directory that is not empty
