"""Frames for laws of a family: location and scale, a bounded interval, and whole numbers.

A family writes only its standard form for points strictly inside; ends, infinities, nan and shapes of
arrays are handled here. No family is defined here.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Law

Function = Callable[[Array], Array]
Moments = tuple[float, float, float, float]  # mean, variance, skewness, kurtosis
INF = float("inf")
NAN = float("nan")
EPSILON = float(np.finfo(float).eps)


def inside(function: Function, x: Array, lower: float, upper: float, below: float, above: float) -> Array:
    """`function` at the points strictly between `lower` and `upper`, `below` and `above` elsewhere."""
    result = np.where(x <= lower, below, np.where(x >= upper, above, NAN))
    within = (x > lower) & (x < upper)
    with np.errstate(all="ignore"):
        if x.ndim == 0:
            return np.asarray(function(x.reshape(1))[0]) if within else np.asarray(result)
        if np.any(within):
            result[within] = function(x[within])
    return result


def with_ends(function: Function, x: Array, lower: float, upper: float) -> Array:
    """`function` on the closed interval between finite ends, 0 elsewhere (a density)."""
    low = np.nextafter(lower, -INF) if np.isfinite(lower) else lower
    high = np.nextafter(upper, INF) if np.isfinite(upper) else upper
    return inside(function, x, low, high, 0.0, 0.0)


class SmoothLaw(Law):
    """A continuous law whose `between` integrates the density where the tails would cancel."""

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        lower, upper = np.broadcast_arrays(np.asarray(lower, float), np.asarray(upper, float))
        value = super().between(lower, upper)
        tail = np.minimum(self.cdf(upper), self.ccdf(lower))
        narrow = (upper > lower) & (value < 0.02 * tail) & np.isfinite(lower) & np.isfinite(upper)
        for point in self.breaks():
            narrow &= ~((lower < point) & (point < upper))
        if not np.any(narrow):
            return value
        # over such a short way the density varies little: a 12-point Gauss rule is exact to rounding
        nodes, weights = np.polynomial.legendre.leggauss(12)
        low, half = lower[narrow], 0.5 * (upper[narrow] - lower[narrow])
        points = (low + half)[..., None] + half[..., None] * nodes
        value = np.array(value)
        value[narrow] = half * (self.pdf(points) @ weights)
        return value


class ScaledLaw(SmoothLaw):
    """The law of location + scale * Z, where `standard_*` describe Z on the interval `ends`.

    The `standard_*` functions get one-dimensional arrays strictly inside (`standard_pdf` also a finite end).
    """

    location: float = 0.0
    scale: float = 1.0
    ends: tuple[float, float] = (-INF, INF)

    @abstractmethod
    def standard_pdf(self, z: Array) -> Array: ...

    @abstractmethod
    def standard_cdf(self, z: Array) -> Array: ...

    @abstractmethod
    def standard_ccdf(self, z: Array) -> Array: ...

    @abstractmethod
    def standard_icdf(self, p: Array) -> Array: ...

    @abstractmethod
    def standard_iccdf(self, q: Array) -> Array: ...

    @abstractmethod
    def standard_moments(self) -> Moments: ...

    def _standardise(self, x: npt.ArrayLike) -> Array:
        with np.errstate(over="ignore", invalid="ignore"):
            return np.asarray((np.asarray(x, float) - self.location) / self.scale)

    def support(self) -> tuple[float, float]:
        return (self.location + self.scale * self.ends[0], self.location + self.scale * self.ends[1])

    def pdf(self, x: npt.ArrayLike) -> Array:
        return np.asarray(with_ends(self.standard_pdf, self._standardise(x), *self.ends) / self.scale)

    def cdf(self, x: npt.ArrayLike) -> Array:
        return inside(self.standard_cdf, self._standardise(x), *self.ends, 0.0, 1.0)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return inside(self.standard_ccdf, self._standardise(x), *self.ends, 1.0, 0.0)

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        z = inside(self.standard_icdf, np.where((p >= 0) & (p <= 1), p, NAN), 0.0, 1.0, *self.ends)
        return np.asarray(self.location + self.scale * z)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        q = np.asarray(q, float)
        z = inside(self.standard_iccdf, np.where((q >= 0) & (q <= 1), q, NAN), 0.0, 1.0, *self.ends[::-1])
        return np.asarray(self.location + self.scale * z)

    def mean(self) -> float:
        return float(self.location + self.scale * self.standard_moments()[0])

    def variance(self) -> float:
        return float(self.scale**2 * self.standard_moments()[1])

    def skewness(self) -> float:
        return float(self.standard_moments()[2])

    def kurtosis(self) -> float:
        return float(self.standard_moments()[3])


class IntervalLaw(SmoothLaw):
    """A law on the interval from `lower` to `upper`, written in the fractions u and v = 1 - u of its width.

    Both fractions are measured from their own end, so that neither tail is a difference of rounded numbers.
    """

    def __init__(self, lower: float, upper: float):
        self.lower, self.upper = lower, upper
        self.width = upper - lower

    @abstractmethod
    def unit_pdf(self, u: Array, v: Array) -> Array: ...

    @abstractmethod
    def unit_cdf(self, u: Array, v: Array) -> Array: ...

    @abstractmethod
    def unit_ccdf(self, u: Array, v: Array) -> Array: ...

    @abstractmethod
    def unit_icdf(self, p: Array) -> Array:
        """The fraction u at which the cdf is p."""

    @abstractmethod
    def unit_iccdf(self, q: Array) -> Array:
        """The fraction v at which the ccdf is q."""

    @abstractmethod
    def unit_moments(self) -> Moments:
        """Moments of the fraction u."""

    def _fractions(self, function: Callable[[Array, Array], Array]) -> Function:
        return lambda x: function((x - self.lower) / self.width, (self.upper - x) / self.width)

    def support(self) -> tuple[float, float]:
        return (self.lower, self.upper)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        value = inside(
            self._fractions(self.unit_pdf), np.clip(x, self.lower, self.upper), -INF, INF, 0.0, 0.0
        )
        return np.asarray(np.where((x < self.lower) | (x > self.upper), 0.0, value / self.width))

    def cdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return inside(self._fractions(self.unit_cdf), x, self.lower, self.upper, 0.0, 1.0)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return inside(self._fractions(self.unit_ccdf), x, self.lower, self.upper, 1.0, 0.0)

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        p = np.where((p >= 0) & (p <= 1), p, NAN)
        x = inside(lambda p: self.lower + self.width * self.unit_icdf(p), p, 0.0, 1.0, *self.support())
        return np.asarray(np.clip(x, self.lower, self.upper))

    def iccdf(self, q: npt.ArrayLike) -> Array:
        q = np.asarray(q, float)
        q = np.where((q >= 0) & (q <= 1), q, NAN)
        x = inside(lambda q: self.upper - self.width * self.unit_iccdf(q), q, 0.0, 1.0, *self.support()[::-1])
        return np.asarray(np.clip(x, self.lower, self.upper))

    def mean(self) -> float:
        return float(self.lower + self.width * self.unit_moments()[0])

    def variance(self) -> float:
        return float(self.width**2 * self.unit_moments()[1])

    def skewness(self) -> float:
        return float(self.unit_moments()[2])

    def kurtosis(self) -> float:
        return float(self.unit_moments()[3])
