"""Plans the daily contacts between a fleet of satellites and its ground antennas, with a proven bound.

The commands' steps as functions::

    import passplan

    run = passplan.load_run("configs/daily.toml")
    windows = passplan.windows_of(run)          # DataFrame, one row for each window
    plan = passplan.plan_run(run)               # audited; .contacts, .segments, .unused are DataFrames
    passplan.write_plan(plan, "plans/today")    # with report.html in it
    passplan.export_plan("plans/today", "calendar")
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from passplan._version import __version__

if TYPE_CHECKING:
    from passplan.inputs.errors import InputError
    from passplan.inputs.load import load_run
    from passplan.inputs.run import Run
    from passplan.planning.audit import audit_plan
    from passplan.planning.record import PlanRecord
    from passplan.planning.steps import links_of, plan_run, windows_of
    from passplan.report.directory import read_plan, write_plan
    from passplan.report.export import export_plan
    from passplan.studies.study import read_study
    from passplan.studies.whatif import run_study

# Loaded on first use: the solver and the sky take seconds to import, and ``passplan --help`` needs neither.
_HOMES = {
    "InputError": "inputs.errors",
    "PlanRecord": "planning.record",
    "Run": "inputs.run",
    "audit_plan": "planning.audit",
    "export_plan": "report.export",
    "links_of": "planning.steps",
    "load_run": "inputs.load",
    "plan_run": "planning.steps",
    "read_plan": "report.directory",
    "read_study": "studies.study",
    "run_study": "studies.whatif",
    "windows_of": "planning.steps",
    "write_plan": "report.directory",
}

__all__ = [
    "InputError",
    "PlanRecord",
    "Run",
    "__version__",
    "audit_plan",
    "export_plan",
    "links_of",
    "load_run",
    "plan_run",
    "read_plan",
    "read_study",
    "run_study",
    "windows_of",
    "write_plan",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(f"{__name__}.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
