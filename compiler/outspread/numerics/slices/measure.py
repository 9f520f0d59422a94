"""Probabilities of events, and how fast they grow with a parameter, in one or two continuous inputs.

One continuous input: the set on which the event holds, measured by the input's law (`LineMeasure`).
Two: that set for each value of the other input, integrated over it (`PlaneMeasure`); the density is the
derivative under the integral sign. Discrete inputs are gone through value by value.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Apply, Name, Node, names, walk
from outspread.laws.law import Array, Estimates
from outspread.numerics.quadrature import NODES, Integrals, integrate, panels_between
from outspread.numerics.sets import Sets
from outspread.numerics.slices import cases
from outspread.numerics.slices.axis import Axis
from outspread.numerics.slices.folds import corners, critical_points, structure_cuts
from outspread.numerics.slices.inner import (
    ConditionalInner,
    IndependentInner,
    Inner,
    boundary,
    probability,
)
from outspread.numerics.slices.problem import Combinations, Problem, combinations
from outspread.numerics.slices.solve import PARAMETER, Solver

Index = npt.NDArray[np.int64]
ROUNDING = 2.3e-16 * 4  # units in the last place lost on the way through a formula, relative to its terms
_BLOCK = 400_000
_THINNED = 4
_LIGHT = 1e-14  # probability of a panel of the outer input that may turn out not to matter
_PASSED = 1e-15  # share of the result up to which it does not


@dataclass
class Effort:
    """Counts evaluations; a plain number that routes report."""

    evaluations: int = 0


class LineMeasure:
    """Events in one continuous input (and any discrete ones)."""

    def __init__(self, problem: Problem):
        (self.name,) = problem.continuous
        self.problem = problem
        self.combos = combinations(problem)
        self.axis = Axis(self.name, problem.laws[self.name])
        self.inner = IndependentInner(problem.laws[self.name])
        self.effort = Effort()
        self._solvers: dict[Node, Solver] = {}
        self._relative = problem.laws[self.name].relative_error + 4e-15

    def exact(self, event: Node) -> bool:
        return self._solver(event).exact

    def _solver(self, event: Node) -> Solver:
        if event not in self._solvers:
            self._solvers[event] = Solver(event, self.axis.frame)
        return self._solvers[event]

    def by_combination(self, event: Node, y: Array) -> Estimates:
        """P(event and combination j) / weight j for each y and combination: shape (len(y), combinations)."""
        shape = (y.size, self.combos.count)
        sets_, environment = self._sets(event, y)
        value = probability(sets_, self.inner)
        edge = boundary(sets_)
        with np.errstate(all="ignore"):
            shift = ROUNDING * (np.abs(environment[PARAMETER])[edge.problem] * edge.rate + np.abs(edge.x))
            density = self.inner.pdf(edge.x, None)
            slip = np.where(density == 0, 0.0, density * shift)
            slip = np.where(np.isfinite(slip), slip, np.sqrt(ROUNDING))
        lost = np.bincount(edge.problem, slip, value.size)
        error = self._relative * value + lost + self.problem.laws[self.name].floor
        return Estimates(value.reshape(shape), error.reshape(shape))

    def _sets(self, event: Node, y: Array) -> tuple[Sets, Mapping[str, Array]]:
        environment = _environment(y, self.combos)
        count = y.size * self.combos.count
        self.effort.evaluations += count
        return self._solver(event)(environment, count), environment

    def event(self, event: Node, y: Array) -> Estimates:
        """P(event) for each value y of the parameter: shape (len(y),)."""
        return _over_blocks(self._event, event, y, max(1, _BLOCK // self.combos.count))

    def _event(self, event: Node, y: Array) -> Estimates:
        parts = self.by_combination(event, y)
        return Estimates(parts.value @ self.combos.weights, parts.error @ self.combos.weights)

    def rate(self, event: Node, y: Array) -> Estimates:
        """d/dy P(event): the density of the formula where the event is {formula <= y}."""
        return _over_blocks(self._rate, event, y, max(1, _BLOCK // self.combos.count))

    def _rate(self, event: Node, y: Array) -> Estimates:
        value = self._density(event, y)
        # How rounding moves the density: its change under a change of y in the last places.
        step = 8 * ROUNDING / 4 * np.maximum(np.abs(y), 1e-300)
        with np.errstate(all="ignore"):
            change = np.maximum(
                np.abs(self._density(event, y + step) - value), np.abs(self._density(event, y - step) - value)
            )
        change = np.where(np.isfinite(change), change, 0.0)
        return Estimates(value, (self._relative + 2e-15) * value + change)

    def _density(self, event: Node, y: Array) -> Array:
        sets_, _ = self._sets(event, y)
        edge = boundary(sets_)
        with np.errstate(all="ignore"):
            density = self.inner.pdf(edge.x, None) * edge.rate
        weights = self.combos.weights[edge.problem % self.combos.count]
        return np.asarray(np.bincount(edge.problem // self.combos.count, density * weights, y.size), float)


class PlaneMeasure:
    """Events in two continuous inputs (and any discrete ones); `outer` is integrated over numerically.

    With `least`, probabilities below it need no digits, and what rounding does to y is not followed: such a
    law is the input of a next step, which takes that into its own account.
    """

    def __init__(
        self, problem: Problem, outer: str, inner: str, relative: float = 1e-12, least: float = 0.0
    ):
        self.problem = problem
        self._least = least
        self.combos = combinations(problem)
        self.relative = relative
        self.effort = Effort()
        laws = problem.laws
        correlation = 0.0 if problem.scores is None else problem.scores.between(outer, inner)
        self.correlation = correlation
        self.axes = self._graded(outer, inner)
        self.outer, self.inner = outer, inner
        self.laws: dict[str, Inner] = {}
        for name in (outer, inner):
            spread = np.sqrt((1 - correlation) * (1 + correlation))
            self.laws[name] = (
                ConditionalInner(laws[name], float(spread)) if correlation else IndependentInner(laws[name])
            )
        self._coarse = {name: self.axes[name].coarse() for name in (outer, inner)}
        self._solvers: dict[tuple[Node, str], Solver] = {}
        self._slopes = {name: _compiled(derivative(problem.expression, name)) for name in (outer, inner)}
        self._relative_error = laws[outer].relative_error + laws[inner].relative_error + 1e-14
        self._floor = laws[outer].floor + laws[inner].floor
        # the law of an earlier step has lost some last places of its own
        self._rounding = ROUNDING * (1 + sum(laws[name].floor > 0 for name in (outer, inner)))

    def exact(self, event: Node) -> bool:
        return self._solver(event, self.inner).exact

    def _graded(self, outer: str, inner: str) -> dict[str, Axis]:
        """The two axes, with points where the formula changes its nature or turns."""
        laws = self.problem.laws
        breaks = {name: self._breaks(name) for name in (outer, inner)}
        grids = (Axis(outer, laws[outer], breaks[outer]).grid, Axis(inner, laws[inner], breaks[inner]).grid)
        picks = np.unique(np.linspace(0, self.combos.count - 1, 3).astype(int))
        for pick in picks.tolist():
            others = {name: value[pick] for name, value in self.combos.values.items()}
            for search in (critical_points, corners):
                turns = search(self.problem.expression, (outer, inner), grids, others)
                for name, found in zip((outer, inner), turns, strict=True):
                    breaks[name] = (*breaks[name], *found.tolist())
        return {
            name: Axis(
                name, laws[name], breaks[name], _is_factor(self.problem.expression, name), 1e-5 * self._least
            )
            for name in (outer, inner)
        }

    def _breaks(self, name: str) -> tuple[float, ...]:
        """Where the formula changes its nature in one input alone, whatever the other: kinks, poles, and
        zeros of factors, where the other input loses its influence."""
        axis = Axis(name, self.problem.laws[name])
        found: list[float] = []
        expression = self.problem.expression
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

    def _solver(self, event: Node, name: str) -> Solver:
        if (event, name) not in self._solvers:
            self._solvers[event, name] = Solver(event, self.axes[name].frame)
        return self._solvers[event, name]

    def by_combination(self, event: Node, y: Array) -> Estimates:
        """P(event | combination j): shape (len(y), combinations)."""
        count = y.size * self.combos.count
        environment = _environment(y, self.combos)
        axis, inner, name = self.axes[self.outer], self.laws[self.inner], self.inner
        solver = self._solver(event, name)
        lower, upper, owner = self._panels(event, environment, count, self.outer, self.inner)

        def integrand(t: Array, who: Index) -> Array:
            x = axis.to_x(t)
            local = {key: value[who] for key, value in environment.items()}
            local[self.outer] = x
            where = solver(local, x.size)
            given = self.correlation * axis.scores(x) if self.correlation else None
            weight = axis.weight(x)
            slip = self._thinned_slip if self._least else self._slip
            return np.stack([probability(where, inner, given), slip(where, local, given)]) * weight

        result = self._integrated(integrand, lower, upper, owner, count)
        self.effort.evaluations += result.evaluations
        shape = (y.size, self.combos.count)
        lost = np.abs(result.value[1])
        error = result.error[0] + lost + self._relative_error * result.value[0]
        error += axis.outside + self._floor
        return Estimates(result.value[0].reshape(shape), error.reshape(shape), lost.reshape(shape))

    def _slip(self, where: Sets, local: Mapping[str, Array], given: Array | None) -> Array:
        """Backward error: by how much the probability moves with every term of the formula off by some units
        in its last place."""
        edge = boundary(where)
        name, inner = self.inner, self.laws[self.inner]
        at = {key: value[edge.problem] for key, value in local.items()}
        at[name] = edge.x
        with np.errstate(all="ignore"):
            term = np.abs(self._slopes[self.outer](at, edge.x.size) * at[self.outer])
            shift = self._rounding * (
                (np.abs(at[PARAMETER]) + np.where(np.isfinite(term), term, 0.0)) * edge.rate + np.abs(edge.x)
            )
            moved = inner.pdf(edge.x, None if given is None else given[edge.problem]) * shift
        return np.asarray(
            np.bincount(edge.problem, np.where(np.isfinite(moved), moved, 0.0), where.count), float
        )

    def _thinned_slip(self, where: Sets, local: Mapping[str, Array], given: Array | None) -> Array:
        """`_slip` at every fourth node of a panel, for the others that of the nearest of these."""
        nodes = np.arange(where.count).reshape(-1, NODES.size)[:, 1::_THINNED]
        chosen = nodes.ravel()
        rows = (where.lower, where.upper, where.lower_rate, where.upper_rate)
        part = {key: value[chosen] for key, value in local.items()}
        few = self._slip(
            Sets(*(row[:, chosen] for row in rows)), part, None if given is None else given[chosen]
        )
        nearest = np.clip(np.round((np.arange(NODES.size) - 1) / _THINNED), 0, nodes.shape[1] - 1).astype(int)
        return np.asarray(few.reshape(nodes.shape)[:, nearest].ravel(), float)

    def _integrated(
        self, integrand: Callable[[Array, Index], Array], lower: Array, upper: Array, owner: Index, count: int
    ) -> Integrals:
        """The integral over the panels. Panels in the tails of the outer input are passed over where their
        probability, which bounds what they add, is nothing beside the rest."""
        options: dict[str, Any] = {
            "components": 2, "relative": self.relative, "absolute": max(1e-300, self._least * 1e-3),
            "control": 1, "noise": 1, "share": 200 if self._least else 2_500,
        }  # fmt: skip
        mass = self._mass(lower, upper)
        light = mass < _LIGHT
        heavy = integrate(integrand, lower[~light], upper[~light], owner[~light], count, **options)
        passed = np.bincount(owner[light], mass[light], count)
        needed = passed > _PASSED * heavy.value[0]
        more = light & needed[owner]
        rest = integrate(integrand, lower[more], upper[more], owner[more], count, **options)
        value, error = heavy.value + rest.value, heavy.error + rest.error
        error[0] += np.where(needed, 0.0, passed)
        return Integrals(value, error, heavy.evaluations + rest.evaluations)

    def _mass(self, lower: Array, upper: Array) -> Array:
        """Probability of the outer input's panels; each end is looked up once."""
        ends, place = np.unique(np.concatenate([lower, upper]), return_inverse=True)
        axis = self.axes[self.outer]
        law, x = self.problem.laws[self.outer], axis.to_x(ends)
        below, above = law.cdf(x)[place], law.ccdf(x)[place]
        n = lower.size
        mass = np.where(below[:n] < 0.5, below[n:] - below[:n], above[:n] - above[n:])
        return np.maximum(mass, 0.0)

    def event(self, event: Node, y: Array) -> Estimates:
        return _over_blocks(self._event, event, y, max(1, 2_000 // self.combos.count))

    def _event(self, event: Node, y: Array) -> Estimates:
        parts = self.by_combination(event, y)
        weights = self.combos.weights
        lost = None if parts.rounding is None else parts.rounding @ weights
        return Estimates(parts.value @ weights, parts.error @ weights, lost)

    def rate(self, event: Node, y: Array) -> Estimates:
        """d/dy P(event), as two integrals along the level curve: over one input where the curve is steep in
        the other, and the other way round, joined by a smooth partition of unity. Neither has the poles at
        turning points and ends that a single integral has."""
        return _over_blocks(self._rate, event, y, max(1, 1_000 // self.combos.count))

    def _rate(self, event: Node, y: Array) -> Estimates:
        one = self._chart(event, y, self.outer, self.inner)
        two = self._chart(event, y, self.inner, self.outer)
        value, error = one.value + two.value, one.error + two.error
        weights = self.combos.weights
        shape = (y.size, self.combos.count)
        return Estimates(
            value.reshape(shape) @ weights, (error + self._relative_error * value).reshape(shape) @ weights
        )

    def _chart(self, event: Node, y: Array, outer: str, inner: str) -> Estimates:
        count = y.size * self.combos.count
        environment = _environment(y, self.combos)
        axis, other, law = self.axes[outer], self.axes[inner], self.laws[inner]
        solver = self._solver(event, inner)
        slope, along = self._slopes[outer], self._slopes[inner]
        ends = self.problem.laws[inner].support()
        lower, upper, owner = self._panels(event, environment, count, outer, inner)

        def integrand(t: Array, who: Index) -> Array:
            x = axis.to_x(t)
            local = {key: value[who] for key, value in environment.items()}
            local[outer] = x
            edge = boundary(solver(local, x.size))
            local = {key: value[edge.problem] for key, value in local.items()}
            local[inner] = edge.x
            given = self.correlation * axis.scores(local[outer]) if self.correlation else None
            with np.errstate(all="ignore"):
                across = slope(local, edge.x.size)
                # the two slopes lose the same digits at one point: their ratio, unlike slope times rate,
                # is the same from both charts, so that the shares add up to 1
                ratio = across / along(local, edge.x.size)
                told = np.isfinite(ratio)
                ratio = np.where(told, ratio, across * edge.rate)
                share = (ratio * axis.length(local[outer]) / other.length(edge.x)) ** 2
                whole = law.pdf(edge.x, given) * edge.rate
                density = whole / (1 + share)
                # close to an end of the law, rounding moves the point by a share of its distance to it
                shift = ROUNDING * (np.abs(local[PARAMETER]) * edge.rate + np.abs(edge.x))
                near = np.minimum(np.abs(edge.x - ends[0]), np.abs(edge.x - ends[1]))
                blurred = density * np.minimum(4 * shift / near, 1.0)
            density = np.where(np.isfinite(density), density, 0.0)
            # where the slopes cannot be told apart any more, all of the density is in doubt
            lost = np.where(~told & np.isfinite(whole), whole, 0.0)
            lost += np.where(np.isfinite(blurred), blurred, 0.0)
            sums = [np.bincount(edge.problem, part, x.size) for part in (density, lost)]
            return np.stack(sums) * axis.weight(x)

        result = integrate(
            integrand, lower, upper, owner, count, components=2, control=1, relative=self.relative,
            absolute=1e-300, noise=1,
        )  # fmt: skip
        self.effort.evaluations += result.evaluations
        return Estimates(result.value[0], result.error[0] + result.value[1])

    def _panels(
        self, event: Node, environment: Mapping[str, Array], count: int, outer: str, inner: str
    ) -> tuple[Array, Array, Index]:
        """Panels of the outer coordinate: its own graded grid, and where the level curve crosses that of
        the inner one, so that no narrow feature of either law falls between nodes."""
        axis, values = self.axes[outer], self._coarse[inner]
        repeated = {key: np.repeat(value, values.size) for key, value in environment.items()}
        repeated[inner] = np.tile(values, count)
        where = self._solver(event, outer)(repeated, count * values.size)
        ends = np.concatenate([where.lower, where.upper])
        ends = np.where(np.isfinite(ends) & (ends > axis.start) & (ends < axis.end), ends, np.nan)
        cells = axis.to_t(ends).reshape(ends.shape[0], count, values.size)
        crossings = np.moveaxis(cells, 0, 1).reshape(count, -1)
        fixed = np.broadcast_to(axis.fixed_points(), (count, axis.fixed_points().size))
        panels = panels_between(np.concatenate([fixed, crossings], axis=1))
        solver = self._solver(event, inner)

        def slices(t: Array, who: Index) -> Sets:
            local = {key: value[who] for key, value in environment.items()}
            local[outer] = axis.to_x(t)
            return solver(local, t.size)

        return structure_cuts(slices, self.axes[inner].start, self.axes[inner].end, panels)


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


def _environment(y: Array, combos: Combinations) -> dict[str, Array]:
    environment = {name: np.tile(value, y.size) for name, value in combos.values.items()}
    environment[PARAMETER] = np.repeat(y, combos.count)
    return environment


def _compiled(node: Node) -> Callable[[Mapping[str, Array], int], Array]:
    arguments = names(node)
    function = compile_numpy(node, arguments)

    def evaluate(environment: Mapping[str, Array], count: int) -> Array:
        return np.broadcast_to(np.asarray(function(*(environment[n] for n in arguments)), float), (count,))

    return evaluate


def _over_blocks(
    method: Callable[[Node, Array], Estimates], event: Node, y: Array, block: int
) -> Estimates:
    """Apply a method to blocks of y, to bound the memory."""
    if y.size <= block:
        return method(event, y)
    parts = [method(event, y[start : start + block]) for start in range(0, y.size, block)]
    return Estimates(
        np.concatenate([p.value for p in parts]),
        np.concatenate([p.error for p in parts]),
        np.concatenate([np.zeros(p.value.size) if p.rounding is None else p.rounding for p in parts]),
    )


__all__ = ["ROUNDING", "Effort", "LineMeasure", "PlaneMeasure"]
