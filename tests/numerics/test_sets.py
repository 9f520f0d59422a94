"""Unions of intervals against membership decided interval by interval."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from outspread.numerics import sets
from outspread.numerics.sets import Sets

WHOLE = st.integers(-6, 6)
PAIRS = st.lists(st.tuples(WHOLE, WHOLE), min_size=0, max_size=5)
POINTS = np.arange(-7.5, 8.0)  # half numbers: never an end point


def disjoint(pairs: list[tuple[int, int]]) -> list[tuple[int, int]]:
    """The unit cells covered by the pairs, joined to maximal intervals."""
    cells = sorted({cell for a, b in pairs for cell in range(min(a, b), max(a, b))})
    found: list[tuple[int, int]] = []
    for cell in cells:
        if found and found[-1][1] == cell:
            found[-1] = (found[-1][0], cell + 1)
        else:
            found.append((cell, cell + 1))
    return found


def as_sets(intervals: list[tuple[int, int]]) -> Sets:
    """One problem; an empty row stands beside the intervals, as rows of other problems make them."""
    rows = [*intervals, (1, 0)]
    lower, upper = (np.array([[float(row[i])] for row in rows]) for i in (0, 1))
    return sets.make(lower, upper, lower + 100, upper + 100)


def members(found: Sets) -> list[bool]:
    return [bool(((found.lower < x) & (x < found.upper)).any()) for x in POINTS]


def inside(intervals: list[tuple[int, int]]) -> list[bool]:
    return [any(a < x < b for a, b in intervals) for x in POINTS]


def length(found: Sets) -> float:
    return float(np.sum(np.where(found.lower < found.upper, found.upper - found.lower, 0.0)))


@given(PAIRS, PAIRS)
def test_intersection_and_union(one: list[tuple[int, int]], two: list[tuple[int, int]]) -> None:
    a, b = disjoint(one), disjoint(two)
    pairs = list(zip(inside(a), inside(b), strict=True))
    meet, join = sets.intersect(as_sets(a), as_sets(b)), sets.union(as_sets(a), as_sets(b))
    assert members(meet) == [x and y for x, y in pairs]
    assert members(join) == [x or y for x, y in pairs]
    # the rows must not overlap either, or probabilities would be counted twice
    assert length(meet) == sum(x and y for x, y in pairs)
    assert length(join) == sum(x or y for x, y in pairs)


@given(PAIRS)
def test_complement_and_what_it_adds_up_to(pairs: list[tuple[int, int]]) -> None:
    intervals = disjoint(pairs)
    rest = sets.complement(as_sets(intervals))
    assert members(rest) == [not x for x in inside(intervals)]
    assert members(sets.complement(rest)) == inside(intervals)
    assert members(sets.union(rest, as_sets(intervals))) == [True] * POINTS.size


@given(PAIRS, WHOLE, WHOLE)
def test_clipping(pairs: list[tuple[int, int]], low: int, high: int) -> None:
    intervals = disjoint(pairs)
    found = sets.clip(as_sets(intervals), float(low), float(high))
    expected = [x and low < p < high for x, p in zip(inside(intervals), POINTS, strict=True)]
    assert members(found) == expected


@given(PAIRS, PAIRS)
def test_ends_keep_their_rates(one: list[tuple[int, int]], two: list[tuple[int, int]]) -> None:
    """The derivative of a set's length is the sum of the rates of its ends: here end + 100 for each."""
    a, b = disjoint(one), disjoint(two)
    for found in (sets.intersect(as_sets(a), as_sets(b)), sets.union(as_sets(a), as_sets(b))):
        full = found.lower < found.upper
        growth = np.sum(np.where(full, found.upper_rate - found.lower_rate, 0.0))
        assert growth == length(found)


def test_problems_are_kept_apart() -> None:
    both = sets.make(np.array([[0.0, 5.0]]), np.array([[1.0, 9.0]]))
    chosen = sets.where(np.array([True, False]), both)
    assert (chosen.lower[0, 0], chosen.upper[0, 0]) == (0.0, 1.0)
    assert not chosen.lower[0, 1] < chosen.upper[0, 1]
    assert sets.compact(sets.stack([chosen, sets.nothing(2)])).lower.shape == (1, 2)
    assert sets.everything(3).count == 3
