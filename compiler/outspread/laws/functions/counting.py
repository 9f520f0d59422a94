"""Binomial and Poisson probabilities by Loader's saddle-point form, which keeps relative accuracy.

C. Loader (2000), Fast and accurate computation of binomial probabilities.
"""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array

LOG_TWO_PI = float(np.log(2 * np.pi))


def stirling_error(n: Array) -> Array:
    """log(n!) - log(sqrt(2 pi n) (n/e)^n), for n >= 0 (n = 0 gives 0 by convention of the callers)."""
    from scipy import special

    n = np.asarray(n, float)
    small = np.minimum(np.maximum(n, 1e-300), 16.0)
    direct = special.gammaln(small + 1) - (small + 0.5) * np.log(small) + small - 0.5 * LOG_TWO_PI
    large = np.maximum(n, 15.0)
    square = 1 / (large * large)
    coefficients = (1 / 12, -1 / 360, 1 / 1260, -1 / 1680, 1 / 1188, -691 / 360360, 1 / 156)
    series = np.zeros_like(large)
    for coefficient in reversed(coefficients):
        series = series * square + coefficient
    return np.asarray(np.where(n < 15, direct, series / large))


def deviance(x: Array, mean: Array) -> Array:
    """x log(x/mean) + mean - x, without cancellation where x is near the mean."""
    x, mean = np.broadcast_arrays(np.asarray(x, float), np.asarray(mean, float))
    total, difference = x + mean, x - mean
    near = np.abs(difference) < 0.1 * total
    v = np.where(near, difference / total, 0.0)
    series = np.zeros_like(v)
    for j in range(12, 0, -1):
        series = (series + 1 / (2 * j + 1)) * v * v
    close = difference * v + 2 * x * v * series
    ratio = np.where(near | (x <= 0), 1.0, x / np.where(mean > 0, mean, 1.0))
    return np.asarray(np.where(near, close, x * np.log(ratio) + mean - x))


def poisson_mass(k: Array, mean: float) -> Array:
    k = np.asarray(k, float)
    safe = np.maximum(k, 1.0)
    value = np.exp(-stirling_error(safe) - deviance(safe, np.full_like(safe, mean))) / np.sqrt(
        2 * np.pi * safe
    )
    return np.asarray(np.where(k == 0, np.exp(-mean), value))


def binomial_mass(k: Array, n: float, p: float) -> Array:
    k = np.asarray(k, float)
    q = 1 - p
    if p == 0 or q == 0:
        return np.asarray(np.where(k == (0 if p == 0 else n), 1.0, 0.0))
    inner = np.clip(k, 1.0, max(n - 1.0, 1.0))
    rest = np.maximum(n - inner, 1.0)
    exponent = (
        stirling_error(np.full_like(k, n))
        - stirling_error(inner)
        - stirling_error(rest)
        - deviance(inner, np.full_like(k, n * p))
        - deviance(rest, np.full_like(k, n * q))
    )
    value = np.exp(exponent) * np.sqrt(n / (2 * np.pi * inner * rest))
    none, every = np.exp(n * np.log1p(-p)), np.exp(n * np.log(p))
    return np.asarray(np.where(k == 0, none, np.where(k == n, every, value)))
