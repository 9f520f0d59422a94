"""The standard normal density, its two tail functions and their inverses, without loss in the far tails.

exp(-z²/2) is evaluated with z² split exactly, so that its relative error does not grow with z².
"""

from __future__ import annotations

import numpy as np

from outspread.laws.law import Array

ROOT_TWO = float(np.sqrt(2.0))
ROOT_TWO_PI = float(np.sqrt(2.0 * np.pi))


def exp_minus_half_square(z: Array) -> Array:
    """exp(-z²/2), relative error a few ulp down to underflow (the square is split as head² + rest)."""
    z = np.minimum(np.abs(z), 40.0)
    head = np.round(z * 65536.0) / 65536.0  # head² has at most 44 bits: exact
    return np.asarray(np.exp(-0.5 * head * head) * np.exp(-0.5 * (z - head) * (z + head)))


def normal_pdf(z: Array) -> Array:
    return exp_minus_half_square(z) / ROOT_TWO_PI


def normal_cdf(z: Array) -> Array:
    """P(Z <= z), relative to itself for every z (scaled complementary error function in the left tail)."""
    from scipy import special

    z = np.asarray(z, float)
    value = np.asarray(special.ndtr(z))
    left = z < 0
    below = z[left]
    value[left] = 0.5 * exp_minus_half_square(below) * special.erfcx(-below / ROOT_TWO)
    return value


def normal_ccdf(z: Array) -> Array:
    return normal_cdf(-z)


def log_normal_cdf(z: Array) -> Array:
    """log P(Z <= z), also where the probability underflows."""
    from scipy import special

    tail = -0.5 * z * z + np.log(0.5 * special.erfcx(np.maximum(-z, 0.0) / ROOT_TWO))
    return np.asarray(np.where(z < -1, tail, np.log1p(-normal_cdf(-np.maximum(z, -1.0)))))


def normal_icdf(p: Array) -> Array:
    """z with P(Z <= z) = p; one Newton step on the logarithm polishes the library's value."""
    from scipy import special

    z = special.ndtri(p)
    cdf = normal_cdf(z)
    # Above 1/2 the step would only replay the rounding of 1 - cdf.
    step = np.where(p < 0.5, np.log(cdf / p) * cdf / np.maximum(normal_pdf(z), 1e-320), 0.0)
    return np.asarray(np.where(np.isfinite(step), z - step, z))


def normal_between(lower: Array, upper: Array, width: Array | None = None) -> Array:
    """P(lower < Z <= upper), from the tail that both ends share.

    `width` is upper - lower where the caller knows it better than the rounded difference. Narrow intervals
    (width below 1/4) are integrated by a 10-point Gauss rule, which does not cancel.
    """
    with np.errstate(invalid="ignore", over="ignore"):
        if width is None:
            width = upper - lower
        swap = lower > 0
        low = np.where(swap, -upper, lower)
        high = np.where(swap, -lower, upper)
        narrow = (width < 0.25) & (width > 0)
        result = np.zeros(np.shape(width))
        wide = (width > 0) & ~narrow
        low_wide, high_wide = low[wide], high[wide]
        beyond = normal_cdf(low_wide)
        over_zero = high_wide > 0
        part = normal_cdf(np.where(over_zero, -high_wide, high_wide))
        result[wide] = np.maximum(np.where(over_zero, 1 - beyond - part, part - beyond), 0.0)
        if narrow.any():
            half = 0.5 * width[narrow]
            points = (low[narrow] + half)[:, None] + half[:, None] * _GAUSS_NODES
            result[narrow] = half * (normal_pdf(points) @ _GAUSS_WEIGHTS)
    return result


_GAUSS_NODES, _GAUSS_WEIGHTS = np.polynomial.legendre.leggauss(10)
