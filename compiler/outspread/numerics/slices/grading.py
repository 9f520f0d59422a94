"""The axes of the two inputs of a plane, with points where the formula changes its nature or turns."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from outspread.formula.calculus import nonsmooth
from outspread.formula.tree import Apply, Name, Node, names, walk
from outspread.laws.law import Array
from outspread.numerics.slices import cases
from outspread.numerics.slices.axis import Axis
from outspread.numerics.slices.common import compiled
from outspread.numerics.slices.folds import corners, critical_points
from outspread.numerics.slices.problem import Combinations, Problem
from outspread.numerics.slices.solve import Solver

_PERIODIC = frozenset({"sin", "cos", "tan"})
_FOLLOWED = 1e-40  # tail probability to which inputs are followed through periods, each of them a piece


@dataclass(frozen=True)
class Grading:
    """`marks`: places of single inputs where the formula changes its nature whatever the other is;
    `spot_values`: values of the formula at critical points and corners."""

    axes: dict[str, Axis]
    marks: dict[str, tuple[float, ...]]
    spot_values: tuple[float, ...]


def grade(problem: Problem, combos: Combinations, outer: str, inner: str, least: float) -> Grading:
    """Tail probabilities below a share of `least` are not followed."""
    laws, expression = problem.laws, problem.expression
    marks = {name: _marks(problem, name) for name in (outer, inner)}
    spots: dict[str, tuple[float, ...]] = {outer: (), inner: ()}
    grids = (Axis(outer, laws[outer], marks[outer]).grid, Axis(inner, laws[inner], marks[inner]).grid)
    found_values: list[float] = []
    for pick in np.unique(np.linspace(0, combos.count - 1, 3).astype(int)).tolist():
        others = {name: value[pick] for name, value in combos.values.items()}
        for search in (critical_points, corners):
            turns = search(expression, (outer, inner), grids, others)
            for name, found in zip((outer, inner), turns, strict=True):
                spots[name] = (*spots[name], *_apart(found))
            count = turns[0].size
            if count:
                columns = {key: np.full(count, value) for key, value in others.items()}
                with np.errstate(all="ignore"):
                    values = compiled(expression)(columns | {outer: turns[0], inner: turns[1]}, count)
                found_values += values[np.isfinite(values)].tolist()
    periodic = any(isinstance(part, Apply) and part.operator in _PERIODIC for part in walk(expression))
    followed = max(1e-5 * least, _FOLLOWED if periodic else 0.0)
    axes = {
        name: Axis(name, laws[name], (*marks[name], *spots[name]), _is_factor(expression, name), followed)
        for name in (outer, inner)
    }
    return Grading(axes, marks, tuple(found_values))


def _marks(problem: Problem, name: str) -> tuple[float, ...]:
    """Where the formula changes its nature in one input alone, whatever the other: kinks, poles, and
    zeros of factors, where the other input loses its influence."""
    axis = Axis(name, problem.laws[name])
    found: list[float] = []
    expression = problem.expression
    factors = [
        argument
        for part in walk(expression)
        if isinstance(part, Apply) and part.operator in ("multiply", "divide", "atan2", "power", "hypot")
        for argument in part.arguments
    ]
    for node in dict.fromkeys([*nonsmooth(expression, name), *factors]):
        if set(names(node)) == {name} and node != Name(name):
            where = Solver(cases.comparison("less_equal", node, cases.ZERO), axis.frame)({}, 1)
            full = where.lower < where.upper
            found += [float(v) for v in np.concatenate([where.lower[full], where.upper[full]])]
    return tuple(value for value in found if np.isfinite(value))


def _apart(values: Array) -> list[float]:
    """Values that differ by more than rounding."""
    ordered = np.unique(values)
    if ordered.size < 2:
        return [float(value) for value in ordered]
    keep = np.append(True, np.diff(ordered) > 1e-8 * max(float(np.abs(ordered).max()), 1e-300))
    return [float(value) for value in ordered[keep]]


def _is_factor(expression: Node, name: str) -> bool:
    """Whether the input, or a power of it, stands in a product or a quotient."""
    for part in walk(expression):
        if isinstance(part, Apply) and part.operator in ("multiply", "divide"):
            for argument in part.arguments:
                if isinstance(argument, Apply) and argument.operator in ("power", "sqrt"):
                    argument = argument.arguments[0]
                if argument == Name(name):
                    return True
    return False
