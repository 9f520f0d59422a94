"""The joint density of the inputs: the product of their densities, times a Gaussian copula density if any."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np

from outspread.laws.law import Array, Law

_LARGEST_EXPONENT = 600.0  # beyond it, and where the product underflows, the factors are joined as logarithms


def input_density(
    laws: Mapping[str, Law], correlation_of_normal_scores: Sequence[Sequence[float]] | None = None
) -> Callable[[Array], Array]:
    """A function from inputs of shape (n, k), rows in the order of `laws`, to their joint density (k,).

    `correlation_of_normal_scores` is the Gaussian copula's matrix in the same order; None: independent.
    Each normal score is taken from the nearer tail, so it is as accurate in the upper as in the lower one.
    Raises ValueError for a matrix that is not symmetric and positive definite with ones on the diagonal, and
    for a copula between inputs with atoms.
    Source of the copula density: P. X.-K. Song (2000), Scandinavian Journal of Statistics 27, 305-320.
    """
    members = tuple(laws.values())
    if correlation_of_normal_scores is None:
        return lambda inputs: _product_of_densities(members, inputs)
    matrix = np.array(correlation_of_normal_scores, dtype=float)
    _check(matrix, members)
    excess = np.linalg.inv(matrix) - np.eye(len(members))
    log_constant = -0.5 * float(np.linalg.slogdet(matrix)[1])

    def density(inputs: Array) -> Array:
        scores = np.stack([normal_score(law, row) for law, row in zip(members, inputs, strict=True)])
        finite = np.all(np.isfinite(scores), axis=0)
        usable = np.where(finite, scores, 0.0)
        exponent = log_constant - 0.5 * np.einsum("ik,ij,jk->k", usable, excess, usable)
        marginal = _product_of_densities(members, inputs)
        plain = (np.abs(exponent) < _LARGEST_EXPONENT) & (marginal > 1e-290)
        with np.errstate(divide="ignore", over="ignore", under="ignore", invalid="ignore"):
            logarithm = exponent + sum(np.log(law.pdf(row)) for law, row in zip(members, inputs, strict=True))
            value = np.where(plain, marginal * np.exp(np.where(plain, exponent, 0.0)), np.exp(logarithm))
        return np.where(finite, value, 0.0)

    return density


def normal_score(law: Law, x: Array) -> Array:
    """z with Φ(z) = P(X ≤ x), computed from the smaller of cdf and ccdf."""
    from scipy.special import ndtri

    below, above = law.cdf(x), law.ccdf(x)
    return np.asarray(np.where(below <= above, ndtri(below), -ndtri(above)), dtype=float)


def _product_of_densities(members: Sequence[Law], inputs: Array) -> Array:
    result = np.ones(np.shape(inputs)[1:])
    with np.errstate(under="ignore", over="ignore"):
        for law, row in zip(members, inputs, strict=True):
            result = result * law.pdf(row)
    return result


def _check(matrix: Array, members: Sequence[Law]) -> None:
    if matrix.shape != (len(members), len(members)):
        raise ValueError(f"the correlation matrix must be {len(members)} by {len(members)}")
    if not np.array_equal(matrix, matrix.T) or not np.all(np.diag(matrix) == 1.0):
        raise ValueError("the correlation matrix must be symmetric with ones on its diagonal")
    if np.linalg.eigvalsh(matrix)[0] <= 0.0:
        raise ValueError("the correlation matrix must be positive definite")
    if any(law.atoms().values.size for law in members):
        raise ValueError("an input with atoms has no density for the copula")
