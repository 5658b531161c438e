"""Local times of stations, for extra labelled columns only."""

from __future__ import annotations

from passplan.inputs.errors import InputError, Problem, nearest
from passplan.inputs.run import Run
from passplan.report.contact_table import LocalTime


def local_time(run: Run, site: str) -> LocalTime:
    """The local time of a site; raises :class:`InputError` where it is unknown or names no time zone."""
    if site not in run.sites:
        raise InputError([Problem("--local", "", site, f"not a site of this plan; {nearest(site, run.sites)}")])
    zone = run.sites[site].time_zone
    if zone is None:
        raise InputError(
            [Problem("--local", "", site, 'this site names no time_zone; add one, as time_zone = "Europe/Oslo"')]
        )
    return LocalTime(site, zone)
