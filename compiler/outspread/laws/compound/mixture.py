"""A mixture: one of several laws, chosen at random with given weights."""

from __future__ import annotations

from functools import cached_property

import numpy as np
import numpy.typing as npt

from outspread.laws.compound.inverse import quantiles
from outspread.laws.computed_moments import ComputedMoments
from outspread.laws.families.shapes import INF, NAN, Moments
from outspread.laws.law import Array, Atoms, Law


class MixtureLaw(ComputedMoments):
    """`weights` above 0 adding up to 1, one for each of `laws`."""

    name = "Mixture"

    def __init__(self, weights: npt.ArrayLike, laws: tuple[Law, ...]):
        self.weights = np.asarray(weights, float)
        self.laws = laws
        self.relative_error = max(law.relative_error for law in laws) + 1e-15
        self.moment_order = min(law.moment_order for law in laws)

    def _sum(self, method: str, *arguments: npt.ArrayLike) -> Array:
        parts = [
            weight * getattr(law, method)(*arguments)
            for weight, law in zip(self.weights, self.laws, strict=True)
        ]
        return np.asarray(sum(parts))

    def support(self) -> tuple[float, float]:
        lows, highs = zip(*(law.support() for law in self.laws), strict=True)
        return (min(lows), max(highs))

    def pdf(self, x: npt.ArrayLike) -> Array:
        return self._sum("pdf", x)

    def cdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return np.asarray(np.where(x >= self.support()[1], 1.0, np.minimum(self._sum("cdf", x), 1.0)))

    def ccdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return np.asarray(np.where(x < self.support()[0], 1.0, np.minimum(self._sum("ccdf", x), 1.0)))

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        return np.asarray(np.minimum(self._sum("between", lower, upper), 1.0))

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self._quantile(p, False)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._quantile(q, True)

    def _quantile(self, p: npt.ArrayLike, upper: bool) -> Array:
        return quantiles(
            self.cdf,
            self.ccdf,
            p,
            lambda p: self._bracket(p, upper),
            self.atoms().values,
            self.support(),
            upper=upper,
        )

    def _bracket(self, p: Array, upper: bool) -> tuple[Array, Array]:
        """Between the least and the greatest of the components' own quantiles."""
        each = [law.iccdf(p) if upper else law.icdf(p) for law in self.laws]
        low, high = np.min(each, axis=0), np.max(each, axis=0)
        # a hair wider: a component's quantile carries its own rounding
        return np.nextafter(low - 1e-14 * np.abs(low), -INF), np.nextafter(high + 1e-14 * np.abs(high), INF)

    def atoms(self) -> Atoms:
        return self._atoms

    @cached_property
    def _atoms(self) -> Atoms:
        each = [law.atoms() for law in self.laws]
        if not any(atoms.values.size for atoms in each):
            return Atoms.none()
        values, index = np.unique(np.concatenate([atoms.values for atoms in each]), return_inverse=True)
        masses = np.concatenate([w * atoms.masses for w, atoms in zip(self.weights, each, strict=True)])
        errors = np.concatenate([w * atoms.errors for w, atoms in zip(self.weights, each, strict=True)])
        return Atoms(
            values,
            np.asarray(np.bincount(index, masses), float),
            np.asarray(np.bincount(index, errors), float),
        )

    @property
    def continuous_mass(self) -> float:
        if not self._atoms.values.size:
            return 1.0
        parts = zip(self.weights, self.laws, strict=True)
        return float(sum(weight * law.continuous_mass for weight, law in parts))

    def tail_orders(self) -> tuple[float, float]:
        firsts, lasts = zip(*(law.tail_orders() for law in self.laws), strict=True)
        return (min(firsts), min(lasts))

    def breaks(self) -> tuple[float, ...]:
        low, high = self.support()
        points = {point for law in self.laws for point in law.breaks()}
        points |= {end for law in self.laws if law.continuous_mass > 0 for end in law.support()}
        return tuple(sorted(point for point in points if low < point < high))

    def singular_ends(self) -> tuple[bool, bool]:
        ends = self.support()
        found = [False, False]
        for law in self.laws:
            for side in (0, 1):
                found[side] |= law.singular_ends()[side] and law.support()[side] == ends[side]
        return (found[0], found[1])

    def compute_moments(self) -> Moments:
        """From the components' central moments, shifted to the common mean (binomial expansion)."""
        means = np.array([law.mean() for law in self.laws])
        variances = np.array([law.variance() for law in self.laws])
        mean = float(self.weights @ means)
        if not np.isfinite(mean):
            return (mean, NAN, NAN, NAN)
        shift = means - mean
        variance = float(self.weights @ (variances + shift**2))
        if not np.isfinite(variance) or variance == 0:
            return (mean, variance, NAN, NAN)
        spread = np.sqrt(variances)
        fixed = variances == 0  # a component without spread has no skewness, and its central moments are 0
        third = np.array([0.0 if f else law.skewness() for f, law in zip(fixed, self.laws, strict=True)])
        fourth = np.array([0.0 if f else law.kurtosis() for f, law in zip(fixed, self.laws, strict=True)])
        third, fourth = third * spread**3, fourth * spread**4
        with np.errstate(invalid="ignore"):
            total3 = self.weights @ (third + 3 * shift * variances + shift**3)
            total4 = self.weights @ (fourth + 4 * shift * third + 6 * shift**2 * variances + shift**4)
        if np.isinf(np.sum(third)):
            total4 = NAN if np.isnan(total4) else total4
        return (mean, variance, float(total3 / variance**1.5), float(total4 / variance**2))
