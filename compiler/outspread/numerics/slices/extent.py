"""The smallest interval that holds all values of a formula, by branch and bound on interval enclosures."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from outspread.formula.evaluate import compile_numpy
from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import Node
from outspread.laws.law import Array, Law

_MOST_BOXES = 4_000
_ROUNDS = 60


@dataclass(frozen=True)
class Extent:
    """Outer bounds that are sure, and how much further in the true ends may lie (0 where infinite)."""

    lower: float
    upper: float
    lower_error: float = 0.0
    upper_error: float = 0.0


def extent(expression: Node, laws: Mapping[str, Law], used: Sequence[str]) -> Extent:
    """The range of the formula over the supports of the inputs it uses."""
    supports = [laws[name].support() for name in used]
    grids = [_grid(laws[name]) for name in used]
    bounds = []
    for sign in (1.0, -1.0):
        bound, doubt = _greatest(expression, used, supports, grids, sign)
        if np.isinf(bound) and used:
            # enclosures over infinite boxes can be needlessly wide; all but 1e-300 of each input is finite
            finite = [_finite(laws[name], grid) for name, grid in zip(used, grids, strict=True)]
            limits = [(float(grid[0]), float(grid[-1])) for grid in finite]
            near, gap = _greatest(expression, used, limits, finite, sign)
            if _inside(expression, used, limits, finite, sign, near - gap):
                bound, doubt = near, gap
        bounds.append((bound, doubt))
    (upper, upper_error), (lower, lower_error) = bounds
    return Extent(-lower, upper, lower_error, upper_error)


def _finite(law: Law, grid: Array) -> Array:
    with np.errstate(all="ignore"):
        low = grid[0] if np.isfinite(grid[0]) else float(law.icdf(1e-300))
        high = grid[-1] if np.isfinite(grid[-1]) else float(law.iccdf(1e-300))
    return np.unique(np.concatenate([[low, high], grid[np.isfinite(grid)]]))


def _inside(
    expression: Node,
    used: Sequence[str],
    limits: Sequence[tuple[float, float]],
    grids: Sequence[Array],
    sign: float,
    best: float,
) -> bool:
    """Whether the greatest value lies inside the finite box, not on a face that stands for infinity: the
    formula must stay clearly below it on every such face."""
    evaluate = compile_numpy(expression, used)
    generator = np.random.Generator(np.random.PCG64(1))
    scale = abs(best) + 1e-300
    for i in range(len(used)):
        for face in limits[i]:
            points = [low + (high - low) * generator.random(4_000) for low, high in limits]
            points[i] = np.full(4_000, face)
            near = [grid[generator.integers(0, grid.size, 4_000)] for grid in grids]
            near[i] = points[i]
            for columns in (points, near):
                with np.errstate(all="ignore"):
                    value = sign * np.broadcast_to(np.asarray(evaluate(*columns), float), (4_000,))
                if bool(np.any(value > best - 1e-6 * scale)):
                    return False
    return True


def _grid(law: Law) -> Array:
    """A starting partition of the support: ends and a few quantiles."""
    low, high = law.support()
    with np.errstate(all="ignore"):
        inner = law.icdf([1e-12, 1e-3, 0.5, 1 - 1e-3, 1 - 1e-12])
    inner = np.concatenate([inner, law.breaks(), [0.0]])
    inner = inner[np.isfinite(inner) & (inner > low) & (inner < high)]
    return np.unique(np.concatenate([[low], inner, [high]]))


def _greatest(
    expression: Node,
    used: Sequence[str],
    supports: Sequence[tuple[float, float]],
    grids: Sequence[Array],
    sign: float,
) -> tuple[float, float]:
    """(sure upper bound of sign * formula, gap to a value that is attained)."""
    if not used:
        value = sign * float(compile_numpy(expression, ())())
        return value, 0.0
    evaluate = compile_numpy(expression, used)
    if len(used) > 3:
        lows = np.array([[low for low, _ in supports]])
        highs = np.array([[high for _, high in supports]])
    else:
        lows, highs = _cells(grids)
    best, at = -np.inf, np.zeros(len(used))
    bound = np.inf
    for _ in range(_ROUNDS):
        with np.errstate(all="ignore"):
            box = {n: Interval(lows[:, i], highs[:, i]) for i, n in enumerate(used)}
            span = enclose(expression, box)
            reach = np.broadcast_to(
                np.asarray(span.upper if sign > 0 else -span.lower, float), lows.shape[:1]
            )
            corner = _representative(lows, highs)
            values = sign * np.asarray(evaluate(*corner.T), float) + 0.0
        reach = np.where(np.isnan(reach), -np.inf, reach)
        finite = values[~np.isnan(values)]
        if finite.size and float(finite.max()) > best:
            best = float(finite.max())
            at = corner[int(np.nanargmax(values))]
        bound = float(reach.max())
        if bound == np.inf or bound <= best or bound - best <= 1e-14 * max(abs(bound), abs(best)):
            break
        keep = reach > best
        lows, highs, reach = lows[keep], highs[keep], reach[keep]
        if lows.shape[0] > _MOST_BOXES or len(used) > 3:
            break
        lows, highs = _halved(lows, highs)
    if np.isinf(bound):
        return bound, 0.0
    if not np.isfinite(best):
        return bound, 0.0
    return bound, max(bound - best, 0.0) + _rounding(expression, used, at, best)


def _rounding(expression: Node, used: Sequence[str], at: Array, value: float) -> float:
    """How far the value at an end may be off because its inputs are decimals that were rounded; 0 for an end
    that is itself a short decimal."""
    if len(repr(value)) <= 14:
        return 0.0
    box = {
        name: Interval(np.array([np.nextafter(x, -np.inf)]), np.array([np.nextafter(x, np.inf)]))
        for name, x in zip(used, at.tolist(), strict=True)
    }
    with np.errstate(all="ignore"):
        span = enclose(expression, box)
    width = float(np.ravel(span.upper)[0] - np.ravel(span.lower)[0])
    return width if np.isfinite(width) else 0.0


def _cells(grids: Sequence[Array]) -> tuple[Array, Array]:
    lower = np.meshgrid(*(grid[:-1] for grid in grids), indexing="ij")
    upper = np.meshgrid(*(grid[1:] for grid in grids), indexing="ij")
    return np.stack([a.ravel() for a in lower], 1), np.stack([a.ravel() for a in upper], 1)


def _representative(lows: Array, highs: Array) -> Array:
    """Points of the boxes: all corners (finite ones) and middles."""
    middle = np.where(np.isinf(lows), highs - 1, np.where(np.isinf(highs), lows + 1, 0.5 * (lows + highs)))
    middle = np.where(np.isinf(lows) & np.isinf(highs), 0.0, middle)
    low = np.where(np.isinf(lows), middle, lows)
    high = np.where(np.isinf(highs), middle, highs)
    points = [middle]
    dimensions = lows.shape[1]
    for code in range(2 ** min(dimensions, 4)):
        pick = np.array([(code >> i) & 1 for i in range(dimensions)], bool)
        points.append(np.where(pick, high, low))
    return np.concatenate(points)


def _halved(lows: Array, highs: Array) -> tuple[Array, Array]:
    """Halve each box along its widest side (an infinite side is cut at twice its finite end)."""
    with np.errstate(all="ignore"):
        width = np.where(np.isinf(highs - lows), np.inf, highs - lows)
        relative = width / np.maximum(np.abs(lows) + np.abs(highs), 1e-300)
    relative = np.where(np.isinf(width), np.inf, relative)
    axis = np.argmax(relative, axis=1)
    row = np.arange(lows.shape[0])
    low, high = lows[row, axis], highs[row, axis]
    cut = np.where(
        np.isinf(low) & np.isinf(high), 0.0,
        np.where(
            np.isinf(high), 2 * np.abs(low) + 1,
            np.where(np.isinf(low), -2 * np.abs(high) - 1, 0.5 * (low + high)),
        ),
    )  # fmt: skip
    left_high, right_low = highs.copy(), lows.copy()
    left_high[row, axis] = cut
    right_low[row, axis] = cut
    return np.concatenate([lows, right_low]), np.concatenate([left_high, highs])
