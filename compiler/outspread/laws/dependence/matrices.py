"""What is wrong with a correlation or covariance matrix, and what would be right.

The smallest eigenvalue, the nearest correlation matrix, the combinations of inputs that a singular matrix
makes constant, and independent factors for it. Nothing is repaired here without being asked for.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.errors import DerivationError, LawError
from outspread.laws.law import Array

#: an eigenvalue below this share of the largest is zero to rounding of a matrix of typed decimals
RANK_TOLERANCE = 1e-12
_ROUNDS = 50_000


def smallest_eigenvalue(matrix: npt.ArrayLike) -> float:
    """The smallest eigenvalue of a symmetric matrix (n, n): above 0 where it is positive definite."""
    return float(np.linalg.eigvalsh(_symmetric(matrix))[0])


def nearest_correlation(matrix: npt.ArrayLike, least_eigenvalue: float = 0.0) -> Array:
    """The correlation matrix nearest to a symmetric one in the Frobenius norm, to about 1e-12.

    Alternating projections onto the matrices with eigenvalues of at least `least_eigenvalue` and onto those
    with a unit diagonal, with Dykstra's correction (Higham 2002, IMA Journal of Numerical Analysis 22,
    329–343, algorithm 3.3). Raises LawError for a matrix that is not symmetric or a least eigenvalue outside
    0 to below 1, DerivationError where the projections do not settle.
    """
    if not 0.0 <= least_eigenvalue < 1.0:
        raise LawError(f"the least eigenvalue is {least_eigenvalue:g}; write a number from 0 to below 1")
    current = _symmetric(matrix)
    correction = np.zeros_like(current)
    for _ in range(_ROUNDS):
        moved = current - correction
        values, vectors = np.linalg.eigh(moved)
        projected = (vectors * np.maximum(values, least_eigenvalue)) @ vectors.T
        correction = projected - moved
        following = 0.5 * (projected + projected.T)
        np.fill_diagonal(following, 1.0)
        change, gap = np.max(np.abs(following - current)), np.max(np.abs(following - projected))
        current = following
        if change <= 1e-14 and gap <= 1e-13:
            return np.asarray(current)
    raise DerivationError("the nearest correlation matrix was not found: the projections do not settle")


def suggested_correlation(matrix: npt.ArrayLike, digits: int = 4) -> Array:
    """A valid matrix near to `matrix` whose entries have `digits` decimals, ready to be typed.

    The nearest one with its smallest eigenvalue raised until the rounded matrix is positive definite (its
    smallest eigenvalue exceeds 1e-9). Raises LawError as `nearest_correlation` does.
    """
    least = 10.0**-digits
    while least < 1.0:
        rounded: Array = np.round(nearest_correlation(matrix, least), digits) + 0.0
        if smallest_eigenvalue(rounded) > 1e-9:
            return rounded
        least *= 2.0
    raise DerivationError(f"no valid correlation matrix with {digits} decimals is near to the one given")


@dataclass(frozen=True)
class Degeneracy:
    """The rank of a covariance, and the combinations Σ c_i x_i that it leaves without any spread.

    `directions`: coefficients, one row a combination, reduced so that each has a leading 1; `words` says
    each of them with the inputs' names.
    """

    rank: int
    directions: tuple[tuple[float, ...], ...]
    words: tuple[str, ...]


def degeneracy(covariance: npt.ArrayLike, names: Sequence[str]) -> Degeneracy:
    """The null directions of a positive semidefinite covariance or correlation matrix (n, n).

    Judged on the correlation matrix, so that units do not matter. Raises LawError where it has an
    eigenvalue below zero beyond rounding: then no inputs at all have this covariance.
    """
    own = _symmetric(covariance)
    scale = np.sqrt(np.maximum(np.diag(own), 0.0))
    size = len(own)
    unit = np.where(scale > 0, scale, 1.0)
    values, vectors = np.linalg.eigh(own / np.outer(unit, unit))
    least = RANK_TOLERANCE * max(float(values[-1]), 1.0) * size
    if values[0] < -least:
        raise LawError(
            f"the matrix has a negative eigenvalue ({values[0]:.3g}); no inputs have such a covariance",
            "covariance",
        )
    null = vectors[:, values <= least].T
    # reduced in standard deviations, so that units do not matter; only then in the inputs' own units
    reduced = _reduced(null, np.sqrt(least)) / unit
    if len(reduced):
        reduced = reduced / reduced[np.arange(len(reduced)), np.argmax(reduced != 0.0, axis=1)][:, None]
    words = tuple(_words(row, names) for row in reduced)
    return Degeneracy(size - len(null), tuple(tuple(float(c) for c in row) for row in reduced), words)


def independent_factors(covariance: npt.ArrayLike) -> Array:
    """F of shape (n, rank) with F Fᵀ = covariance: x = mean + F z with independent standard normal z.

    Cholesky's method with pivoting, which stops at the rank (Higham 2002, Accuracy and Stability of Numerical
    Algorithms, section 10.3). Raises LawError for a negative eigenvalue.
    """
    own = _symmetric(covariance)
    rank = degeneracy(own, [str(k) for k in range(len(own))]).rank
    scale = np.sqrt(np.maximum(np.diag(own), 0.0))
    unit = np.where(scale > 0, scale, 1.0)
    rest = own / np.outer(unit, unit)
    factor = np.zeros((len(own), rank))
    for k in range(rank):
        pivot = int(np.argmax(np.diag(rest)))
        factor[:, k] = rest[:, pivot] / np.sqrt(rest[pivot, pivot])
        rest = rest - np.outer(factor[:, k], factor[:, k])
        rest[pivot], rest[:, pivot] = 0.0, 0.0
    return factor * scale[:, None]


def _symmetric(matrix: npt.ArrayLike) -> Array:
    own = np.array(matrix, float)
    if own.ndim != 2 or own.shape[0] != own.shape[1] or not np.all(np.isfinite(own)):
        raise LawError("the matrix has as many rows as columns, of finite numbers", "matrix")
    if not np.allclose(own, own.T, rtol=1e-12, atol=0.0):
        raise LawError("the matrix is not symmetric", "matrix")
    return np.asarray(0.5 * (own + own.T))


def _reduced(rows: Array, negligible: float) -> Array:
    """The reduced row echelon form, which gives the plainest combinations."""
    rows = rows.copy()
    at = 0
    for column in range(rows.shape[1]):
        if at == len(rows):
            break
        pivot = at + int(np.argmax(np.abs(rows[at:, column])))
        if abs(rows[pivot, column]) <= negligible * np.max(np.abs(rows[at:])):
            continue
        rows[[at, pivot]] = rows[[pivot, at]]
        rows[at] = rows[at] / rows[at, column]
        for other in range(len(rows)):
            if other != at:
                rows[other] = rows[other] - rows[other, column] * rows[at]
        at += 1
    rows[np.abs(rows) <= negligible * np.max(np.abs(rows), axis=1, keepdims=True, initial=0.0)] = 0.0
    return rows


def _words(row: Array, names: Sequence[str]) -> str:
    used = [(float(c), name) for c, name in zip(row, names, strict=True) if c != 0.0]
    if len(used) == 1:
        return f"{used[0][1]} does not vary"
    text = ""
    for coefficient, name in used:
        size = f"{abs(coefficient):.6g}"
        term = name if size == "1" else f"{size} {name}"
        if not text:
            text = term if coefficient > 0 else f"-{term}"
        else:
            text += f" + {term}" if coefficient > 0 else f" - {term}"
    return f"{text} does not vary"
