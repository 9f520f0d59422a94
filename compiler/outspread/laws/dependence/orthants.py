"""Lower orthant probabilities of up to six jointly normal scores, to an absolute error.

Plackett's identity (1954, Biometrika 41, 351–360): ∂P/∂ρ_ij = φ(b_i, b_j; ρ_ij) times the probability of
the other scores given these two. Along the matrices I + t (R - I), 0 <= t <= 1, it leads from independence
to R, and from n scores to n - 2 under one integral sign; t = sin(πs/2) takes away the root singularity that a
perfect correlation has at its end. Nothing here is relative to itself in a tail: `bivariate` and
`randomised` are.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np

from outspread.laws.dependence.bivariate import bivariate_fast
from outspread.laws.functions.normal import normal_cdf
from outspread.laws.law import Array, Estimates
from outspread.numerics.quadrature import Index, integrate

LARGEST = 6
#: panel ends in s: near s = 1 a nearly singular matrix makes the integrand steep
_EDGES = np.array([0.0, 0.5, 0.85, 0.97, 1.0])
_FAST_ERROR = 2e-15


def orthant(limits: Array, matrices: Array, absolute: float = 1e-13) -> Estimates:
    """P(Z_1 <= b_1, …, Z_n <= b_n) of N problems at once.

    limits: shape (n, N), finite or infinite; matrices: (n, n, N), positive semidefinite, ones on the
    diagonal; n <= 6. Errors are bounds and about `absolute` where the matrices are not nearly singular.
    """
    size, count = limits.shape
    if size > LARGEST:
        raise ValueError(f"orthants of {size} scores are not derived here; at most {LARGEST}")
    limits = np.clip(limits, -40.0, 40.0)  # P(Z > 40) < 1e-349
    if size == 0:
        return Estimates(np.ones(count), np.zeros(count))
    if size == 1:
        value = normal_cdf(limits[0])
        return Estimates(value, 4e-16 * value)
    if size == 2:
        return Estimates(bivariate_fast(limits[0], limits[1], matrices[0, 1]), np.full(count, _FAST_ERROR))
    start = np.prod(normal_cdf(limits), axis=0)
    worst = np.zeros(count)

    def growth(s: Array, owner: Index) -> Array:
        value, error = _growth(s, limits[:, owner], matrices[:, :, owner], absolute)
        np.maximum.at(worst, owner, error)
        return value

    owner = np.repeat(np.arange(count), len(_EDGES) - 1)
    low, high = np.tile(_EDGES[:-1], count), np.tile(_EDGES[1:], count)
    found = integrate(growth, low, high, owner, count, relative=0.0, absolute=absolute, rounds=40)
    value = start + found.value[0]
    error = found.error[0] + worst + 1e-15 + _rounding(limits, matrices)
    return Estimates(np.clip(value, 0.0, 1.0), error)


def _growth(s: Array, limits: Array, matrices: Array, absolute: float) -> tuple[Array, Array]:
    """dP/ds along the path, and the error that the inner probabilities leave in it."""
    t = np.sin(0.5 * np.pi * s)
    speed = 0.5 * np.pi * np.cos(0.5 * np.pi * s)
    total, error = np.zeros(s.size), np.zeros(s.size)
    for i, j in combinations(range(len(limits)), 2):
        rho = matrices[i, j]
        if not np.any(rho):
            continue
        r = t * rho
        rest = (1.0 - r) * (1.0 + r)
        b, c = limits[i], limits[j]
        with np.errstate(all="ignore"):
            exponent = -0.5 * ((b - c) ** 2 / rest + 2.0 * b * c / (1.0 + r))
            factor = speed * rho * np.exp(exponent) / (2.0 * np.pi * np.sqrt(rest))
        # at the far end of a perfect correlation the factor's limit is reached by its neighbours
        factor = np.where(np.isfinite(factor), factor, 0.0)
        used = np.flatnonzero(np.abs(factor) > 1e-3 * absolute)
        error[np.abs(factor) <= 1e-3 * absolute] += 1e-3 * absolute
        if used.size:
            inner = _conditional(i, j, t[used], limits[:, used], matrices[:, :, used], absolute)
            total[used] += factor[used] * inner.value
            error[used] += np.abs(factor[used]) * inner.error
    return total, error


def _rounding(limits: Array, matrices: Array) -> Array:
    """What a few units in the last place of every correlation change the probability by, at most."""
    total = np.zeros(limits.shape[1])
    for i, j in combinations(range(len(limits)), 2):
        rho = matrices[i, j]
        rest = np.maximum((1.0 - rho) * (1.0 + rho), 1e-15)
        b, c = limits[i], limits[j]
        # exp(-(b² - 2ρbc + c²)/(2 (1 - ρ²))) with both differences kept
        same = np.where(rho < 0, -c, c)
        total += np.exp(-0.5 * (b - same) ** 2 / rest) / np.sqrt(rest)
    return np.asarray(1e-15 * total)


def _conditional(i: int, j: int, t: Array, limits: Array, matrices: Array, absolute: float) -> Estimates:
    """The probability of the other scores given that scores i and j equal their limits."""
    others = [k for k in range(len(limits)) if k not in (i, j)]
    r = t * matrices[i, j]
    rest = (1.0 - r) * (1.0 + r)
    a, c = t * matrices[others, i], t * matrices[others, j]
    centre = ((a - r * c) * limits[i] + (c - r * a) * limits[j]) / rest
    outer = a[:, None] * a[None] - r * (a[:, None] * c[None] + c[:, None] * a[None]) + c[:, None] * c[None]
    covariance = -outer / rest
    for k, m in enumerate(others):
        for q, n in enumerate(others):
            covariance[k, q] += (t if k != q else 1.0) * matrices[m, n]
    spread = np.sqrt(np.maximum(np.einsum("kkn->kn", covariance), 1e-32))
    matrix = np.clip(covariance / (spread[:, None] * spread[None]), -1.0, 1.0)
    return orthant((limits[others] - centre) / spread, matrix, absolute)
