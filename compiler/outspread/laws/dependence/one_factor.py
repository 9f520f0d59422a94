"""Rectangle probabilities of scores that one common factor correlates: ρ_ij = λ_i λ_j for all i ≠ j.

Given the factor the scores are independent, so that one integral does for any number of them (Dunnett and
Sobel 1955, Biometrika 42, 258–260). Equal correlations are the best known case.
"""

from __future__ import annotations

import numpy as np

from outspread.laws.dependence.bivariate import coarse_peak, integrate_peak, log_side, step_points
from outspread.laws.functions.normal import normal_between, normal_pdf
from outspread.laws.law import Array, Estimates

_FAR = 38.5


def factor_loadings(matrix: Array) -> Array | None:
    """λ of shape (n,) with ρ_ij = λ_i λ_j off the diagonal to 4e-16, |λ| < 1; None where there is none.

    matrix: (n, n), n >= 3, with no correlation that is 0.
    """
    size = len(matrix)
    if np.any(matrix == 0.0):
        return None
    # |λ_0|² = ρ_01 ρ_02 / ρ_12; the others follow from λ_0
    square = matrix[0, 1] * matrix[0, 2] / matrix[1, 2]
    if not 0.0 < square < 1.0:
        return None
    loadings = np.empty(size)
    loadings[0] = np.sqrt(square)
    loadings[1:] = matrix[0, 1:] / loadings[0]
    rest = (np.outer(loadings, loadings) - matrix)[~np.eye(size, dtype=bool)]
    return loadings if np.all(np.abs(loadings) < 1.0) and np.all(np.abs(rest) <= 4e-16) else None


def one_factor_rectangle(lower: Array, upper: Array, loadings: Array) -> Estimates:
    """P(lower < Z <= upper), shape (1,), relative to itself; lower, upper, loadings: shape (n,)."""
    rest = np.sqrt((1.0 - loadings) * (1.0 + loadings))[:, None]

    def sides(factor: Array) -> tuple[Array, Array]:
        centre = loadings[:, None] * factor
        return (lower[:, None] - centre) / rest, (upper[:, None] - centre) / rest

    def conditional(factor: Array) -> Estimates:
        low, high = sides(factor)
        centre = loadings[:, None] * factor
        value = np.prod(normal_between(low, high), axis=0)
        nearest = np.where(low > 0, low, np.where(high < 0, -high, 0.0))
        size = np.abs(centre) + np.minimum(np.abs(lower), np.abs(upper))[:, None]
        return Estimates(value, value * np.sum(1e-15 + 4e-16 * nearest * size / rest, axis=0))

    least = float(1.0 / np.sqrt(1.0 + np.sum((loadings / rest[:, 0]) ** 2)))
    mode, worst = coarse_peak(
        conditional, lambda x: np.sum(log_side(*sides(x)), axis=0), -_FAR, _FAR, least
    )
    ends = np.concatenate([lower, upper])
    extra = step_points(ends, np.tile(loadings, 2), np.tile(rest[:, 0], 2))[None, :]
    return integrate_peak(
        lambda x, owner: normal_pdf(x) * conditional(x).value,
        np.array([-_FAR]), np.array([_FAR]), np.array([mode]), np.array([least]), 1e-14, worst, extra,
    )  # fmt: skip
