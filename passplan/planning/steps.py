"""The main job as a chain of steps: windows, links, plan, audit."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pandas as pd

from passplan.geometry.identity import inherit_ids
from passplan.geometry.losses import Losses
from passplan.geometry.pointing import Samples, sample_windows
from passplan.geometry.survey import Ground, cut_by_travel, find_losses
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.timing import off_pointing_deg
from passplan.geometry.trim import trimmed
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.choose import valid_span
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.errors import PassplanError
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.link.conflicts import find_interference
from passplan.link.expected import expecting
from passplan.link.profiles import WindowLink, link_profiles
from passplan.planning.audit import Fault, audit_plan
from passplan.planning.changes import compare
from passplan.planning.ground_flux import flux_summary, flux_warnings
from passplan.planning.lost_value import lost_value
from passplan.planning.plan import make_plan
from passplan.planning.record import PlanRecord
from passplan.planning.summary import summarise
from passplan.planning.weather import weather_summary

Report = Callable[[str, int, int], None]
_SAMPLE_STEP_S = 10.0


class AuditFailedError(PassplanError):
    """The independent audit found faults in a plan, so the plan is not handed on."""

    exit_code = 6

    def __init__(self, faults: list[Fault]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(["the audit refused the plan; nothing was written", *map(str, faults)]))


def windows_of(run: Run, progress: Report | None = None, *, only: tuple[str, str] | None = None) -> pd.DataFrame:
    """The windows table of a run; ``only`` narrows it to one spacecraft and antenna.

    Beside the columns of the geometry floor: ``off_pointing_deg`` (sigma of the pointing at the nearest) and
    ``lost_s`` (seconds inside in which nothing can be received).
    """
    return _survey(run, progress or _silent, only)[0]


def _survey(run: Run, report: Report, only: tuple[str, str] | None = None) -> tuple[pd.DataFrame, Losses]:
    orbits, antennas = run.orbits, run.antennas
    if only is not None:
        orbits, antennas = {only[0]: orbits[only[0]]}, {only[1]: antennas[only[1]]}
    policy = run.policy
    refraction = policy.refraction != "off"
    windows = find_windows(
        orbits, antennas, run.sites, run.start_utc, run.end_utc, mounts=run.mounts, refraction=refraction,
        timing=policy.timing, progress=lambda done, total: report("finding windows", done, total),
    )
    windows = cut_by_travel(windows, orbits, _ground(run))
    windows = cut_by_manoeuvres(run, windows)
    losses = losses_of(run, windows)
    off_deg = off_pointing_deg(windows, orbits, policy.timing)
    return windows.assign(off_pointing_deg=off_deg, lost_s=losses.lost_seconds(len(windows))), losses


def losses_of(run: Run, windows: pd.DataFrame) -> Losses:
    """The seconds inside each window in which nothing can be received or sent, in the order of the table."""
    return find_losses(windows, run.orbits, _ground(run), run.start_utc, run.policy.guard_sigmas)


def links_of(run: Run, windows: pd.DataFrame, losses: Losses | None = None) -> list[WindowLink]:
    """The link along each window, in the order of the table, without the seconds that are lost."""
    lost = losses_of(run, windows) if losses is None else losses
    return link_profiles(run, windows, samples_of(run, windows), lost)


def cut_by_manoeuvres(run: Run, windows: pd.DataFrame) -> pd.DataFrame:
    """``windows`` within the time between manoeuvres that each element set is good for."""
    starts, ends = np.full(len(windows), -np.inf), np.full(len(windows), np.inf)
    for name, source in run.orbits.items():
        manoeuvres = [datetime64(instant) for instant in run.spacecraft[name].manoeuvres_utc]
        if manoeuvres and isinstance(source, ElementSet):
            mine = (windows["spacecraft"] == name).to_numpy()
            starts[mine], ends[mine] = (float(utc_seconds(at)) for at in valid_span(source, manoeuvres))
    return trimmed(windows, starts, ends, run.orbits, run.sites, refraction=run.policy.refraction != "off")


def _ground(run: Run) -> Ground:
    share = run.policy.off_pointing_beamwidths
    permitted = {name: share * (antenna.beamwidth_deg or np.inf) for name, antenna in run.antennas.items()}
    return Ground(run.antennas, run.sites, run.mounts, permitted, run.policy.refraction != "off")


def samples_of(run: Run, windows: pd.DataFrame) -> Samples:
    """Pointing along each window, every 10 s; apparent where the policy counts refraction."""
    refraction = run.policy.refraction != "off"
    return sample_windows(
        windows, run.orbits, run.sites, run.start_utc, step_s=_SAMPLE_STEP_S, refraction=refraction)


def plan_run(run: Run, progress: Report | None = None, *, against: PlanRecord | None = None) -> PlanRecord:
    """Plan a run and audit the plan.

    ``against`` is an earlier plan: its windows hand down their ids, and the ``change`` column tells what differs.
    Raises :class:`AuditFailedError` where the audit finds a fault; a requirement that cannot be met is no
    fault but a shortfall in the summary.
    """
    report = progress or _silent
    seconds: dict[str, float] = {}
    began = time.perf_counter()

    def lap(stage: str) -> None:
        nonlocal began
        now = time.perf_counter()
        seconds[stage] = round(now - began, 3)
        began = now

    windows, losses = _survey(run, report)
    if against is not None:
        windows = inherit_ids(windows, against.windows)
    lap("windows")
    report("computing links", 0, 0)
    samples = samples_of(run, windows)
    links = link_profiles(run, windows, samples, losses)
    if run.policy.volume_basis == "expected":
        report("expecting volumes", 0, 0)
        links = expecting(run, windows, samples, links, losses)
    interference = find_interference(run, windows)
    lap("links")
    plan = make_plan(run, windows, links, progress=report, interference=interference)
    seconds["plan"] = round(plan.planned_s, 3)
    lap("reasons")
    seconds["reasons"] = round(seconds["reasons"] - plan.planned_s, 3)
    summary = summarise(run, windows, plan)
    flux = flux_summary(run, windows, samples, plan)
    summary["flux_density"] = flux
    summary["warnings"] += flux_warnings(plan.contacts, flux)
    summary["weather"] = weather_summary(run, windows, samples, plan, losses)
    lap("weather")
    record = PlanRecord(
        summary=summary, windows=windows, contacts=plan.contacts, segments=plan.segments,
        unused=plan.unused, files=run.files,
    )
    summary["lost_value"] = lost_value(run, record, links)
    lap("lost value")
    report("auditing", 0, 0)
    faults = audit_plan(run, record.contacts, record.segments, record.summary)
    lap("audit")
    if faults:
        raise AuditFailedError(faults)
    record = replace(record, summary={**record.summary, "seconds": seconds})
    return record if against is None else compare(record, against)


def _silent(_stage: str, _done: int, _total: int) -> None:
    """Nobody is watching."""
