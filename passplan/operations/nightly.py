"""The unattended run: one at a time, a plan published whole or not at all, the last good one never lost."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Annotated, Any

from filelock import FileLock, Timeout
from pydantic import Field

from passplan.inputs.errors import Findings, PassplanError
from passplan.inputs.load import beside, load_run
from passplan.inputs.reader import Reader
from passplan.inputs.records import Instant, Record
from passplan.inputs.run import Run
from passplan.inputs.tables import checked, read_toml
from passplan.operations.status import read_status, write_status
from passplan.planning.record import PlanRecord
from passplan.report.directory import DirectoryError, write_plan

LATEST = "latest"


class NightlyConfig(Record):
    """What the unattended run plans and where it leaves its plans (paths relative to the config).

    ``start`` is for rehearsals; without it the horizon begins at the next full minute.
    """

    run: str
    plans: str
    start: Instant | None = None
    watch_h: Annotated[float, Field(gt=0.0, le=24.0 * 31)] = 26.0


@dataclass(frozen=True)
class Nightly:
    """A checked config with its paths resolved."""

    run: Path
    plans: Path
    start: datetime | None
    watch_h: float


class BusyError(PassplanError):
    """Another unattended run holds the lock."""

    exit_code = 7


def read_nightly(path: str | Path) -> Nightly:
    """Read and check a nightly config; raises :class:`~passplan.inputs.errors.InputError`."""
    path = Path(path)
    findings = Findings()
    document = read_toml(path, Reader(path.parent), findings) or {}
    findings.raise_if_any()
    config = checked(NightlyConfig, document, path, "", findings)
    findings.raise_if_any()
    return Nightly(beside(path, config.run), beside(path, config.plans), config.start, config.watch_h)


def run_nightly(
    nightly: Nightly, planner: Callable[[Run], PlanRecord], *, start: datetime | None = None
) -> tuple[PlanRecord, Path]:
    """Plan, audit (in ``planner``) and publish one night; returns the record and its directory.

    Whatever goes wrong, ``latest`` keeps pointing to the last good plan and the status file says what
    happened, with the exit code of the exception, which is then raised on.
    Raises :class:`BusyError` where another run is at work, without touching anything.
    """
    try:
        nightly.plans.mkdir(parents=True, exist_ok=True)
        lock = FileLock(nightly.plans / ".lock")
        lock.acquire(timeout=0)
    except Timeout:
        raise BusyError(f"{nightly.plans}: another nightly run holds the lock; wait for it to end") from None
    except OSError as fault:
        raise DirectoryError(f"{nightly.plans}: cannot be used ({fault.strerror}); check the place") from fault
    began = datetime.now(UTC)
    try:
        record, out = _one_night(nightly, planner, start or nightly.start or _next_minute(began))
    except BaseException as fault:
        _report(nightly.plans, began, code=exit_code(fault), message=str(fault) or type(fault).__name__)
        raise
    else:
        _report(nightly.plans, began, code=0, message="", record=record, out=out)
        return record, out
    finally:
        lock.release()


def exit_code(fault: BaseException) -> int:
    """The exit code of a fault: its own, or 1 where nobody foresaw it."""
    return fault.exit_code if isinstance(fault, PassplanError) else 1


def point_latest(plans: Path, target: Path) -> None:
    """Make ``latest`` point to ``target`` in one step: a link is made aside and renamed over the old one."""
    with tempfile.TemporaryDirectory(prefix=".latest-", dir=plans) as scratch:
        link = Path(scratch) / LATEST
        link.symlink_to(target.name, target_is_directory=True)
        os.replace(link, plans / LATEST)  # noqa: PTH105 - Path.replace would follow nothing either, but says less


def _one_night(nightly: Nightly, planner: Callable[[Run], PlanRecord], start: datetime) -> tuple[PlanRecord, Path]:
    record = planner(load_run(nightly.run, start=start))
    stamp = f"{start:%Y%m%dT%H%M%SZ}"
    out = nightly.plans / f"{stamp}-{record.summary['plan_id']}"
    # The same inputs give the same plan: a repeated night finds its own plan already there.
    if not (out / "plan.json").is_file():
        write_plan(record, out)
    try:
        point_latest(nightly.plans, out)
    except OSError as fault:
        raise DirectoryError(f"{nightly.plans / LATEST}: cannot be set ({fault.strerror}); check the place") from fault
    return record, out


def _report(
    plans: Path, began: datetime, *, code: int, message: str, record: PlanRecord | None = None,
    out: Path | None = None,
) -> None:
    ended = datetime.now(UTC)
    before = read_status(plans)
    status: dict[str, Any] = {
        "exit_code": code, "message": message, "began_utc": _iso(began), "ended_utc": _iso(ended),
        "seconds": round((ended - began).total_seconds(), 3),
        "last_good_utc": before.get("last_good_utc"), "last_good_plan": before.get("last_good_plan"),
    }
    if record is not None and out is not None:
        keys = ("plan_id", "status", "contacts", "volume_mb", "value", "bound", "gap", "shortfalls", "warnings")
        status |= {key: record.summary[key] for key in keys}
        status |= {"last_good_utc": _iso(ended), "last_good_plan": out.name}
    try:
        write_status(plans, status)
    except OSError as fault:
        raise DirectoryError(f"{plans}: status file cannot be written ({fault.strerror}); check the place") from fault


def _next_minute(now: datetime) -> datetime:
    return now.replace(second=0, microsecond=0) + timedelta(minutes=1)


def _iso(instant: datetime) -> str:
    return instant.isoformat(timespec="milliseconds").replace("+00:00", "Z")
