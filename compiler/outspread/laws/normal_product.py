"""The law of the product of two centred jointly normal variables, relative accurate in both tails.

Density: Craig (1936), Annals of Mathematical Statistics 7, 1–15; Nadarajah and Pogány (2016), Comptes
Rendus Mathématique 354, 201–204, for correlated factors (both from memory). Tails: with
K0(t) = ∫ exp(-t cosh u) du over u > 0 (Abramowitz and Stegun 9.6.24) the density is integrated in closed
form, and the trapezoidal rule in u converges exponentially because the integrand is analytic and even.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Law
from outspread.numerics.roots import ordinal_middle

#: the trapezoidal rule needs many nodes where the factors are nearly proportional
LARGEST_CORRELATION = 0.99
_REACH = 46.0


class NormalProduct(Law):
    """The law of Z1 Z2 for standard normal Z1, Z2 with the given correlation (|correlation| <= 0.99)."""

    relative_error = 1e-12

    def __init__(self, correlation: float = 0.0):
        if not abs(correlation) <= LARGEST_CORRELATION:
            raise ValueError(f"the correlation must not exceed {LARGEST_CORRELATION}")
        self.correlation = float(correlation)
        self.rest = (1 - self.correlation) * (1 + self.correlation)
        strip = np.arccos(abs(self.correlation))  # distance of the nearest pole of the integrand
        self._nodes = np.arange(int(max(400, np.ceil(_REACH * 6.5 / strip))) + 1)

    def support(self) -> tuple[float, float]:
        return (-np.inf, np.inf)

    def breaks(self) -> tuple[float, ...]:
        return (0.0,)

    def pdf(self, x: npt.ArrayLike) -> Array:
        from scipy.special import k0e

        x = np.asarray(x, float)
        t = np.abs(x) / self.rest
        with np.errstate(divide="ignore", invalid="ignore"):
            value = np.exp(self.correlation * x / self.rest - t) * k0e(t) / (np.pi * np.sqrt(self.rest))
        return np.asarray(np.where(np.isinf(x), 0.0, value))

    def _upper(self, x: Array, correlation: float) -> Array:
        """P(Z1 Z2 > x) for x >= 0."""
        flat = np.maximum(np.ravel(x), 0.0)
        result = np.empty_like(flat)
        for start in range(0, flat.size, 2000):
            block = flat[start : start + 2000, None]
            with np.errstate(divide="ignore", over="ignore"):
                reach = np.minimum(_REACH, np.arccosh(1 + np.minimum(_REACH * self.rest / block, 1e30)))
            step = reach / (len(self._nodes) - 1)
            # cosh u - r, written so that nothing cancels for r near 1
            above = 2 * np.sinh(step * self._nodes / 2) ** 2 + (1 - correlation)
            terms = np.exp(-block * above / self.rest) / above
            terms[:, 0] /= 2
            result[start : start + 2000] = np.sum(terms, axis=1) * step[:, 0]
        return np.asarray((result * np.sqrt(self.rest) / np.pi).reshape(np.shape(x)))

    def cdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        low = self._upper(np.where(x < 0, -x, 0.0), -self.correlation)
        high = 1.0 - self._upper(np.where(x > 0, x, 0.0), self.correlation)
        return np.asarray(np.where(np.isnan(x), np.nan, np.where(x < 0, low, high)))

    def ccdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        high = self._upper(np.where(x > 0, x, 0.0), self.correlation)
        low = 1.0 - self._upper(np.where(x < 0, -x, 0.0), -self.correlation)
        return np.asarray(np.where(np.isnan(x), np.nan, np.where(x > 0, high, low)))

    def _beyond(self, p: Array, correlation: float) -> Array:
        """The x >= 0 with P(product > x) = p for p up to the probability of the positive side."""
        low, high = np.zeros_like(p), np.full_like(p, 1600.0)
        for _ in range(70):
            middle = ordinal_middle(low, high).reshape(p.shape)
            outside = self._upper(middle, correlation) <= p
            low, high = np.where(outside, low, middle), np.where(outside, middle, high)
        return high

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        return -self._upper_quantile(p, -self.correlation)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._upper_quantile(np.asarray(q, float), self.correlation)

    def _upper_quantile(self, q: Array, correlation: float) -> Array:
        positive = float(self._upper(np.zeros(1), correlation)[0])
        right = self._beyond(np.clip(q, 5e-324, positive), correlation)
        left = -self._beyond(np.clip(1.0 - q, 5e-324, 1.0), -correlation)
        x = np.where(q <= positive, right, left)
        x = np.where(q == 0, np.inf, np.where(q == 1, -np.inf, x))
        return np.asarray(np.where((q >= 0) & (q <= 1), x, np.nan))

    def mean(self) -> float:
        return self.correlation

    def variance(self) -> float:
        return 1 + self.correlation**2

    def skewness(self) -> float:
        r = self.correlation
        return float((6 * r + 2 * r**3) / (1 + r**2) ** 1.5)

    def kurtosis(self) -> float:
        r = self.correlation
        return float(3 + (6 + 36 * r**2 + 6 * r**4) / (1 + r**2) ** 2)
