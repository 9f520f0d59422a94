"""Bracketed roots against exactly known ones, over all magnitudes of double precision."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from outspread.numerics.roots import bracketed_root, ordinal_middle

finite = st.floats(allow_nan=False, allow_infinity=False)


@given(finite, finite)
def test_the_ordinal_middle_lies_between(a: float, b: float) -> None:
    low, high = min(a, b), max(a, b)
    middle = float(ordinal_middle(np.array([low]), np.array([high]))[0])
    assert low <= middle <= high


def test_the_ordinal_middle_halves_the_magnitudes() -> None:
    """Between 1 and 2^100 lie 100 powers of two with equally many numbers each."""
    assert float(ordinal_middle(np.array([1.0]), np.array([2.0**100]))[0]) == 2.0**50


@pytest.mark.parametrize("exponent", [-250, -40, -3, 0, 5, 90, 250])
def test_roots_are_found_to_the_last_digits_at_every_magnitude(exponent: int) -> None:
    """x^3 = c has the root cbrt(c)."""
    target = 1.7 * 10.0**exponent
    root, width = bracketed_root(
        lambda x, index: np.cbrt(x) - np.cbrt(target), np.array([-1e300]), np.array([1e300])
    )
    assert abs(root[0] - target) <= width[0] + 1e-15 * target


def test_each_problem_has_its_own_bracket_and_root() -> None:
    targets = np.linspace(0.01, 50, 500)
    ends = np.full(500, 9.0)
    root, _ = bracketed_root(lambda x, index: np.exp(x) - targets[index], -ends, ends)
    np.testing.assert_allclose(root, np.log(targets), rtol=4e-15, atol=4e-15)


def test_a_jump_is_bracketed_between_neighbouring_numbers() -> None:
    jump = 0.3
    root, width = bracketed_root(
        lambda x, index: np.where(x < jump, -1.0, 2.0), np.array([-1.0]), np.array([1.0])
    )
    assert abs(root[0] - jump) <= width[0] <= 2e-16


def test_one_sign_gives_no_root_and_a_root_at_an_end_is_kept() -> None:
    root, width = bracketed_root(
        lambda x, index: np.where(index == 0, x * x + 1, x), np.array([-1.0, 0.0]), np.array([1.0, 1.0])
    )
    assert np.isnan(root[0])
    assert (root[1], width[1]) == (0.0, 0.0)
