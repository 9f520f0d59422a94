"""The law of a sum of independent uniform variables: a B-spline, accurate relative to itself in both tails.

Equal widths: the recurrence of cardinal B-splines, whose terms are all positive (de Boor 1972; the
Irwin–Hall distribution). Unequal widths: the piecewise polynomial with coefficients from exact fractions.
The upper half is the mirror image of the lower one.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb, factorial

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Law
from outspread.numerics.roots import ordinal_middle

INF = float("inf")
#: more knots than this are not tabulated
MOST_KNOTS = 130


def _signed_knots(widths: tuple[Fraction, ...]) -> dict[Fraction, int]:
    """Subset sums with the signed number of subsets that give them; raises ValueError beyond MOST_KNOTS."""
    knots = {Fraction(0): 1}
    for width in widths:
        moved = {knot + width: -count for knot, count in knots.items()}
        for knot, count in moved.items():
            knots[knot] = knots.get(knot, 0) + count
        if len(knots) > MOST_KNOTS:
            raise ValueError(f"more than {MOST_KNOTS} knots")
    return dict(sorted(knots.items()))


def cardinal_spline(order: int, x: Array) -> Array:
    """The B-spline of the given order (density of a sum of `order` standard uniforms) at x."""
    values = [np.where((x - k >= 0) & (x - k < 1), 1.0, 0.0) for k in range(order)]
    for n in range(2, order + 1):
        values = [
            ((x - k) * values[k] + (n - (x - k)) * values[k + 1]) / (n - 1) for k in range(order - n + 1)
        ]
    return np.asarray(values[0])


class UniformSum(Law):
    """The law of Σ w_i U_i with U_i uniform on (0, 1) and independent, all w_i > 0, at least two of them.

    Raises ValueError where the widths are unequal and give more than MOST_KNOTS knots.
    """

    relative_error = 1e-12

    def __init__(self, widths: tuple[Fraction, ...]):
        if len(widths) < 2 or min(widths) <= 0:
            raise ValueError("two or more positive widths are needed")
        self.widths = widths
        self.count = len(widths)
        self.equal = max(widths) == min(widths)
        self.width = float(widths[0])
        self.total = float(sum(widths))
        self._knots = _signed_knots(widths)
        self._edges = np.array([float(knot) for knot in self._knots])
        if not self.equal:
            self._density = self._pieces(self.count - 1)
            self._integral = self._pieces(self.count)

    def _pieces(self, degree: int) -> Array:
        """Taylor coefficients at each knot of the lower half, lowest order first."""
        knots = list(self._knots.items())
        volume = Fraction(factorial(degree))
        for width in self.widths:
            volume *= width
        half = sum(self.widths) / 2
        rows = []
        for position, (start, _) in enumerate(knots):
            if start > half:
                break
            row = [Fraction(0)] * (degree + 1)
            for knot, count in knots[: position + 1]:
                distance = start - knot
                for k in range(degree + 1):
                    row[k] += count * comb(degree, k) * distance ** (degree - k)
            rows.append([float(value / volume) for value in row])
        return np.array(rows)

    def support(self) -> tuple[float, float]:
        return (0.0, self.total)

    def _evaluate(self, table: Array, x: Array) -> Array:
        piece = np.clip(np.searchsorted(self._edges, x, side="right") - 1, 0, len(table) - 1)
        t = x - self._edges[piece]
        value = np.zeros_like(x)
        for k in range(table.shape[1] - 1, -1, -1):
            value = value * t + table[piece, k]
        return value

    def _lower_cdf(self, x: Array) -> Array:
        """The cdf for x in the lower half."""
        x = np.clip(x, 0.0, self.total / 2)
        if not self.equal:
            return self._evaluate(self._integral, x)
        u = x / self.width
        parts = [cardinal_spline(self.count + 1, u - k) for k in range(self.count // 2 + 1)]
        return np.asarray(sum(parts, np.zeros_like(u)))

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        inside = (x >= 0) & (x <= self.total)
        low = np.clip(np.minimum(x, self.total - x), 0.0, self.total / 2)
        if self.equal:
            value = cardinal_spline(self.count, low / self.width) / self.width
        else:
            value = self._evaluate(self._density, low)
        return np.asarray(np.where(inside, value, np.where(np.isnan(x), np.nan, 0.0)))

    def _tail(self, x: Array) -> Array:
        """P(S <= x); the complement of the mirrored tail above the middle."""
        middle = self.total / 2
        low = self._lower_cdf(np.minimum(x, middle))
        high = 1.0 - self._lower_cdf(self.total - np.maximum(x, middle))
        value = np.where(x <= middle, low, high)
        value = np.where(x <= 0, 0.0, np.where(x >= self.total, 1.0, value))
        return np.asarray(np.where(np.isnan(x), np.nan, value))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._tail(np.asarray(x, float))

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._tail(self.total - np.asarray(x, float))

    def _quantile(self, p: Array) -> Array:
        """The x with P(S <= x) = p for p <= 1/2."""
        low, high = np.zeros_like(p), np.full_like(p, self.total / 2)
        for _ in range(70):
            middle = ordinal_middle(low, high).reshape(p.shape)
            reached = self._lower_cdf(middle) >= p
            low, high = np.where(reached, low, middle), np.where(reached, middle, high)
        return np.asarray(np.where(p <= 0, 0.0, high))

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        small = np.clip(np.where(p <= 0.5, p, 1.0 - p), 0.0, 0.5)
        x = self._quantile(small)
        x = np.where(p <= 0.5, x, self.total - x)
        return np.asarray(np.where((p >= 0) & (p <= 1), x, np.nan))

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return np.asarray(self.total - self.icdf(q))

    def breaks(self) -> tuple[float, ...]:
        return tuple(float(edge) for edge in self._edges[1:-1])

    def mean(self) -> float:
        return self.total / 2

    def variance(self) -> float:
        return float(sum(width**2 for width in self.widths) / 12)

    def skewness(self) -> float:
        return 0.0

    def kurtosis(self) -> float:
        second = sum(width**2 for width in self.widths)
        fourth = sum(width**4 for width in self.widths)
        return float(3 - Fraction(6, 5) * Fraction(fourth) / Fraction(second) ** 2)
