"""The audit of classes of data and of changing generation: an honest plan passes, a corrupted one is named."""

from __future__ import annotations

from copy import deepcopy
from dataclasses import replace
from io import StringIO
from pathlib import Path

import numpy as np
import pytest
from audit_bench import CRAFT, Bench
from rich.console import Console

from passplan.inputs.data import DataClass
from passplan.inputs.generation import Series
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.audit import audit_plan
from passplan.planning.audit.making import rates_of
from passplan.planning.audit.storage import class_balances
from passplan.planning.backlog import backlogs
from passplan.planning.fleet import fleet_of
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run
from passplan.report.backlog_chart import backlog_chart

ROOT = Path(__file__).parents[3]


def _run() -> Run:
    """Ten hours of three spacecraft: two classes aboard Ambril-3, one on Teasel-1 that comes in each revolution."""
    whole = load_run(ROOT / "configs" / "daily.toml", policy={"time_limit_s": 20.0})
    hour = np.timedelta64(1, "h")
    series = Series(
        np.array([whole.start_utc - hour, whole.start_utc + 2 * hour]),
        np.array([whole.start_utc + hour, whole.start_utc + 3 * hour]), np.array([0.3, 2.0]))
    data = {
        "Ambril-3": (
            DataClass(name="alerts", spacecraft=("Ambril-3",), weight=9.0, generation_file="alerts.csv"),
            DataClass(name="frames", spacecraft=("Ambril-3",), weight=2.0, generation_mb_per_s=1.2,
                      generation_mb_per_orbit=800.0, generation_orbit_span=(0.2, 0.5), start_fill_mb=9_000.0)),
        "Teasel-1": (DataClass(name="soil", spacecraft=("Teasel-1",), weight=5.0, generation_mb_per_orbit=90.0),),
    }
    return replace(
        whole, end_utc=whole.start_utc + 10 * hour, data=data, series={"alerts.csv": series}, requests=(),
        spacecraft={name: whole.spacecraft[name] for name in CRAFT},
        orbits={name: whole.orbits[name] for name in CRAFT})


@pytest.fixture(scope="module")
def honest() -> Bench:
    record = plan_run(_run())  # audited inside
    return Bench(_run(), record.contacts, record.segments, record.summary)


@pytest.fixture
def bench(honest: Bench) -> Bench:
    return Bench(honest.run, honest.contacts.copy(), honest.segments.copy(), deepcopy(honest.summary))


def test_the_plan_has_pieces_of_both_classes_and_loses_the_lesser(honest: Bench) -> None:
    assert honest.audit() == []
    assert {"alerts", "frames", "soil", "data"} <= set(honest.segments["data_class"])
    assert honest.segments.duplicated(["contact_id", "start_utc"]).any()
    classes = honest.summary["storage"]["Ambril-3"]["classes"]
    assert classes["alerts"]["lost_mb"] == pytest.approx(0.0, abs=1e-6)
    assert classes["alerts"]["generated_mb"] == pytest.approx(3_600 * 2.3)
    assert classes["frames"]["lost_mb"] > 1.0


def test_volume_moved_from_one_class_to_the_other(bench: Bench) -> None:
    twins = bench.segments[bench.segments.duplicated(["contact_id", "start_utc"], keep=False)].index[:2]
    bench.segments.loc[twins[0], "volume_mb"] += 1.0
    bench.segments.loc[twins[1], "volume_mb"] -= 1.0
    faults = bench.audit()
    assert {"volume", "value"} >= {fault.kind for fault in faults}
    assert any(" MB of alerts, not " in str(fault) for fault in faults)


def test_a_class_that_the_spacecraft_does_not_have(bench: Bench) -> None:
    row = bench.segments.index[bench.segments["data_class"] == "soil"][0]
    bench.segments.loc[row, "data_class"] = "sand"
    assert any("Teasel-1 has no class of data 'sand'" in str(fault) for fault in bench.audit())


@pytest.mark.parametrize("key", ["start_mb", "generated_mb", "delivered_mb", "lost_mb", "left_mb"])
def test_a_figure_of_a_class(bench: Bench, key: str) -> None:
    bench.summary["storage"]["Ambril-3"]["classes"]["frames"][key] += 0.01
    assert any(f"Ambril-3, class frames: storage figure {key}" in str(fault) for fault in bench.audit())


def test_generation_that_differs_from_what_the_plan_counted(bench: Bench) -> None:
    series = bench.run.series["alerts.csv"]
    bench.run = replace(bench.run, series={"alerts.csv": replace(series, mb_per_s=series.mb_per_s * 1.001)})
    assert any("storage figure generated_mb" in str(fault) for fault in bench.audit())


def test_both_paths_see_the_same_generation() -> None:
    run = _run()
    fleet = fleet_of(run)
    for name in ("Ambril-3", "Teasel-1"):
        for stream, item in zip(fleet.streams_of(fleet.names.index(name)), run.data_of(name), strict=True):
            for start_s, end_s, rate in rates_of(run, name, item):
                made = float(stream.made(end_s) - stream.made(start_s))
                assert made == pytest.approx(rate * (end_s - start_s), abs=1e-6)
    nine = sum(balance.generated_mb for balance in class_balances(run, "Teasel-1", [], []).values())
    # Ten hours are between six and seven revolutions of 95 min.
    assert 6.0 * 90.0 < nine < 7.0 * 90.0


def test_the_charts_follow_the_plan(honest: Bench) -> None:
    none = honest.contacts.iloc[:0]
    record = PlanRecord(honest.summary, none, honest.contacts, honest.segments, none)
    drawn = backlogs(record)
    for name in CRAFT:
        store = honest.summary["storage"][name]
        ends = drawn[name].fill_mb[[0, -1]]
        assert ends == pytest.approx([store["start_mb"], store["left_mb"]], abs=0.01)
        assert drawn[name].fill_mb.max() <= store["capacity_mb"] + 0.01
    assert drawn["Ambril-3"].losing_s


def _ageing_run() -> Run:
    """The same, with a deadline, worth that fades, and storage freed late, of which each matters."""
    run = _run()
    alerts, frames = run.data["Ambril-3"]
    data = {
        **run.data,
        "Ambril-3": (
            alerts.model_copy(update={"freshness": ((0.0, 1.0), (1.0, 0.8), (1.0, 0.5), (6.0, 0.1))}),
            frames.model_copy(update={"deadline_h": 2.5})),
    }
    late = {"acknowledged_by": "next_command", "overflow": "newest"}
    craft = {**run.spacecraft, "Ambril-3": run.spacecraft["Ambril-3"].model_copy(update=late)}
    return replace(run, data=data, spacecraft=craft)


@pytest.fixture(scope="module")
def aged() -> Bench:
    record = plan_run(_ageing_run())  # audited inside
    return Bench(_ageing_run(), record.contacts, record.segments, record.summary)


def test_an_ageing_plan_misses_deadlines_and_says_so(aged: Bench) -> None:
    assert aged.audit() == []
    classes = aged.summary["storage"]["Ambril-3"]["classes"]
    assert classes["frames"]["missed_mb"] > 1.0
    assert classes["frames"]["missed_mb"] <= classes["frames"]["lost_mb"]
    mine = aged.contacts[aged.contacts["spacecraft"] == "Ambril-3"]
    assert (mine["weight"] < 9.0).all()


@pytest.mark.parametrize(("change", "said"), [
    ({"deadline_h": 2.6}, "missed the deadline"),
    ({"deadline_h": None}, "missed the deadline"),
])
def test_a_deadline_that_the_plan_did_not_keep(aged: Bench, change: dict[str, float | None], said: str) -> None:
    alerts, frames = aged.run.data["Ambril-3"]
    data = {**aged.run.data, "Ambril-3": (alerts, frames.model_copy(update=change))}
    faults = audit_plan(replace(aged.run, data=data), aged.contacts, aged.segments, aged.summary)
    assert any(said in str(fault) for fault in faults)


def test_worth_that_is_counted_as_if_fresh(aged: Bench) -> None:
    alerts, frames = aged.run.data["Ambril-3"]
    data = {**aged.run.data, "Ambril-3": (alerts.model_copy(update={"freshness": ()}), frames)}
    faults = audit_plan(replace(aged.run, data=data), aged.contacts, aged.segments, aged.summary)
    assert {fault.kind for fault in faults} == {"value"}


@pytest.mark.parametrize("change", [{"acknowledged_by": None}, {"acknowledged_by": "contact"}, {"overflow": "oldest"}])
def test_storage_that_is_freed_or_lost_otherwise(aged: Bench, change: dict[str, str | None]) -> None:
    craft = aged.run.spacecraft["Ambril-3"].model_copy(update=change)
    run = replace(aged.run, spacecraft={**aged.run.spacecraft, "Ambril-3": craft})
    faults = audit_plan(run, aged.contacts, aged.segments, aged.summary)
    assert {fault.kind for fault in faults} & {"storage", "volume", "value"}


def test_the_review_shows_each_class(honest: Bench) -> None:
    none = honest.contacts.iloc[:0]
    stores = backlogs(PlanRecord(honest.summary, none, honest.contacts, honest.segments, none))
    console = Console(width=100, record=True, file=StringIO())
    console.print(backlog_chart(honest.summary, stores, 100, None))
    lines = console.export_text().splitlines()
    own = next(line for line in lines if line.startswith("  alerts"))
    assert "worth 9" in own
    assert not any(line.startswith("  soil") for line in lines)  # the only class of its spacecraft
    assert max(map(len, lines)) <= 100
