"""Moments that are differences of gamma functions, evaluated with enough digits to survive the cancellation.

Conventions: a moment that diverges is inf, one that does not exist nan; with an infinite variance the
skewness and the kurtosis do not exist.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

Moments = tuple[float, float, float, float]  # mean, variance, skewness, kurtosis
NAN = float("nan")
INF = float("inf")

#: standard Gumbel law for maxima: Euler's constant, pi²/6, 12 sqrt(6) zeta(3) / pi³, 27/5
GUMBEL_MOMENTS: Moments = (0.5772156649015329, 1.6449340668482264, 1.1395470994046486, 5.4)


def as_float(value: Any) -> float:
    """The nearest double; infinite where it overflows."""
    try:
        return float(value)
    except OverflowError:
        return INF if value > 0 else -INF


def from_raw(raw: Callable[[Any, int], Any], order: float = INF, digits: int = 80) -> Moments:
    """Moments from `raw(mpmath, k)` = E Z^k of a law bounded below, finite for k < order."""
    import mpmath

    with mpmath.workdps(digits):
        if order <= 1:
            return (INF, NAN, NAN, NAN)
        m1 = raw(mpmath, 1)
        if order <= 2:
            return (as_float(m1), INF, NAN, NAN)
        m2 = raw(mpmath, 2)
        variance = m2 - m1**2
        if order <= 3:
            return (as_float(m1), as_float(variance), INF, INF)
        m3 = raw(mpmath, 3)
        skewness = (m3 - 3 * m1 * m2 + 2 * m1**3) / variance ** mpmath.mpf(1.5)
        if order <= 4:
            return (as_float(m1), as_float(variance), as_float(skewness), INF)
        fourth = raw(mpmath, 4) - 4 * m1 * m3 + 6 * m1**2 * m2 - 3 * m1**4
        return (as_float(m1), as_float(variance), as_float(skewness), as_float(fourth / variance**2))


def weibull_moments(shape: float) -> Moments:
    """E^(1/shape) for a standard exponential E: raw moments Gamma(1 + k/shape)."""
    return from_raw(lambda mp, k: mp.gamma(1 + k / mp.mpf(shape)), digits=80 + _small(1 / shape))


def extreme_moments(shape: float) -> Moments:
    """(E^(-shape) - 1) / shape: the standard generalised extreme value law."""
    if shape == 0:
        return GUMBEL_MOMENTS
    order = 1 / shape if shape > 0 else INF
    # E^(-shape) itself has raw moments Gamma(1 - k shape); shift and scale come after
    digits = 80 + _small(abs(shape))
    mean, variance, skewness, kurtosis = from_raw(
        lambda mp, k: mp.gamma(1 - k * mp.mpf(shape)), order, digits
    )
    if order <= 1:
        return (INF, NAN, NAN, NAN)
    import mpmath

    with mpmath.workdps(digits):
        s = mpmath.mpf(shape)
        mean = as_float((mpmath.gamma(1 - s) - 1) / s)
        if order > 2:
            spread = mpmath.gamma(1 - 2 * s) - mpmath.gamma(1 - s) ** 2
            variance = as_float(spread / s**2)
    sign = 1 if shape > 0 else -1
    return (mean, variance, sign * skewness, kurtosis)


def root_gamma_moments(shape: float) -> Moments:
    """sqrt(G) for a gamma variable G of this shape and scale 1."""
    return from_raw(lambda mp, k: mp.rf(mp.mpf(shape), mp.mpf(k) / 2), digits=80 + _small(1 / shape))


def burr_moments(inner: float, outer: float) -> Moments:
    """Raw moments outer * B(outer - k/inner, 1 + k/inner)."""

    def raw(mp: Any, k: int) -> Any:
        c, d = mp.mpf(inner), mp.mpf(outer)
        return d * mp.beta(d - k / c, 1 + k / c)

    return from_raw(raw, inner * outer, digits=80 + _small(1 / inner))


def gompertz_moments(shape: float) -> Moments:
    """log(1 + E / shape): the trapezoidal rule over log E, which converges geometrically (the integrand is
    analytic in a strip of half width pi/2 and decays at both ends)."""
    t = np.arange(-50.0, 7.0, 0.05)
    hazard = np.exp(t)
    weights = np.exp(t - hazard)
    weights /= np.sum(weights)
    z = np.log1p(hazard / shape)
    mean = float(weights @ z)
    second, third, fourth = (float(weights @ (z - mean) ** k) for k in (2, 3, 4))
    return (mean, second, third / second**1.5, fourth / second**2)


def _small(size: float) -> int:
    """Digits that fourth-order cancellation takes where the spread is a fraction `size` of the mean."""
    import math

    return 8 + 4 * max(0, round(-math.log10(size)))
