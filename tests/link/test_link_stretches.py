from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.link.stretches import Stretches, find_stretches


def _of(found: Stretches, track: int) -> list[tuple[int, float, float]]:
    own = slice(found.offsets[track], found.offsets[track + 1])
    return list(zip(found.rung[own].tolist(), found.first_s[own].tolist(), found.last_s[own].tolist(), strict=True))


def test_crossings_lie_on_the_line_between_samples() -> None:
    time = np.array([0.0, 10.0, 20.0, 30.0])
    quality = np.array([0.0, 10.0, 10.0, 5.0])
    found = find_stretches(time, quality, np.array([0, 4]), np.array([7.0, 5.0, 20.0]))
    assert _of(found, 0) == [(0, 7.0, 26.0), (1, 5.0, 30.0)]


def test_a_dip_makes_two_stretches() -> None:
    time, quality = np.arange(5.0), np.array([2.0, 2.0, 0.0, 2.0, 2.0])
    found = find_stretches(time, quality, np.array([0, 5]), np.array([1.0]))
    assert _of(found, 0) == [(0, 0.0, 1.5), (0, 2.5, 4.0)]


def test_tracks_do_not_see_each_other() -> None:
    time = np.array([0.0, 1.0, 100.0, 101.0])
    quality = np.array([3.0, 3.0, 3.0, 0.0])
    found = find_stretches(time, quality, np.array([0, 2, 2, 4]), np.array([1.5]))
    assert _of(found, 0) == [(0, 0.0, 1.0)]
    assert _of(found, 1) == []
    assert _of(found, 2) == [(0, 100.0, 100.5)]


def test_nan_is_below_every_threshold() -> None:
    time, quality = np.arange(4.0), np.array([np.nan, 5.0, 5.0, np.nan])
    found = find_stretches(time, quality, np.array([0, 4]), np.array([1.0]))
    assert _of(found, 0) == [(0, 1.0, 2.0)]


def test_nothing_at_all() -> None:
    nothing = np.zeros(0)
    assert _of(find_stretches(nothing, nothing, np.array([0, 0]), np.array([1.0])), 0) == []
    assert _of(find_stretches(np.arange(2.0), np.ones(2), np.array([0, 2]), nothing), 0) == []


@settings(deadline=None, max_examples=100)
@given(
    st.lists(st.lists(st.integers(-5, 5), min_size=1, max_size=12), min_size=1, max_size=5),
    st.lists(st.floats(-4.9, 4.9), min_size=1, max_size=4),
)
def test_inside_the_quality_holds_and_outside_it_does_not(tracks: list[list[int]], levels: list[float]) -> None:
    sizes = [len(track) for track in tracks]
    time = np.concatenate([np.arange(size, dtype=float) for size in sizes])
    quality = np.concatenate([np.array(track, float) for track in tracks])
    found = find_stretches(time, quality, np.concatenate(([0], np.cumsum(sizes))), np.array(levels))
    for k, track in enumerate(tracks):
        for index, level in enumerate(levels):
            own = [(first, last) for rung, first, last in _of(found, k) if rung == index]
            for instant in np.linspace(0.0, len(track) - 1.0, 101):
                value = float(np.interp(instant, np.arange(len(track)), track))
                inside = any(first - 1e-9 <= instant <= last + 1e-9 for first, last in own)
                if abs(value - level) > 1e-6:
                    assert inside == (value > level)
