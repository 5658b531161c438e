"""Two followers of ageing data that share no code, the account's and the audit's, on the same random storage."""

from __future__ import annotations

import math
import random

import numpy as np
import pytest

from passplan.inputs.data import DataClass
from passplan.planning.audit.ageing import _Kind, _Tank, mean_share
from passplan.planning.classes import follow
from passplan.planning.streams import Keeping, Stream

_HORIZON_S = 1_200
_CURVES = ((), ((0.0, 1.0), (300.0, 0.0)), ((0.0, 1.0), (110.0, 0.8), (110.0, 0.4), (500.0, 0.1)))


@pytest.mark.parametrize("block", range(4))
def test_both_find_the_same(block: int) -> None:
    for seed in range(25 * block, 25 * block + 25):
        rng = random.Random(seed)
        capacity = rng.choice([0.0, 50.0, 300.0, 5e3])
        pairs = [_class(rng, k, capacity) for k in range(rng.randint(1, 3))]
        pieces: list[tuple[float, float, float]] = []
        for _ in range(rng.randint(0, 5)):
            start_s = (pieces[-1][1] if pieces else 0.0) + rng.randint(0, 300)
            end_s = start_s + rng.randint(1, 200)
            if end_s <= _HORIZON_S:
                pieces.append((start_s, end_s, rng.choice([0.1, 0.5, 1.0, 5.0])))
        newest = rng.random() < 0.4
        freed_s = [rng.choice([p[1], p[1] + 100.0, math.inf]) for p in pieces] if rng.random() < 0.4 else []
        one = follow([stream for stream, _ in pairs], capacity, _HORIZON_S, pieces, Keeping(newest), freed_s)
        kinds = [kind for _, kind in pairs]
        tank = _Tank(kinds, capacity, newest)
        for k, (start_s, end_s, rate) in enumerate(pieces):
            tank.go(start_s, 0.0, None)
            for kind in kinds:
                kind.sent.append(0.0)
                kind.worth.append(0.0)
            tank.go(end_s, rate, freed_s[k] if freed_s else None)
        tank.go(_HORIZON_S, 0.0, None)
        for k, kind in enumerate(kinds):
            assert kind.sent == pytest.approx(one.sent_mb[:, k], abs=1e-4), f"seed {seed}"
            assert kind.worth == pytest.approx(one.sent_worth[:, k], abs=1e-4), f"seed {seed}"
            assert kind.lost + kind.missed == pytest.approx(one.lost_mb[k], abs=1e-4), f"seed {seed}"
            assert kind.aboard == pytest.approx(one.left_mb[k], abs=1e-4), f"seed {seed}"


def _class(rng: random.Random, k: int, capacity: float) -> tuple[Stream, _Kind]:
    edges = sorted({0.0, float(_HORIZON_S), *(float(rng.randrange(_HORIZON_S)) for _ in range(rng.randint(0, 3)))})
    rates = [rng.choice([0.0, 0.1, 0.5, 2.0]) for _ in edges[1:]]
    deadline_s = rng.choice([math.inf, 90.0, 400.0])
    start_age_s, start_mb = min(deadline_s, rng.choice([0.0, 50.0, 300.0])), capacity * rng.random() / 3.0
    curve = rng.choice(_CURVES)
    made = np.concatenate([[0.0], np.cumsum(np.diff(edges) * np.array(rates))])
    ages, shares = zip(*(curve or ((0.0, 1.0),)), strict=True)
    stream = Stream(str(k), 9.0 - k, start_mb, np.array(edges), made, deadline_s, start_age_s, np.array(ages),
                    np.array(shares))
    item = DataClass(
        name=str(k), spacecraft=("x",), weight=9.0 - k, start_fill_mb=start_mb, start_age_h=start_age_s / 3600.0,
        deadline_h=None if math.isinf(deadline_s) else deadline_s / 3600.0,
        freshness=tuple((age / 3600.0, share) for age, share in curve))
    return stream, _Kind(item, list(zip(edges[:-1], edges[1:], rates, strict=True)), _HORIZON_S)


def test_the_mean_over_a_step_is_that_of_its_two_sides() -> None:
    assert mean_share(((0.0, 1.0), (2.0, 1.0), (2.0, 0.2)), 1.0, 5.0) == pytest.approx(0.25 * 1.0 + 0.75 * 0.2)
    assert mean_share(((0.0, 1.0), (4.0, 0.0)), 0.0, 8.0) == pytest.approx(0.25)
