"""Pointing tables go stale: until when they may be issued, remembered in the plan directory."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.errors import PassplanError
from passplan.inputs.run import Run

RECORD = "pointing_expiry.json"


class ExpiredError(PassplanError):
    """Pointing tables of this plan must not be issued any more; the message says since when and what to do."""

    exit_code = 3


def latest_use(run: Run) -> datetime:
    """Where nobody says otherwise: the end of the horizon, or the day on which the first element set is too old."""
    ends = [_zoned(run.end_utc)]
    for name, orbit in run.orbits.items():
        if isinstance(orbit, ElementSet):
            days = run.spacecraft[name].element_refuse_age_days or run.policy.element_refuse_age_days
            ends.append(_zoned(orbit.epoch_utc) + timedelta(days=days))
    return min(ends)


def settle_expiry(directory: Path, run: Run, asked: datetime | None, now: datetime | None = None) -> str:
    """The expiry of a new issue as text, remembered in ``directory``; it can be brought forward, never put off.

    Raises :class:`ExpiredError` where that instant has passed, and OSError where it cannot be remembered.
    """
    now = now or datetime.now(UTC)
    known = _remembered(directory)
    if known is not None and known <= now:
        raise ExpiredError(
            f"{directory}: its pointing tables expired at {_text(known)}; plan again with fresh element sets"
        )
    expiry = min(time for time in (asked, known, latest_use(run)) if time is not None)
    if asked is not None and expiry <= now:
        raise ExpiredError(f"--expires {_text(asked)}: {_text(expiry)} has passed; name a later instant, or plan again")
    if asked is not None:
        (directory / RECORD).write_text(json.dumps({"expires_utc": _text(expiry)}) + "\n", encoding="utf-8")
    return _text(expiry)


def _remembered(directory: Path) -> datetime | None:
    try:
        text = json.loads((directory / RECORD).read_text(encoding="utf-8"))["expires_utc"]
        return datetime.fromisoformat(text)
    except FileNotFoundError:
        return None
    except (ValueError, KeyError, TypeError) as fault:
        # An expiry that cannot be read must not turn into none at all.
        raise ExpiredError(f"{directory / RECORD}: not readable ({fault}); plan again") from fault


def _zoned(instant: np.datetime64) -> datetime:
    stamp: datetime = instant.astype("datetime64[us]").astype(object)
    return stamp.replace(tzinfo=UTC)


def _text(instant: datetime) -> str:
    return instant.astimezone(UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")
