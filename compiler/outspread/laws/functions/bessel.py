"""The modified Bessel function of the first kind without its exponential growth and its power at 0."""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array


def log_scaled_bessel(order: float, x: Array) -> Array:
    """Logarithm of exp(-x) I_order(x) (2/x)^order, for order > -1 and x >= 0.

    The power series of DLMF 10.25.2, whose terms are all positive, for x² below 40 (1 + order), which also
    covers x so small that the library's value would underflow; beyond, the library's scaled function.
    """
    from scipy import special

    x = np.asarray(x, float)
    result = np.empty(x.shape)
    near = 0.25 * x * x < 10 * (1 + order)
    result[near] = np.log(_series(order, 0.25 * x[near] ** 2)) - special.gammaln(order + 1) - x[near]
    far = x[~near]
    with np.errstate(divide="ignore"):
        result[~near] = np.log(special.ive(order, far)) + order * np.log(2 / far)
    return result


def _series(order: float, quarter: Array) -> Array:
    """Sum of quarter^k / (k! (order + 1)_k)."""
    term = np.ones_like(quarter)
    total = np.ones_like(quarter)
    k = 0
    while np.any(term > 1e-17 * total):
        k += 1
        term = term * (quarter / (k * (k + order)))
        total = total + term
    return total
