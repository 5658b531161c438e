"""Two sisters on one frequency in one beam: C/I by hand, and a plan that keeps exactly one of two contacts."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest
from planning_cases import problem_of

from passplan.geometry.pointing import LookAngles
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.errors import Findings
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.link.chains import chains_between
from passplan.link.conflicts import Interference, find_interference
from passplan.link.interference import aggregate_db, c_over_i_db, spectrum_share
from passplan.planning.audit.check import audit_plan
from passplan.planning.plan import make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Conflict, Crowd, Limits
from passplan.planning.steps import links_of, plan_run, windows_of
from passplan.planning.summary import summarise
from passplan.planning.value import account

ROOT = Path(__file__).parents[2]
# Ambril-5 of the sample, and a sister 0.02 deg (0.3 s, 2.4 km) behind it.
LEAD = "1 Z0105U 26214B   27067.69000000  .00000000  00000-0  21000-4 0  999{}"
ORBIT = "2 Z0105  97.6000  82.1000 0011000  90.0000  {:7.4f} 15.05491974 4005{}"


def _checksum(line: str) -> int:
    return sum(int(c) if c.isdigit() else c == "-" for c in line[:68]) % 10


def _element(mean_anomaly_deg: float) -> object:
    first, second = LEAD.format(0), ORBIT.format(mean_anomaly_deg, 0)
    text = f"{first[:68]}{_checksum(first)}\n{second[:68]}{_checksum(second)}\n"
    findings = Findings()
    found = parse_tle(text, "pair.tle", findings)
    assert not findings.problems
    return found[0]


@pytest.fixture(scope="module")
def run() -> Run:
    """Half a day of two sisters over two antennas of one site."""
    whole = load_run(ROOT / "configs" / "daily.toml")
    radio = whole.radios["x-8310"]
    craft = {name: whole.spacecraft[name].model_copy(update={
        "radios": ("x-8310",), "start_fill_mb": 5e5, "storage_mb": 1e6, "weight": 1.0, "generation_mb_per_s": 0.0,
        "command_every_h": None,
    }) for name in ("Ambril-5", "Ambril-6")}
    antennas = {
        "Isvarde-A": whole.antennas["Isvarde-A"].model_copy(update={"receivers": ("x-7m",), "transmitters": ()}),
        "Isvarde-B": whole.antennas["Isvarde-B"].model_copy(update={"receivers": ("x-5m",)}),
    }
    return replace(
        whole, spacecraft=craft, antennas=antennas, radios={"x-8310": radio}, closures=(), requests=(),
        end_utc=whole.start_utc + np.timedelta64(12, "h"),
        orbits={"Ambril-5": _element(70.0), "Ambril-6": _element(69.98)},
        policy=whole.policy.model_copy(update={
            "required_c_over_i_db": 15.0, "cut_grid_s": 0, "options_per_window": 1, "worth_per_money": 0.0,
        }),
    )


def _flat(elevation_deg: float, range_km: float, count: int) -> LookAngles:
    flat = np.ones(count)
    return LookAngles(120.0 * flat, elevation_deg * flat, range_km * flat, 0.0 * flat)


def test_c_over_i_by_hand(run: Run) -> None:
    chain = chains_between(run, "Ambril-5", "Isvarde-B")[0]
    apart = np.array([0.0, 0.2, 10.0])
    site = run.sites["Isvarde"]
    ratio = c_over_i_db(run, chain, "Ambril-6", site, (_flat(30.0, 1_000.0, 3), _flat(30.0, 2_000.0, 3)), apart)
    # Twice as far: 6.02 dB; 0.5 dB of pointing loss; the beam of 50.1 dBi at an efficiency of 0.6 is 0.533 deg
    # wide: 12 (0.2 / 0.533)^2 = 1.69 dB; at 10 deg 50.1 - (32 - 25) = 43.1 dB.
    assert ratio == pytest.approx([5.52, 5.52 + 1.69, 5.52 + 43.1], abs=0.02)
    # Over two links it sends twice as much.
    two = run.spacecraft["Ambril-6"].model_copy(update={"links": 2})
    doubled = replace(run, spacecraft={**run.spacecraft, "Ambril-6": two})
    looks = (_flat(30.0, 1_000.0, 3), _flat(30.0, 2_000.0, 3))
    assert c_over_i_db(doubled, chain, "Ambril-6", site, looks, apart) == pytest.approx(ratio - 3.0103, abs=1e-3)
    below = c_over_i_db(run, chain, "Ambril-6", site, (_flat(30.0, 1e3, 1), _flat(-1.0, 3e3, 1)), np.zeros(1))
    assert np.isinf(below[0])


def test_spectrum_and_polarisation_count(run: Run) -> None:
    chain = chains_between(run, "Ambril-5", "Isvarde-B")[0]
    own = run.radios["x-8310"]
    assert isinstance(own, DownlinkRadio)
    # A band of 45 x 1.25 = 56.25 MHz; 28.125 MHz higher half of it overlaps.
    assert spectrum_share(run, chain, own.model_copy(update={"frequency_mhz": 8_338.125})) == pytest.approx(0.5)
    assert spectrum_share(run, chain, own.model_copy(update={"frequency_mhz": 8_370.0})) == 0.0
    other = own.model_copy(update={"name": "other", "polarisation": "RHCP"})
    crossed = replace(run, radios={**run.radios, "other": other}, spacecraft={
        **run.spacecraft, "Ambril-6": run.spacecraft["Ambril-6"].model_copy(update={"radios": ("other",)})})
    looks = (_flat(30.0, 1_000.0, 2), _flat(30.0, 1_000.0, 2))
    apart = np.array([0.0, 5.0])
    same, cross = (c_over_i_db(r, chain, "Ambril-6", run.sites["Isvarde"], looks, apart) for r in (run, crossed))
    assert cross - same == pytest.approx([20.0, 0.0])
    assert aggregate_db([same, same]) == pytest.approx(same - 10.0 * np.log10(2.0))


def test_the_planner_keeps_exactly_one_of_two_conflicting_contacts(run: Run) -> None:
    calm = replace(run, policy=run.policy.model_copy(update={"required_c_over_i_db": None}))
    both, one = plan_run(calm), plan_run(run)
    # Names of windows end with their pass; without the rule both sisters are heard in each.
    per_pass = [plan.contacts["window_id"].str.rsplit(".", n=1).str[-1].value_counts() for plan in (both, one)]
    assert len(per_pass[0]) >= 3
    assert set(per_pass[0]) == {2}
    assert set(per_pass[1]) == {1}
    assert set(per_pass[0].index) == set(per_pass[1].index)
    assert "interference" in set(one.unused["reason"])
    assert one.unused[one.unused["reason"] == "interference"]["detail"].str.contains("C/I").all()
    # The audit finds by its own path what the calm plan ignored, and nothing in the other.
    faults = audit_plan(run, both.contacts, both.segments, both.summary)
    assert {fault.kind for fault in faults} == {"interference"}
    assert audit_plan(run, one.contacts, one.segments, one.summary) == []


def test_pairs_are_named_and_ordered(run: Run) -> None:
    windows = windows_of(run)
    pairs = find_interference(run, windows).pairs
    assert {(pair.victim, pair.interferer) for pair in pairs} == {("Ambril-5", "Ambril-6"), ("Ambril-6", "Ambril-5")}
    assert all(pair.start_s < pair.end_s and pair.worst_db < 15.0 for pair in pairs)
    assert [pair.start_s for pair in pairs] == sorted(pair.start_s for pair in pairs)
    calm = replace(run, policy=run.policy.model_copy(update={"required_c_over_i_db": None}))
    assert find_interference(calm, windows).pairs == ()


def _three(run: Run) -> Run:
    """A third sister on the other side, heard by a third antenna. One beside another leaves -0.5 dB, two -3.5 dB."""
    orbits = {"Ambril-5": _element(70.0), "Ambril-6": _element(69.985), "Ambril-4": _element(70.016)}
    other = run.antennas["Isvarde-B"].model_copy(update={"name": "Isvarde-C"})
    return replace(
        run, orbits=orbits, antennas={**run.antennas, "Isvarde-C": other},
        spacecraft={name: run.spacecraft["Ambril-5"].model_copy(update={"name": name}) for name in orbits},
        end_utc=run.start_utc + np.timedelta64(6, "h"),
        policy=run.policy.model_copy(update={"required_c_over_i_db": -2.0}),
    )


def test_two_that_are_each_tolerable_are_not_both_in_the_plan(run: Run) -> None:
    three = _three(run)
    found = find_interference(three, windows_of(three))
    assert found.pairs == ()
    assert {(crowd.victim, crowd.interferers) for crowd in found.crowds} == {
        ("Ambril-4", ("Ambril-5", "Ambril-6")), ("Ambril-5", ("Ambril-4", "Ambril-6")),
        ("Ambril-6", ("Ambril-4", "Ambril-5"))}
    plan = plan_run(three)
    # The same with pairs only: the audit, which adds powers up by itself, refuses that plan.
    windows = windows_of(three)
    lone = make_plan(three, windows, links_of(three, windows), interference=Interference(found.pairs))
    faults = audit_plan(three, lone.contacts, lone.segments, summarise(three, windows, lone))
    assert {fault.kind for fault in faults} == {"interference"}
    assert all("all that send" in fault.sentence for fault in faults)
    assert 0 < len(plan.contacts) < len(lone.contacts)
    assert plan.summary["value"] < lone.result.value
    told = plan.unused[plan.unused["reason"] == "interference"]["detail"]
    assert told.str.contains("C/I of all of them").any()


@pytest.mark.parametrize("seed", range(12))
def test_with_crowds_the_plan_is_the_best_of_all(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    rows = []
    for _ in range(8):
        start = int(rng.integers(0, 20)) * 60
        end = start + int(rng.integers(4, 12)) * 60
        rows.append({"spacecraft": int(rng.integers(0, 4)), "antenna": int(rng.integers(0, 4)), "start_s": start,
                     "end_s": end, "pieces": [(start, end, float(rng.integers(1, 5)))]})
    crowds = []
    for k in range(6):
        victim, low = int(rng.integers(0, 4)), int(rng.integers(0, 25)) * 60
        others = tuple(c for c in range(4) if c != victim)
        crowds.append(Crowd(f"c{k}", victim, int(rng.integers(0, 4)), others, tuple(rng.uniform(0.2, 1.0, 3).tolist()),
                            low, low + int(rng.integers(1, 8)) * 60))
    problem = problem_of(rows, weight=(1.0, 2.0, 1.5, 1.2), generation=(0.0,) * 4, capacity=(1e6,) * 4,
                         start=(1e5,) * 4, prepare_s=(0,) * 4, release_s=(0,) * 4, crowds=tuple(crowds))

    def allowed(chosen: tuple[int, ...]) -> bool:
        for instant in range(0, 32 * 60, 60):
            now = [rows[k] for k in chosen if rows[k]["start_s"] <= instant < rows[k]["end_s"]]  # type: ignore[operator]
            if any(len({row[key] for row in now}) < len(now) for key in ("spacecraft", "antenna")):
                return False
            for crowd in crowds:
                if crowd.start_s <= instant < crowd.end_s and any(
                        (row["spacecraft"], row["antenna"]) == (crowd.victim, crowd.antenna) for row in now):
                    share = dict(zip(crowd.interferers, crowd.shares, strict=True))
                    if sum(share.get(row["spacecraft"], 0.0) for row in now) > 1.0:  # type: ignore[call-overload]
                        return False
        return True

    plans = [chosen for size in range(len(rows) + 1) for chosen in combinations(range(len(rows)), size)]
    best = max(account(problem, chosen).value for chosen in plans if allowed(chosen))
    found = find_plan(problem, Limits(gap=0.0))
    assert allowed(found.chosen)
    assert found.value == pytest.approx(best)


@pytest.mark.parametrize("seed", range(8))
def test_with_conflicts_the_plan_is_the_best_of_all(seed: int) -> None:
    rng = np.random.default_rng(seed)
    rows = []
    for _ in range(7):
        start = int(rng.integers(0, 40)) * 60
        end = start + int(rng.integers(3, 9)) * 60
        rows.append({"spacecraft": int(rng.integers(0, 3)), "antenna": int(rng.integers(0, 3)), "start_s": start,
                     "end_s": end, "pieces": [(start + 20, end, float(rng.integers(1, 5)))]})
    conflicts = tuple(
        Conflict(f"c{k}", int(rng.integers(0, 3)), int(rng.integers(0, 3)), int(rng.integers(0, 3)), low, low + 600)
        for k, low in enumerate(rng.integers(0, 2_000, 6).tolist()))
    conflicts = tuple(c for c in conflicts if c.victim != c.interferer)
    problem = problem_of(rows, weight=(1.0, 2.0, 1.5), generation=(0.0,) * 3, capacity=(1e6,) * 3, start=(1e5,) * 3,
                         prepare_s=(60,) * 3, release_s=(0,) * 3, conflicts=conflicts)

    def clash(a: dict[str, object], b: dict[str, object]) -> bool:
        def meets(x: int, y: int) -> bool:
            return max(a["start_s"], b["start_s"]) - x < min(a["end_s"], b["end_s"]) + y  # type: ignore[call-overload,operator,type-var]

        if a["spacecraft"] == b["spacecraft"] and meets(0, 0):
            return True
        if a["antenna"] == b["antenna"] and meets(60, 0):
            return True
        for c in conflicts:
            for x, y in ((a, b), (b, a)):
                hit = (x["spacecraft"], x["antenna"], y["spacecraft"]) == (c.victim, c.antenna, c.interferer)
                low, high = max(x["start_s"], y["start_s"], c.start_s), min(x["end_s"], y["end_s"], c.end_s)
                if hit and low < high:
                    return True
        return False

    best = max(
        account(problem, chosen).value
        for size in range(len(rows) + 1) for chosen in combinations(range(len(rows)), size)
        if not any(clash(rows[a], rows[b]) for a, b in combinations(chosen, 2)))
    found = find_plan(problem, Limits(gap=0.0))
    assert found.value == pytest.approx(best)
