"""One continuous input as an axis of integration: a grid graded by probability, and the coordinate t.

Where the density is bounded, t is the input itself. Where the law spreads over many magnitudes, t is an
inverse hyperbolic sine; where it begins at 0 with an unbounded density or spreads over many magnitudes from
there, the logarithm. Where the density is unbounded at another end, t is a probability counted from the
nearer end (negative for the upper half), so that the singularity is gone and both ends keep full resolution:
P(X in A) = integral over t of 1{x(t) in A} dt.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from outspread.laws.law import Array, Law
from outspread.numerics.slices.inner import normal_score
from outspread.numerics.slices.solve import Frame

_WIDEST = 50.0  # ratio of the distances from the middle of two neighbouring grid points
_MOST_STEPS = 40
_FURTHEST = 1e145  # the square is still a number, and so is the density of a heavy tail
_TAILS = (1e-300, 1e-200, 1e-120, 1e-70, 1e-40, 1e-22, 1e-12, 1e-7, 1e-4, 0.01, 0.12)
_COARSE_TAILS = (1e-300, 1e-120, 1e-40, 1e-12, 1e-4, 0.05, 0.25, 0.45, 0.499)


class Axis:
    """`frame` is what solvers see of the input; `breaks` are further points where a panel must end;
    `multiplicative`: the formula takes the input as a factor, so that ratios to it matter; `least`: the
    smallest tail probability that is followed."""

    def __init__(
        self,
        name: str,
        law: Law,
        breaks: tuple[float, ...] = (),
        multiplicative: bool = False,
        least: float = 0.0,
    ):
        self.name, self.law = name, law
        self.mass = law.continuous_mass
        self.breaks = breaks
        low, high = law.support()
        self.support = (low, high)
        lower, upper, middle, spread = _quantiles(law)
        tails = np.array(_TAILS)
        first = max(int(np.searchsorted(tails, least, side="right")) - 1, 0)
        lower, upper = lower[first:], upper[first:]
        self.start = low if np.isfinite(low) else float(lower[0])
        self.end = high if np.isfinite(high) else float(upper[0])
        points = np.concatenate(
            [[self.start], lower, [float(middle)], upper[::-1], [self.end], law.breaks(), breaks, [0.0]]
        )
        points = points[np.isfinite(points) & (points >= self.start) & (points <= self.end)]
        self.grid: Array = np.unique(points)
        self.scale = spread / 2 if spread > 0 else max(abs(float(middle)), 1.0)
        self.middle = float(middle)
        self.singular = law.singular_ends() if self.mass == 1.0 else (False, False)
        steps = _steps(self.grid, float(middle), spread)
        # a tail over many magnitudes has its mass in a sliver of each panel, unless t counts probability
        wide = self.mass == 1.0 and (any(self.singular) or steps.size > _MOST_STEPS)
        self.by_logarithm = (wide or multiplicative) and low == 0.0 and not self.singular[1]
        self.by_logarithm &= self.mass == 1.0
        wide &= not self.by_logarithm
        self.by_probability = wide and any(self.singular)
        self.by_sinh = wide and not any(self.singular)
        if not (wide or self.by_logarithm):
            self.grid = np.unique(np.concatenate([self.grid, steps]))
        #: probability beyond the ends of the grid, too small to matter or where the density underflows
        cut = np.isinf(low) + np.isinf(high) + self.by_logarithm
        self.outside = float(tails[first]) * cut if first else 0.0
        if self.by_logarithm or self.by_sinh:
            self._limit()
        self.frame = Frame(name, self.grid)

    def _limit(self) -> None:
        """End the grid where the density is still a number: beyond, the mass is given up and stated."""
        start, end = max(-_FURTHEST, self.start), min(_FURTHEST, self.end)
        if start > self.start:
            self.outside += float(self.law.cdf(start))
        if end < self.end:
            self.outside += float(self.law.ccdf(end))
        self.start, self.end = start, end
        self.grid = np.unique(np.clip(self.grid, start, end))

    def coarse(self) -> Array:
        """A sparser grid: the ends, the middle, the breaks and a few tail points."""
        ends = [self.start, self.end, 0.0]
        points = np.concatenate([_coarse_quantiles(self.law), ends, self.law.breaks(), self.breaks])
        points = points[np.isfinite(points) & (points >= self.start) & (points <= self.end)]
        return np.unique(points)

    def to_t(self, x: Array) -> Array:
        """The coordinate of points; NaN stays NaN."""
        if self.by_logarithm:
            with np.errstate(all="ignore"):
                t = np.log(x)
            return np.where(np.isinf(t), np.nan, t)
        if self.by_sinh:
            return np.asarray(np.arcsinh((x - self.middle) / self.scale), float)
        if not self.by_probability:
            return x
        below, above = self.law.cdf(x), self.law.ccdf(x)
        t = np.where(below <= 0.5, below, -above)
        return np.where(np.isnan(x), np.nan, t)

    def to_x(self, t: Array) -> Array:
        if self.by_logarithm:
            return np.asarray(np.exp(t), float)
        if self.by_sinh:
            return np.asarray(self.middle + self.scale * np.sinh(t), float)
        if not self.by_probability:
            return t
        lower = np.maximum(t, 0.0)
        upper = np.maximum(-t, 0.0)
        return np.where(t >= 0, self.law.icdf(np.minimum(lower, 0.5)), self.law.iccdf(np.minimum(upper, 0.5)))

    def weight(self, x: Array) -> Array:
        """dP/dt at x."""
        if self.by_logarithm:
            return np.asarray(self.law.pdf(x) * x, float)
        if self.by_sinh:
            return np.asarray(self.law.pdf(x) * np.hypot(self.scale, x - self.middle), float)
        return np.ones_like(x) if self.by_probability else self.law.pdf(x)

    def fixed_points(self) -> Array:
        """Panel ends in t that hold for every problem."""
        if self.by_logarithm:
            return np.unique(self.to_t(self.grid[self.grid > 1e-305]))
        if self.by_sinh:
            return np.unique(self.to_t(self.grid))
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
            if singular:  # smaller than either; a plain minimum would put a kink into what is integrated
                distance = np.abs(x - end)
                length = length * distance / np.hypot(length, distance)
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


def _steps(grid: Array, middle: float, spread: float) -> Array:
    """Points outside the body between neighbours of the grid one of which lies many times further out."""
    found: list[float] = []
    for side in (-1.0, 1.0):
        distance = np.sort(side * (grid - middle))
        distance = distance[distance > 1e-3 * spread]
        for near, far in zip(distance[:-1].tolist(), distance[1:].tolist(), strict=True):
            if far > _WIDEST * near:
                count = int(np.ceil(np.log(far / near) / np.log(_WIDEST / 5)))
                found.extend((middle + side * np.geomspace(near, far, count + 1)[1:-1]).tolist())
    return np.array(found)
