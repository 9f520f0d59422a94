"""Roots of a formula in one variable by interval subdivision, for many problems at once.

A box is dropped when the enclosure of the formula excludes 0, and solved by bracketing when the enclosure of
its derivative excludes 0; otherwise it is halved. Nothing is missed: what stays undecided at the smallest
size is kept as a boundary of its own (a double root, a jump or a pole), at which the sign is looked at anew.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
import numpy.typing as npt

from outspread.errors import DerivationError
from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import COMPARISONS, Apply, Node, Number, names, subtract, walk
from outspread.numerics import sets
from outspread.numerics.roots import bracketed_root
from outspread.numerics.sets import Array, Sets
from outspread.numerics.slices.scan import agrees, scan

Index = npt.NDArray[np.int64]
_CHUNK = 20_000
_MANY = 300  # problems from which on the quick way is taken
_AUDIT = 48
_SMALLEST = 4e-15
_DEPTH = 64
_JUMPS = COMPARISONS | {"and", "or", "not", "if", "sign", "floor", "ceil", "atan2"}
_MOST_BOXES = 200_000  # undecided at once: beyond this the formula has no end of boundaries


class TooManyBoundaries(DerivationError):
    """The sign changes of a formula cannot be told apart: there are too many, or one never gets isolated."""

    def __init__(self) -> None:
        super().__init__(
            "the formula changes its sign at more places than can be told apart; limit its inputs' ranges"
        )


Solve = Callable[[Mapping[str, Array], int], Sets]


def root_finder(left: Node, right: Node, operator: str, name: str, grid: Array, parameter: str) -> Solve:
    """A solver of `left operator right` for `name`: where the left side holds no other name, its monotone
    branches are found once and each problem is a bracketed root on every branch; else by subdivision."""
    if names(left) == (name,) and name not in names(right):
        return Branches(left, right, operator, name, grid, parameter).solve
    return Isolator(left, right, operator, name, grid, parameter).solve


class Branches:
    """`left operator right` where left is a formula of `name` alone: its monotone, continuous branches."""

    def __init__(self, left: Node, right: Node, operator: str, name: str, grid: Array, parameter: str):
        self.below = operator in ("less", "less_equal")
        self.value = compile_numpy(left, (name,))
        self.slope = compile_numpy(derivative(left, name), (name,))
        self.right_arguments = names(right)
        self.right = compile_numpy(right, self.right_arguments)
        self.rate = compile_numpy(derivative(right, parameter), self.right_arguments)
        points = [grid[[0, -1]]]
        for node in (derivative(left, name), *nonsmooth(left, name)):
            if names(node) == (name,):
                isolator = Isolator(node, Number(0.0), "less_equal", name, grid, parameter)
                points.append(isolator.boundaries({}, 1)[0])
        ends = np.unique(np.concatenate(points))
        self.start, self.end = ends[:-1], ends[1:]
        self.low, self.first = self._inside(self.start, self.end, 1.0)
        self.high, self.last = self._inside(self.end, self.start, -1.0)

    def _inside(self, ends: Array, others: Array, side: float) -> tuple[Array, Array]:
        """Where a branch begins and its value there: a pole, or a jump that shows as a value which does not
        continue the branch, is left out by the least step inwards."""
        inner = 1e-9 * np.abs(others - ends)
        with np.errstate(all="ignore"):
            at, near, far = (np.asarray(self.value(x), float) for x in (
                ends, ends + side * inner, others - side * inner,
            ))  # fmt: skip
            jump = ~np.isfinite(at) | (np.abs(at - near) > 0.1 * np.abs(far - near) + 1e-6 * np.abs(near))
            moved = np.where(jump, np.nextafter(ends, others), ends)
            return moved, np.where(jump, np.asarray(self.value(moved), float), at)

    def solve(self, environment: Mapping[str, Array], count: int) -> Sets:
        """One row for each branch."""
        given = [environment[n] for n in self.right_arguments]
        bound = np.broadcast_to(np.asarray(self.right(*given), float), (count,))
        speed = np.broadcast_to(np.asarray(self.rate(*given), float), (count,))
        first, last = self.first[:, None], self.last[:, None]
        with np.errstate(invalid="ignore"):
            least, most = np.minimum(first, last), np.maximum(first, last)
            rising = last >= first
            inside = (bound > least) & (bound < most)
            holds_all = (bound >= most) if self.below else (bound <= least)
        branch, problem = np.nonzero(inside)
        root, _ = bracketed_root(
            lambda x, i: np.asarray(self.value(x), float) - bound[problem[i]],
            self.low[branch], self.high[branch],
            self.first[branch] - bound[problem], self.last[branch] - bound[problem],
        )  # fmt: skip
        cut, rate = np.zeros(inside.shape), np.zeros(inside.shape)
        with np.errstate(all="ignore"):
            moving = speed[problem] / np.asarray(self.slope(root), float)
        cut[branch, problem] = root
        rate[branch, problem] = np.where(np.isfinite(moving), moving, 0.0)
        from_start = np.broadcast_to(rising if self.below else ~rising, inside.shape)
        keep = inside | holds_all
        lower = np.where(inside & ~from_start, cut, self.start[:, None])
        upper = np.where(inside & from_start, cut, self.end[:, None])
        return sets.compact(
            Sets(
                np.where(keep, lower, np.inf),
                np.where(keep, upper, -np.inf),
                np.where(inside & ~from_start, rate, 0.0),
                np.where(inside & from_start, rate, 0.0),
            )
        )


class Isolator:
    """Solves `left operator right` for `name` on the range of the grid."""

    def __init__(self, left: Node, right: Node, operator: str, name: str, grid: Array, parameter: str):
        self.difference = left if right == Number(0.0) else subtract(left, right)
        self.below = operator in ("less", "less_equal")
        self.name, self.grid, self.parameter = name, grid, parameter
        self.slope = derivative(self.difference, name)
        self.arguments = names(self.difference)
        self.value = compile_numpy(self.difference, self.arguments)
        self.slope_value = compile_numpy(self.slope, self.arguments)
        self.moving = parameter in self.arguments
        self._calls = 0
        self._continuous = not any(
            isinstance(part, Apply) and part.operator in _JUMPS for part in walk(self.difference)
        )
        self.rate_value = compile_numpy(derivative(self.difference, parameter), self.arguments)

    def solve(self, environment: Mapping[str, Array], count: int) -> Sets:
        if count > _MANY:
            quick = self._quick(environment, count)
            if quick is not None:
                return quick
        parts = []
        for start in range(0, count, _CHUNK):
            stop = min(start + _CHUNK, count)
            part = {key: value[start:stop] for key, value in environment.items()}
            parts.append(self._solve(part, stop - start))
        if len(parts) == 1:
            return parts[0]
        rows = max(part.lower.shape[0] for part in parts)
        padded = [
            sets.stack([part, *([sets.nothing(part.count)] * (rows - part.lower.shape[0]))]) for part in parts
        ]
        return Sets(*(
            np.concatenate([getattr(part, field) for part in padded], axis=1)
            for field in ("lower", "upper", "lower_rate", "upper_rate")
        ))  # fmt: skip

    def _quick(self, environment: Mapping[str, Array], count: int) -> Sets | None:
        """Many problems at once: sign changes between the points of a fine grid, and turning points in
        between. A sample of the problems is solved by subdivision as well; if one differs, None."""
        found = scan(self, environment, count)
        self._calls += 1
        if self._calls <= 4 or self._calls % 32 == 0:
            sample = np.unique(np.linspace(0, count - 1, _AUDIT).astype(int))
            part = {key: value[sample] for key, value in environment.items()}
            roots, owners, moving = self.boundaries(part, sample.size)
            if not agrees(found, roots[moving], sample[owners[moving]], sample):
                return None
        return self._assembled(environment, count, *found)

    def at(
        self, function: Callable[..., Array], environment: Mapping[str, Array], x: Array, index: Index
    ) -> Array:
        """A compiled formula of `arguments` at x for the problems `index`."""
        values = [x if name == self.name else environment[name][index] for name in self.arguments]
        with np.errstate(all="ignore"):
            return np.broadcast_to(np.asarray(function(*values), float), x.shape)

    def _solve(self, environment: Mapping[str, Array], count: int) -> Sets:
        return self._assembled(environment, count, *self.boundaries(environment, count))

    def _assembled(
        self,
        environment: Mapping[str, Array],
        count: int,
        roots: Array,
        owners: Index,
        moving: npt.NDArray[np.bool_],
    ) -> Sets:
        """The sets between boundaries on which the comparison holds."""
        order = np.lexsort((roots, owners))
        roots, owners, moving = roots[order], owners[order], moving[order]
        per = np.bincount(owners, minlength=count)
        most = int(per.max()) if per.size else 0
        position = np.arange(owners.size) - np.repeat(np.cumsum(per) - per, per)
        ends = np.full((most + 2, count), self.grid[-1])
        ends[0] = self.grid[0]
        ends[position + 1, owners] = roots
        rates = np.zeros_like(ends)
        if self.moving and roots.size:
            slope = self.at(self.slope_value, environment, roots, owners)
            speed = -self.at(self.rate_value, environment, roots, owners) / slope
            rates[position + 1, owners] = np.where(moving & np.isfinite(speed), speed, 0.0)
        lower, upper = ends[:-1], ends[1:]
        middle = 0.5 * (lower + upper)
        index = np.broadcast_to(np.arange(count), middle.shape)
        value = self.at(self.value, environment, middle.ravel(), index.ravel()).reshape(middle.shape)
        holds = (value <= 0) if self.below else (value >= 0)
        holds &= lower < upper
        return sets.compact(Sets(
            np.where(holds, lower, np.inf), np.where(holds, upper, -np.inf),
            np.where(holds, rates[:-1], 0.0), np.where(holds, rates[1:], 0.0),
        ))  # fmt: skip

    def boundaries(
        self, environment: Mapping[str, Array], count: int
    ) -> tuple[Array, Index, npt.NDArray[np.bool_]]:
        """All sign changes (and undecided spots): position, problem, whether it moves with the parameter.

        Raises TooManyBoundaries.
        """
        first = np.zeros(count, np.int64)
        last = np.full(count, self.grid.size - 1)
        low, high, owner = self.grid[first], self.grid[last], np.arange(count)
        found: list[tuple[Array, Index, npt.NDArray[np.bool_]]] = []
        for depth in range(_DEPTH + 12):
            if not low.size:
                break
            if low.size > _MOST_BOXES:
                if count == 1:
                    raise TooManyBoundaries
                return self._in_halves(environment, count)
            box = {key: Interval(value[owner], value[owner]) for key, value in environment.items()}
            box[self.name] = Interval(low, high)
            span = enclose(self.difference, box)
            # an empty enclosure (NaN) lies outside the domain and holds no root
            # and where it is 0 throughout, nothing changes inside
            possible = np.broadcast_to((span.lower <= 0) & (span.upper >= 0), low.shape)
            possible = possible & ((span.lower != 0) | (span.upper != 0))
            bounded = np.isfinite(span.lower) & np.isfinite(span.upper)
            bounded = np.broadcast_to(bounded, low.shape)[possible]
            low, high, owner = low[possible], high[possible], owner[possible]
            first, last = first[possible], last[possible]
            box = {key: Interval(value[owner], value[owner]) for key, value in environment.items()}
            box[self.name] = Interval(low, high)
            rise = enclose(self.slope, box)
            steady = np.broadcast_to((rise.lower > 0) | (rise.upper < 0), low.shape) & bounded
            if steady.any():
                found.append(self._brackets(environment, low[steady], high[steady], owner[steady]))
            open_ = ~steady
            if self._continuous:
                open_ &= ~self._without_zero(environment, low, high, owner, rise, bounded)
            low, high, owner, first, last = (column[open_] for column in (low, high, owner, first, last))
            # halve by grid points, which are graded by probability, then within a cell
            graded = last - first > 1
            half = (first + last) // 2
            middle = np.where(graded, self.grid[half], 0.5 * (low + high))
            tiny = ~graded & (
                (high - low <= _SMALLEST * np.maximum(np.abs(low), np.abs(high)))
                | (middle <= low)
                | (middle >= high)
            )
            if depth == _DEPTH + 11:
                tiny[:] = True
            if tiny.any():
                found.append((middle[tiny], owner[tiny], np.zeros(int(tiny.sum()), bool)))
            low, high, middle, owner = low[~tiny], high[~tiny], middle[~tiny], owner[~tiny]
            first, last, half, graded = first[~tiny], last[~tiny], half[~tiny], graded[~tiny]
            left_last = np.where(graded, half, last)
            right_first = np.where(graded, half, first)
            low, high = np.concatenate([low, middle]), np.concatenate([middle, high])
            first, last = np.concatenate([first, right_first]), np.concatenate([left_last, last])
            owner = np.concatenate([owner, owner])
        if not found:
            return np.zeros(0), np.zeros(0, np.int64), np.zeros(0, bool)
        return (
            np.concatenate([part[0] for part in found]),
            np.concatenate([part[1] for part in found]),
            np.concatenate([part[2] for part in found]),
        )

    def _without_zero(
        self,
        environment: Mapping[str, Array],
        low: Array,
        high: Array,
        owner: Index,
        rise: Interval,
        bounded: npt.NDArray[np.bool_],
    ) -> npt.NDArray[np.bool_]:
        """Boxes that the mean value theorem clears: the value in the middle is more than the slope can undo.
        It narrows with the square of the box, where the enclosure of the values narrows with the box."""
        middle = 0.5 * (low + high)
        box = {key: Interval(value[owner], value[owner]) for key, value in environment.items()}
        box[self.name] = Interval(middle, middle)
        value = enclose(self.difference, box)
        steepest = np.maximum(np.abs(rise.lower), np.abs(rise.upper))
        with np.errstate(invalid="ignore"):
            reach = steepest * (0.5 + 1e-12) * (high - low)
            cleared = (value.lower > reach) | (value.upper < -reach)
        return np.asarray(cleared & bounded, bool)

    def _in_halves(
        self, environment: Mapping[str, Array], count: int
    ) -> tuple[Array, Index, npt.NDArray[np.bool_]]:
        """`boundaries` of the problems in two portions, for those that need many boxes together."""
        parts = []
        for start, stop in ((0, count // 2), (count // 2, count)):
            part = {key: value[start:stop] for key, value in environment.items()}
            roots, owners, moving = self.boundaries(part, stop - start)
            parts.append((roots, owners + start, moving))
        one, two = parts
        return (
            np.concatenate([one[0], two[0]]),
            np.concatenate([one[1], two[1]]),
            np.concatenate([one[2], two[2]]),
        )

    def _brackets(
        self, environment: Mapping[str, Array], low: Array, high: Array, owner: Index
    ) -> tuple[Array, Index, npt.NDArray[np.bool_]]:
        at_low = self.at(self.value, environment, low, owner)
        at_high = self.at(self.value, environment, high, owner)
        change = np.sign(at_low) * np.sign(at_high) <= 0
        low, high, owner = low[change], high[change], owner[change]
        root, _ = bracketed_root(
            lambda x, index: self.at(self.value, environment, x, owner[index]),
            low, high, at_low[change], at_high[change],
        )  # fmt: skip
        known = ~np.isnan(root)
        return root[known], owner[known], np.ones(int(known.sum()), bool)
