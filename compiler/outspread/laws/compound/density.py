"""A law whose density is a formula of x on a stated support; compiling it is left to `formula`."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.formula.calculus import nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.laws.families.integral import IntegralLaw
from outspread.laws.families.shapes import INF
from outspread.laws.law import Array
from outspread.numerics.roots import bracketed_root

#: how far the integral of a density may be from 1
NORMALISED_TO = 1e-9


class FormulaLaw(IntegralLaw):
    """The law with density `formula` (a Node in x) from `lower` to `upper` (may be infinite).

    Raises LawError where the formula is negative or undefined somewhere, or does not integrate to 1.
    """

    name = "Distribution with the stated density"

    def __init__(self, formula: Node, lower: float, upper: float):
        if not lower < upper:
            raise LawError(
                f"upper is {upper:g} and lower is {lower:g}, and upper above lower would be right", "upper"
            )
        unknown = [name for name in names(formula) if name != "x"]
        if unknown:
            raise LawError(
                f"the density names {unknown[0]!r}, and a formula of x alone would be right", "density"
            )
        self._compiled = compile_numpy(formula, ("x",))
        self._total = 1.0
        self._tails = (INF, INF)
        self.ends = (lower, upper)
        grid = self._grid()
        self._check(grid)
        self.centre, self.spread = self._place(grid)
        self.corners = self._corners(formula, grid)
        self._tails = (self._tail_order(-1), self._tail_order(1))
        self._normalise()
        self.relative_error = max(1e-12, 4 * self.panels.error)
        self.moment_order = min(self._tails)

    def standard_pdf(self, z: Array) -> Array:
        with np.errstate(all="ignore"):
            return np.asarray(self._compiled(z) / self._total + 0.0 * z, float)

    def _grid(self) -> Array:
        """Points strictly inside, dense near finite ends and spread over all magnitudes on infinite sides."""
        lower, upper = self.ends
        small = np.geomspace(1e-12, 0.5, 60)
        decades = np.concatenate((np.geomspace(1e-6, 1.0, 60), np.geomspace(1.0, 1e8, 400)))
        if np.isfinite(lower) and np.isfinite(upper):
            width = upper - lower
            points = np.concatenate(
                (lower + width * small, upper - width * small, np.linspace(lower, upper, 801))
            )
        elif np.isfinite(lower):
            points = lower + decades
        elif np.isfinite(upper):
            points = upper - decades
        else:
            points = np.concatenate((-decades, [0.0], decades))
        points = np.unique(points)
        return points[(points > lower) & (points < upper)]

    def _check(self, grid: Array) -> None:
        values = self.standard_pdf(grid)
        wrong = np.flatnonzero(np.isnan(values) | (values < 0))
        if wrong.size:
            x, value = grid[wrong[0]], values[wrong[0]]
            state = "has no value" if np.isnan(value) else f"is {value:g}"
            message = f"the density {state} at x = {x:.6g}, and 0 or more everywhere would be right"
            raise LawError(message, "density")
        if not np.any(np.isfinite(values) & (values > 0)):
            raise LawError("the density is 0 everywhere, and an integral of 1 would be right", "density")

    def _place(self, grid: Array) -> tuple[float, float]:
        """Centre and spread from the grid: median and quartiles of its trapezoidal sum."""
        values = np.nan_to_num(self.standard_pdf(grid), posinf=0.0)
        mass = np.concatenate(([0.0], np.cumsum(0.5 * (values[1:] + values[:-1]) * np.diff(grid))))
        quarter, half, rest = np.interp(np.array([0.25, 0.5, 0.75]) * mass[-1], mass, grid)
        inside = float(np.clip(half, np.nextafter(self.ends[0], INF), np.nextafter(self.ends[1], -INF)))
        return inside, float(max(0.4 * (rest - quarter), 1e-9 * max(abs(half), 1e-9)))

    def _corners(self, formula: Node, grid: Array) -> tuple[float, ...]:
        """Zeros inside the support of the sub-expressions at which the formula may not be smooth."""
        found: set[float] = set()
        for part in nonsmooth(formula, "x"):
            compiled = compile_numpy(part, ("x",))
            with np.errstate(all="ignore"):
                values = np.asarray(compiled(grid) + 0.0 * grid, float)
                found.update(float(x) for x in grid[values == 0])
                change = np.flatnonzero(np.sign(values[:-1]) * np.sign(values[1:]) < 0)
                root, _ = bracketed_root(_indexed(compiled), grid[change], grid[change + 1])
            found.update(float(x) for x in root[np.isfinite(root)])
        return tuple(sorted(point for point in found if self.ends[0] < point < self.ends[1]))

    def _normalise(self) -> None:
        panels = self.panels
        total = panels.total
        self._check(0.5 * (panels.edges[1:] + panels.edges[:-1]))
        if not np.isfinite(total):
            raise LawError("the integral of the density diverges, and 1 would be right", "density")
        if abs(total - 1) > NORMALISED_TO:
            raise LawError(
                f"the density integrates to {total:.12g} from {self.ends[0]:g} to {self.ends[1]:g},"
                f" and 1 would be right: divide it by {total:.12g}",
                "density",
            )
        self._total = total
        del self.panels

    def _tail_order(self, side: int) -> float:
        """Order below which moments of one side exist: infinite unless the density falls like a power."""
        if np.isfinite(self.ends[0 if side < 0 else 1]):
            return INF
        for farthest in (1e45, 1e20, 1e9):
            x = side * self.spread * farthest ** np.array([1 / 3, 2 / 3, 1.0])
            values = self.standard_pdf(x)
            if not np.all((values > 1e-290) & np.isfinite(values)):
                continue
            first, second = -np.diff(np.log(values)) / np.log(farthest) * 3
            # one slope over many decades is a power law; a slope that grows is not
            return float(round(second, 6) - 1) if abs(first - second) < 1e-5 * second else INF
        return INF

    def tail_orders(self) -> tuple[float, float]:
        return self._tails

    def singular_ends(self) -> tuple[bool, bool]:
        first, last = (
            bool(np.isfinite(end)) and not np.isfinite(self.standard_pdf(np.array([end]))[0])
            for end in self.ends
        )
        return (first, last)


def _indexed(function: Callable[..., Array]) -> Callable[[Array, npt.NDArray[np.int64]], Array]:
    """`function(x)` as the root finder calls it, with an array also where it is constant."""
    return lambda x, index: np.asarray(function(x) + 0.0 * x, float)
