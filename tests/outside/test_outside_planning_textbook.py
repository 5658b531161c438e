"""The planner against textbook algorithms for its special cases."""

from __future__ import annotations

import random
from bisect import bisect_right
from itertools import pairwise

import networkx as nx
import numpy as np
import pytest

from passplan.planning.option_table import build_options
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Antennas, Fleet, Limits, Problem, Windows

PATHS = pytest.mark.parametrize("exact_options", [10_000, 0], ids=["exact", "search"])


def _limits(exact_options: int) -> Limits:
    # The first search on a machine compiles its kernels, which takes a while where much else is running.
    return Limits(gap=0.0, exact_options=exact_options, time_limit_s=300.0, search_rounds=40)


def fixed_volumes(spans: list[tuple[int, int, float]], antennas: list[int], count: int) -> Problem:
    """One spacecraft for each span, with its whole volume aboard and a link that brings it all down.

    ``antennas`` says which antenna each row stands on; rows of one span are alike.
    """
    crafts = len(spans)
    per = len(antennas) // max(1, crafts)
    rows = [
        {"window": k * per + n, "spacecraft": k, "antenna": antennas[k * per + n], "start_s": a, "end_s": b,
         "pieces": [(a, b, volume)]}
        for k, (a, b, volume) in enumerate(spans) for n in range(per)]
    volumes = np.array([volume for _, _, volume in spans])
    return Problem(
        horizon_s=10_000,
        fleet=Fleet(tuple(f"c{k}" for k in range(crafts)), np.ones(crafts), np.zeros(crafts), volumes, volumes),
        antennas=Antennas(tuple(f"a{k}" for k in range(count))),
        windows=Windows(tuple(f"w{k}" for k in range(len(rows))), np.array([r["spacecraft"] for r in rows]),
                        np.array([r["antenna"] for r in rows]), np.array([r["start_s"] for r in rows]),
                        np.array([r["end_s"] for r in rows])),
        options=build_options(rows))


def random_spans(seed: int, count: int) -> list[tuple[int, int, float]]:
    rng = random.Random(seed)
    starts = [rng.randrange(0, 9_000, 10) for _ in range(count)]
    return [(a, a + rng.randrange(120, 900, 10), float(rng.randint(1, 1_000))) for a in starts]


@PATHS
@pytest.mark.parametrize("seed", range(12))
def test_one_antenna_is_weighted_interval_scheduling(seed: int, exact_options: int) -> None:
    """Kleinberg and Tardos, Algorithm Design (2005), section 6.1: OPT(j) = max(v_j + OPT(p(j)), OPT(j - 1))."""
    spans = random_spans(seed, 40)
    by_end = sorted(spans, key=lambda span: span[1])
    ends = [b for _, b, _ in by_end]
    best = [0.0]
    for j, (a, _, volume) in enumerate(by_end):
        best.append(max(best[j], volume + best[bisect_right(ends, a, 0, j)]))
    result = find_plan(fixed_volumes(spans, [0] * len(spans), 1), _limits(exact_options))
    assert result.value == pytest.approx(best[-1], rel=1e-6)
    assert result.bound >= best[-1] * (1.0 - 1e-9)


@PATHS
@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("count", [2, 3])
def test_identical_antennas_are_a_minimum_cost_flow(seed: int, count: int, exact_options: int) -> None:
    """Arkin and Silverberg (1987); Bouzina and Emmons (1996): k units flow along time, each job an arc of cost -v."""
    spans = random_spans(1_000 + seed, 24)
    graph = nx.DiGraph()
    instants = sorted({t for a, b, _ in spans for t in (a, b)})
    graph.add_node(instants[0], demand=-count)
    graph.add_node(instants[-1], demand=count)
    for a, b in pairwise(instants):
        graph.add_edge(a, b, capacity=count, weight=0)
    for k, (a, b, volume) in enumerate(spans):
        # Two arcs through a node of its own, as a digraph has one arc between two nodes.
        graph.add_edge(a, ("job", k), capacity=1, weight=-int(volume))
        graph.add_edge(("job", k), b, capacity=1, weight=0)
    best = -nx.cost_of_flow(graph, nx.min_cost_flow(graph))
    antennas = list(range(count)) * len(spans)
    result = find_plan(fixed_volumes(spans, antennas, count), _limits(exact_options))
    assert result.value == pytest.approx(best, rel=1e-6)
    assert result.bound >= best * (1.0 - 1e-9)
