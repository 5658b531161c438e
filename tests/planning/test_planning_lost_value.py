"""Lost value by cause: it adds up, and what is charged to a link is what that link would have saved."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from passplan.inputs.run import Run
from passplan.planning.backlog import Backlog, follow
from passplan.planning.lost_value import NO_WINDOW, Chance, missed_links, share_out
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run
from passplan.planning.value import follow_storage

HORIZON_S = 1000


def _store(start_mb: float, generation: float, capacity: float, sent: list[tuple[int, int, float]]) -> Backlog:
    return follow(start_mb, generation, capacity, [(float(a), float(b), r / 8.0) for a, b, r in sent], float(HORIZON_S))


def _shares(
    start_mb: float, generation: float, capacity: float, sent: list[tuple[int, int, float]], chances: list[Chance]
) -> tuple[dict[str, tuple[float, float]], float, float]:
    store = _store(start_mb, generation, capacity, sent)
    _, lost, left = follow_storage(HORIZON_S, start_mb, generation, capacity, [(a, b, r / 8.0) for a, b, r in sent])
    missed = missed_links(store, chances, np.array(sent, float).reshape(-1, 3))
    return share_out(store, missed, generation * HORIZON_S, lost, left), lost, left


def _chance(first: float, last: float, mbps: float, cause: str) -> Chance:
    return Chance(np.array([first]), np.array([mbps]), ((first, last, cause),))


def test_every_spacecraft_of_a_plan_adds_up(short_plan: PlanRecord) -> None:
    found = short_plan.summary["lost_value"]
    assert list(found) == list(short_plan.summary["storage"])
    for name, shares in found.items():
        store, weight = short_plan.summary["storage"][name], short_plan.summary["spacecraft"][name]["weight"]
        for key in ("lost", "left"):
            volume = sum(share[f"{key}_mb"] for share in shares.values())
            assert volume == pytest.approx(store[f"{key}_mb"], rel=1e-12, abs=1e-9)
            worth = sum(share[f"{key}_value"] for share in shares.values())
            assert worth == pytest.approx(weight * store[f"{key}_mb"], rel=1e-12, abs=1e-9)
            assert all(share[f"{key}_mb"] > -1e-6 for share in shares.values())
    assert {cause for shares in found.values() for cause in shares} > {NO_WINDOW, "antenna_busy", "in_contact"}


def test_windows_without_margin_are_charged_at_the_slowest_rate(short_run: Run) -> None:
    policy = short_run.policy.model_copy(update={"required_margin_db": 14.0})
    plan = plan_run(replace(short_run, policy=policy))
    weak = plan.unused[plan.unused["reason"] == "no_margin"]
    charged = {name for name, shares in plan.summary["lost_value"].items() if "no_margin" in shares}
    assert charged
    assert charged <= set(weak["spacecraft"])


def test_a_link_before_the_storage_is_full_saves_what_it_carries() -> None:
    # 1 MB/s into 100 MB: full after 100 s, 900 MB are lost. 10 s at 8 Mbit/s carry 10 MB.
    shares, lost, left = _shares(0.0, 1.0, 100.0, [], [_chance(50.0, 60.0, 8.0, "closure")])
    assert (lost, left) == (pytest.approx(900.0), pytest.approx(100.0))
    assert shares["closure"] == (pytest.approx(10.0), 0.0)
    assert shares[NO_WINDOW] == (pytest.approx(890.0), pytest.approx(100.0))


def test_a_link_carries_no_more_than_is_aboard() -> None:
    # From 20 s to 120 s at 2 MB/s: 20 MB are aboard at its start and 100 MB come in.
    shares, _, _ = _shares(0.0, 1.0, 100.0, [], [_chance(20.0, 120.0, 16.0, "antenna_busy")])
    assert shares["antenna_busy"] == (pytest.approx(120.0), 0.0)


def test_at_the_very_end_what_is_left_shrinks_and_not_what_is_gone() -> None:
    shares, _, _ = _shares(0.0, 1.0, 100.0, [], [_chance(990.0, 1000.0, 64.0, "interference")])
    assert shares["interference"] == (pytest.approx(10.0), pytest.approx(70.0))


def test_the_fastest_of_two_links_at_once_is_charged_once() -> None:
    slow, fast = _chance(50.0, 70.0, 8.0, "closure"), _chance(60.0, 80.0, 16.0, "antenna_busy")
    shares, _, _ = _shares(0.0, 1.0, 100.0, [], [slow, fast])
    assert shares["closure"][0] == pytest.approx(10.0)
    assert shares["antenna_busy"][0] == pytest.approx(40.0)


def test_data_that_a_later_contact_takes_is_not_charged() -> None:
    # The contact at the end empties the storage: nothing is lost, nothing is left.
    shares, lost, left = _shares(50.0, 0.0, 100.0, [(900, 1000, 8.0)], [_chance(10.0, 20.0, 8.0, "closure")])
    assert (lost, left, shares) == (0.0, 0.0, {})


@example(share=0.625, generation=1.25, capacity=6.0, raw=[(1, 1, 1.0)], unused=[(1, 97, 30.0)])
@given(
    st.floats(0.0, 1.0), st.floats(0.0, 2.0), st.floats(5.0, 500.0),
    st.lists(st.tuples(st.integers(1, 300), st.integers(1, 200), st.floats(0.1, 30.0)), max_size=4),
    st.lists(st.tuples(st.integers(1, 300), st.integers(1, 200), st.floats(0.1, 30.0)), min_size=1, max_size=4),
)
@settings(deadline=None, max_examples=120)
def test_what_is_charged_is_what_the_links_would_save(
    share: float, generation: float, capacity: float, raw: list[tuple[int, int, float]],
    unused: list[tuple[int, int, float]],
) -> None:
    sent, links = _laid_out(raw), _laid_out(unused)
    chances = [_chance(float(a), float(b), rate, f"cause {k}") for k, (a, b, rate) in enumerate(links)]
    shares, lost, left = _shares(share * capacity, generation, capacity, sent, chances)
    assert sum(s[0] for s in shares.values()) == pytest.approx(lost, abs=1e-6)
    assert sum(s[1] for s in shares.values()) == pytest.approx(left, abs=1e-6)
    edges = sorted({0, HORIZON_S, *(t for a, b, _ in (*sent, *links) for t in (a, b))})
    both = [
        (a, b, max((r for c, d, r in (*sent, *links) if c <= a < d), default=0.0) / 8.0)
        for a, b in pairwise(edges)
    ]
    _, then_lost, then_left = follow_storage(HORIZON_S, share * capacity, generation, capacity, both)
    rest = shares.get(NO_WINDOW, (0.0, 0.0))
    # With all links in use a spill may come later, so that what is saved of it is kept instead: the sum is what counts.
    assert then_lost + then_left == pytest.approx(sum(rest), abs=1e-6)


def _laid_out(raw: list[tuple[int, int, float]]) -> list[tuple[int, int, float]]:
    found, clock = [], 0
    for wait, length, rate in raw:
        if clock + wait + length <= HORIZON_S:
            found.append((clock + wait, clock + wait + length, rate))
            clock += wait + length
    return found
