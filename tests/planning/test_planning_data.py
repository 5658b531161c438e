"""Classes of data and changing generation: layers against classes, and plans against exhaustive enumeration."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from data_cases import DataJudge, random_ageing_problem, random_data_problem
from hypothesis import given, settings
from hypothesis import strategies as st
from planning_cases import problem_of, some_of

from passplan.planning.classes import follow
from passplan.planning.layering import layers_of
from passplan.planning.maps import storage_maps, worth_of
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.streams import Keeping, Stream, steady
from passplan.planning.value import account, follow_storage

Pieces = list[tuple[int, int, float]]


def test_the_best_class_goes_down_first_and_the_least_is_lost() -> None:
    # 60 MB of storage: 10 MB of a and 40 MB of b aboard, 1 MB/s of each. Full after 5 s; then a displaces b and
    # what comes of b is lost: by 10 s a 20, b 40, 10 MB of b lost. Then 3 MB/s for 10 s: a sends its 20 + 10 MB in
    # 10 s (at 3 MB/s against 1 MB/s), while b goes on growing: freed are 2 MB/s net of a, b takes 1 MB/s of it.
    classes = (steady("a", 5.0, 10.0, 1.0, 20.0), steady("b", 1.0, 40.0, 1.0, 20.0))
    run = follow(classes, 60.0, 20.0, [(10, 20, 3.0)])
    assert run.sent_mb[0] == pytest.approx([30.0, 0.0])
    assert run.lost_mb == pytest.approx([0.0, 10.0])
    assert run.left_mb == pytest.approx([0.0, 50.0])
    assert run.losing_s.tolist() == [[5.0, 10.0]]


def _stream(name: str, weight: float, start_mb: float, rates: list[float], edges: list[float]) -> Stream:
    made = np.concatenate([[0.0], np.cumsum(np.diff(edges) * np.array(rates))])
    return Stream(name, weight, start_mb, np.array(edges), made)


@st.composite
def _cases(draw: st.DrawFn) -> tuple[list[Stream], float, Pieces, float]:
    clock, pieces = 0, []
    for gap, length, rate in draw(st.lists(
            st.tuples(st.integers(0, 200), st.integers(1, 200), st.sampled_from([0.1, 0.5, 1.0, 5.0])), max_size=5)):
        pieces.append((clock + gap, clock + gap + length, rate))
        clock += gap + length
    horizon_s = float(clock + 100)
    capacity = draw(st.sampled_from([0.0, 50.0, 300.0, 5e3]))
    count = draw(st.integers(1, 3))
    streams = []
    for k in range(count):
        inner = sorted(set(draw(st.lists(st.integers(1, int(horizon_s) - 1), max_size=4))))
        edges = [0.0, *map(float, inner), horizon_s]
        rates = [draw(st.sampled_from([0.0, 0.1, 0.5, 2.0])) for _ in edges[1:]]
        streams.append(_stream(str(k), 9.0 - 4.0 * k, capacity * draw(st.floats(0.0, 1.0)) / count, rates, edges))
    return streams, capacity, pieces, horizon_s


@given(_cases())
@settings(deadline=None, max_examples=200)
def test_layers_are_worth_what_the_classes_are(case: tuple[list[Stream], float, Pieces, float]) -> None:
    streams, capacity, pieces, horizon_s = case
    run = follow(streams, capacity, horizon_s, pieces)
    worth = float(run.delivered_mb @ [one.weight for one in streams]) - 0.7 * float(run.lost_mb.sum())
    into = sum(one.start_mb + float(one.made_mb[-1]) for one in streams)
    assert float((run.delivered_mb + run.lost_mb + run.left_mb).sum()) == pytest.approx(into, abs=1e-6)
    assert run.sent_mb.sum(axis=0) == pytest.approx(run.delivered_mb, abs=1e-9)
    by_layer = 0.0
    for layer in layers_of(streams, capacity, 0.7):
        alone = follow([Stream("", 1.0, layer.start_mb, layer.time_s, layer.made_mb)], capacity, horizon_s, pieces)
        by_layer += layer.weight * float(alone.delivered_mb[0]) - layer.spill_cost * float(alone.lost_mb[0])
    assert by_layer == pytest.approx(worth, abs=1e-6)


@given(_cases())
@settings(deadline=None, max_examples=200)
def test_maps_are_worth_what_the_account_says(case: tuple[list[Stream], float, Pieces, float]) -> None:
    streams, capacity, pieces, horizon_s = case
    # Two pieces to a contact, so that a contact has a gap inside.
    groups = [pieces[k:k + 2] for k in range(0, len(pieces), 2)]
    rows = [{"start_s": group[0][0], "end_s": group[-1][1], "pieces": group} for group in groups]
    plain = problem_of(rows, horizon_s=int(horizon_s), capacity=(capacity,), spill_cost_per_mb=0.3)
    problem = _with(plain, streams)
    chosen = list(range(len(groups)))
    by_maps = worth_of(problem, storage_maps(problem), 0, chosen)
    assert by_maps == pytest.approx(account(problem, chosen).value, abs=1e-6)


def _with(problem: Problem, streams: list[Stream]) -> Problem:
    return replace(problem, fleet=replace(problem.fleet, streams=(tuple(streams),)))


def test_one_steady_class_is_the_plain_storage() -> None:
    pieces = [(20, 50, 3.0), (80, 90, 0.5)]
    run = follow([steady("", 1.0, 30.0, 1.0, 120.0)], 60.0, 120.0, pieces)
    volumes, lost, left = follow_storage(120, 30.0, 1.0, 60.0, pieces)
    assert run.sent_mb[:, 0] == pytest.approx(volumes)
    assert (run.lost_mb[0], run.left_mb[0]) == pytest.approx((lost, left))


@pytest.mark.parametrize("block", some_of(range(6), 2))
def test_120_random_cases_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(20 * block, 20 * block + 20):
        problem = random_data_problem(seed)
        judge = DataJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert all(judge.compatible(a, b) for a in chosen for b in chosen if a < b), f"seed {seed}"
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert judge.value(chosen) == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value
        assert result.status in ("optimal", "empty"), f"seed {seed}"


class _ByAccount(DataJudge):
    """Every plan is tried; what each is worth says the account, which the audit's tests compare with a second one."""

    def value(self, chosen: frozenset[int]) -> float:
        return account(self.problem, chosen).value


@pytest.mark.parametrize("block", some_of(range(5), 2))
def test_60_random_cases_with_ages_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(12 * block, 12 * block + 12):
        problem = random_ageing_problem(seed)
        judge = _ByAccount(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        assert judge.points(frozenset(result.chosen)) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= value - 1e-6 * max(1.0, abs(value)), f"seed {seed}"


def test_a_deadline_drops_the_oldest() -> None:
    # 1 MB/s, a deadline of 50 s: from then on 1 MB/s is dropped and 50 MB stay. 3 MB/s for 20 s send 50 MB of the
    # store by t = 125 s (it falls by 2 MB/s) and what is made: 60 MB in all.
    one = replace(steady("a", 1.0, 0.0, 1.0, 200.0), deadline_s=50.0)
    run = follow([one], 1e3, 200.0, [(100, 120, 3.0)])
    assert run.delivered_mb[0] == pytest.approx(60.0)
    # 50 MB by t = 100 s, none until the store is 50 s deep again: 10 MB are left at 120 s, made since 110 s; the oldest
    # of them is 50 s old at 160 s. From there to 200 s 40 MB more.
    assert (run.missed_mb[0], run.left_mb[0]) == pytest.approx((90.0, 50.0))


def test_worth_fades_with_the_age_at_which_it_is_sent() -> None:
    # 100 MB of one age each second from 100 s to 0 s, sent at 1 MB/s against no generation: always 100 s old.
    faded = {"fresh_age_s": np.array([0.0, 200.0]), "fresh_share": np.array([1.0, 0.0])}
    one = replace(steady("a", 4.0, 100.0, 0.0, 100.0), start_age_s=100.0, **faded)
    run = follow([one], 1e3, 100.0, [(0, 100, 1.0)])
    assert run.sent_worth[0, 0] == pytest.approx(4.0 * 0.5 * 100.0)


def test_storage_is_freed_when_it_is_acknowledged() -> None:
    # A full store of 100 MB: what is sent stays until 60 s, so that 1 MB/s is lost until then.
    one = steady("a", 1.0, 100.0, 1.0, 100.0)
    at_once = follow([one], 100.0, 100.0, [(0, 20, 5.0)])
    later = follow([one], 100.0, 100.0, [(0, 20, 5.0)], None, [60.0])
    assert at_once.lost_mb[0] == pytest.approx(0.0)
    assert later.lost_mb[0] > 20.0


def test_the_newest_is_lost_where_the_policy_says_so() -> None:
    # Full from the start. Losing the oldest leaves data of the last 10 s, losing the newest the old data.
    one = replace(steady("a", 1.0, 10.0, 1.0, 100.0), start_age_s=10.0, fresh_age_s=np.array([0.0, 50.0, 50.0]),
                  fresh_share=np.array([1.0, 1.0, 0.0]))
    oldest = follow([one], 10.0, 100.0, [(90, 100, 1.0)])
    newest = follow([one], 10.0, 100.0, [(90, 100, 1.0)], Keeping(newest=True))
    assert (oldest.sent_worth[0, 0], newest.sent_worth[0, 0]) == pytest.approx((10.0, 0.0))
