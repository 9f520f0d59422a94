"""Finds all solutions of a smooth map at given outputs by branch and prune, without a written inverse.

Boxes are thrown away where an interval enclosure of the map misses the outputs, and shrunk by the Krawczyk
operator, which also proves that a box holds exactly one solution. Boxes that stay undecided down to the last
digits (the determinant vanishes there) are reported by their column.
Sources: R. Krawczyk (1969), Computing 4, 187-201; R. E. Moore, R. B. Kearfott, M. J. Cloud, Introduction to
Interval Analysis (SIAM 2009), chapter 8.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.formula.interval import Interval, enclose
from outspread.formula.interval_arithmetic import add, multiply, negate
from outspread.formula.tree import Apply, Name, Node, Number, rebuild, walk
from outspread.formula.tree import names as tree_names
from outspread.laws.law import Array, Law
from outspread.routes.jacobian.construct import is_integer, known_number, tidy
from outspread.routes.jacobian.precise import Precise
from outspread.routes.jacobian.smooth import Candidates, Mask, SmoothMap
from outspread.routes.jacobian.symbolic import parameter_ranges, reach

LARGEST_EFFORT = 20_000  # boxes looked at for one point
CHUNK = 256  # points worked on together
SMALLEST = 1e-13  # width at which an undecided box is given up, relative to its size and scale
_INFLATION = 0.1
_POLISHING = 200
_MOST_POLES = 6

Index = npt.NDArray[np.int64]


@dataclass(frozen=True)
class _Boxes:
    """`lower`, `upper` of shape (n, b); `column` says to which point each box belongs."""

    lower: Array
    upper: Array
    column: Index

    def take(self, which: Mask | Index) -> _Boxes:
        return _Boxes(self.lower[:, which], self.upper[:, which], self.column[which])


def _joined(parts: list[_Boxes]) -> _Boxes:
    return _Boxes(
        np.concatenate([part.lower for part in parts], axis=1),
        np.concatenate([part.upper for part in parts], axis=1),
        np.concatenate([part.column for part in parts]),
    )


class SearchedInverse:
    """The inverse of one smooth piece, found anew at each point."""

    def __init__(self, smooth: SmoothMap, laws: Mapping[str, Law]):
        """Raises TooManyBranches where floor or ceil take too many values."""
        self.smooth = smooth
        self.laws = laws
        meanings = dict(zip(smooth.outputs, smooth.piece.outputs, strict=True))
        self.ranges = parameter_ranges(smooth.piece.parameters, laws, meanings)
        reaches = np.array([reach(law) for law in laws.values()])
        self.start = self._widened(reaches)
        outputs = smooth.piece.outputs
        tidied = tuple(_tidied(output) for output in outputs)
        self.forms = (outputs,) if tidied == outputs else (outputs, tidied)
        self.poles = _poles(outputs)
        self.centre = np.array([float(law.icdf(0.5)) for law in laws.values()])
        spread = [float(law.iccdf(0.25)) - float(law.icdf(0.25)) for law in laws.values()]
        self.scale = np.array([max(one, 1e-300) for one in spread])
        self.unresolved: Index = np.zeros(0, dtype=np.int64)

    def _widened(self, reaches: Array) -> Array:
        """A little beyond the support, so that a solution on its edge is inside a box."""
        margin = 1e-9 * (reaches[:, 1] - reaches[:, 0])
        return np.column_stack([reaches[:, 0] - margin, reaches[:, 1] + margin])

    def candidates(self, points: Array) -> Iterator[Candidates]:
        """Candidates at points of shape (n, k); `unresolved` then holds the columns that stayed undecided."""
        unresolved: list[Index] = []
        for values in itertools.product(*self.ranges.values()):
            parameters = dict(zip(self.ranges, map(float, values), strict=True))
            for first in range(0, points.shape[1], CHUNK):
                with np.errstate(all="ignore"):  # unbounded slopes give infinities, which rule nothing out
                    found, open_columns = self._search(points[:, first : first + CHUNK], parameters)
                unresolved.append(open_columns + first)
                yield self._as_candidates(found, parameters, first)
        self.unresolved = np.unique(np.concatenate(unresolved)) if unresolved else np.zeros(0, dtype=np.int64)

    def _search(self, points: Array, parameters: Mapping[str, float]) -> tuple[_Boxes, Index]:
        count = points.shape[1]
        boxes = _Boxes(
            np.repeat(self.start[:, :1], count, axis=1),
            np.repeat(self.start[:, 1:], count, axis=1),
            np.arange(count),
        )
        effort = np.zeros(count, dtype=np.int64)
        proven = [boxes.take(np.zeros(count, dtype=bool))]
        regions = list(proven)
        given_up: list[Index] = []
        while boxes.column.size:
            effort += np.bincount(boxes.column, minlength=count)
            boxes = self._pruned(boxes, points, parameters)
            inflated = self._inflated(boxes)
            image = self._krawczyk(inflated, points, parameters)
            unique = _inside(image, inflated)
            regions.append(inflated.take(unique))
            proven.append(_Boxes(image.lower, image.upper, boxes.column).take(unique))
            boxes, changed = _intersected(boxes.take(~unique), image.take(~unique))
            small = self._small(boxes) | (effort[boxes.column] > LARGEST_EFFORT)
            given_up.append(self._without_poles(boxes.take(small), points, parameters).column)
            boxes, changed = boxes.take(~small), changed[~small]
            boxes = _joined([boxes.take(changed), *self._halves(boxes.take(~changed))])
        found = self._polished(_joined(proven), points, parameters)
        return _without_repeats(found, _joined(regions)), np.unique(np.concatenate(given_up))

    def _named(self, boxes: _Boxes, parameters: Mapping[str, float]) -> dict[str, Interval]:
        named = {name: Interval(boxes.lower[i], boxes.upper[i]) for i, name in enumerate(self.smooth.inputs)}
        size = boxes.column.size
        return named | {name: Interval.of(np.full(size, value)) for name, value in parameters.items()}

    def _pruned(self, boxes: _Boxes, points: Array, parameters: Mapping[str, float]) -> _Boxes:
        for form in self.forms:
            for index, output in enumerate(form):
                forward = enclose(output, self._named(boxes, parameters))
                boxes = boxes.take(forward.contains(points[index, boxes.column]))
        for condition in self.smooth.piece.conditions:
            held = enclose(condition, self._named(boxes, parameters))
            boxes = boxes.take(held.upper == 1.0)
        return boxes

    def _without_poles(self, boxes: _Boxes, points: Array, parameters: Mapping[str, float]) -> _Boxes:
        """The boxes that stay possible when every denominator in them is taken with one sign at a time."""
        if not boxes.column.size or not self.poles or len(self.poles) > _MOST_POLES:
            return boxes
        names = {pole: f" pole {i}" for i, pole in enumerate(self.poles)}
        outputs = [_put(output, names) for output in self.smooth.piece.outputs]
        named = self._named(boxes, parameters)
        ranges = {name: enclose(pole, named) for pole, name in names.items()}
        possible = np.zeros(boxes.column.size, dtype=bool)
        for signs in itertools.product((False, True), repeat=len(names)):
            sided = dict(named)
            for (name, part), above in zip(ranges.items(), signs, strict=True):
                low = np.maximum(part.lower, 0.0) if above else part.lower
                high = part.upper if above else np.minimum(part.upper, 0.0)
                none = ~(low <= high)
                sided[name] = Interval(np.where(none, np.nan, low), np.where(none, np.nan, high))
            here = np.ones(boxes.column.size, dtype=bool)
            for index, output in enumerate(outputs):
                here &= enclose(output, sided).contains(points[index, boxes.column])
            possible |= here
        return boxes.take(possible)

    def _inflated(self, boxes: _Boxes) -> _Boxes:
        width = boxes.upper - boxes.lower
        size = np.maximum(np.abs(boxes.lower), np.abs(boxes.upper))
        # enough to hold what rounding adds to the image of a box that is already small
        margin = _INFLATION * width + 1e-9 * size + 1e-12 * self.scale[:, None]
        return _Boxes(boxes.lower - margin, boxes.upper + margin, boxes.column)

    def _krawczyk(self, boxes: _Boxes, points: Array, parameters: Mapping[str, float]) -> _Boxes:
        """K(X) = m - C(f(m) - y) + (I - C·f'(X))(X - m); everything where the slopes are unbounded."""
        order, count = boxes.lower.shape
        middle = 0.5 * boxes.lower + 0.5 * boxes.upper
        at_middle = self._named(_Boxes(middle, middle, boxes.column), parameters)
        named = self._named(boxes, parameters)
        residual = [
            add(enclose(output, at_middle), Interval.of(-points[i, boxes.column]))
            for i, output in enumerate(self.smooth.piece.outputs)
        ]
        slopes = [[enclose(entry, named) for entry in row] for row in self.smooth.jacobian]
        inverse = _approximate_inverse(slopes, order, count)
        lower, upper = np.empty_like(boxes.lower), np.empty_like(boxes.upper)
        for i in range(order):
            step = add(*(multiply(Interval.of(inverse[:, i, j]), residual[j]) for j in range(order)))
            total = add(Interval.of(middle[i]), negate(step))
            for j in range(order):
                products = (multiply(Interval.of(inverse[:, i, k]), slopes[k][j]) for k in range(order))
                defect = add(Interval.of(float(i == j)), negate(add(*products)))
                away = add(Interval(boxes.lower[j], boxes.upper[j]), Interval.of(-middle[j]))
                total = add(total, multiply(defect, away))
            lower[i], upper[i] = total.lower, total.upper
        useless = ~np.all(np.isfinite(lower) & np.isfinite(upper), axis=0)
        useless |= np.logical_or.reduce([entry.empty for row in slopes for entry in row])
        lower[:, useless], upper[:, useless] = -np.inf, np.inf
        return _Boxes(lower, upper, boxes.column)

    def _small(self, boxes: _Boxes) -> Mask:
        size = np.maximum(np.abs(boxes.lower), np.abs(boxes.upper))
        floor = SMALLEST * np.maximum(size, 1e-6 * self.scale[:, None])
        return np.asarray(np.all(boxes.upper - boxes.lower <= floor, axis=0))

    def _halves(self, boxes: _Boxes) -> list[_Boxes]:
        """Each box cut in two across its widest side, measured on a scale linear near the law's centre and
        logarithmic far away from it."""
        if not boxes.column.size:
            return [boxes]
        centre, scale = self.centre[:, None], self.scale[:, None]
        low, high = np.arcsinh((boxes.lower - centre) / scale), np.arcsinh((boxes.upper - centre) / scale)
        with np.errstate(over="ignore"):
            middle = centre + scale * np.sinh(0.5 * low + 0.5 * high)
        inside = (middle > boxes.lower) & (middle < boxes.upper)
        middle = np.where(inside, middle, 0.5 * boxes.lower + 0.5 * boxes.upper)
        middle = np.where((boxes.lower < 0.0) & (boxes.upper > 0.0), 0.0, middle)  # where poles often are
        side = np.argmax(np.where(boxes.upper > boxes.lower, high - low, -1.0), axis=0)
        at = (side, np.arange(side.size))
        first_upper, second_lower = boxes.upper.copy(), boxes.lower.copy()
        first_upper[at], second_lower[at] = middle[at], middle[at]
        return [
            _Boxes(boxes.lower, first_upper, boxes.column),
            _Boxes(second_lower, boxes.upper, boxes.column),
        ]

    def _polished(self, boxes: _Boxes, points: Array, parameters: Mapping[str, float]) -> _Boxes:
        """Each box, which holds exactly one solution, shrunk until it shrinks no further."""
        for _ in range(_POLISHING if boxes.column.size else 0):
            image = self._krawczyk(boxes, points, parameters)
            lower, upper = np.maximum(boxes.lower, image.lower), np.minimum(boxes.upper, image.upper)
            usable = np.all(lower <= upper, axis=0)  # else the last rounding has crossed them: keep the box
            shrunk = np.any(upper - lower < 0.9 * (boxes.upper - boxes.lower), axis=0) & usable
            boxes = _Boxes(
                np.where(usable, lower, boxes.lower), np.where(usable, upper, boxes.upper), boxes.column
            )
            if not np.any(shrunk):
                break
        return boxes

    def _as_candidates(self, found: _Boxes, parameters: Mapping[str, float], first: int) -> Candidates:
        from mpmath import mpf

        columns = found.column + first
        middle = 0.5 * found.lower + 0.5 * found.upper

        def precise(index: int) -> Mapping[str, Precise] | None:
            return {
                name: mpf(float(value))
                for name, value in zip(self.smooth.inputs, middle[:, index], strict=True)
            }

        named = {name: Interval(found.lower[i], found.upper[i]) for i, name in enumerate(self.smooth.inputs)}
        constant = {name: np.full(columns.size, value) for name, value in parameters.items()}
        return Candidates(columns, named, constant, np.zeros(columns.size, dtype=bool), precise)


def _poles(outputs: Sequence[Node]) -> tuple[Node, ...]:
    """Denominators, and bases of negative powers, that depend on an input."""
    found: dict[Node, None] = {}
    for output in outputs:
        for node in walk(output):
            if isinstance(node, Apply) and node.operator in ("divide", "power"):
                exponent = known_number(tidy(node.arguments[1]))
                negative = exponent is not None and exponent < 0.0
                part = node.arguments[1] if node.operator == "divide" else node.arguments[0]
                if (node.operator == "divide" or negative) and tree_names(part):
                    found[part] = None
    return tuple(found)


def _put(node: Node, names: Mapping[Node, str]) -> Node:
    return rebuild(node, lambda part: Name(names[part]) if part in names else None)


def _tidied(node: Node) -> Node:
    """The tidied form, which often encloses better; `node` itself where folding may have rounded a number."""
    found = tidy(node)
    before, after = _numbers(node), _numbers(found)
    exact = after <= before or all(is_integer(value * 1024.0) for value in before | after)
    return found if exact else node


def _numbers(node: Node) -> set[float]:
    return {abs(part.value) for part in walk(node) if isinstance(part, Number)}


def _approximate_inverse(slopes: list[list[Interval]], order: int, count: int) -> Array:
    """Inverse of the middle of each slope matrix, shape (count, n, n); the identity where there is none."""
    matrix = np.empty((count, order, order))
    with np.errstate(invalid="ignore", over="ignore"):
        for i in range(order):
            for j in range(order):
                matrix[:, i, j] = 0.5 * slopes[i][j].lower + 0.5 * slopes[i][j].upper
        matrix[~np.all(np.isfinite(matrix), axis=(1, 2))] = np.eye(order)
        scale = np.prod(np.linalg.norm(matrix, axis=2), axis=1)
        singular = ~(np.abs(np.linalg.det(matrix)) > 1e-12 * scale)
        matrix[singular] = np.eye(order)
        return np.asarray(np.linalg.inv(matrix), dtype=np.float64)


def _inside(image: _Boxes, box: _Boxes) -> Mask:
    return np.asarray(np.all((image.lower > box.lower) & (image.upper < box.upper), axis=0))


def _intersected(boxes: _Boxes, image: _Boxes) -> tuple[_Boxes, Mask]:
    """The boxes cut with their images, the empty ones dropped, and which of them shrank to a half."""
    lower, upper = np.maximum(boxes.lower, image.lower), np.minimum(boxes.upper, image.upper)
    left = np.all(lower <= upper, axis=0)
    shrunk = np.any(upper - lower < 0.5 * (boxes.upper - boxes.lower), axis=0)
    return _Boxes(lower, upper, boxes.column).take(left), shrunk[left]


def _without_repeats(found: _Boxes, regions: _Boxes) -> _Boxes:
    """A solution inside an earlier solution's region of uniqueness is that earlier one."""
    keep = np.ones(found.column.size, dtype=bool)
    for i in range(found.column.size):
        if not keep[i]:
            continue
        same = found.column[i + 1 :] == found.column[i]
        low, high = regions.lower[:, i : i + 1], regions.upper[:, i : i + 1]
        within = np.all((found.lower[:, i + 1 :] >= low) & (found.upper[:, i + 1 :] <= high), axis=0)
        keep[i + 1 :] &= ~(same & within)
    return found.take(keep)
