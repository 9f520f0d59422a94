"""One continuous input as an axis of integration: a grid graded by probability, and the coordinate t.

Where the density is bounded, t is the input itself. Where it is unbounded at an end, t is a probability
counted from the nearer end (negative for the upper half), so that the singularity is gone and both ends
keep full resolution: P(X in A) = integral over t of 1{x(t) in A} dt.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from outspread.laws.law import Array, Law
from outspread.numerics.slices.inner import normal_score
from outspread.numerics.slices.solve import Frame

_WIDEST = 50.0  # ratio of the distances from the middle of two neighbouring grid points
_MOST_STEPS = 40
_TAILS = (1e-300, 1e-200, 1e-120, 1e-70, 1e-40, 1e-22, 1e-12, 1e-7, 1e-4, 0.01, 0.12)
_COARSE_TAILS = (1e-300, 1e-120, 1e-40, 1e-12, 1e-4, 0.05, 0.25, 0.45, 0.499)


class Axis:
    """`frame` is what solvers see of the input; `breaks` are further points where a panel must end."""

    def __init__(self, name: str, law: Law, breaks: tuple[float, ...] = ()):
        self.name, self.law = name, law
        self.mass = law.continuous_mass
        self.breaks = breaks
        low, high = law.support()
        self.support = (low, high)
        lower, upper, middle, spread = _quantiles(law)
        self.start = low if np.isfinite(low) else float(lower[0])
        self.end = high if np.isfinite(high) else float(upper[0])
        points = np.concatenate(
            [[self.start], lower, [float(middle)], upper[::-1], [self.end], law.breaks(), breaks, [0.0]]
        )
        points = points[np.isfinite(points) & (points >= self.start) & (points <= self.end)]
        self.grid: Array = np.unique(points)
        self.singular = law.singular_ends() if self.mass == 1.0 else (False, False)
        steps = _steps(self.grid, float(middle))
        # a tail over many magnitudes has its mass in a sliver of each panel, unless t counts probability
        self.by_probability = self.mass == 1.0 and (any(self.singular) or steps.size > _MOST_STEPS)
        if not self.by_probability:
            self.grid = np.unique(np.concatenate([self.grid, steps]))
        self.frame = Frame(name, self.grid)
        self.scale = spread / 2 if spread > 0 else max(abs(float(middle)), 1.0)
        self.middle = float(middle)

    def coarse(self) -> Array:
        """A sparser grid: the ends, the middle, the breaks and a few tail points."""
        ends = [self.start, self.end, 0.0]
        points = np.concatenate([_coarse_quantiles(self.law), ends, self.law.breaks(), self.breaks])
        points = points[np.isfinite(points) & (points >= self.start) & (points <= self.end)]
        return np.unique(points)

    def to_t(self, x: Array) -> Array:
        """The coordinate of points; NaN stays NaN."""
        if not self.by_probability:
            return x
        below, above = self.law.cdf(x), self.law.ccdf(x)
        t = np.where(below <= 0.5, below, -above)
        return np.where(np.isnan(x), np.nan, t)

    def to_x(self, t: Array) -> Array:
        if not self.by_probability:
            return t
        lower = np.maximum(t, 0.0)
        upper = np.maximum(-t, 0.0)
        return np.where(t >= 0, self.law.icdf(np.minimum(lower, 0.5)), self.law.iccdf(np.minimum(upper, 0.5)))

    def weight(self, x: Array) -> Array:
        """dP/dt at x."""
        return np.ones_like(x) if self.by_probability else self.law.pdf(x)

    def fixed_points(self) -> Array:
        """Panel ends in t that hold for every problem."""
        if not self.by_probability:
            return self.grid
        inner = self.grid[1:-1]
        return np.unique(np.concatenate([self.to_t(inner), [-0.5, 0.0, 0.5]]))

    def length(self, x: Array) -> Array:
        """A local length: the law's scale, growing with the distance from the middle far out, where a
        coordinate has no digits left to tell details of the other one, and shrinking to 0 towards an end
        where the density is unbounded."""
        length = np.hypot(self.scale, x - self.middle)
        for end, singular in zip(self.support, self.singular, strict=True):
            if singular:
                distance = np.abs(x - end)
                length = np.minimum(length, distance)
        return length

    def scores(self, x: Array) -> Array:
        return normal_score(self.law, x)


@lru_cache(maxsize=256)
def _quantiles(law: Law) -> tuple[Array, Array, float, float]:
    """Lower and upper tail quantiles, the median, and the distance from the 16 % to the 84 % quantile."""
    tails = np.array(_TAILS)
    with np.errstate(all="ignore"):
        lower, upper, body = law.icdf(tails), law.iccdf(tails), law.icdf(np.array([0.16, 0.5, 0.84]))
    return lower, upper, float(body[1]), float(body[2] - body[0])


@lru_cache(maxsize=256)
def _coarse_quantiles(law: Law) -> Array:
    tails = np.array(_COARSE_TAILS)
    with np.errstate(all="ignore"):
        return np.concatenate([law.icdf(tails), law.iccdf(tails), law.icdf(np.array([0.5]))])


def _steps(grid: Array, middle: float) -> Array:
    """Points between those neighbours of the grid that lie many times further out than each other."""
    found: list[float] = []
    for side in (-1.0, 1.0):
        distance = np.sort(side * (grid - middle))
        distance = distance[distance > 0]
        for near, far in zip(distance[:-1].tolist(), distance[1:].tolist(), strict=True):
            if far > _WIDEST * near:
                count = int(np.ceil(np.log(far / near) / np.log(_WIDEST / 5)))
                found.extend((middle + side * np.geomspace(near, far, count + 1)[1:-1]).tolist())
    return np.array(found)
