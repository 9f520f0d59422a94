"""The largest and the smallest of independent quantities, whatever their laws.

The cdf of the maximum is the product of the cdfs, its ccdf the complement of that product summed in
logarithms; for the minimum the sides change places. Dependent quantities are not treated here.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from outspread.laws.computed_moments import ComputedMoments
from outspread.laws.families.shapes import Moments
from outspread.laws.law import Array, Atoms, Law
from outspread.laws.quantile_moments import quantile_moments
from outspread.numerics.roots import ordinal_middle

INF = float("inf")
Side = Callable[[Array], Array]


class IndependentExtreme(ComputedMoments):
    """Maximum (`largest`) or minimum of independent quantities with the given laws.

    All of them are continuous or all are discrete; ValueError otherwise.
    Source: David and Nagaraja, Order Statistics (2003), section 2.1 (from memory).
    """

    def __init__(self, laws: tuple[Law, ...], *, largest: bool):
        masses = {law.continuous_mass for law in laws}
        if masses not in ({0.0}, {1.0}):
            raise ValueError("the laws must be all continuous or all discrete")
        self.laws, self.largest = laws, largest
        self._mass = masses.pop()
        self.relative_error = 2 * sum(law.relative_error for law in laws) + 1e-14
        self.moment_order = self._order_of_moments()
        self.identical = all(law is laws[0] for law in laws)

    def _order_of_moments(self) -> float:
        """The heaviest tail towards the extreme decides; on the other side the tails multiply."""
        towards, away = [], []
        for law in self.laws:
            low, high = law.support()
            outer, inner = (high, low) if self.largest else (low, high)
            towards.append(law.moment_order if np.isinf(outer) else INF)
            away.append(law.moment_order if np.isinf(inner) else INF)
        return min(min(towards), sum(away))

    def support(self) -> tuple[float, float]:
        choose = max if self.largest else min
        ends = [law.support() for law in self.laws]
        return choose(low for low, _ in ends), choose(high for _, high in ends)

    def _inner(self, law: Law) -> tuple[Side, Side]:
        """The side whose probabilities multiply, and the other one."""
        return (law.cdf, law.ccdf) if self.largest else (law.ccdf, law.cdf)

    def _product(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        return np.asarray(np.prod(np.stack([self._inner(law)[0](x) for law in self.laws]), axis=0))

    def _complement(self, x: npt.ArrayLike) -> Array:
        """1 - Π (1 - c_i) for small c_i, and 1 minus the product where that is small."""
        x = np.asarray(x, float)
        others = np.stack([self._inner(law)[1](x) for law in self.laws])
        inner = np.stack([self._inner(law)[0](x) for law in self.laws])
        with np.errstate(divide="ignore"):
            logs = np.where(others < 0.5, np.log1p(-others), np.log(inner))
        return np.asarray(-np.expm1(np.sum(logs, axis=0)))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._product(x) if self.largest else self._complement(x)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._complement(x) if self.largest else self._product(x)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        sides = [self._inner(law)[0](x) for law in self.laws]
        before = [np.ones_like(x)]
        for side in sides[:-1]:
            before.append(before[-1] * side)
        total, after = np.zeros_like(x), np.ones_like(x)
        for law, left, side in zip(reversed(self.laws), reversed(before), reversed(sides), strict=True):
            with np.errstate(invalid="ignore"):
                part = law.pdf(x) * (left * after)
            total = total + np.where(np.isnan(part), 0.0, part)
            after = after * side
        return np.asarray(total)

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self._quantile(np.asarray(p, float), lower_side=True)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._quantile(np.asarray(q, float), lower_side=False)

    def _quantile(self, p: Array, *, lower_side: bool) -> Array:
        """The point where the cdf (or the ccdf) is p, between quantiles of the parts that enclose it."""
        count = len(self.laws)
        inverse = [law.icdf if lower_side else law.iccdf for law in self.laws]
        with np.errstate(divide="ignore"):
            if self.largest == lower_side:
                shares = np.power(p, 1.0 / count)
            else:
                shares = -np.expm1(np.log1p(-p) / count)
        if self.identical and self._mass == 1.0:
            return np.asarray(inverse[0](shares))
        choose = np.maximum if self.largest else np.minimum
        ends = [
            choose.reduce(np.stack([find(level) for find in inverse])) for level in (p, shares)
        ]
        return self._bisect(p, np.minimum(*ends), np.maximum(*ends), lower_side)

    def _bisect(self, p: Array, low: Array, high: Array, lower_side: bool) -> Array:
        """inf{x: cdf(x) >= p} or inf{x: ccdf(x) <= p} in [low, high], to the last bit."""

        def reached(x: Array) -> npt.NDArray[np.bool_]:
            return np.asarray(self.cdf(x) >= p if lower_side else self.ccdf(x) <= p)

        low, high = np.nextafter(low, -INF), np.where(np.isnan(p), np.nan, np.nextafter(high, INF))
        for _ in range(70):
            middle = ordinal_middle(low, high).reshape(low.shape)
            done = reached(middle)
            low, high = np.where(done, low, middle), np.where(done, middle, high)
            if np.all((np.nextafter(low, INF) >= high) | np.isnan(high)):
                break
        bottom, top = self.support()
        return np.asarray(np.clip(high, bottom, top))

    @property
    def continuous_mass(self) -> float:
        return self._mass

    def atoms(self) -> Atoms:
        if self._mass == 1.0:
            return Atoms.none()
        values = np.unique(np.concatenate([law.atoms().values for law in self.laws]))
        below = np.nextafter(values, -INF)
        inner = [self._inner(law)[0] for law in self.laws]
        # P(X <= x) and P(X < x) for the maximum, P(X > x-) and P(X > x) for the minimum
        first, second = (values, below) if self.largest else (below, values)
        upper = np.stack([side(first) for side in inner])
        lower = np.stack([side(second) for side in inner])
        masses = np.zeros_like(values)
        for i in range(len(self.laws)):
            jump = np.maximum(upper[i] - lower[i], 0.0)
            masses += jump * np.prod(lower[:i], axis=0) * np.prod(upper[i + 1 :], axis=0)
        keep = masses > 0
        return Atoms(values[keep], masses[keep], np.full(int(np.sum(keep)), self.relative_error))

    def breaks(self) -> tuple[float, ...]:
        low, high = self.support()
        points = {end for law in self.laws for end in law.support()}
        points |= {point for law in self.laws for point in law.breaks()}
        return tuple(sorted(point for point in points if low < point < high))

    def singular_ends(self) -> tuple[bool, bool]:
        low, high = self.support()
        own = [(law.support(), law.singular_ends()) for law in self.laws]
        at_low = any(ends[0] == low and singular[0] for ends, singular in own)
        at_high = any(ends[1] == high and singular[1] for ends, singular in own)
        return at_low, at_high

    def compute_moments(self) -> Moments:
        if self._mass == 1.0:
            return quantile_moments(self)
        atoms = self.atoms()
        weights = atoms.masses / np.sum(atoms.masses)
        mean = float(np.sum(weights * atoms.values))
        centred = atoms.values - mean
        variance, third, fourth = (float(np.sum(weights * centred**k)) for k in (2, 3, 4))
        if variance == 0:
            return mean, 0.0, float("nan"), float("nan")
        return mean, variance, third / variance**1.5, fourth / variance**2
