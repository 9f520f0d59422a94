"""Nearest correlation matrices, singular covariances and factors, against published examples and theorems."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from outspread.errors import LawError
from outspread.laws.dependence.matrices import (
    degeneracy,
    independent_factors,
    nearest_correlation,
    smallest_eigenvalue,
    suggested_correlation,
)
from outspread.laws.law import Array


def test_published_examples() -> None:
    """Higham (2002), IMA Journal of Numerical Analysis 22, 329-343, section 4 and its introduction (both from
    memory, four decimals)."""
    found = nearest_correlation([[1, 1, 0], [1, 1, 1], [0, 1, 1]])
    expected = [[1, 0.7607, 0.1573], [0.7607, 1, 0.7607], [0.1573, 0.7607, 1]]
    np.testing.assert_allclose(found, expected, rtol=0, atol=5e-5)
    second_difference = 2 * np.eye(4) - np.eye(4, k=1) - np.eye(4, k=-1)
    found = nearest_correlation(second_difference)
    expected = [
        [1, -0.8084, 0.1916, 0.1068], [-0.8084, 1, -0.6562, 0.1916],
        [0.1916, -0.6562, 1, -0.8084], [0.1068, 0.1916, -0.8084, 1],
    ]  # fmt: skip
    np.testing.assert_allclose(found, expected, rtol=0, atol=5e-5)


def random_symmetric(seed: int, size: int) -> Array:
    entries = np.random.default_rng(seed).uniform(-1.0, 1.0, (size, size))
    matrix = 0.5 * (entries + entries.T)
    np.fill_diagonal(matrix, 1.0)
    return matrix


@given(seed=st.integers(0, 10**6), size=st.integers(3, 9))
@settings(max_examples=25, deadline=None, derandomize=True)
def test_no_valid_matrix_is_nearer(seed: int, size: int) -> None:
    """X is nearest exactly if A - X = diag(y) - P with P positive semidefinite and P X = 0 (Higham 2002,
    theorem 2.4)."""
    matrix = random_symmetric(seed, size)
    near = nearest_correlation(matrix)
    assert smallest_eigenvalue(near) > -1e-12
    assert np.all(np.diag(near) == 1.0)
    # (A - X + P) is diagonal: P is found on the null space of X by least squares
    values, vectors = np.linalg.eigh(near)
    null = vectors[:, values < 1e-7]
    basis = [
        np.outer(null[:, i], null[:, j]) + np.outer(null[:, j], null[:, i])
        for i in range(null.shape[1])
        for j in range(i + 1)
    ]
    off = ~np.eye(size, dtype=bool)
    residual = (near - matrix)[off]
    if not basis:
        assert np.max(np.abs(residual)) < 1e-10
        return
    weights, *_ = np.linalg.lstsq(np.array([part[off] for part in basis]).T, residual, rcond=None)
    multiplier = sum(w * part for w, part in zip(weights, basis, strict=True))
    assert np.max(np.abs(multiplier[off] - residual)) < 1e-6
    if null.shape[1] == 1:  # else the multiplier off the diagonal may not be unique
        assert np.min(np.linalg.eigvalsh(multiplier)) > -1e-6


def test_a_valid_matrix_stays() -> None:
    matrix = np.array([[1.0, 0.3, -0.2], [0.3, 1.0, 0.5], [-0.2, 0.5, 1.0]])
    np.testing.assert_allclose(nearest_correlation(matrix), matrix, rtol=0, atol=1e-13)


@given(seed=st.integers(0, 10**6), size=st.integers(3, 7))
@settings(max_examples=20, deadline=None, derandomize=True)
def test_the_suggestion_can_be_typed_and_is_valid(seed: int, size: int) -> None:
    suggestion = suggested_correlation(random_symmetric(seed, size))
    assert smallest_eigenvalue(suggestion) > 0
    typed = np.array([[float(f"{value:.4f}") for value in row] for row in suggestion])
    assert np.array_equal(typed, suggestion)


def test_eigenvalue_of_three_equal_correlations() -> None:
    """Equal correlations r have the eigenvalues 1 + (n - 1) r and 1 - r: at r = -0.7, n = 3 the least is
    -0.4."""
    assert smallest_eigenvalue(np.full((3, 3), -0.7) + 1.7 * np.eye(3)) == pytest.approx(-0.4, abs=1e-15)


def test_singular_covariance_in_words() -> None:
    """gap = bore - 2 shaft, in units that differ by a thousand."""
    loads = np.array([[1e-3, 0.0], [0.0, 1.0], [1e-3, -2.0]])
    found = degeneracy(loads @ loads.T, ["bore", "shaft", "gap"])
    assert found.rank == 2
    assert found.words == ("bore - 2 shaft - gap does not vary",)
    np.testing.assert_allclose(found.directions, [[1.0, -2.0, -1.0]], rtol=0, atol=1e-9)


def test_constant_and_equal_inputs_in_words() -> None:
    found = degeneracy([[1, 1, 0], [1, 1, 0], [0, 0, 0]], ["x", "y", "z"])
    assert found.rank == 1
    assert found.words == ("x - y does not vary", "z does not vary")


@given(seed=st.integers(0, 10**6), size=st.integers(2, 7), rank=st.integers(1, 7))
@settings(max_examples=40, deadline=None, derandomize=True)
def test_factors_restore_the_covariance(seed: int, size: int, rank: int) -> None:
    random = np.random.default_rng(seed)
    rank = min(rank, size)
    loads = random.normal(size=(size, rank)) * 10.0 ** random.uniform(-6, 6, (size, 1))
    covariance = loads @ loads.T
    factor = independent_factors(covariance)
    assert factor.shape == (size, rank)
    scale = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(
        (factor @ factor.T) / np.outer(scale, scale), covariance / np.outer(scale, scale), rtol=0, atol=1e-12
    )
    found = degeneracy(covariance, [str(k) for k in range(size)])
    assert found.rank == rank
    for direction in found.directions:
        spread = np.array(direction) @ loads
        assert np.max(np.abs(spread)) < 1e-5 * np.max(np.abs(np.array(direction)[:, None] * loads))


def test_refusals() -> None:
    with pytest.raises(LawError, match="negative eigenvalue"):
        degeneracy([[1, 2], [2, 1]], ["a", "b"])
    with pytest.raises(LawError, match="not symmetric"):
        nearest_correlation([[1, 0.5], [0.4, 1]])
    with pytest.raises(LawError, match="as many rows as columns"):
        smallest_eigenvalue([[1, 0.5]])
    with pytest.raises(LawError, match="least eigenvalue"):
        nearest_correlation(np.eye(2), 1.0)
