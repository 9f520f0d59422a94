"""Probabilities of events, and how fast they grow with a parameter, in one continuous input: the set on which
the event holds, measured by the input's law. Discrete inputs are gone through value by value.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from outspread.formula.tree import Node
from outspread.laws.law import Array, Estimates
from outspread.numerics.sets import Sets
from outspread.numerics.slices.axis import Axis
from outspread.numerics.slices.common import ROUNDING, Effort, environment_of, over_blocks
from outspread.numerics.slices.inner import IndependentInner, boundary, probability
from outspread.numerics.slices.problem import Problem, combinations
from outspread.numerics.slices.solve import PARAMETER, Solver

_BLOCK = 400_000


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
        found = probability(sets_, self.inner)
        value = found.value
        edge = boundary(sets_)
        with np.errstate(all="ignore"):
            shift = ROUNDING * (np.abs(environment[PARAMETER])[edge.problem] * edge.rate + np.abs(edge.x))
            density = self.inner.pdf(edge.x, None)
            slip = np.where(density == 0, 0.0, density * shift)
            # with no probability on one side there is none to be moved
            unknown = np.where(value[edge.problem] > 0, np.sqrt(ROUNDING), 0.0)
            slip = np.where(np.isfinite(slip), slip, unknown)
        lost = np.bincount(edge.problem, slip, value.size)
        error = self._relative * value + lost + found.error + self.problem.laws[self.name].floor
        return Estimates(value.reshape(shape), error.reshape(shape))

    def _sets(self, event: Node, y: Array) -> tuple[Sets, Mapping[str, Array]]:
        environment = environment_of(y, self.combos)
        count = y.size * self.combos.count
        self.effort.evaluations += count
        return self._solver(event)(environment, count), environment

    def event(self, event: Node, y: Array) -> Estimates:
        """P(event) for each value y of the parameter: shape (len(y),)."""
        return over_blocks(self._event, event, y, max(1, _BLOCK // self.combos.count))

    def _event(self, event: Node, y: Array) -> Estimates:
        parts = self.by_combination(event, y)
        return Estimates(parts.value @ self.combos.weights, parts.error @ self.combos.weights)

    def rate(self, event: Node, y: Array) -> Estimates:
        """d/dy P(event): the density of the formula where the event is {formula <= y}."""
        return over_blocks(self._rate, event, y, max(1, _BLOCK // self.combos.count))

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
