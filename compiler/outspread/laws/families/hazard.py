"""Frame for laws whose cumulative hazard -log P(X > x) has a closed form; no family is defined here.

Everything follows from the hazard without cancellation: both tails, the inverses, narrow intervals.
"""

from __future__ import annotations

from abc import abstractmethod

import numpy as np
import numpy.typing as npt

from outspread.laws.families.shapes import INF, ScaledLaw, inside
from outspread.laws.law import Array


def rounding(sensitivity: float) -> float:
    """Bound on the relative error of a probability p whose logarithm moves by at most `sensitivity` times
    the relative change of its argument; the arguments here carry one or two roundings."""
    return 5e-15 + 6e-16 * sensitivity


#: -log of the smallest probability for which relative errors are stated
LOG_SMALLEST = 668.0


class HazardLaw(ScaledLaw):
    """Z with P(Z > z) = exp(-cumulative(z)), `cumulative` rising from 0 to infinity over `ends`.

    With `mirrored`, P(Z <= z) = exp(-cumulative(z)) and `cumulative` falls. `rate` is |d cumulative / dz|.
    """

    mirrored = False

    @abstractmethod
    def cumulative(self, z: Array) -> Array: ...

    @abstractmethod
    def rate(self, z: Array) -> Array: ...

    @abstractmethod
    def inverse(self, hazard: Array) -> Array:
        """z with cumulative(z) = hazard."""

    def increment(self, low: Array, high: Array) -> Array:
        """|cumulative(high) - cumulative(low)| for low < high, both inside and finite."""
        return np.abs(self.cumulative(high) - self.cumulative(low))

    def standard_pdf(self, z: Array) -> Array:
        return np.asarray(self.rate(z) * np.exp(-self.cumulative(z)))

    def standard_cdf(self, z: Array) -> Array:
        hazard = self.cumulative(z)
        return np.exp(-hazard) if self.mirrored else -np.expm1(-hazard)

    def standard_ccdf(self, z: Array) -> Array:
        hazard = self.cumulative(z)
        return -np.expm1(-hazard) if self.mirrored else np.exp(-hazard)

    def standard_icdf(self, p: Array) -> Array:
        return self.inverse(-np.log(p) if self.mirrored else -np.log1p(-p))

    def standard_iccdf(self, q: Array) -> Array:
        return self.inverse(-np.log1p(-q) if self.mirrored else -np.log(q))

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low, high = np.broadcast_arrays(self._standardise(lower), self._standardise(upper))
        below, above = (INF, 0.0) if self.mirrored else (0.0, INF)
        first, last = (inside(self.cumulative, z, *self.ends, below, above) for z in (low, high))
        least = np.minimum(first, last)
        within = (low > self.ends[0]) & (high < self.ends[1]) & (low < high)
        with np.errstate(all="ignore"):
            a, b = np.where(within, low, self._middle()), np.where(within, high, self._middle())
            change = np.where(within, self.increment(a, b), np.abs(last - first))
            probability = -np.exp(-least) * np.expm1(-change)
        return np.asarray(np.where(high > low, np.where(np.isinf(least), 0.0, probability), 0.0))

    def _middle(self) -> float:
        """Some point inside, to stand in for those that are not."""
        return float(self.standard_icdf(np.array([0.5]))[0])


def power_difference(low: Array, high: Array, exponent: float) -> Array:
    """|high^exponent - low^exponent| for 0 < low < high, without cancellation."""
    logarithm = np.log1p((low - high) / high)  # log(low / high)
    near = high**exponent * -np.expm1(exponent * logarithm)
    return np.abs(np.where(low > 0.5 * high, near, high**exponent - low**exponent))
