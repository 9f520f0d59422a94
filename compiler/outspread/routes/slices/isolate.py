"""Roots of a formula in one variable by interval subdivision, for many problems at once.

A box is dropped when the enclosure of the formula excludes 0, and solved by bracketing when the enclosure of
its derivative excludes 0; otherwise it is halved. Nothing is missed: what stays undecided at the smallest
size is kept as a boundary of its own (a double root, a jump or a pole), at which the sign is looked at anew.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative
from outspread.formula.evaluate import compile_numpy
from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import Node, Number, names, subtract
from outspread.numerics import sets
from outspread.numerics.roots import bracketed_root
from outspread.numerics.sets import Array, Sets

Index = npt.NDArray[np.int64]
_CHUNK = 20_000
_SMALLEST = 4e-15
_DEPTH = 64


class Isolator:
    """Solves `left operator right` for `name` on the range of the grid."""

    def __init__(self, left: Node, right: Node, operator: str, name: str, grid: Array, parameter: str):
        self.difference = left if right == Number(0.0) else subtract(left, right)
        self.below = operator in ("less", "less_equal")
        self.name, self.grid, self.parameter = name, grid, parameter
        self.slope = derivative(self.difference, name)
        self.arguments = names(self.difference)
        self._value = compile_numpy(self.difference, self.arguments)
        self._slope = compile_numpy(self.slope, self.arguments)
        self.moving = parameter in self.arguments
        self._rate = compile_numpy(derivative(self.difference, parameter), self.arguments)

    def solve(self, environment: Mapping[str, Array], count: int) -> Sets:
        parts = []
        for start in range(0, count, _CHUNK):
            stop = min(start + _CHUNK, count)
            part = {key: value[start:stop] for key, value in environment.items()}
            parts.append(self._solve(part, stop - start))
        if len(parts) == 1:
            return parts[0]
        rows = max(part.lower.shape[0] for part in parts)
        padded = [sets.stack([part, *([sets.nothing(part.count)] * (rows - part.lower.shape[0]))]) for part in parts]
        return Sets(*(
            np.concatenate([getattr(part, field) for part in padded], axis=1)
            for field in ("lower", "upper", "lower_rate", "upper_rate")
        ))  # fmt: skip

    def _at(self, function: object, environment: Mapping[str, Array], x: Array, index: Index) -> Array:
        values = [x if name == self.name else environment[name][index] for name in self.arguments]
        with np.errstate(all="ignore"):
            return np.broadcast_to(np.asarray(function(*values), float), x.shape)  # type: ignore[operator]

    def _solve(self, environment: Mapping[str, Array], count: int) -> Sets:
        roots, owners, moving = self._boundaries(environment, count)
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
            slope = self._at(self._slope, environment, roots, owners)
            speed = -self._at(self._rate, environment, roots, owners) / slope
            rates[position + 1, owners] = np.where(moving & np.isfinite(speed), speed, 0.0)
        lower, upper = ends[:-1], ends[1:]
        middle = 0.5 * (lower + upper)
        index = np.broadcast_to(np.arange(count), middle.shape)
        value = self._at(self._value, environment, middle.ravel(), index.ravel()).reshape(middle.shape)
        holds = (value <= 0) if self.below else (value >= 0)
        holds &= lower < upper
        return sets.compact(Sets(
            np.where(holds, lower, np.inf), np.where(holds, upper, -np.inf),
            np.where(holds, rates[:-1], 0.0), np.where(holds, rates[1:], 0.0),
        ))  # fmt: skip

    def _boundaries(
        self, environment: Mapping[str, Array], count: int
    ) -> tuple[Array, Index, npt.NDArray[np.bool_]]:
        """All sign changes (and undecided spots): positions, problem, whether they move with the parameter."""
        cells = self.grid.size - 1
        low = np.repeat(self.grid[:-1], count)
        high = np.repeat(self.grid[1:], count)
        owner = np.tile(np.arange(count), cells)
        found: list[tuple[Array, Index, npt.NDArray[np.bool_]]] = []
        for depth in range(_DEPTH):
            if not low.size:
                break
            box = {key: Interval(value[owner], value[owner]) for key, value in environment.items()}
            box[self.name] = Interval(low, high)
            span = enclose(self.difference, box)
            # an empty enclosure (NaN) lies outside the domain and holds no root
            possible = (span.lower <= 0) & (span.upper >= 0)
            possible = np.broadcast_to(possible, low.shape)
            low, high, owner = low[possible], high[possible], owner[possible]
            box = {key: Interval(value[owner], value[owner]) for key, value in environment.items()}
            box[self.name] = Interval(low, high)
            rise = enclose(self.slope, box)
            steady = np.broadcast_to((rise.lower > 0) | (rise.upper < 0), low.shape)
            whole = enclose(self.difference, box)
            steady = steady & np.isfinite(whole.lower) & np.isfinite(whole.upper)
            if steady.any():
                found.append(self._brackets(environment, low[steady], high[steady], owner[steady]))
            low, high, owner = low[~steady], high[~steady], owner[~steady]
            middle = 0.5 * (low + high)
            tiny = (high - low <= _SMALLEST * np.maximum(np.abs(low), np.abs(high))) | (middle <= low) | (middle >= high)
            if depth == _DEPTH - 1:
                tiny[:] = True
            if tiny.any():
                found.append((middle[tiny], owner[tiny], np.zeros(int(tiny.sum()), bool)))
            low, high, middle, owner = low[~tiny], high[~tiny], middle[~tiny], owner[~tiny]
            low, high = np.concatenate([low, middle]), np.concatenate([middle, high])
            owner = np.concatenate([owner, owner])
        if not found:
            return np.zeros(0), np.zeros(0, np.int64), np.zeros(0, bool)
        return (
            np.concatenate([part[0] for part in found]),
            np.concatenate([part[1] for part in found]),
            np.concatenate([part[2] for part in found]),
        )

    def _brackets(
        self, environment: Mapping[str, Array], low: Array, high: Array, owner: Index
    ) -> tuple[Array, Index, npt.NDArray[np.bool_]]:
        at_low = self._at(self._value, environment, low, owner)
        at_high = self._at(self._value, environment, high, owner)
        change = np.sign(at_low) * np.sign(at_high) <= 0
        low, high, owner = low[change], high[change], owner[change]
        root, _ = bracketed_root(
            lambda x, index: self._at(self._value, environment, x, owner[index]),
            low, high, at_low[change], at_high[change],
        )  # fmt: skip
        known = ~np.isnan(root)
        return root[known], owner[known], np.ones(int(known.sum()), bool)
