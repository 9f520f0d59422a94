"""Chooses what a plot of a law shows: the range, at most 400 points, clipped heights, the limits to mark.

Pure numbers; drawing them is `plots`' business.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from outspread.formula.tree import COMPARISONS, Apply, Name, Node, Number, walk
from outspread.laws.law import Array, Law
from outspread.reading.model import Model

MOST_POINTS = 400
#: depth of the tails that a plot of tails may show
DEEPEST_TAIL = 1e-12


@dataclass(frozen=True)
class Limit:
    """A value of an output that a requirement names."""

    at: float
    requirement: str


@dataclass(frozen=True)
class DensityCurve:
    """Points of the density; `top` is the height to show, `unbounded` where it has no bound."""

    x: Array
    y: Array
    top: float
    unbounded: tuple[float, ...]


def limits(model: Model, output: str) -> tuple[Limit, ...]:
    """The values of the output that the model's requirements compare it with, each once, ascending."""
    found: dict[float, str] = {}
    for requirement in model.requirements:
        if requirement.kind == "quantile" and requirement.output == output:
            for bound in (requirement.at_least, requirement.at_most):
                if bound is not None:
                    found.setdefault(bound, requirement.name)
        elif requirement.event is not None:
            for value in _compared(requirement.event, output):
                found.setdefault(value, requirement.name)
    return tuple(Limit(at, found[at]) for at in sorted(found))


def _compared(event: Node, output: str) -> list[float]:
    values = []
    for node in walk(event):
        if isinstance(node, Apply) and node.operator in COMPARISONS:
            sides = [_constant(side) for side in node.arguments]
            named = [isinstance(side, Name) and side.name == output for side in node.arguments]
            values += [v for v, other in zip(sides, reversed(named), strict=True) if other and v is not None]
    return values


def _constant(node: Node) -> float | None:
    if isinstance(node, Number):
        return node.value
    if isinstance(node, Apply) and node.operator == "negate":
        inner = _constant(node.arguments[0])
        return None if inner is None else -inner
    return None


def quantiles(law: Law, p: float) -> tuple[float, float]:
    """Lower and upper quantile with `p` outside on each side, infinite ends left out by a finite support."""
    with np.errstate(all="ignore"):
        return float(law.icdf(p)), float(law.iccdf(p))


def window(law: Law, marks: tuple[float, ...] = ()) -> tuple[float, float]:
    """The range for density and distribution function: nearly all of the probability, with the marks
    near enough to show beside it; heavy tails are cut so that the body stays visible."""
    inner = quantiles(law, 0.025)
    body = inner[1] - inner[0]
    low, high = inner
    for p in (5e-4, 2e-3, 5e-3, 1e-2):
        low, high = quantiles(law, p)
        if body > 0 and high - low <= 4 * body:
            break
    span = (high - low) or abs(low) or 1.0
    for mark in marks:
        if low - 0.6 * span <= mark <= high + 0.6 * span:
            low, high = min(low, mark), max(high, mark)
    margin = 0.06 * (high - low or span)
    return low - margin, high + margin


def tail_window(law: Law) -> tuple[float, float, float]:
    """(low, high, depth): how far the plot of the tails goes, and the probability it reaches."""
    inner = quantiles(law, 0.005)
    body = inner[1] - inner[0]
    depth = DEEPEST_TAIL
    for depth in (DEEPEST_TAIL, 1e-9, 1e-7, 1e-6, 1e-5, 1e-4, 1e-3):
        low, high = quantiles(law, depth)
        if math.isfinite(low) and math.isfinite(high) and high - low <= max(12 * body, 1e-300):
            return low, high, depth
    return *quantiles(law, 1e-3), 1e-3


def density(law: Law, low: float, high: float) -> DensityCurve:
    """The density on [low, high], denser where the probability is, both sides of every break."""
    lower, upper = law.support()
    with np.errstate(all="ignore"):
        inside = np.asarray(law.icdf(np.linspace(0.002, 0.998, 150)), float)
        edges = [point for point in (lower, *law.breaks(), upper) if low <= point <= high]
        nearest = (high - low) * 1e-9
        sides = [point + step for point in edges[:25] for step in (-nearest, nearest)]
        x = np.unique(np.concatenate([np.linspace(low, high, 200), inside, sides]))
        x = x[(x >= low) & (x <= high) & np.isfinite(x)][:MOST_POINTS]
        y = np.asarray(law.pdf(x), float)
        bulk = np.asarray(law.pdf(np.asarray(law.icdf(np.linspace(0.03, 0.97, 95)), float)), float)
    bulk = bulk[np.isfinite(bulk)]
    usual = float(np.max(bulk)) if bulk.size else 1.0
    finite = y[np.isfinite(y)]
    highest = float(np.max(finite)) if finite.size else 1.0
    singular = [end for end, is_so in zip((lower, upper), law.singular_ends(), strict=True) if is_so]
    with np.errstate(all="ignore"):
        singular += [point for point in law.breaks() if not math.isfinite(float(law.pdf(point)))]
    shown = tuple(sorted(point for point in singular if low <= point <= high))
    top = 1.12 * (min(highest, 1.6 * usual) if shown or highest > 8 * usual else highest)
    return DensityCurve(x, np.where(np.isfinite(y), np.minimum(y, 1.5 * top), 1.5 * top), top or 1.0, shown)


def distribution(law: Law, low: float, high: float) -> tuple[Array, Array]:
    """Points of the distribution function, with both ends of every jump."""
    with np.errstate(all="ignore"):
        atoms = law.atoms()
        jumps = atoms.values[(atoms.values >= low) & (atoms.values <= high)][:90]
        inside = np.asarray(law.icdf(np.linspace(0.005, 0.995, 100)), float)
        x = np.unique(np.concatenate([np.linspace(low, high, 180), inside]))
        x = x[(x > low) & (x < high)] if law.continuous_mass else np.zeros(0)
        x = np.unique(np.concatenate([[low, high], x, jumps]))
        y = np.asarray(law.cdf(x), float)
        before = y[np.searchsorted(x, jumps)] - _masses(law, jumps)
    both_x = np.concatenate([x, jumps])
    both_y = np.concatenate([y, before])
    order = np.lexsort((both_y, both_x))
    return both_x[order], both_y[order]


def _masses(law: Law, points: Array) -> Array:
    atoms = law.atoms()
    return atoms.masses[np.searchsorted(atoms.values, points)]


def tails(law: Law, low: float, high: float, depth: float) -> tuple[Array, Array, Array]:
    """x, cdf and ccdf for the logarithmic plot, nan where a tail is below `depth` or unity."""
    margin = 0.02 * (high - low)
    with np.errstate(all="ignore"):
        spread = np.geomspace(depth, 0.5, 90)
        ends = [np.asarray(inverse(spread), float) for inverse in (law.icdf, law.iccdf)]
        x = np.concatenate([np.linspace(low - margin, high + margin, 150), *ends])
        x = np.unique(x[np.isfinite(x)])[:MOST_POINTS]
        below, above = np.asarray(law.cdf(x), float), np.asarray(law.ccdf(x), float)
    floor = depth / 10
    return x, np.where(below > floor, below, np.nan), np.where(above > floor, above, np.nan)


def thinned(points: tuple[tuple[float, float], ...], most: int = MOST_POINTS) -> tuple[Array, Array]:
    """At most `most` of the points of a curve, the largest and smallest of every stretch among them."""
    x = np.array([point[0] for point in points], float)
    y = np.array([point[1] for point in points], float)
    keep = np.isfinite(x) & np.isfinite(y)
    x, y = x[keep], y[keep]
    if x.size <= most:
        return x, y
    stretches = np.array_split(np.arange(x.size), most // 2)
    chosen = sorted({int(part[pick(y[part])]) for part in stretches for pick in (np.argmin, np.argmax)})
    return x[chosen], y[chosen]
