"""Probabilities of rectangles of jointly normal scores: the method for the number of scores.

One to three scores by `bivariate` and any number with one common factor by `one_factor`, relative to
themselves; four to six by `orthants`, and where that loses its digits (in a tail, or near a singular matrix)
by `randomised`; more by `randomised`. Sides that are all of the line are left out
first, and scores that depend on no other are split off as factors.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.laws.dependence.bivariate import bivariate_rectangle, trivariate_rectangle
from outspread.laws.dependence.one_factor import factor_loadings, one_factor_rectangle
from outspread.laws.dependence.orthants import LARGEST as LARGEST_ORTHANT
from outspread.laws.dependence.orthants import orthant
from outspread.laws.dependence.randomised import LARGEST, randomised_rectangle
from outspread.laws.functions.normal import normal_between
from outspread.laws.law import Array

LEAST_EIGENVALUE = 1e-8
#: below this the path of `orthants` grows too steep to be integrated in reasonable time
_STEEP = 1e-4


@dataclass(frozen=True)
class Probability:
    """A probability, the bound on its absolute error and the method: closed form | quadrature | sampling.

    The bound of a sampled one holds with a probability of 0.9999.
    """

    value: float
    error: float
    method: str


def rectangle_probability(
    lower: npt.ArrayLike,
    upper: npt.ArrayLike,
    matrix: npt.ArrayLike,
    *,
    absolute: float = 1e-10,
    relative: float = 1e-5,
    seed: int = 0,
    points: int = 2**18,
) -> Probability:
    """P(lower_k < Z_k <= upper_k for all k) of standard normal scores with correlation matrix `matrix`.

    lower, upper: shape (n,), may be infinite; at most 40 scores depend on one another. `absolute` and
    `relative` are the errors at which sampling stops (either is enough), `points` the most for each of its 16
    replicates; quadrature always does its best. For digits of a small probability give absolute=0.
    Raises LawError for a matrix that is no positive definite correlation matrix (two scores may be perfectly
    correlated) and for more scores.
    """
    low, high, own = np.array(lower, float), np.array(upper, float), np.array(matrix, float)
    if low.shape != high.shape or own.shape != (low.size, low.size) or low.ndim != 1:
        raise LawError("a rectangle has one lower and one upper limit for each row of the matrix")
    if not np.array_equal(own, own.T) or not np.all(np.diag(own) == 1.0) or np.any(np.abs(own) > 1.0):
        raise LawError("a correlation matrix is symmetric with ones on its diagonal", "matrix")
    if np.any(np.isnan(low)) or np.any(np.isnan(high)):
        raise LawError("a limit of the rectangle is not a number")
    if np.any(high <= low):
        return Probability(0.0, 0.0, "closed form")
    kept = np.flatnonzero(np.isfinite(low) | np.isfinite(high))
    value, error, methods = 1.0, 0.0, ["closed form"]
    for block in _blocks(own, kept):
        part = _block(low[block], high[block], own[np.ix_(block, block)], absolute, relative, seed, points)
        error = error * part.value + part.error * value + error * part.error
        value *= part.value
        methods.append(part.method)
    ranked = sorted(methods, key=("closed form", "quadrature", "sampling").index)
    return Probability(value, error, ranked[-1])


def _blocks(matrix: Array, kept: npt.NDArray[np.int64]) -> list[list[int]]:
    """The scores kept, in groups that are independent of one another."""
    waiting = [int(k) for k in kept]
    groups: list[list[int]] = []
    while waiting:
        group = [waiting.pop(0)]
        for member in group:  # the group grows while it is walked
            near = [k for k in waiting if matrix[member, k] != 0.0]
            group.extend(near)
            waiting = [k for k in waiting if k not in near]
        groups.append(sorted(group))
    return groups


def _block(
    low: Array, high: Array, matrix: Array, absolute: float, relative: float, seed: int, points: int
) -> Probability:
    size = low.size
    if size == 1:
        value = float(normal_between(low, high)[0])
        return Probability(value, 1e-15 * value, "closed form")
    if size == 2:
        two = bivariate_rectangle(low[:, None], high[:, None], matrix[0, 1:])
        return Probability(float(two.value[0]), float(two.error[0]), "quadrature")
    smallest = float(np.linalg.eigvalsh(matrix)[0])
    if smallest < LEAST_EIGENVALUE:
        raise LawError(
            f"the correlation matrix is not positive definite (smallest eigenvalue {smallest:.3g}): state a "
            "score that the others determine by a formula of them",
            "matrix",
        )
    loadings = factor_loadings(matrix)
    if loadings is not None:
        common = one_factor_rectangle(low, high, loadings)
        return Probability(float(common.value[0]), float(common.error[0]), "quadrature")
    if size == 3:
        three = trivariate_rectangle(low, high, matrix)
        return Probability(float(three.value[0]), float(three.error[0]), "quadrature")
    if size > LARGEST:
        raise LawError(f"{size} scores depend on one another; rectangles of at most {LARGEST} are derived")
    two_sided = int(np.sum(np.isfinite(low) & np.isfinite(high)))
    orthants = 2**two_sided
    if smallest < _STEEP or size > LARGEST_ORTHANT or (size == LARGEST_ORTHANT and orthants > 4):
        return _sampled(low, high, matrix, absolute, relative, seed, points)
    corners = _corners(low, high, matrix)
    if corners.error <= max(absolute, relative * corners.value):
        return corners
    sampled = _sampled(low, high, matrix, absolute, relative, seed, points)
    return sampled if sampled.error < corners.error else corners


def _sampled(
    low: Array, high: Array, matrix: Array, absolute: float, relative: float, seed: int, points: int
) -> Probability:
    found = randomised_rectangle(
        low, high, matrix, absolute=absolute, relative=relative, seed=seed, points=points
    )
    return Probability(float(found.value), float(found.error), "sampling")


def _corners(low: Array, high: Array, matrix: Array) -> Probability:
    """The rectangle as a signed sum of orthants; scores turned so that few corners are finite."""
    turn = np.where(np.isfinite(low) & ~np.isfinite(high), -1.0, 1.0)
    low, high = np.where(turn < 0, -high, low), np.where(turn < 0, -low, high)
    matrix = matrix * np.outer(turn, turn)
    value = error = 0.0
    for choice in product((0, 1), repeat=low.size):
        ends = np.where(choice, low, high)
        if np.any(np.isneginf(ends)):
            continue
        used = np.flatnonzero(np.isfinite(ends))
        found = orthant(ends[used][:, None], matrix[np.ix_(used, used)][:, :, None])
        value += (-1.0) ** sum(choice) * float(found.value[0])
        error += float(found.error[0])
    return Probability(min(max(value, 0.0), 1.0), error, "quadrature")
