from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry import stencil
from passplan.geometry.products import product
from passplan.geometry.timescale import Floats

LENGTH = 40


def _rows(function: object) -> Floats:
    return np.asarray(function(np.arange(LENGTH) / 10.0), float)[None, :]  # type: ignore[operator]


@settings(deadline=None, max_examples=60)
@given(st.floats(0.0, LENGTH - 1.0), st.lists(st.floats(-1.0, 1.0), min_size=14, max_size=14))
def test_polynomials_of_degree_13_are_reproduced_anywhere_on_the_grid(at: float, powers: list[float]) -> None:
    rows = _rows(np.polynomial.Polynomial(powers, domain=[0.0, 4.0]))
    found = stencil.interpolate((rows,), np.array([0]), np.array([int(at)]), np.array([[at]]))[0][0, 0]
    assert found == pytest.approx(np.polynomial.Polynomial(powers, domain=[0.0, 4.0])(at / 10.0), abs=1e-9)


def test_value_slope_and_bend_are_those_of_the_function() -> None:
    first, zero = stencil.place(np.array([20]), LENGTH)
    powers = stencil.polynomials(_rows(np.sin), np.array([0]), first)
    x = np.array([20.3]) - zero
    total, rise, curve = (float(part[0]) for part in stencil.bend(powers, x))
    assert total == pytest.approx(np.sin(2.03), abs=1e-13)
    assert rise == pytest.approx(0.1 * np.cos(2.03), abs=1e-12)
    assert curve == pytest.approx(-0.01 * np.sin(2.03), abs=1e-11)
    assert stencil.value(powers, x)[0] == pytest.approx(total)
    assert stencil.slope(powers, x)[1][0] == pytest.approx(rise)


def test_the_stated_error_holds_for_a_harmonic() -> None:
    # 1.3e-5 (omega h)^14 in the middle of the stencil; here omega h = 1.
    rows = np.cos(np.arange(LENGTH, dtype=float))[None, :]
    at = np.linspace(15.0, 20.0, 51)
    found = stencil.interpolate((rows,), np.zeros(at.size, np.int64), at.astype(np.int64), at[None])[0][0]
    assert 1e-6 < np.abs(found - np.cos(at)).max() < 1.3e-5


def test_an_economized_polynomial_stays_within_its_stated_error_of_the_full_one() -> None:
    # 2 (3/2)^11 / 11! of the amplitude for omega h = 1, whatever the phase (Lanczos, Applied Analysis).
    phases = np.linspace(0.0, np.pi, 7)
    rows = np.cos(np.arange(LENGTH, dtype=float) + phases[:, None])
    row, middle = np.arange(7), np.full(7, 20)
    powers, first = stencil.near(rows, row, middle), stencil.place(middle, LENGTH)[0]
    assert stencil.is_whole(middle, LENGTH).all()
    off = [np.abs(stencil.value(powers, np.full(7, x)) - stencil.value(stencil.polynomials(rows, row, first), x)).max()
           for x in np.linspace(-stencil.NEAR, stencil.NEAR, 61)]
    assert 1e-6 < max(off) < 2.0 * 1.5**11 / math.factorial(11)


def test_what_is_whole_is_what_does_not_lean() -> None:
    interval = np.arange(LENGTH)
    first, _ = stencil.place(interval, LENGTH)
    assert np.array_equal(stencil.is_whole(interval, LENGTH), first == interval - 6)


def test_stencils_lean_inwards_at_the_ends() -> None:
    first, zero = stencil.place(np.array([0, 20, LENGTH - 1]), LENGTH)
    assert first.tolist() == [0, 14, LENGTH - 14]
    assert (zero - first).tolist() == [6, 6, 6]


def test_products_in_pieces_are_whole_products() -> None:
    generator = np.random.default_rng(5)
    left, right = generator.normal(size=(14, 14)), generator.normal(size=(14, 5_000))
    np.testing.assert_allclose(product(left, right), left @ right, rtol=1e-12, atol=1e-12)
