"""The law of the product of two centred jointly normal variables, relative accurate in both tails.

Density: Craig (1936), Annals of Mathematical Statistics 7, 1–15; Nadarajah and Pogány (2016), Comptes
Rendus Mathématique 354, 201–204, for correlated factors (both from memory). Tails: with
K0(t) = ∫ exp(-t cosh u) du over u > 0 (Abramowitz and Stegun 9.6.24) the density is integrated in closed
form, and the trapezoidal rule in u converges exponentially because the integrand is analytic and even
(Trefethen and Weideman 2014, SIAM Review 56, 385–458, theorem 5.1; from memory).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Law
from outspread.numerics.roots import ordinal_middle

#: the trapezoidal rule needs many nodes where the factors are nearly proportional
LARGEST_CORRELATION = 0.99
#: what is left out of an integral, beyond its reach and between its nodes, is below exp(-_REACH) of it
_REACH = 46.0
#: nodes times points of one block
_BLOCK = 200_000
#: no probability above the smallest double lies beyond
_FARTHEST = 1600.0
#: one more Newton step from here is exact to rounding, for its error is of the order of the square
_NEAR = 1e-9


class NormalProduct(Law):
    """The law of Z1 Z2 for standard normal Z1, Z2 with the given correlation (|correlation| <= 0.99)."""

    relative_error = 1e-12

    def __init__(self, correlation: float = 0.0):
        if not abs(correlation) <= LARGEST_CORRELATION:
            raise ValueError(f"the correlation must not exceed {LARGEST_CORRELATION}")
        self.correlation = float(correlation)
        self.rest = (1 - self.correlation) * (1 + self.correlation)

    def support(self) -> tuple[float, float]:
        return (-np.inf, np.inf)

    def breaks(self) -> tuple[float, ...]:
        return (0.0,)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        with np.errstate(over="ignore", invalid="ignore"):
            right, left = (np.abs(x) / (1 + sign * self.correlation) for sign in (1, -1))
            value = np.exp(-np.where(x > 0, right, left)) * self._scaled_density(np.abs(x))
        return np.asarray(np.where(np.isinf(x), 0.0, value))

    def _scaled_density(self, x: Array) -> Array:
        """The density at x >= 0 times exp(x/(1 + correlation)); at -x it is the same with 1 - correlation."""
        from scipy.special import k0e

        return np.asarray(k0e(x / self.rest) / (np.pi * np.sqrt(self.rest)))

    def _upper(self, x: Array, correlation: float) -> Array:
        """P(Z1 Z2 > x) for x >= 0."""
        x = np.clip(x, 0.0, 2 * _FARTHEST)
        return np.asarray(np.exp(-x / (1 + correlation)) * self._scaled_tail(x, correlation))

    def _scaled_tail(self, x: Array, correlation: float) -> Array:
        """P(Z1 Z2 > x) exp(x/(1 + correlation)) for x >= 0, which underflows nowhere.

        √rest/π times the integral of exp(-t (cosh u - 1))/(cosh u - correlation) over u > 0, t = x/rest.
        """
        flat = np.ravel(x) / self.rest
        result = np.full_like(flat, np.arccos(-correlation) / np.sqrt(self.rest))  # the integral for t = 0
        inside = np.flatnonzero(flat > 0)
        reach, count = _nodes(flat[inside], correlation)
        for nodes in np.unique(count):
            members = np.flatnonzero(count == nodes)
            for some in np.array_split(members, -(-members.size * int(nodes) // _BLOCK)):
                step = reach[some] / nodes
                # cosh u - 1, written so that nothing cancels
                above = 2 * np.sinh(0.5 * step[:, None] * np.arange(nodes + 1)) ** 2
                terms = np.exp(-flat[inside[some], None] * above) / (above + (1 - correlation))
                terms[:, 0] /= 2
                result[inside[some]] = np.sum(terms, axis=1) * step
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
        """The x >= 0 with P(product > x) = p for 0 < p <= P(product > 0): Newton's method in log p.

        The logarithm of the tail is convex, so that from the left no step leads too far; a step out of the
        bracket is replaced by halving in the order of representable numbers.
        """
        goal = np.log(p)
        root = np.zeros_like(p)
        live = np.flatnonzero(p < np.arccos(-correlation) / np.pi)
        low, high = np.zeros(live.size), np.full(live.size, _FARTHEST)
        x = np.full(live.size, 1e-3)
        for _ in range(200):
            if not live.size:
                break
            tail = self._scaled_tail(x, correlation)
            excess = np.log(tail) - x / (1 + correlation) - goal[live]
            low, high = np.where(excess > 0, x, low), np.where(excess > 0, high, x)
            step = excess * tail / self._scaled_density(x)
            found = x + step
            middle = ordinal_middle(low, high)
            inside = (found > low) & (found < high)
            done = (np.abs(step) <= _NEAR * x) | (excess == 0) | (middle <= low) | (middle >= high)
            root[live[done]] = np.where(inside, found, x)[done]
            x = np.where(inside, found, middle)[~done]
            live, low, high = live[~done], low[~done], high[~done]
        root[live] = x
        return root

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        return 0.0 - self._upper_quantile(p, -self.correlation)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._upper_quantile(np.asarray(q, float), self.correlation)

    def _upper_quantile(self, q: Array, correlation: float) -> Array:
        flat = q.ravel()
        x = np.full(flat.shape, np.nan)
        x[flat == 0] = np.inf
        x[flat == 1] = -np.inf
        right = (flat > 0) & (flat <= np.arccos(-correlation) / np.pi)
        left = (flat < 1) & (flat > 0) & ~right
        x[right] = self._beyond(flat[right], correlation)
        x[left] = -self._beyond(1.0 - flat[left], -correlation)
        return x.reshape(q.shape)

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


def _nodes(t: Array, correlation: float) -> tuple[Array, npt.NDArray[np.int64]]:
    """How far the integral for each t > 0 reaches, and by how many steps of the trapezoidal rule.

    In the strip |Im u| <= a, which holds no pole, the integrand grows at most by exp(t (1 - cos a)) and a
    small factor, and the rule leaves out that times exp(-2 pi a / step).
    """
    with np.errstate(over="ignore"):
        ratio = np.sqrt(_REACH / t)
    reach = np.minimum(2 * np.arcsinh(np.sqrt(0.5) * ratio), _REACH)
    strip = min(0.9 * float(np.arccos(correlation)), 1.4)
    a = np.minimum(strip, np.sqrt(2.0) * ratio)
    needed = reach * (_REACH + t * 2 * np.sin(a / 2) ** 2) / (2 * np.pi * a)
    # few different numbers, so that points share their nodes; each depends on its own t alone
    return reach, np.ceil(2.0 ** (np.ceil(2 * np.log2(needed)) / 2)).astype(np.int64)
