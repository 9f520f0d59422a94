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
from outspread.formula.folding import fold
from outspread.formula.tree import Node, multiply, names, subtract
from outspread.numerics import sets
from outspread.numerics.sets import Array, Sets

Index = npt.NDArray[np.int64]
_BITS = 50  # of the length of a panel up to which a change of structure is bracketed
_SECTIONS = 16
_FEW = 1_000
_TOUCHING = 1e-14  # relative gap between intervals that rounding may leave
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
    structure: Callable[[Array, Index], Index], panels: tuple[Array, Array, Index]
) -> CutPanels:
    """The panels, cut around every change of `structure(t, owner)`: a number that tells the kind of slice at
    outer coordinates t (`signature`, and `sides` of its ends).

    Each change found between the ends and the middle of a panel is bracketed to the last places of the
    panel's length; the bracket is a panel of its own. Panels near a change have it for an origin: at a
    fold a slice shrinks like a square root.
    """
    lower, upper, owner = panels
    if not lower.size:
        return CutPanels(lower, upper, owner, lower)
    inside = 1e-9 * (upper - lower)
    points = np.stack([lower + inside, 0.5 * (lower + upper), upper - inside])
    kinds = structure(points.ravel(), np.tile(owner, 3)).reshape(3, -1)
    # the structure may change just between two panels, too
    differs = (owner[1:] == owner[:-1]) & (upper[:-1] == lower[1:]) & (kinds[2, :-1] != kinds[0, 1:])
    starts, who = [lower], [np.arange(lower.size)]
    opens, closes = [np.append(False, differs)], [np.append(differs, False)]
    for first, second in ((0, 1), (1, 2)):
        changed = np.flatnonzero(kinds[first] != kinds[second])
        if changed.size:
            a, b = _bracketed(
                structure, points[first, changed], points[second, changed], owner[changed],
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
    """Number of intervals within [low, high] for each problem, told apart by whether they reach its ends.
    Intervals that touch count as one: a gap may open between them."""
    lower, upper = np.maximum(where.lower, low), np.minimum(where.upper, high)
    full = lower < upper
    count = full.sum(axis=0)
    if full.shape[0] > 1:
        starts, ends = sets.ordered(np.where(full, lower, np.inf), np.where(full, upper, -np.inf))
        reach = np.maximum.accumulate(ends, axis=0)[:-1]
        with np.errstate(invalid="ignore"):
            apart = starts[1:] - reach > _TOUCHING * (np.abs(starts[1:]) + np.abs(reach))
        count = full.any(axis=0) + (apart & np.isfinite(starts[1:])).sum(axis=0)
    at_low = (full & (lower <= low)).any(axis=0)
    at_high = (full & (upper >= high)).any(axis=0)
    return np.asarray(4 * count + 2 * at_low + at_high, np.int64)


def sides(where: Sets, kinks: Array) -> Index:
    """A number for each problem that tells on which sides of the formula's kinks the ends of its slice lie,
    and which of them move with the value of the formula: one that stands still lies on a kink.

    `kinks` has shape (kinks, 2 * rows, problems): what vanishes at each kink, at the lower and at the upper
    ends of `where`; only the signs matter. The number does not depend on the rows in which intervals stand.
    """
    full = where.lower < where.upper
    ends = np.concatenate([where.lower, where.upper])
    still = np.concatenate([where.lower_rate, where.upper_rate]) == 0
    signs = np.where(np.isfinite(ends), np.where(kinks > 0, 1, 2) + 2 * still, 0)
    weights = np.random.Generator(np.random.PCG64(7)).integers(1, 2**20, (2, kinks.shape[0]))
    rows = full.shape[0]
    codes = np.tensordot(weights[0], signs[:, :rows], 1) + np.tensordot(weights[1], signs[:, rows:], 1)
    return np.asarray(np.where(full, codes * codes % 2_147_483_647, 0).sum(axis=0), np.int64)


def _bracketed(
    structure: Callable[[Array, Index], Index], a: Array, b: Array, owner: Index, kind: Index
) -> tuple[Array, Array]:
    """Many sections at a time for few panels, where a call costs more than its points."""
    sections = _SECTIONS if a.size < _FEW else 2
    shares = np.arange(1, sections) / sections
    for _ in range(int(np.ceil(_BITS / np.log2(sections)))):
        points = a + (b - a) * shares[:, None]
        same = structure(points.ravel(), np.tile(owner, sections - 1)).reshape(points.shape) == kind
        first = np.where(same.all(axis=0), sections - 1, np.argmin(same, axis=0))
        ends = np.vstack([a, points, b])
        columns = np.arange(a.size)
        a, b = ends[first, columns], ends[first + 1, columns]
    return a, b


def critical_points(
    expression: Node, pair: tuple[str, str], grids: tuple[Array, Array], others: Mapping[str, Array]
) -> tuple[Array, Array]:
    """Points at which the gradient in both inputs vanishes, by Newton's method from a grid of starts.

    `others` holds single values of discrete inputs; only a few combinations need to be looked at, since the
    result grades panels and states nothing.
    """
    slopes = [derivative(expression, name) for name in pair]
    return _common_zeros(slopes[0], slopes[1], pair, grids, others)


def corners(
    expression: Node, pair: tuple[str, str], grids: tuple[Array, Array], others: Mapping[str, Array]
) -> tuple[Array, Array]:
    """Points at which two kinks of the formula cross, the corners of its pieces, and at which the formula
    turns along a kink."""
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
    slopes = [derivative(expression, name) for name in pair]
    for kink in kinks:
        if set(pair) <= {*names(kink)}:
            across = [derivative(kink, name) for name in pair]
            along = subtract(multiply(slopes[0], across[1]), multiply(slopes[1], across[0]))
            found.append(_common_zeros(kink, fold(along), pair, grids, others))
    if not found:
        return np.zeros(0), np.zeros(0)
    return _distinct(np.concatenate([f[0] for f in found]), np.concatenate([f[1] for f in found]))


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
    return _distinct(x[good], z[good])


def _distinct(x: Array, z: Array) -> tuple[Array, Array]:
    """Points that differ by more than rounding, at most `_MOST` of them."""
    if x.size < 2:
        return x, z
    steps = [1e-8 * max(float(np.abs(column).max()), 1e-300) for column in (x, z)]
    cells = np.stack([np.round(column / step) for column, step in zip((x, z), steps, strict=True)])
    first = np.sort(np.unique(cells, axis=1, return_index=True)[1])[:_MOST]
    return x[first], z[first]
