"""Where the slices of a plane change their structure: folds and ends of the region, turning points, corners.

A panel of the outer integral must not hide the place where a slice becomes empty or falls into two parts;
`structure_cuts` brackets such places, `critical_points` and `corners` find the points around which whole
regions of a level set can be small.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.numerics.sets import Array, Sets

Index = npt.NDArray[np.int64]
_BISECTIONS = 50
_NEAR = 10.0  # lengths of a panel: a root further away looks smooth from there
_STARTS = 13
_NEWTON = 30
_MOST = 24
_MOST_KINKS = 8


@dataclass(frozen=True)
class CutPanels:
    """Panels of the outer coordinate; `origins` as `numerics.quadrature.integrate` takes them."""

    lower: Array
    upper: Array
    owner: Index
    origins: Array

    def part(self, which: npt.NDArray[np.bool_]) -> CutPanels:
        return CutPanels(self.lower[which], self.upper[which], self.owner[which], self.origins[which])


def structure_cuts(
    slices: Callable[[Array, Index], Sets], low: float, high: float, panels: tuple[Array, Array, Index]
) -> CutPanels:
    """The panels, cut around every change in the number of intervals that a slice has within [low, high].

    `slices(t, owner)` gives the slice at outer coordinates t. Each change found between the ends and the
    middle of a panel is bracketed to the last places of the panel's length; the bracket is a panel of its
    own. Panels near a change have it for an origin: at a fold a slice shrinks like a square root.
    """
    lower, upper, owner = panels
    if not lower.size:
        return CutPanels(lower, upper, owner, lower)
    inside = 1e-9 * (upper - lower)
    points = np.stack([lower + inside, 0.5 * (lower + upper), upper - inside])
    kinds = signature(slices(points.ravel(), np.tile(owner, 3)), low, high).reshape(3, -1)
    # the structure may change just between two panels, too
    differs = (owner[1:] == owner[:-1]) & (upper[:-1] == lower[1:]) & (kinds[2, :-1] != kinds[0, 1:])
    after, before = np.append(False, differs), np.append(differs, False)
    starts, who = [lower], [np.arange(lower.size)]
    opens, closes = [np.append(False, differs)], [np.append(differs, False)]
    for first, second in ((0, 1), (1, 2)):
        changed = np.flatnonzero(kinds[first] != kinds[second])
        if changed.size:
            a, b = _bracketed(
                slices, low, high, points[first, changed], points[second, changed], owner[changed],
                kinds[first, changed],
            )  # fmt: skip
            starts += [a, b]
            who += [changed, changed]
            opens += [np.zeros(changed.size, bool), np.ones(changed.size, bool)]
            closes += [np.zeros(changed.size, bool)] * 2
    start, panel = np.concatenate(starts), np.concatenate(who)
    opened, closing = np.concatenate(opens), np.concatenate(closes)
    order = np.lexsort((opened, start, panel))
    start, panel, opened = start[order], panel[order], opened[order]
    last = np.append(panel[1:] != panel[:-1], True)
    end = np.where(last, upper[panel], np.append(start[1:], np.inf))
    # the bracket's own panel lies between one that closes before it and one that opens behind it
    cut = np.append(opened[1:] & ~last[:-1], False)
    closed = np.where(last, closing[panel], np.append(cut[1:], False) & ~cut)
    found = CutPanels(start, end, owner[panel], _nearest(start, end, owner[panel], opened & ~cut, closed))
    return found.part(found.upper > found.lower)


def _nearest(
    lower: Array,
    upper: Array,
    owner: Index,
    opened: npt.NDArray[np.bool_],
    closed: npt.NDArray[np.bool_],
) -> Array:
    """For each of the ordered panels the nearest change of structure of its owner, NaN where that is far."""
    rows = np.arange(lower.size)
    before = np.maximum.accumulate(np.where(opened, rows, -1))
    after = np.minimum.accumulate(np.where(closed, rows, lower.size)[::-1])[::-1]
    known = [(before >= 0), (after < lower.size)]
    before, after = np.maximum(before, 0), np.minimum(after, lower.size - 1)
    known = [known[0] & (owner[before] == owner), known[1] & (owner[after] == owner)]
    below = np.where(known[0], lower - lower[before], np.inf)
    above = np.where(known[1], upper[after] - upper, np.inf)
    origin = np.where(below <= above, lower[before], upper[after])
    return np.where(np.minimum(below, above) <= _NEAR * (upper - lower), origin, np.nan)


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
