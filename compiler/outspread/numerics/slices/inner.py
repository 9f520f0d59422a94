"""The law of the variable that is integrated exactly, given the others, and probabilities of sets under it.

Independent inputs: the law itself. A Gaussian copula: the law given the normal scores of the others,
P(X <= x | scores) = Phi((z(x) - m) / s) with z the normal score of x (Song 2000, Scandinavian Journal of
Statistics 27, 305–320).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from outspread.laws.functions.normal import normal_between
from outspread.laws.law import Array, Estimates, Law
from outspread.numerics.sets import Sets


class Inner(Protocol):
    """What `probability` and `density` ask of the variable; `given` holds the conditional means (or None)."""

    def between(self, lower: Array, upper: Array, given: Array | None) -> Estimates:
        """Probabilities of (lower, upper], the error on top of the law's own relative error and floor."""
        ...

    def pdf(self, x: Array, given: Array | None) -> Array: ...


@dataclass(frozen=True)
class IndependentInner:
    """The continuous part of a law: its atoms, if any, are treated point by point elsewhere."""

    law: Law

    def between(self, lower: Array, upper: Array, given: Array | None) -> Estimates:
        return self.law.continuous_between(lower, upper)

    def pdf(self, x: Array, given: Array | None) -> Array:
        return self.law.pdf(x)


@dataclass(frozen=True)
class ConditionalInner:
    """A continuous law given the scores of others: normal score of X ~ Normal(given, spread)."""

    law: Law
    spread: float

    def between(self, lower: Array, upper: Array, given: Array | None) -> Estimates:
        assert given is not None
        low, high = np.broadcast_arrays(np.asarray(lower, float), np.asarray(upper, float))
        with np.errstate(invalid="ignore"):  # infinite scores beyond the ends of both
            a = (normal_score(self.law, low) - given) / self.spread
            b = (normal_score(self.law, high) - given) / self.spread
        width = None
        if getattr(self.law, "family", "") == "normal":
            # the ends' own difference keeps the digits that their scores round away
            with np.errstate(invalid="ignore"):
                width = (high - low) / (float(self.law.parameters["sd"]) * self.spread)
        mass = normal_between(a, b, width)
        return Estimates(mass, np.zeros_like(mass))

    def pdf(self, x: Array, given: Array | None) -> Array:
        assert given is not None
        z = normal_score(self.law, x)
        with np.errstate(all="ignore"):
            w = (z - given) / self.spread
            factor = np.exp(np.minimum(0.5 * (z - w) * (z + w), 700.0)) / self.spread
            value = self.law.pdf(x) * factor
        return np.where(np.isfinite(z), value, 0.0)


def normal_score(law: Law, x: Array) -> Array:
    """Phi^-1(F(x)), from the smaller tail."""
    from scipy.special import ndtri

    if law.family == "normal":
        return np.asarray((x - law.parameters["mean"]) / law.parameters["sd"], float)
    below, above = law.cdf(x), law.ccdf(x)
    return np.asarray(np.where(below < above, ndtri(below), -ndtri(above)), float)


def probability(where: Sets, inner: Inner, given: Array | None = None) -> Estimates:
    """P(X in set) for each problem: shape (N,); the error as in `Inner.between`."""
    full = where.lower < where.upper
    if where.lower.shape[0] == 1 and full.all():
        return inner.between(where.lower[0], where.upper[0], given)
    row, problem = np.nonzero(full)
    part = None if given is None else given[problem]
    found = inner.between(where.lower[row, problem], where.upper[row, problem], part)
    value, error = (np.bincount(problem, column, where.count) for column in (found.value, found.error))
    return Estimates(np.asarray(value, float), np.asarray(error, float))


@dataclass(frozen=True)
class Boundary:
    """The end points that move with y, flat: position, |dx/dy|, the problem each belongs to."""

    x: Array
    rate: Array
    problem: np.ndarray[tuple[int], np.dtype[np.int64]]


def boundary(where: Sets) -> Boundary:
    """The moving ends. An interval whose two ends round to one number counts once, with the rate at which it
    grows: its probability is lost, but not its density nor the rounding error."""
    full = where.lower < where.upper
    point = (where.lower == where.upper) & np.isfinite(where.lower)
    growth = np.where(point, where.upper_rate - where.lower_rate, 0.0)
    ends, rates, problems = [], [], []
    for kept, end, rate in (
        (full, where.lower, where.lower_rate),
        (full, where.upper, where.upper_rate),
        (point, where.upper, growth),
    ):
        moving = kept & (rate != 0) & np.isfinite(end)
        row, problem = np.nonzero(moving)
        ends.append(end[row, problem])
        rates.append(np.abs(rate[row, problem]))
        problems.append(problem)
    return Boundary(np.concatenate(ends), np.concatenate(rates), np.concatenate(problems))
