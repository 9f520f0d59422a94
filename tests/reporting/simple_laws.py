"""Laws for the report's fixtures, from the standard library alone: no engine is needed."""

from __future__ import annotations

import math
from statistics import NormalDist

import numpy as np

from outspread.laws.law import Atoms, Law

_erfc = np.vectorize(math.erfc, otypes=[float])
_inverse = np.vectorize(NormalDist().inv_cdf, otypes=[float])


def _quantile(p):
    p = np.asarray(p, float)
    inside = np.clip(p, 1e-300, 1 - 1e-16)
    return np.where(p <= 0, -np.inf, np.where(p >= 1, np.inf, _inverse(inside)))


class NormalLaw(Law):
    def __init__(self, mu, sigma):
        self.mu, self.sigma = mu, sigma
        self.family, self.parameters = "normal", {"mean": mu, "sd": sigma}

    def support(self):
        return (-math.inf, math.inf)

    def _z(self, x):
        return (np.asarray(x, float) - self.mu) / self.sigma

    def pdf(self, x):
        with np.errstate(under="ignore"):
            return np.exp(-(self._z(x) ** 2) / 2) / (self.sigma * math.sqrt(2 * math.pi))

    def cdf(self, x):
        return _erfc(-self._z(x) / math.sqrt(2)) / 2

    def ccdf(self, x):
        return _erfc(self._z(x) / math.sqrt(2)) / 2

    def icdf(self, p):
        return self.mu + self.sigma * _quantile(p)

    def iccdf(self, q):
        return self.mu - self.sigma * _quantile(q)

    def mean(self):
        return self.mu

    def variance(self):
        return self.sigma**2

    def skewness(self):
        return 0.0

    def kurtosis(self):
        return 3.0


class ClippedNormalLaw(NormalLaw):
    """max(X, 0) of a normal X: an atom at 0."""

    def support(self):
        return (0.0, math.inf)

    def pdf(self, x):
        return np.where(np.asarray(x, float) > 0, super().pdf(x), 0.0)

    def cdf(self, x):
        return np.where(np.asarray(x, float) >= 0, super().cdf(x), 0.0)

    def ccdf(self, x):
        return np.where(np.asarray(x, float) >= 0, super().ccdf(x), 1.0)

    def icdf(self, p):
        return np.maximum(super().icdf(p), 0.0)

    def iccdf(self, q):
        return np.maximum(super().iccdf(q), 0.0)

    def atoms(self):
        return Atoms(np.zeros(1), super().cdf(np.zeros(1)), np.full(1, 1e-14))

    @property
    def continuous_mass(self):
        return float(super().ccdf(0.0))

    def mean(self):
        z = self.mu / self.sigma
        return float(self.mu * super().ccdf(0.0) + self.sigma * math.exp(-z * z / 2) / math.sqrt(2 * math.pi))

    def variance(self):
        second = (self.mu**2 + self.sigma**2) * float(super().ccdf(0.0))
        z = self.mu / self.sigma
        second += self.mu * self.sigma * math.exp(-z * z / 2) / math.sqrt(2 * math.pi)
        return second - self.mean() ** 2

    def skewness(self):
        return 0.9

    def kurtosis(self):
        return 4.1


class PoissonLaw(Law):
    def __init__(self, rate):
        self.rate = rate
        self.family, self.parameters = "poisson", {"mean": rate}
        self.points = np.arange(0, 60, dtype=float)
        self.masses = np.array([math.exp(k * math.log(rate) - rate - math.lgamma(k + 1)) for k in range(60)])

    def support(self):
        return (0.0, math.inf)

    @property
    def continuous_mass(self):
        return 0.0

    def atoms(self):
        return Atoms(self.points, self.masses, self.masses * 1e-14)

    def pdf(self, x):
        return np.zeros(np.shape(x))

    def cdf(self, x):
        x = np.asarray(x, float)
        return np.array([self.masses[self.points <= v].sum() for v in x.ravel()]).reshape(x.shape)

    def ccdf(self, x):
        x = np.asarray(x, float)
        return np.array([self.masses[self.points > v].sum() for v in x.ravel()]).reshape(x.shape)

    def icdf(self, p):
        return self.points[np.minimum(np.searchsorted(np.cumsum(self.masses), np.asarray(p, float)), 59)]

    def iccdf(self, q):
        return self.icdf(1 - np.asarray(q, float))

    def mean(self):
        return self.rate

    def variance(self):
        return self.rate

    def skewness(self):
        return self.rate**-0.5

    def kurtosis(self):
        return 3 + 1 / self.rate


class CauchyLaw(Law):
    """Ratio of two centred normals: no moment exists."""

    def support(self):
        return (-math.inf, math.inf)

    def pdf(self, x):
        return 1 / (math.pi * (1 + np.asarray(x, float) ** 2))

    def cdf(self, x):
        return np.arctan2(1.0, -np.asarray(x, float)) / math.pi

    def ccdf(self, x):
        return np.arctan2(1.0, np.asarray(x, float)) / math.pi

    def icdf(self, p):
        return -1 / np.tan(math.pi * np.asarray(p, float))

    def iccdf(self, q):
        return -self.icdf(q)

    def mean(self):
        return math.nan

    def variance(self):
        return math.nan

    def skewness(self):
        return math.nan

    def kurtosis(self):
        return math.nan


class ArcsineLaw(Law):
    """On (0, 1): the density is unbounded at both ends."""

    def support(self):
        return (0.0, 1.0)

    def singular_ends(self):
        return (True, True)

    def pdf(self, x):
        x = np.asarray(x, float)
        with np.errstate(all="ignore"):
            inside = 1 / (math.pi * np.sqrt(x * (1 - x)))
        return np.where((x < 0) | (x > 1), 0.0, inside)

    def cdf(self, x):
        return 2 / math.pi * np.arcsin(np.sqrt(np.clip(np.asarray(x, float), 0, 1)))

    def ccdf(self, x):
        return self.cdf(1 - np.asarray(x, float))

    def icdf(self, p):
        return np.sin(math.pi * np.asarray(p, float) / 2) ** 2

    def iccdf(self, q):
        return self.icdf(1 - np.asarray(q, float))

    def mean(self):
        return 0.5

    def variance(self):
        return 0.125

    def skewness(self):
        return 0.0

    def kurtosis(self):
        return 1.5
