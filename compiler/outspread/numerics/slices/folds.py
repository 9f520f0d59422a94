"""Where the slices of a plane change their structure: folds and ends of the region, turning points, corners.

A panel of the outer integral must not hide the place where a slice becomes empty or falls into two parts;
`structure_cuts` brackets such places, `critical_points` and `corners` find the points around which whole
regions of a level set can be small.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.numerics.sets import Array, Sets

Index = npt.NDArray[np.int64]
_BISECTIONS = 22
_STARTS = 13
_NEWTON = 30
_MOST = 24
_MOST_KINKS = 8


def structure_cuts(
    slices: Callable[[Array, Index], Sets], low: float, high: float, panels: tuple[Array, Array, Index]
) -> tuple[Array, Array, Index]:
    """The panels, cut around every change in the number of intervals that a slice has within [low, high].

    `slices(t, owner)` gives the slice at outer coordinates t. Each change found between the ends and the
    middle of a panel is bracketed to a millionth of the panel; the bracket is a panel of its own.
    """
    lower, upper, owner = panels
    if not lower.size:
        return panels
    inside = 1e-9 * (upper - lower)
    points = np.stack([lower + inside, 0.5 * (lower + upper), upper - inside])
    kinds = signature(slices(points.ravel(), np.tile(owner, 3)), low, high).reshape(3, -1)
    left: list[Array] = []
    right: list[Array] = []
    who: list[Index] = []
    for first, second in ((0, 1), (1, 2)):
        changed = np.flatnonzero(kinds[first] != kinds[second])
        if changed.size:
            a, b = _bracketed(
                slices, low, high, points[first, changed], points[second, changed], owner[changed],
                kinds[first, changed],
            )  # fmt: skip
            left.append(a)
            right.append(b)
            who.append(changed)
    if not left:
        return panels
    cuts = np.concatenate([*left, *right])
    panel = np.concatenate([*who, *who])
    starts, ends = np.concatenate([lower, cuts]), np.concatenate([upper, cuts])
    every = np.concatenate([np.arange(lower.size), panel])
    order = np.lexsort((starts, every))
    starts, every = starts[order], every[order]
    following = np.append(starts[1:], np.inf)
    same = np.append(every[1:] == every[:-1], False)
    ends = np.where(same, following, upper[every])
    keep = ends > starts
    return starts[keep], ends[keep], owner[every[keep]]


def signature(where: Sets, low: float, high: float) -> Index:
    """Number of intervals within [low, high] for each problem, told apart by whether they reach its ends."""
    lower, upper = np.maximum(where.lower, low), np.minimum(where.upper, high)
    full = lower < upper
    count = full.sum(axis=0)
    at_low = (full & (lower <= low)).any(axis=0)
    at_high = (full & (upper >= high)).any(axis=0)
    return np.asarray(4 * count + 2 * at_low + at_high, np.int64)


def _bracketed(
    slices: Callable[[Array, Index], Sets],
    low: float,
    high: float,
    a: Array,
    b: Array,
    owner: Index,
    kind: Index,
) -> tuple[Array, Array]:
    for _ in range(_BISECTIONS):
        middle = 0.5 * (a + b)
        same = signature(slices(middle, owner), low, high) == kind
        a, b = np.where(same, middle, a), np.where(same, b, middle)
    return a, b


def critical_points(
    expression: Node, pair: tuple[str, str], grids: tuple[Array, Array], others: Mapping[str, Array]
) -> tuple[Array, Array]:
    """Coordinates at which the gradient in both inputs vanishes, by Newton's method from a grid of starts.

    `others` holds single values of discrete inputs; only a few combinations need to be looked at, since the
    result grades panels and states nothing.
    """
    slopes = [derivative(expression, name) for name in pair]
    return _common_zeros(slopes[0], slopes[1], pair, grids, others)


def corners(
    expression: Node, pair: tuple[str, str], grids: tuple[Array, Array], others: Mapping[str, Array]
) -> tuple[Array, Array]:
    """Coordinates at which two kinks of the formula cross: the corners of its pieces."""
    kinks = [
        node
        for node in dict.fromkeys([*nonsmooth(expression, pair[0]), *nonsmooth(expression, pair[1])])
        if any(name in names(node) for name in pair)
    ][:_MOST_KINKS]
    found = [
        _common_zeros(one, two, pair, grids, others)
        for i, one in enumerate(kinks)
        for two in kinks[:i]
        if set(pair) <= {*names(one), *names(two)}
    ]
    if not found:
        return np.zeros(0), np.zeros(0)
    return _distinct(np.concatenate([f[0] for f in found])), _distinct(np.concatenate([f[1] for f in found]))


def _common_zeros(
    one: Node,
    two: Node,
    pair: tuple[str, str],
    grids: tuple[Array, Array],
    others: Mapping[str, Array],
) -> tuple[Array, Array]:
    bends = [derivative(node, name) for node in (one, two) for name in pair]
    used = dict.fromkeys(name for node in (one, two, *bends) for name in names(node) if name not in pair)
    arguments = (*pair, *used)
    functions = [compile_numpy(node, arguments) for node in (one, two, *bends)]
    starts = [grid[np.unique(np.linspace(0, grid.size - 1, _STARTS).astype(int))] for grid in grids]
    mesh = np.meshgrid(*starts)
    x, z = mesh[0].ravel().astype(float), mesh[1].ravel().astype(float)
    fixed = [others[name] for name in used]
    with np.errstate(all="ignore"):
        for _ in range(_NEWTON):
            g1, g2, h11, h12, h21, h22 = (np.broadcast_to(f(x, z, *fixed), x.shape) for f in functions)
            determinant = h11 * h22 - h12 * h21
            dx, dz = (h22 * g1 - h12 * g2) / determinant, (h11 * g2 - h21 * g1) / determinant
            x, z = x - dx, z - dz
            small = np.abs(dx) <= 1e-9 * (np.abs(x) + 1e-300)
            small &= np.abs(dz) <= 1e-9 * (np.abs(z) + 1e-300)
        exact = (np.abs(dx) <= 1e-12 * np.ptp(grids[0])) & (np.abs(dz) <= 1e-12 * np.ptp(grids[1]))
    good = (small | exact) & np.isfinite(x) & np.isfinite(z)
    good &= (x > grids[0][0]) & (x < grids[0][-1]) & (z > grids[1][0]) & (z < grids[1][-1])
    return _distinct(x[good]), _distinct(z[good])


def _distinct(values: Array) -> Array:
    ordered = np.unique(values)
    if ordered.size < 2:
        return ordered
    scale = max(float(np.abs(ordered).max()), 1e-300)
    keep = np.append(True, np.diff(ordered) > 1e-8 * scale)
    return np.asarray(ordered[keep][:_MOST], float)
