from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.roots import solve
from passplan.geometry.timescale import Floats


def _cubic(x: Floats, root: Floats, steepness: Floats) -> tuple[Floats, Floats]:
    apart = x - root
    return steepness * (apart**3 + 0.01 * apart), steepness * (3.0 * apart**2 + 0.01)


@settings(deadline=None, max_examples=60)
@given(st.lists(st.tuples(st.floats(0.0, 1.0), st.floats(0.1, 9.0), st.booleans()), min_size=1, max_size=40))
def test_every_bracketed_root_is_found_rising_or_falling(cases: list[tuple[float, float, bool]]) -> None:
    root, steepness, rising = (np.array(column) for column in zip(*cases, strict=True))
    data = root.astype(float), np.where(rising, steepness, -steepness)
    low, high = np.zeros(root.size), np.ones(root.size)
    found = solve(_cubic, data, low, high, 0.5 * (low + high), rising.astype(bool), 1e-9)
    np.testing.assert_allclose(found, root, atol=1e-8)


def test_a_double_root_is_approached_though_slowly() -> None:
    # Newton only halves the distance to a double root: the last step is what is left.
    def touching(x: Floats) -> tuple[Floats, Floats]:
        return (x - 0.3) ** 2, 2.0 * (x - 0.3)

    found = solve(touching, (), np.array([0.3]), np.array([1.0]), np.array([0.9]), np.array([True]), 1e-7)
    assert found[0] == pytest.approx(0.3, abs=2e-7)


def test_a_flat_function_ends_in_its_bracket() -> None:
    def flat(x: Floats) -> tuple[Floats, Floats]:
        return np.full_like(x, -1.0), np.zeros_like(x)

    found = solve(flat, (), np.array([2.0]), np.array([3.0]), np.array([2.5]), np.array([True]), 1e-9)
    assert 2.0 <= found[0] <= 3.0
