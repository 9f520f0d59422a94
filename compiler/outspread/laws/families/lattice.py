"""Frame for laws on whole numbers and on a finite set of points; no family is defined here."""

from __future__ import annotations

from abc import abstractmethod

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.laws.families.shapes import EPSILON, INF, NAN, Moments
from outspread.laws.law import Array, Atoms, Law

#: atoms are listed up to here on either side, in tail probability
SMALLEST_TAIL = 1e-300
#: more atoms than this are not listed
MOST_ATOMS = 4_000_000


class LatticeLaw(Law):
    """A law on the whole numbers from `first` to `last` (may be infinite).

    A family gives its mass and tails at whole k inside, as one-dimensional arrays.
    """

    first: float = 0.0
    last: float = INF

    @abstractmethod
    def mass(self, k: Array) -> Array:
        """P(X = k)."""

    @abstractmethod
    def up_to(self, k: Array) -> Array:
        """P(X <= k) for first <= k < last."""

    @abstractmethod
    def beyond(self, k: Array) -> Array:
        """P(X > k) for first <= k < last."""

    @abstractmethod
    def moments(self) -> Moments: ...

    @property
    def continuous_mass(self) -> float:
        return 0.0

    def support(self) -> tuple[float, float]:
        return (self.first, self.last)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return np.asarray(np.where(np.isnan(x), NAN, 0.0))

    def _steps(self, x: npt.ArrayLike, upwards: bool) -> Array:
        x = np.asarray(x, float)
        k = np.atleast_1d(np.floor(x)).ravel()
        low, high = (0.0, 1.0) if upwards else (1.0, 0.0)
        result = np.where(k < self.first, low, np.where(k >= self.last, high, NAN))
        within = (k >= self.first) & (k < self.last) & np.isfinite(k)
        with np.errstate(all="ignore"):
            result[within] = np.clip((self.up_to if upwards else self.beyond)(k[within]), 0.0, 1.0)
        return np.asarray(result.reshape(x.shape))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._steps(x, True)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._steps(x, False)

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        goal = np.where((p >= 0) & (p <= 1), p, NAN) * (1 - 4 * EPSILON)
        found = self._search(np.atleast_1d(goal).ravel(), lambda k, goal: self.cdf(k) >= goal)
        return np.asarray(np.where(p == 0, self.first, np.where(p == 1, self.last, found.reshape(p.shape))))

    def iccdf(self, q: npt.ArrayLike) -> Array:
        q = np.asarray(q, float)
        goal = np.where((q >= 0) & (q <= 1), q, NAN) * (1 + 4 * EPSILON)
        found = self._search(np.atleast_1d(goal).ravel(), lambda k, goal: self.ccdf(k) <= goal)
        return np.asarray(np.where(q == 1, self.first, np.where(q == 0, self.last, found.reshape(q.shape))))

    def _search(self, goal: Array, reached: object) -> Array:
        """Smallest whole k for which `reached(k, goal)`, by doubling and bisection on whole numbers."""
        assert callable(reached)
        low = np.full(goal.shape, self.first - 1)
        step = np.ones(goal.shape)
        high = np.minimum(low + step, self.last)
        defined = np.isfinite(goal)
        while True:
            short = defined & (high < min(self.last, 2.0**53)) & ~reached(high, goal)
            if not np.any(short):
                break
            low = np.where(short, high, low)
            step = np.where(short, 2 * step, step)
            high = np.where(short, np.minimum(low + step, self.last), high)
        while np.any(high - low > 1):
            middle = np.floor(0.5 * (low + high))
            there = reached(middle, goal) | (high - low <= 1)
            high = np.where(there & (high - low > 1), middle, high)
            low = np.where(there, low, middle)
        return np.asarray(np.where(defined, high, NAN))

    def atoms(self) -> Atoms:
        first, last = float(self.icdf(SMALLEST_TAIL)), min(float(self.iccdf(SMALLEST_TAIL)), self.last)
        if not last - first < MOST_ATOMS:
            raise LawError(
                f"the distribution has more than {MOST_ATOMS:,} points, and a continuous one would be right"
            )
        k = np.arange(first, last + 1)
        with np.errstate(all="ignore"):
            masses = self.mass(k)
        kept = masses > 0
        return Atoms(k[kept], masses[kept], masses[kept] * self.relative_error)

    def mean(self) -> float:
        return float(self.moments()[0])

    def variance(self) -> float:
        return float(self.moments()[1])

    def skewness(self) -> float:
        return float(self.moments()[2])

    def kurtosis(self) -> float:
        return float(self.moments()[3])


class PointLaw(Law):
    """A law on finitely many points: `values` ascending and distinct, `masses` summing to 1."""

    relative_error = 1e-14

    def __init__(self, values: npt.ArrayLike, masses: npt.ArrayLike):
        self.values = np.asarray(values, float)
        self.masses = np.asarray(masses, float)
        rising, falling = np.cumsum(self.masses), np.cumsum(self.masses[::-1])[::-1]
        #: probability up to and including, and beyond, each point; index 0 stands for "before all points"
        self._up_to = np.concatenate(([0.0], rising[:-1], [1.0]))
        self._beyond = np.concatenate(([1.0], falling[1:], [0.0]))

    @property
    def continuous_mass(self) -> float:
        return 0.0

    def support(self) -> tuple[float, float]:
        return (float(self.values[0]), float(self.values[-1]))

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return np.asarray(np.where(np.isnan(x), NAN, 0.0))

    def _at(self, table: Array, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return np.asarray(np.where(np.isnan(x), NAN, table[np.searchsorted(self.values, x, side="right")]))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._at(self._up_to, x)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._at(self._beyond, x)

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        index = np.searchsorted(self._up_to[1:], p * (1 - 4 * EPSILON), side="left")
        value = self.values[np.minimum(index, len(self.values) - 1)]
        return np.asarray(np.where((p >= 0) & (p <= 1), value, NAN))

    def iccdf(self, q: npt.ArrayLike) -> Array:
        q = np.asarray(q, float)
        # -beyond ascends: the first point whose ccdf is at most q
        index = np.searchsorted(-self._beyond[1:], -q * (1 + 4 * EPSILON), side="left")
        value = self.values[np.minimum(index, len(self.values) - 1)]
        return np.asarray(np.where((q >= 0) & (q <= 1), value, NAN))

    def atoms(self) -> Atoms:
        kept = self.masses > 0
        return Atoms(self.values[kept], self.masses[kept], self.masses[kept] * self.relative_error)

    def _central(self, order: int) -> float:
        deviations = self.values - self.mean()
        return float(np.sum(self.masses * deviations**order))

    def mean(self) -> float:
        return float(np.sum(self.masses * self.values))

    def variance(self) -> float:
        return self._central(2)

    def skewness(self) -> float:
        variance = self.variance()
        return self._central(3) / variance**1.5 if variance > 0 else NAN

    def kurtosis(self) -> float:
        variance = self.variance()
        return self._central(4) / variance**2 if variance > 0 else NAN
