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
LETTER, GAP = 4.6, 4.0  # mean width of a character in a label, and the room between labels, in points
MARGIN = 40.0  # how far a label may run out of the axes to either side, in points
#: depth of the tails that a plot of tails may show
DEEPEST_TAIL = 1e-12


@dataclass(frozen=True)
class Limit:
    """A value of an output that a requirement names."""

    at: float
    requirement: str


@dataclass(frozen=True)
class Place:
    """Where a label stands over its line: `shift` points to the right of it, in a row above the axes."""

    shift: float
    row: int


def placed_labels(at: list[float], texts: list[str], width: float) -> list[Place]:
    """Places for labels over the lines `at` (ascending, in points from the left of axes of that width) so
    that none covers another or runs far out of the axes: over its line, else beside it, else a row higher."""
    taken: list[tuple[float, float, int]] = []
    places = []
    for i, (x, text) in enumerate(zip(at, texts, strict=True)):
        half = 0.5 * LETTER * len(text)
        follows = at[i + 1] - LETTER * len(texts[i + 1]) / 2 if i + 1 < len(at) else np.inf
        shifts = (0.0, 1.0 - half, half - 1.0) if x + half <= follows else (1.0 - half, 0.0, half - 1.0)
        choices = [Place(shift, row) for row in range(3) for shift in shifts]

        def free(place: Place, x: float = x, half: float = half) -> bool:
            left, right = x + place.shift - half, x + place.shift + half
            inside = left >= -MARGIN and right <= width + MARGIN
            return inside and all(
                row != place.row or right + GAP <= start or left >= stop + GAP for start, stop, row in taken
            )

        place = next((choice for choice in choices if free(choice)), choices[-1])
        taken.append((x + place.shift - half, x + place.shift + half, place.row))
        places.append(place)
    return places


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


@dataclass(frozen=True)
class Reach:
    """Where a law's probability lies, well enough for choosing a range: points outwards from the middle
    with the probability beyond each (`left`: at most, `right`: above), and the 0.025 and 0.975 quantiles;
    `ended` says on which sides the last point is the end of the support."""

    inner: tuple[float, float]
    left: tuple[Array, Array]
    right: tuple[Array, Array]
    ended: tuple[bool, bool] = (False, False)

    def beyond(self, p: float) -> tuple[float, float]:
        """Roughly the points with probability `p` outside on each side, the outermost known where less is."""
        return _outwards(self.left, p), _outwards(self.right, p)

    @property
    def floor(self) -> float:
        """The smallest probability that both sides reach; a side that ends, be it in an atom, reaches 0."""
        last = [
            0.0 if ended else float(side[1][-1])
            for side, ended in zip((self.left, self.right), self.ended, strict=True)
        ]
        return max(last)


def _outwards(side: tuple[Array, Array], p: float) -> float:
    x, beyond = side
    with np.errstate(divide="ignore"):
        heights = -np.log(np.maximum(beyond, 1e-300))
    return float(np.interp(-math.log(p), heights, x))


def reach(law: Law) -> Reach:
    """The reach of a law from three quantiles and two dozen values: a derived law pays for each."""
    with np.errstate(all="ignore"):
        low, middle, high = np.asarray(law.icdf(np.array([0.025, 0.5, 0.975])), float).tolist()
        lower, upper = law.support()
        steps = np.geomspace(0.25, 16.0, 13)
        body = high - low if high > low else abs(middle) or 1.0
        left = np.unique(np.maximum(low - body * (steps - 0.25), lower))[::-1]
        right = np.unique(np.minimum(high + body * (steps - 0.25), upper))
        below = np.minimum.accumulate(np.asarray(law.cdf(left), float))
        above = np.minimum.accumulate(np.asarray(law.ccdf(right), float))
    ended = (bool(left[-1] <= lower), bool(right[-1] >= upper))
    return Reach((low, high), (left, below), (right, above), ended)


def window(law_reach: Reach, marks: tuple[float, ...] = ()) -> tuple[float, float]:
    """The range for density and distribution function: nearly all of the probability, with the marks
    near enough to show beside it; heavy tails are cut so that the body stays visible."""
    low, high = law_reach.inner
    body = high - low
    for p in (5e-4, 2e-3, 5e-3, 1e-2):
        low, high = law_reach.beyond(p)
        if body > 0 and high - low <= 4 * body:
            break
    span = (high - low) or abs(low) or 1.0
    for mark in marks:
        if low - 0.6 * span <= mark <= high + 0.6 * span:
            low, high = min(low, mark), max(high, mark)
    margin = 0.06 * (high - low or span)
    return low - margin, high + margin


def tail_window(law_reach: Reach) -> tuple[float, float, float]:
    """(low, high, depth): how far the plot of the tails goes, and the probability it reaches."""
    floor = law_reach.floor
    depth = DEEPEST_TAIL if floor <= DEEPEST_TAIL else min(10.0 ** math.ceil(math.log10(floor)), 1e-2)
    return *law_reach.beyond(depth), depth


@dataclass(frozen=True)
class Curves:
    """The density and the distribution function of a law over one range."""

    density: DensityCurve
    x: Array
    cdf: Array


def sample(law: Law, low: float, high: float) -> Curves:
    """Both curves at the same points: even ones, more where the probability is, both sides of breaks."""
    with np.errstate(all="ignore"):
        even = np.linspace(low, high, 101)
        cdf = np.asarray(law.cdf(even), float)
        inside = np.interp(np.linspace(0.004, 0.996, 100), np.maximum.accumulate(cdf), even)
        lower, upper = law.support()
        edges = [point for point in (lower, *law.breaks(), upper) if low <= point <= high]
        nearest = (high - low) * 1e-9
        sides = [point + step for point in edges[:25] for step in (-nearest, nearest)]
        x = np.unique(np.concatenate([even, inside, sides]))
        x = x[(x >= low) & (x <= high)][:MOST_POINTS]
        pdf = np.asarray(law.pdf(x), float) if law.continuous_mass else np.zeros(x.size)
        cdf = np.asarray(law.cdf(x), float)
    return Curves(_density(law, x, pdf, cdf), *_with_jumps(law, x, cdf))


def _density(law: Law, x: Array, pdf: Array, cdf: Array) -> DensityCurve:
    """The density clipped to a height at which its bulk can be seen."""
    finite = np.isfinite(pdf)
    bulk = pdf[finite & (cdf >= 0.03) & (cdf <= 0.97)]
    usual = float(np.max(bulk)) if bulk.size else 1.0
    highest = float(np.max(pdf[finite])) if finite.any() else 1.0
    ends = [end for end, is_so in zip(law.support(), law.singular_ends(), strict=True) if is_so]
    with np.errstate(all="ignore"):
        breaks = np.array(law.breaks()[:25], float)
        poles = breaks[~np.isfinite(np.asarray(law.pdf(breaks), float))].tolist() if breaks.size else []
    shown = tuple(sorted(point for point in (*ends, *poles) if x[0] <= point <= x[-1]))
    top = 1.12 * (min(highest, 1.6 * usual) if shown or highest > 8 * usual else highest)
    return DensityCurve(x, np.where(finite, np.minimum(pdf, 1.5 * top), 1.5 * top), top or 1.0, shown)


def _with_jumps(law: Law, x: Array, cdf: Array) -> tuple[Array, Array]:
    """Points of the distribution function with both ends of every jump."""
    atoms = law.atoms()
    seen = np.flatnonzero((atoms.values >= x[0]) & (atoms.values <= x[-1]))[:90]
    jumps = atoms.values[seen]
    if not law.continuous_mass:
        x, cdf = x[[0, -1]], cdf[[0, -1]]
    with np.errstate(all="ignore"):
        after = np.asarray(law.cdf(jumps), float)
    both_x = np.concatenate([x, jumps, jumps])
    both_y = np.concatenate([cdf, after, after - atoms.masses[seen]])
    order = np.lexsort((both_y, both_x))
    return both_x[order], both_y[order]


def tails(law: Law, low: float, high: float, depth: float) -> tuple[Array, Array, Array]:
    """x, cdf and ccdf for the logarithmic plot, nan where a tail is below `depth`.

    Each is computed where it is the smaller one and taken from the other elsewhere: near 1 a curve on a
    logarithmic scale shows no difference.
    """
    span = high - low
    with np.errstate(all="ignore"):
        near = span * np.geomspace(1e-8, 0.02, 16)  # a tail may fall steeply at the end of its support
        x = np.unique(
            np.concatenate([np.linspace(low - 0.02 * span, high + 0.02 * span, 90), low + near, high - near])
        )
        if law.continuous_mass < 1.0:
            atoms = law.atoms().values
            x = np.unique(np.concatenate([x, atoms[(atoms >= x[0]) & (atoms <= x[-1])][:90]]))
        below = np.asarray(law.cdf(x), float)
        small = below <= 0.5
        above = 1.0 - below
        above[~small] = np.asarray(law.ccdf(x[~small]), float)
    floor = depth / 10
    return x, np.where(below > floor, below, np.nan), np.where(above > floor, above, np.nan)


def drawn_depth(depth: float, *curves: Array) -> float:
    """The power of ten down to which the curves go, where none of them reaches `depth`."""
    least = min((float(np.nanmin(curve)) for curve in curves if np.isfinite(curve).any()), default=depth)
    return max(depth, 10.0 ** math.floor(math.log10(least)))


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
