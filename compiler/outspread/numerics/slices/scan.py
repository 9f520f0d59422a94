"""The quick search for roots of many similar problems: a fine grid, and turning points between its points.

It finds every root where the formula has at most one turning point between neighbouring grid points; that
this is so is checked by its caller, who solves a sample of the problems by interval subdivision.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Protocol

import numpy as np
import numpy.typing as npt

from outspread.numerics.roots import bracketed_root
from outspread.numerics.sets import Array

Index = npt.NDArray[np.int64]
Found = tuple[Array, Index, npt.NDArray[np.bool_]]
_PER_CELL = 3
_BLOCK = 2_000_000


class Problems(Protocol):
    """What is scanned: the formula and its slope at points x of the problems `index`."""

    grid: Array
    value: Callable[..., Array]
    slope_value: Callable[..., Array]

    def at(
        self, function: Callable[..., Array], environment: Mapping[str, Array], x: Array, index: Index
    ) -> Array: ...


def scan(problems: Problems, environment: Mapping[str, Array], count: int) -> Found:
    """(root, problem, moves with the parameter) of all sign changes."""
    points = _refined(problems.grid)
    size = max(1, _BLOCK // points.size)
    parts = [
        _scan_block(problems, environment, np.arange(start, min(start + size, count)), points)
        for start in range(0, count, size)
    ]
    roots, owners = np.concatenate([p[0] for p in parts]), np.concatenate([p[1] for p in parts])
    return roots, owners, np.ones(roots.size, bool)


def _refined(grid: Array) -> Array:
    share = np.arange(_PER_CELL) / _PER_CELL
    inner = grid[:-1, None] + share * np.diff(grid)[:, None]
    return np.append(inner.ravel(), grid[-1])


def _scan_block(
    problems: Problems, environment: Mapping[str, Array], which: Index, points: Array
) -> tuple[Array, Index]:
    index = np.repeat(which, points.size)
    x = np.tile(points, which.size)
    shape = (which.size, points.size)
    value = problems.at(problems.value, environment, x, index).reshape(shape)
    slope = problems.at(problems.slope_value, environment, x, index).reshape(shape)
    # a cell whose slope changes sign is cut at its turning point
    with np.errstate(invalid="ignore"):
        turns = (np.sign(slope[:, :-1]) * np.sign(slope[:, 1:]) < 0) & (
            np.sign(value[:, :-1]) * np.sign(value[:, 1:]) > 0
        )
        # only a turn towards 0 can hide a pair of roots
        turns &= np.sign(slope[:, :-1]) * np.sign(value[:, :-1]) < 0
        change = np.sign(value[:, :-1]) * np.sign(value[:, 1:]) < 0
    row, cell = np.nonzero(change)
    low, high, owner = points[cell], points[cell + 1], which[row]
    row, cell = np.nonzero(turns)
    if row.size:
        left, right, who = points[cell], points[cell + 1], which[row]
        top, _ = bracketed_root(
            lambda t, i: problems.at(problems.slope_value, environment, t, who[i]), left, right
        )
        known = ~np.isnan(top)
        top, left, right, who = top[known], left[known], right[known], who[known]
        beyond = problems.at(problems.value, environment, top, who)
        before = problems.at(problems.value, environment, left, who)
        crossed = np.sign(beyond) * np.sign(before) < 0
        low = np.concatenate([low, left[crossed], top[crossed]])
        high = np.concatenate([high, top[crossed], right[crossed]])
        owner = np.concatenate([owner, who[crossed], who[crossed]])
    root, _ = bracketed_root(lambda t, i: problems.at(problems.value, environment, t, owner[i]), low, high)
    zero = np.nonzero(value == 0)
    root = np.concatenate([root, points[zero[1]]])
    owner = np.concatenate([owner, which[zero[0]]])
    known = ~np.isnan(root)
    return root[known], owner[known]


def agrees(found: Found, roots: Array, owners: Index, sample: Index) -> bool:
    """Whether the roots found for the sampled problems are those of the subdivision."""
    chosen = np.isin(found[1], sample)
    one, who = found[0][chosen], found[1][chosen]
    order, other = np.lexsort((one, who)), np.lexsort((roots, owners))
    if one.size != roots.size or not np.array_equal(who[order], owners[other]):
        return False
    a, b = one[order], roots[other]
    return bool(np.all(np.abs(a - b) <= 1e-9 * np.maximum(np.abs(a), np.abs(b)) + 1e-300))
