"""Pearson's correlation of two inputs under a copula, by quadrature with an error bound, and its extremes.

E[(X - μ)(Y - ν)] is an integral over the first score of X times the conditional mean of Y, itself an integral
over the score of the conditional level: in these (Rosenblatt's) coordinates no dependence, however strong,
makes a narrow ridge, and kinks of both quantile functions are panel boundaries. For a Gaussian copula this is
the relation of Nataf's model (Liu and Der Kiureghian 1986, Probabilistic Engineering Mechanics 1, 105–112).
Extremes: X and Y rising functions of one level, or one rising and one falling (Hoeffding 1940, Fréchet 1951).
"""

from __future__ import annotations

import math

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.copula import Copula
from outspread.laws.dependence.families import pair_copula
from outspread.laws.dependence.levels import Levels
from outspread.laws.dependence.margins import Margin, level_margin, margin_of
from outspread.laws.dependence.solving import Solved
from outspread.laws.functions.normal import normal_pdf
from outspread.laws.law import Array, Law
from outspread.numerics.quadrature import Index, integrate, panels_between

_INNER = np.array([-4.5, -1.5, 1.5, 4.5])
_STEP = (-8.0, -3.0, 0.0, 3.0, 8.0)
_OUTER = np.array([-6.0, -4.0, -2.5, -1.25, 0.0, 1.25, 2.5, 4.0, 6.0])
_MOST_VALUES = 1_000_000  # at a time: bounds the memory
_MOST_EDGES = 16  # of the second margin: more steps than this leave its conditional mean smooth if not steep
_RELATIVE, _ABSOLUTE = 1e-12, 2e-13


def pearson_correlation(copula: Copula, first: Law, second: Law) -> Solved:
    """Pearson's correlation of inputs with these marginals under the copula of a pair, with an error bound.

    Raises DerivationError where a marginal has no variance, LawError where the copula is of no pair.
    """
    if copula.size != 2:
        raise LawError(f"a correlation is that of a pair; the copula joins {copula.size} inputs")
    return correlation_of_margins(copula, margin_of(first), margin_of(second))


def level_correlation(family: str, parameter: float, degrees_of_freedom: float | None = None) -> Solved:
    """Spearman's correlation of a family by quadrature: Pearson's of the levels themselves."""
    margin = level_margin()
    return correlation_of_margins(pair_copula(family, parameter, degrees_of_freedom), margin, margin)


def extreme_correlation(first: Margin, second: Margin, direction: int) -> Solved:
    """|correlation| of X and Y as functions of one score, Y falling in it where the direction is -1."""

    def product(z: Array, owner: Index) -> Array:
        return normal_pdf(z) * first.standard(z) * second.standard(direction * z) * direction

    cut = max(first.cut, second.cut)
    points = np.concatenate([_OUTER, first.edges, direction * second.edges, [-cut, cut]])
    low, high, owner = panels_between(points[None, :])
    found = integrate(product, low, high, owner, 1, relative=1e-13, absolute=_tolerance(first, second))
    return Solved(float(found.value[0, 0]), float(found.error[0, 0]) + _inherent(first, second))


def _tolerance(first: Margin, second: Margin) -> float:
    return max(_ABSOLUTE, 20.0 * (first.noise + second.noise))


def _inherent(first: Margin, second: Margin) -> float:
    """What the tails left out and the rounding of the quantiles may change a correlation by."""
    left_out = math.sqrt(first.beyond) + math.sqrt(second.beyond)
    return left_out + 4.0 * (first.noise + second.noise) + 1e-14


def correlation_of_margins(copula: Copula, first: Margin, second: Margin) -> Solved:
    if first.values is not None and second.values is None:  # all copulas here are exchangeable
        first, second = second, first
    tolerance = _tolerance(first, second)

    def outer(z: Array, owner: Index) -> Array:
        weight = normal_pdf(z) * first.standard(z)
        mean, error = _conditional_mean(copula, z, second, tolerance)
        return np.stack([weight * mean, np.abs(weight) * error])  # the inner errors are integrated too

    low, high, owner = panels_between(_outer_points(copula, first, second)[None, :])
    found = integrate(
        outer, low, high, owner, 1, components=2, control=1, relative=_RELATIVE, absolute=tolerance
    )
    error = float(found.error[0, 0] + found.value[1, 0] + found.error[1, 0])
    return Solved(float(found.value[0, 0]), error + _inherent(first, second))


def _outer_points(copula: Copula, first: Margin, second: Margin) -> Array:
    """Panel ends of the first score: its own edges, and quantiles of it given the second's edges."""
    ends = np.array([-first.cut, first.cut])
    points = [_OUTER, first.edges, ends]
    if second.edges.size:
        levels = Levels.from_scores(second.edges)
        given = Levels(levels.lower[None], levels.upper[None])
        # the mean given the first rises or turns there, however steeply
        rises = np.stack([
            copula.conditional_inverse(given, Levels.from_scores(np.full(second.edges.size, score))).scores()
            for score in _STEP
        ])  # fmt: skip
        steep = np.abs(rises[-2] - rises[1]) < 1.0
        points.append(rises[:, steep | (second.edges.size <= _MOST_EDGES)].ravel())
    return np.asarray(np.clip(np.concatenate(points), *ends))


def _conditional_mean(
    copula: Copula, scores: Array, margin: Margin, tolerance: float
) -> tuple[Array, Array]:
    """E(Y | the first score) for each of `scores` (N,), and the error of each."""
    count = scores.size
    levels = Levels.from_scores(scores)
    given = Levels(levels.lower[None], levels.upper[None])
    if margin.values is not None:
        total = np.full(count, margin.values[0])
        rises = np.diff(margin.values)
        wide = Levels(given.lower[:, None], given.upper[:, None])
        part = max(_MOST_VALUES // count, 1)
        for start in range(0, len(rises), part):
            edges = margin.edges[start : start + part, None]
            total += rises[start : start + part] @ copula.conditional(wide, Levels.from_scores(edges)).upper
        return total, np.full(count, 1e-14 * (1.0 + float(np.max(np.abs(margin.values)))))
    points = [np.broadcast_to(np.concatenate([_INNER, [-margin.cut, margin.cut]]), (count, 6))]
    for edge in margin.edges:
        place = copula.conditional(given, Levels.from_scores(np.full(count, edge))).scores()
        points.append(np.clip(place, -margin.cut, margin.cut)[:, None])
    following = copula.following_score(scores)

    def inner(e: Array, owner: Index) -> Array:
        return normal_pdf(e) * margin.standard(following(e, owner))

    low, high, owner = panels_between(np.concatenate(points, axis=1))
    result = integrate(inner, low, high, owner, count, relative=_RELATIVE, absolute=tolerance)
    return result.value[0], result.error[0]
