"""The law of a monotone map of a quantity whose law is known: a + b X, X^p, log X, exp X.

Tails keep their relative accuracy: a decreasing map swaps cdf and ccdf, nothing is computed as 1 - cdf.
Maps that are not monotone are a matter of the route over the branches of the inverse.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.laws.computed_moments import ComputedMoments
from outspread.laws.families.shapes import Moments
from outspread.laws.law import Array, Atoms, Law
from outspread.laws.quantile_moments import quantile_moments

INF = float("inf")
#: more than the slack with which discrete laws compare a probability with their steps
_NUDGE = 10 * float(np.finfo(float).eps)


class AffineLaw(Law):
    """The law of shift + scale * X, where X has the law `base` and scale is not 0."""

    def __init__(self, base: Law, scale: float, shift: float = 0.0):
        if scale == 0 or not np.isfinite(scale) or not np.isfinite(shift):
            raise ValueError("scale must be finite and not 0, shift finite")
        self.base, self.scale, self.shift = base, float(scale), float(shift)
        self.relative_error = base.relative_error
        self.moment_order = base.moment_order
        self._lattice = base.continuous_mass < 1

    def _back(self, y: npt.ArrayLike) -> Array:
        """The x that is mapped to y; next to an atom of a law with atoms, that atom."""
        y = np.asarray(y, float)
        with np.errstate(over="ignore", invalid="ignore"):
            x = np.asarray((y - self.shift) / self.scale)
        points = self.base.atoms().values if self._lattice else np.zeros(0)
        if not points.size:
            return x
        right = np.clip(np.searchsorted(points, x), 0, points.size - 1)
        left = np.maximum(right - 1, 0)
        nearest = np.where(np.abs(points[left] - x) <= np.abs(points[right] - x), points[left], points[right])
        image = self._forth(nearest)
        rounding = 4 * np.spacing(np.maximum(np.abs(image), abs(self.shift)))
        return np.asarray(np.where(np.abs(image - y) <= rounding, nearest, x))

    def _forth(self, x: npt.ArrayLike) -> Array:
        return np.asarray(self.shift + self.scale * np.asarray(x, float))

    def support(self) -> tuple[float, float]:
        low, high = sorted(float(self._forth(end)) for end in self.base.support())
        return low, high

    def pdf(self, x: npt.ArrayLike) -> Array:
        return np.asarray(self.base.pdf(self._back(x)) / abs(self.scale))

    def _below(self, x: Array) -> Array:
        """P(X < x)."""
        return self.base.cdf(np.nextafter(x, -INF)) if self._lattice else self.base.cdf(x)

    def _from(self, x: Array) -> Array:
        """P(X >= x)."""
        return self.base.ccdf(np.nextafter(x, -INF)) if self._lattice else self.base.ccdf(x)

    def cdf(self, x: npt.ArrayLike) -> Array:
        back = self._back(x)
        return self.base.cdf(back) if self.scale > 0 else self._from(back)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        back = self._back(x)
        return self.base.ccdf(back) if self.scale > 0 else self._below(back)

    def icdf(self, p: npt.ArrayLike) -> Array:
        if self.scale > 0:
            return self._forth(self.base.icdf(p))
        # at a jump of the base's ccdf, a slightly smaller probability picks the point on the other side
        p = np.asarray(p, float)
        return self._forth(self.base.iccdf(p * (1 - _NUDGE) if self._lattice else p))

    def iccdf(self, q: npt.ArrayLike) -> Array:
        if self.scale > 0:
            return self._forth(self.base.iccdf(q))
        q = np.asarray(q, float)
        return self._forth(self.base.icdf(np.minimum(q * (1 + _NUDGE), 1.0) if self._lattice else q))

    def atoms(self) -> Atoms:
        atoms = self.base.atoms()
        step = 1 if self.scale > 0 else -1
        return Atoms(self._forth(atoms.values)[::step], atoms.masses[::step], atoms.errors[::step])

    @property
    def continuous_mass(self) -> float:
        return self.base.continuous_mass

    def breaks(self) -> tuple[float, ...]:
        return tuple(sorted(float(self._forth(point)) for point in self.base.breaks()))

    def singular_ends(self) -> tuple[bool, bool]:
        lower, upper = self.base.singular_ends()
        return (lower, upper) if self.scale > 0 else (upper, lower)

    def mean(self) -> float:
        return float(self.shift + self.scale * self.base.mean())

    def variance(self) -> float:
        return float(self.scale**2 * self.base.variance())

    def skewness(self) -> float:
        return float(np.sign(self.scale) * self.base.skewness())

    def kurtosis(self) -> float:
        return self.base.kurtosis()


Function = Callable[[Array], Array]


@dataclass(frozen=True)
class Map:
    """A strictly monotone map: y = forward(x), x = inverse(y), slope(y) = |dx/dy|."""

    name: str
    forward: Function
    inverse: Function
    slope: Function
    increasing: bool = True


def power_map(exponent: float) -> Map:
    """x^exponent of x > 0."""
    inverse = 1.0 / exponent

    def forward(x: Array) -> Array:
        return np.asarray(np.sqrt(x) if exponent == 0.5 else np.power(x, exponent))

    def backward(y: Array) -> Array:
        return np.asarray(np.square(y) if exponent == 0.5 else np.power(y, inverse))

    return Map(
        "power", forward, backward, lambda y: np.abs(inverse) * np.power(y, inverse - 1.0), exponent > 0
    )


LOG_MAP = Map("log", np.log, np.exp, np.exp)
EXP_MAP = Map("exp", np.exp, np.log, lambda y: 1.0 / y)


class Transformed(ComputedMoments):
    """The law of a monotone map of X, where X has the continuous law `base`.

    `ends` is the support of the result, `singular` says at which of its ends the density is unbounded,
    `moment_order` as in Law. Moments are integrals over the quantile function (`moments`).
    """

    def __init__(
        self,
        base: Law,
        mapping: Map,
        ends: tuple[float, float],
        *,
        singular: tuple[bool, bool] = (False, False),
        moment_order: float = INF,
    ):
        self.base, self.map = base, mapping
        self._ends, self._singular = ends, singular
        self.moment_order = moment_order
        # the map and its inverse round once each, which a steep tail multiplies
        self.relative_error = max(1e-12, 4 * base.relative_error)

    def _inside(self, y: npt.ArrayLike, function: Function, below: float, above: float) -> Array:
        y = np.asarray(y, float)
        low, high = self._ends
        held = np.where((y > low) & (y < high), y, np.nan)
        with np.errstate(all="ignore"):
            inside = function(held)
        return np.asarray(np.where(y <= low, below, np.where(y >= high, above, inside)))

    def support(self) -> tuple[float, float]:
        return self._ends

    def pdf(self, x: npt.ArrayLike) -> Array:
        def density(y: Array) -> Array:
            return np.asarray(self.base.pdf(self.map.inverse(y)) * self.map.slope(y))

        x = np.asarray(x, float)
        low, high = self._ends
        at_ends = []
        for end, unbounded in zip((low, high), self._singular, strict=True):
            inner = np.nextafter(end, INF if end == low else -INF) if np.isfinite(end) else end
            limit = 0.0 if not np.isfinite(end) else float(self._inside(inner, density, 0.0, 0.0))
            at_ends.append(INF if unbounded else limit)
        inside = self._inside(x, density, 0.0, 0.0)
        value = np.where(x == low, at_ends[0], np.where(x == high, at_ends[1], inside))
        return np.asarray(np.where(np.isinf(x), 0.0, value))

    def cdf(self, x: npt.ArrayLike) -> Array:
        side = self.base.cdf if self.map.increasing else self.base.ccdf
        return self._inside(x, lambda y: side(self.map.inverse(y)), 0.0, 1.0)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        side = self.base.ccdf if self.map.increasing else self.base.cdf
        return self._inside(x, lambda y: side(self.map.inverse(y)), 1.0, 0.0)

    def icdf(self, p: npt.ArrayLike) -> Array:
        with np.errstate(all="ignore"):
            return np.asarray(
                self.map.forward(self.base.icdf(p) if self.map.increasing else self.base.iccdf(p))
            )

    def iccdf(self, q: npt.ArrayLike) -> Array:
        with np.errstate(all="ignore"):
            return np.asarray(
                self.map.forward(self.base.iccdf(q) if self.map.increasing else self.base.icdf(q))
            )

    def breaks(self) -> tuple[float, ...]:
        points = np.asarray(self.base.breaks(), float)
        with np.errstate(all="ignore"):
            images = self.map.forward(points)
        return tuple(float(y) for y in np.sort(images) if self._ends[0] < y < self._ends[1])

    def singular_ends(self) -> tuple[bool, bool]:
        return self._singular

    def compute_moments(self) -> Moments:
        return quantile_moments(self)


@dataclass(frozen=True)
class PowerTail:
    """P(X <= x) is exp(constant) x^exponent near 0, or P(X > x) is exp(constant) x^-exponent far out."""

    exponent: float
    constant: float


class LogLaw(Transformed):
    """The law of ln X for X > 0 with a power law at 0, and perhaps at infinity.

    Beyond `far` on the logarithmic scale the power law holds to rounding; it carries the tails on where X
    itself would underflow or overflow.
    """

    def __init__(self, base: Law, lower: PowerTail, upper: PowerTail | None = None, far: float = 40.0):
        super().__init__(base, LOG_MAP, (-INF, INF))
        self._lower, self._upper, self._far = lower, upper, far

    def _joined(
        self, y: npt.ArrayLike, middle: Function, below: Function | None, above: Function | None
    ) -> Array:
        """`middle` between -far and far, `below` and `above` (where given) beyond."""
        y = np.asarray(y, float)
        value = np.asarray(middle(y))
        with np.errstate(all="ignore"):
            if below is not None:
                value = np.where(y < -self._far, below(y), value)
            if above is not None:
                value = np.where(y > self._far, above(y), value)
        return np.asarray(value)

    def _tail(self, tail: PowerTail | None, factor: bool = False) -> Function | None:
        if tail is None:
            return None
        scale = tail.exponent if factor else 1.0
        return lambda y: np.asarray(scale * np.exp(tail.constant - tail.exponent * np.abs(y)))

    def pdf(self, x: npt.ArrayLike) -> Array:
        return self._joined(x, super().pdf, self._tail(self._lower, True), self._tail(self._upper, True))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._joined(x, super().cdf, self._tail(self._lower), None)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._joined(x, super().ccdf, None, self._tail(self._upper))

    def _quantile(self, p: npt.ArrayLike, middle: Function, tail: PowerTail | None) -> Array:
        """|y| from the power law where it is beyond `far`, else `middle`."""
        p = np.asarray(p, float)
        value = np.asarray(middle(p))
        if tail is None:
            return value
        with np.errstate(all="ignore"):
            distance = (tail.constant - np.log(p)) / tail.exponent
        sign = -1.0 if tail is self._lower else 1.0
        return np.asarray(np.where(distance > self._far, sign * distance, value))

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self._quantile(p, super().icdf, self._lower)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self._quantile(q, super().iccdf, self._upper)
