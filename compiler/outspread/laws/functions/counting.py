"""Saddle-point form of gamma, beta, Poisson and binomial densities, which keeps relative accuracy.

C. Loader (2000), Fast and accurate computation of binomial probabilities.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array

LOG_TWO_PI = float(np.log(2 * np.pi))
#: coefficients of Stirling's series in 1/n³, 1/n⁵, … (DLMF 5.11.1)
_STIRLING = (1 / 12, -1 / 360, 1 / 1260, -1 / 1680, 1 / 1188, -691 / 360360, 1 / 156)


def stirling_error(n: npt.ArrayLike) -> Array:
    """log Gamma(n + 1) - log(sqrt(2 pi n) (n/e)^n), for n > 0.

    Stirling's series from n = 16 on; below, the recurrence from n to n + 1, term by term small.
    """
    n = np.asarray(n, float)
    # a parameter is one number for many points, asked for again and again
    return np.asarray(_one_stirling_error(float(n))) if n.ndim == 0 else _stirling_error(n)


@lru_cache(maxsize=256)
def _one_stirling_error(n: float) -> float:
    return float(_stirling_error(np.array([n]))[0])


def _stirling_error(n: Array) -> Array:
    correction = np.zeros(n.shape)
    shifted = n
    for _ in range(16):
        low = shifted < 16
        if not np.any(low):
            break
        step = (shifted + 0.5) * np.log1p(1 / np.maximum(shifted, 1e-300)) - 1
        correction = correction + np.where(low, step, 0.0)
        shifted = np.where(low, shifted + 1, shifted)
    square = 1 / (shifted * shifted)
    series = np.zeros_like(shifted)
    for coefficient in reversed(_STIRLING):
        series = series * square + coefficient
    return np.asarray(series / shifted + correction)


def deviance(x: npt.ArrayLike, mean: npt.ArrayLike) -> Array:
    """x log(x/mean) + mean - x, without cancellation where x is near the mean."""
    x, mean = np.broadcast_arrays(np.asarray(x, float), np.asarray(mean, float))
    shape, x, mean = x.shape, x.ravel(), mean.ravel()
    difference = x - mean
    near = np.abs(difference) < 0.1 * (x + mean)
    result = np.empty_like(x)
    close, beyond = np.flatnonzero(near), np.flatnonzero(~near)
    result[close] = _near_deviance(x[close], mean[close], difference[close])
    result[beyond] = _far_deviance(x[beyond], mean[beyond])
    return result.reshape(shape)


def _near_deviance(x: Array, mean: Array, difference: Array) -> Array:
    v = difference / (x + mean)
    series = np.zeros_like(v)
    for j in range(12, 0, -1):
        series = (series + 1 / (2 * j + 1)) * v * v
    return np.asarray(difference * v + 2 * x * v * series)


def _far_deviance(x: Array, mean: Array) -> Array:
    with np.errstate(all="ignore"):
        quotient = x / mean
        logarithm = np.where(x > 0, np.log(quotient), 0.0)
        # log of a quotient that overflows, as a difference of logarithms
        wild = (x > 0) & ~((quotient > 1e-300) & np.isfinite(quotient))
        if np.any(wild):
            logarithm[wild] = np.log(x[wild]) - np.log(mean[wild])
        return np.asarray(x * logarithm + (mean - x))


def gamma_kernel(a: npt.ArrayLike, x: npt.ArrayLike) -> Array:
    """x^a exp(-x) / Gamma(a + 1) for a > 0."""
    a = np.asarray(a, float)
    return np.asarray(np.exp(-stirling_error(a) - deviance(a, x)) / np.sqrt(2 * np.pi * a))


def beta_kernel(a: npt.ArrayLike, b: npt.ArrayLike, u: Array, v: Array) -> Array:
    """u^a v^b / B(a, b), given u and v = 1 - u, for a, b > 0."""
    a, b = np.asarray(a, float), np.asarray(b, float)
    n = a + b
    exponent = stirling_error(n) - stirling_error(a) - stirling_error(b)
    return np.asarray(
        np.exp(exponent - deviance(a, n * u) - deviance(b, n * v)) * np.sqrt(a * b / (2 * np.pi * n))
    )


def poisson_mass(k: Array, mean: float) -> Array:
    return np.asarray(np.where(k == 0, np.exp(-mean), gamma_kernel(np.maximum(k, 1.0), mean)))


def binomial_mass(k: Array, n: float, p: float, q: float) -> Array:
    """Of k successes in n trials of probability p, q = 1 - p."""
    if p == 0 or q == 0:
        return np.asarray(np.where(k == (0 if p == 0 else n), 1.0, 0.0))
    inner = np.clip(k, 1.0, max(n - 1.0, 1.0))
    rest = np.maximum(n - inner, 1.0)
    kernel = beta_kernel(inner, rest, np.full_like(k, p), np.full_like(k, q))
    none = np.exp(n * np.log1p(-p)) if p < 0.5 else np.exp(n * np.log(q))
    every = np.exp(n * np.log(p)) if p < 0.5 else np.exp(n * np.log1p(-q))
    # C(n, k) p^k q^(n-k) = n / (k (n - k)) p^k q^(n-k) / B(k, n - k)
    return np.asarray(np.where(k == 0, none, np.where(k == n, every, kernel * n / (inner * rest))))
