"""Laws from points: a density or distribution function that is linear between them, and histograms."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.laws.families.shapes import EPSILON, NAN
from outspread.laws.law import Array, Law

#: how far the integral of a tabulated density may be from 1: tables carry rounded figures
NORMALISED_TO = 1e-6


class PiecewiseLinearLaw(Law):
    """Density linear on each panel between `edges`, from `left` to `right` (jumps between panels allowed)."""

    relative_error = 1e-13

    def __init__(self, edges: Array, left: Array, right: Array):
        self.edges = edges
        self.widths = np.diff(edges)
        masses = 0.5 * (left + right) * self.widths
        total = float(np.sum(masses))
        self.left, self.right, self.masses = left / total, right / total, masses / total
        self.below = np.concatenate(([0.0], np.cumsum(self.masses)))
        self.above = np.concatenate((np.cumsum(self.masses[::-1])[::-1], [0.0]))

    def support(self) -> tuple[float, float]:
        present = np.flatnonzero(self.masses > 0)
        return (float(self.edges[present[0]]), float(self.edges[present[-1] + 1]))

    def _panel(self, x: Array) -> npt.NDArray[np.int64]:
        return np.clip(np.searchsorted(self.edges, x, side="right") - 1, 0, self.masses.size - 1)

    def _linear(self, i: npt.NDArray[np.int64], x: Array) -> Array:
        share = (x - self.edges[i]) / self.widths[i]
        return np.asarray(self.left[i] * (1 - share) + self.right[i] * share)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        low, high = self.support()
        inside = (x >= low) & (x <= high)
        value = self._linear(self._panel(np.where(inside, x, low)), np.where(inside, x, low))
        return np.asarray(np.where(np.isnan(x), NAN, np.where(inside, value, 0.0)))

    def cdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        low, high = self.support()
        z = np.clip(np.nan_to_num(x, nan=low), low, high)
        i = self._panel(z)
        part = 0.5 * (self.left[i] + self._linear(i, z)) * (z - self.edges[i])
        value = np.where(x >= high, 1.0, np.where(x <= low, 0.0, np.minimum(self.below[i] + part, 1.0)))
        return np.asarray(np.where(np.isnan(x), NAN, value))

    def ccdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        low, high = self.support()
        z = np.clip(np.nan_to_num(x, nan=low), low, high)
        i = self._panel(z)
        part = 0.5 * (self._linear(i, z) + self.right[i]) * (self.edges[i + 1] - z)
        value = np.where(x >= high, 0.0, np.where(x <= low, 1.0, np.minimum(self.above[i + 1] + part, 1.0)))
        return np.asarray(np.where(np.isnan(x), NAN, value))

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        lower, upper = np.broadcast_arrays(np.asarray(lower, float), np.asarray(upper, float))
        low, high = self.support()
        a, b = np.clip(lower, low, high), np.clip(upper, low, high)
        i, j = self._panel(a), self._panel(b)
        one = 0.5 * (self._linear(i, a) + self._linear(i, b)) * (b - a)
        first = 0.5 * (self._linear(i, a) + self.right[i]) * (self.edges[i + 1] - a)
        last = 0.5 * (self.left[j] + self._linear(j, b)) * (b - self.edges[j])
        k = np.minimum(i + 1, j)
        middle = np.where(self.below[j] < 0.5, self.below[j] - self.below[k], self.above[k] - self.above[j])
        value = np.where(i == j, one, first + np.maximum(middle, 0.0) + last)
        return np.asarray(np.where(b > a, np.minimum(value, 1.0), 0.0))

    def icdf(self, p: npt.ArrayLike) -> Array:
        p = np.asarray(p, float)
        goal = np.where((p >= 0) & (p <= 1), p, 0.0)
        i = np.clip(
            np.searchsorted(self.below, goal * (1 - EPSILON), side="left") - 1, 0, self.masses.size - 1
        )
        rest = np.clip(goal - self.below[i], 0.0, self.masses[i])
        x = self.edges[i] + self._distance(rest, self.left[i], self.right[i], self.widths[i])
        low, high = self.support()
        x = np.where(p == 0, low, np.where(p == 1, high, np.clip(x, low, high)))
        return np.asarray(np.where((p >= 0) & (p <= 1), x, NAN))

    def iccdf(self, q: npt.ArrayLike) -> Array:
        q = np.asarray(q, float)
        goal = np.where((q >= 0) & (q <= 1), q, 0.0)
        i = np.clip(
            np.searchsorted(-self.above, -goal * (1 - EPSILON), side="right") - 1, 0, self.masses.size - 1
        )
        rest = np.clip(goal - self.above[i + 1], 0.0, self.masses[i])
        x = self.edges[i + 1] - self._distance(rest, self.right[i], self.left[i], self.widths[i])
        low, high = self.support()
        x = np.where(q == 0, high, np.where(q == 1, low, np.clip(x, low, high)))
        return np.asarray(np.where((q >= 0) & (q <= 1), x, NAN))

    @staticmethod
    def _distance(mass: Array, near: Array, far: Array, width: Array) -> Array:
        """t with near t + (far - near) t² / (2 width) = mass, by the form that does not cancel."""
        with np.errstate(all="ignore"):
            root = np.sqrt(np.maximum(near * near + 2 * mass * (far - near) / width, 0.0))
            t = 2 * mass / (near + root)
        return np.asarray(np.minimum(np.nan_to_num(t), width))

    def breaks(self) -> tuple[float, ...]:
        low, high = self.support()
        return tuple(float(edge) for edge in self.edges if low < edge < high)

    def _central(self, about: float, order: int) -> float:
        """Three Gauss points a panel: exact for (x - about)^4 times a linear density."""
        nodes, weights = np.polynomial.legendre.leggauss(4)
        share = 0.5 * (1 + nodes)
        x = self.edges[:-1, None] + self.widths[:, None] * share
        density = self.left[:, None] * (1 - share) + self.right[:, None] * share
        return float(np.sum(0.5 * self.widths[:, None] * weights * density * (x - about) ** order))

    def mean(self) -> float:
        middle = float(self.edges[self.edges.size // 2])
        return middle + self._central(middle, 1)

    def variance(self) -> float:
        return self._central(self.mean(), 2)

    def skewness(self) -> float:
        return float(self._central(self.mean(), 3) / self.variance() ** 1.5)

    def kurtosis(self) -> float:
        return self._central(self.mean(), 4) / self.variance() ** 2


def _columns(
    first: str, second: str, x: Sequence[float], y: Sequence[float], more: int = 0
) -> tuple[Array, Array]:
    points, values = np.asarray(x, float), np.asarray(y, float)
    if points.size < 2 or points.size != values.size + more:
        wanted = "one more edge than counts" if more else "as many of the one as of the other"
        raise LawError(
            f"{first} has {points.size} and {second} has {values.size} entries,"
            f" and {wanted}, 2 {first} at least, would be right",
            second,
        )
    if not (np.all(np.isfinite(points)) and np.all(np.isfinite(values))):
        raise LawError(f"{first} and {second} hold something that is not a finite number", second)
    steps = np.diff(points)
    if np.any(steps <= 0):
        at = int(np.argmax(steps <= 0))
        raise LawError(
            f"{first} does not increase from {points[at]:g} to {points[at + 1]:g},"
            " and increasing values would be right",
            first,
        )
    if np.any(values < 0):
        raise LawError(f"{second} has the entry {np.min(values):g}, and 0 or more would be right", second)
    return points, values


def density_table(x: Sequence[float], pdf: Sequence[float]) -> PiecewiseLinearLaw:
    """Density linear between the points. Raises LawError where it does not integrate to 1 within 1e-6."""
    points, values = _columns("x", "pdf", x, pdf)
    total = float(np.sum(0.5 * (values[1:] + values[:-1]) * np.diff(points)))
    if not abs(total - 1) <= NORMALISED_TO:
        raise LawError(f"the tabulated density integrates to {total:.9g}, and 1 would be right", "pdf")
    law = PiecewiseLinearLaw(points, values[:-1], values[1:])
    law.name = "Distribution with a tabulated density"
    return law


def cdf_table(x: Sequence[float], cdf: Sequence[float]) -> PiecewiseLinearLaw:
    """Distribution function linear between the points, from 0 at the first to 1 at the last."""
    points, values = _columns("x", "cdf", x, cdf)
    if np.any(np.diff(values) < 0):
        at = int(np.argmax(np.diff(values) < 0))
        raise LawError(
            f"cdf falls from {values[at]:g} to {values[at + 1]:g}, and values that never fall would be right",
            "cdf",
        )
    if values[0] != 0 or abs(values[-1] - 1) > 1e-9:
        raise LawError(
            f"cdf runs from {values[0]:g} to {values[-1]:.10g}, and from 0 to 1 would be right", "cdf"
        )
    level = np.diff(values) / np.diff(points)
    law = PiecewiseLinearLaw(points, level, level)
    law.name = "Distribution with a tabulated distribution function"
    return law


def histogram(edges: Sequence[float], counts: Sequence[float]) -> PiecewiseLinearLaw:
    """Each bin's share of the counts, spread evenly over the bin."""
    points, values = _columns("edges", "counts", edges, counts, more=1)
    if not np.sum(values) > 0:
        raise LawError("all counts are 0, and at least one above 0 would be right", "counts")
    level = values / np.diff(points)
    law = PiecewiseLinearLaw(points, level, level)
    law.name = "Histogram"
    return law
