"""Regularised incomplete gamma functions and their inverses, relative accuracy in both tails.

The library serves the body and shapes below 30; far from the mean of larger shapes, where it loses
digits, the power series (DLMF 8.7.1) and the continued fraction (DLMF 8.9.2) with a saddle-point factor.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.functions.counting import gamma_kernel
from outspread.laws.law import Array

#: shapes from here on, and distances from the mean in standard deviations, for which the library is replaced
LEAST_SHAPE = 30.0
FAR = 4.5


def gamma_lower(shape: npt.ArrayLike, x: npt.ArrayLike) -> Array:
    """P(a, x): the cdf of a gamma law of this shape and scale 1."""
    from scipy import special

    a, x = np.broadcast_arrays(np.asarray(shape, float), np.asarray(x, float))
    result = np.asarray(special.gammainc(a, x))
    far = (a >= LEAST_SHAPE) & (x < a - FAR * np.sqrt(a)) & (x > 0)
    if np.any(far):
        result = np.array(result)
        result[far] = _power_series(a[far], x[far])
    return result


def gamma_upper(shape: npt.ArrayLike, x: npt.ArrayLike) -> Array:
    """Q(a, x) = 1 - P(a, x)."""
    from scipy import special

    a, x = np.broadcast_arrays(np.asarray(shape, float), np.asarray(x, float))
    result = np.asarray(special.gammaincc(a, x))
    far = (a >= LEAST_SHAPE) & (x > a + FAR * np.sqrt(a)) & np.isfinite(x)
    if np.any(far):
        result = np.array(result)
        result[far] = _continued_fraction(a[far], x[far])
    return result


def _power_series(a: Array, x: Array) -> Array:
    term = np.ones_like(x)
    total = np.ones_like(x)
    n = 0
    while np.any(term > 1e-17 * total):
        n += 1
        term = term * (x / (a + n))
        total = total + term
    return gamma_kernel(a, x) * total


def _continued_fraction(a: Array, x: Array) -> Array:
    """Q = kernel * a / (x + 1 - a - 1 (1-a) / (x + 3 - a - ...)), by the modified Lentz method."""
    b = x + 1 - a
    c = np.full_like(x, 1e300)
    d = 1 / b
    fraction = d
    n = 0
    while True:
        n += 1
        numerator = -n * (n - a)
        b = b + 2
        d = 1 / (numerator * d + b)
        c = b + numerator / c
        change = c * d
        fraction = fraction * change
        if np.all(np.abs(change - 1) < 1e-16) or n > 200_000:
            break
    return gamma_kernel(a, x) * a * fraction


def gamma_lower_inverse(shape: float, p: Array) -> Array:
    """x with P(shape, x) = p, polished on the logarithm of the smaller tail."""
    from scipy import special

    return _polish(shape, np.asarray(special.gammaincinv(shape, p)), p, lower=True)


def gamma_upper_inverse(shape: float, q: Array) -> Array:
    """x with Q(shape, x) = q."""
    from scipy import special

    return _polish(shape, np.asarray(special.gammainccinv(shape, q)), q, lower=False)


def _polish(shape: float, x: Array, tail: Array, *, lower: bool) -> Array:
    """One Newton step; near 1 the tail is rounded and the library's value stands."""
    with np.errstate(all="ignore"):
        value = gamma_lower(shape, x) if lower else gamma_upper(shape, x)
        step = np.log(value / tail) * value / gamma_density(shape, x)
        new = x - step if lower else x + step
        use = (tail < 0.9) & np.isfinite(step) & (np.abs(step) < 1e-6 * x)
    return np.asarray(np.where(use, new, x))


def gamma_density(shape: float, x: Array) -> Array:
    """x^(a-1) exp(-x) / Gamma(a); at x = 0 its limit."""
    if shape == 1:
        return np.exp(-x)
    limit = np.inf if shape < 1 else 0.0
    safe = np.where(x > 0, x, 1.0)
    return np.asarray(np.where(x > 0, gamma_kernel(shape, safe) * shape / safe, limit))
