"""Unions of intervals on the real line, many at once, whose end points know how they move with a parameter.

A `Sets` holds for each of N problems up to m intervals. Beside each end point stands its derivative with
respect to a parameter y, so that the derivative of the set's probability follows by the Leibniz rule:
d/dy P(X in S(y)) = sum of f(upper) upper' - f(lower) lower'. Open and closed ends are not told apart: the
laws that are integrated over these sets are continuous (atoms are treated point by point elsewhere).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Sets:
    """Arrays of shape (m, N): disjoint intervals [lower, upper]; empty where not lower < upper."""

    lower: Array
    upper: Array
    lower_rate: Array
    upper_rate: Array

    @property
    def count(self) -> int:
        return int(self.lower.shape[1])


def make(
    lower: Array, upper: Array, lower_rate: Array | None = None, upper_rate: Array | None = None
) -> Sets:
    zero = np.zeros(np.broadcast_shapes(lower.shape, upper.shape))
    return Sets(
        np.broadcast_to(lower, zero.shape),
        np.broadcast_to(upper, zero.shape),
        zero if lower_rate is None else np.broadcast_to(lower_rate, zero.shape),
        zero if upper_rate is None else np.broadcast_to(upper_rate, zero.shape),
    )


def everything(count: int) -> Sets:
    return make(np.full((1, count), -np.inf), np.full((1, count), np.inf))


def nothing(count: int) -> Sets:
    return make(np.full((1, count), np.inf), np.full((1, count), -np.inf))


def where(condition: npt.NDArray[np.bool_], sets: Sets) -> Sets:
    """The sets, emptied where the condition (shape (N,)) does not hold."""
    return Sets(
        np.where(condition, sets.lower, np.inf),
        np.where(condition, sets.upper, -np.inf),
        np.where(condition, sets.lower_rate, 0.0),
        np.where(condition, sets.upper_rate, 0.0),
    )


def stack(parts: list[Sets]) -> Sets:
    """The intervals of all parts side by side; the parts must be disjoint."""
    if len(parts) == 1:
        return parts[0]
    return Sets(
        np.concatenate([part.lower for part in parts]),
        np.concatenate([part.upper for part in parts]),
        np.concatenate([part.lower_rate for part in parts]),
        np.concatenate([part.upper_rate for part in parts]),
    )


def clip(sets: Sets, lower: Array | float, upper: Array | float) -> Sets:
    """The intersection with [lower, upper], whose ends stand still."""
    low, high = np.asarray(lower, float), np.asarray(upper, float)
    cut_low, cut_high = sets.lower < low, sets.upper > high
    return Sets(
        np.where(cut_low, low, sets.lower),
        np.where(cut_high, high, sets.upper),
        np.where(cut_low, 0.0, sets.lower_rate),
        np.where(cut_high, 0.0, sets.upper_rate),
    )


def intersect(left: Sets, right: Sets) -> Sets:
    """Intersection: each interval of one with each of the other."""
    a, b = left.lower.shape[0], right.lower.shape[0]
    one = np.repeat(np.arange(a), b)
    two = np.tile(np.arange(b), a)
    later = left.lower[one] >= right.lower[two]
    sooner = left.upper[one] <= right.upper[two]
    result = Sets(
        np.where(later, left.lower[one], right.lower[two]),
        np.where(sooner, left.upper[one], right.upper[two]),
        np.where(later, left.lower_rate[one], right.lower_rate[two]),
        np.where(sooner, left.upper_rate[one], right.upper_rate[two]),
    )
    return _packed(result) if a > 1 and b > 1 else compact(result)


def _packed(sets: Sets) -> Sets:
    """The same with the intervals of each problem in its first rows, and no more rows than needed."""
    held = _held(sets)
    most = int(held.sum(axis=0).max(initial=0))
    if most == 0:
        return nothing(sets.count)
    if most == held.shape[0]:
        return sets
    row, problem = np.nonzero(held)
    place = (np.cumsum(held, axis=0) - 1)[row, problem]
    packed = []
    for column, filler in (
        (sets.lower, np.inf), (sets.upper, -np.inf), (sets.lower_rate, 0.0), (sets.upper_rate, 0.0)
    ):  # fmt: skip
        into = np.full((most, sets.count), filler)
        into[place, problem] = column[row, problem]
        packed.append(into)
    return Sets(*packed)


def _held(sets: Sets) -> npt.NDArray[np.bool_]:
    """Which intervals hold anything: a single point counts, a point at infinity does not."""
    point = (sets.lower == sets.upper) & np.isfinite(sets.lower)
    return np.asarray((sets.lower < sets.upper) | point, bool)


def ordered(key: Array, *columns: Array) -> list[Array]:
    """Columns with each problem's rows in the order of the key, which comes first."""
    if key.shape[0] == 1:
        return [key, *columns]
    if key.shape[0] == 2:
        swap = key[0] > key[1]
        return [
            np.stack([np.where(swap, column[1], column[0]), np.where(swap, column[0], column[1])])
            for column in (key, *columns)
        ]
    order = np.argsort(key, axis=0, kind="stable")
    return [np.take_along_axis(column, order, 0) for column in (key, *columns)]


def union(left: Sets, right: Sets) -> Sets:
    """Union, with overlapping intervals merged."""
    both = stack([left, right])
    empty = ~(both.lower < both.upper)
    lower, upper, lower_rate, upper_rate = ordered(
        np.where(empty, np.inf, both.lower), np.where(empty, -np.inf, both.upper), both.lower_rate,
        both.upper_rate,
    )  # fmt: skip
    result_lower, result_lower_rate = lower.copy(), lower_rate.copy()
    reach, reach_rate = upper[0].copy(), upper_rate[0].copy()
    for row in range(1, lower.shape[0]):
        inside = lower[row] < reach
        result_lower[row] = np.where(inside, reach, lower[row])
        # a seam between two overlapping intervals: both sides carry the same rate and cancel
        result_lower_rate[row] = np.where(inside, reach_rate, lower_rate[row])
        further = upper[row] > reach
        reach_rate = np.where(further, upper_rate[row], reach_rate)
        reach = np.where(further, upper[row], reach)
    return compact(Sets(result_lower, upper, result_lower_rate, upper_rate))


def symmetric_difference(left: Sets, right: Sets) -> Sets:
    """What is in one of the two but not in both: between the ends of both, in order, every second gap."""
    both = stack([left, right])
    empty = ~(both.lower < both.upper)
    ends = np.concatenate([np.where(empty, np.inf, both.lower), np.where(empty, np.inf, both.upper)])
    rates = np.concatenate([both.lower_rate, both.upper_rate])
    ends, rates = ordered(ends, rates)
    return compact(Sets(ends[0::2], ends[1::2], rates[0::2], rates[1::2]))


def complement(sets: Sets) -> Sets:
    """What is not in the sets."""
    empty = ~(sets.lower < sets.upper)
    lower, upper, lower_rate, upper_rate = ordered(
        np.where(empty, np.inf, sets.lower), np.where(empty, np.inf, sets.upper),
        np.where(empty, 0.0, sets.lower_rate), np.where(empty, 0.0, sets.upper_rate),
    )  # fmt: skip
    end = np.full((1, sets.count), np.inf)
    zero = np.zeros_like(end)
    return compact(
        Sets(
            np.concatenate([-end, upper]),
            np.concatenate([lower, end]),
            np.concatenate([zero, upper_rate]),
            np.concatenate([lower_rate, zero]),
        )
    )


def compact(sets: Sets) -> Sets:
    """Drop the rows that are empty for every problem; single points stay, a flat operation may widen them."""
    if sets.lower.shape[0] <= 1:
        return sets
    full = _held(sets).any(axis=1)
    if full.all():
        return sets
    if not full.any():
        return nothing(sets.count)
    return Sets(sets.lower[full], sets.upper[full], sets.lower_rate[full], sets.upper_rate[full])
