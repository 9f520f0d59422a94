"""Probabilities of events, and how fast they grow with a parameter, in two continuous inputs.

For each value of the one input the set of the other on which the event holds is measured exactly, and
integrated over the first; the density is the derivative under the integral sign. Discrete inputs are gone
through value by value.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative, nonsmooth, one_piece
from outspread.formula.tree import Node
from outspread.laws.law import Array, Estimates
from outspread.numerics.quadrature import NODES, Integrals, integrate, panels_between
from outspread.numerics.sets import Sets
from outspread.numerics.slices.common import ROUNDING, Effort, compiled, environment_of, over_blocks
from outspread.numerics.slices.folds import CutPanels, sides, signature, structure_cuts
from outspread.numerics.slices.grading import grade
from outspread.numerics.slices.inner import (
    Boundary,
    ConditionalInner,
    IndependentInner,
    Inner,
    boundary,
    probability,
)
from outspread.numerics.slices.problem import Problem, combinations
from outspread.numerics.slices.solve import PARAMETER, Solver

Index = npt.NDArray[np.int64]
_SETTLED = 3e-13  # relative error of a density by one integral up to which the other way is not gone
_STEPPED = 1e-10  # relative; the density of a part is a slope with tiny steps between its panels
_THINNED = 4
_MOST_KINKS = 24
_LIGHT = 1e-14  # probability of a panel of the outer input that may turn out not to matter
_PASSED = 1e-15  # share of the result up to which it does not


class PlaneMeasure:
    """Events in two continuous inputs (and any discrete ones); `outer` is integrated over numerically.

    With `least`, probabilities below it need no digits, and what rounding does to y is not followed: such a
    law is the input of a next step, which takes that into its own account.
    """

    def __init__(self, problem: Problem, outer: str, inner: str, relative: float = 1e-12, least: float = 0.0):
        self.problem = problem
        self._least = least
        self.combos = combinations(problem)
        self.relative = relative
        self.effort = Effort()
        laws = problem.laws
        correlation = 0.0 if problem.scores is None else problem.scores.between(outer, inner)
        self.correlation = correlation
        self.grading = grade(problem, self.combos, outer, inner, least)
        self.axes = self.grading.axes
        self.outer, self.inner = outer, inner
        self.laws: dict[str, Inner] = {}
        for name in (outer, inner):
            spread = np.sqrt((1 - correlation) * (1 + correlation))
            self.laws[name] = (
                ConditionalInner(laws[name], float(spread)) if correlation else IndependentInner(laws[name])
            )
        self._coarse = {name: self.axes[name].coarse() for name in (outer, inner)}
        self._solvers: dict[tuple[Node, str], Solver] = {}
        self._slopes = {name: compiled(derivative(problem.expression, name)) for name in (outer, inner)}
        kinks = dict.fromkeys(node for name in (outer, inner) for node in nonsmooth(problem.expression, name))
        self._kinks = [compiled(node) for node in list(kinks)[:_MOST_KINKS]]
        self._bends: dict[str, Callable[[Mapping[str, Array], int], Array]] = {}
        # whether densities are tried by one integral: a level curve with parts along which the inner input
        # alone varies is not seen by it
        self._alone = one_piece(problem.expression)
        self._relative_error = laws[outer].relative_error + laws[inner].relative_error + 1e-14
        self._floor = laws[outer].floor + laws[inner].floor
        # the law of an earlier step has lost some last places of its argument
        self._rounding = ROUNDING * (1 + 8 * sum(laws[name].floor > 0 for name in (outer, inner)))

    def exact(self, event: Node) -> bool:
        return self._solver(event, self.inner).exact

    def _solver(self, event: Node, name: str) -> Solver:
        if (event, name) not in self._solvers:
            self._solvers[event, name] = Solver(event, self.axes[name].frame)
        return self._solvers[event, name]

    def by_combination(self, event: Node, y: Array) -> Estimates:
        """P(event | combination j): shape (len(y), combinations)."""
        count = y.size * self.combos.count
        environment = environment_of(y, self.combos)
        axis, inner, name = self.axes[self.outer], self.laws[self.inner], self.inner
        solver = self._solver(event, name)
        panels = self._panels(event, environment, count, self.outer, self.inner)

        def integrand(t: Array, who: Index) -> Array:
            x = axis.to_x(t)
            local = {key: value[who] for key, value in environment.items()}
            local[self.outer] = x
            where = solver(local, x.size)
            given = self.correlation * axis.scores(x) if self.correlation else None
            weight = axis.weight(x)
            slip = self._thinned_slip if self._least else self._slip
            found, lost = probability(where, inner, given), slip(where, local, given)
            return np.stack([found.value, lost + found.error, lost]) * weight

        result = self._integrated(integrand, panels, count)
        self.effort.evaluations += result.evaluations
        shape = (y.size, self.combos.count)
        doubt, lost = np.abs(result.value[1:])
        error = result.error[0] + doubt + self._relative_error * result.value[0]
        error += axis.outside + self.axes[name].outside + self._floor
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
        self, integrand: Callable[[Array, Index], Array], panels: CutPanels, count: int
    ) -> Integrals:
        """The integral over the panels. Panels in the tails of the outer input are passed over where their
        probability, which bounds what they add, is nothing beside the rest."""
        options: dict[str, Any] = {
            "components": 3, "relative": self.relative, "control": 1, "noise": 1,
            "share": 200 if self._least or self._floor else 2_500,
        }  # fmt: skip

        def integral(part: CutPanels, absolute: Array) -> Integrals:
            return integrate(
                integrand, part.lower, part.upper, part.owner, count, origins=part.origins,
                absolute=absolute, **options,
            )  # fmt: skip

        mass = self._mass(panels.lower, panels.upper)
        light = mass < _LIGHT
        least = np.full(count, max(1e-300, self._least * 1e-3))
        heavy = integral(panels.part(~light), least)
        passed = np.bincount(panels.owner[light], mass[light], count)
        needed = passed > _PASSED * heavy.value[0]
        enough = np.maximum(least, self.relative * np.abs(heavy.value[0]))
        rest = integral(panels.part(light & needed[panels.owner]), enough)
        value, error = heavy.value + rest.value, heavy.error + rest.error
        error[0] += np.where(needed, 0.0, passed)
        return Integrals(value, error, heavy.evaluations + rest.evaluations)

    def _mass(self, lower: Array, upper: Array) -> Array:
        """Probability of the outer input's panels; each end is looked up once."""
        if self.axes[self.outer].by_probability:  # the two ends of the law meet at t = 0
            return np.asarray(upper - lower, float)
        ends, place = np.unique(np.concatenate([lower, upper]), return_inverse=True)
        axis = self.axes[self.outer]
        law, x = self.problem.laws[self.outer], axis.to_x(ends)
        below, above = law.cdf(x)[place], law.ccdf(x)[place]
        n = lower.size
        mass = np.where(below[:n] < 0.5, below[n:] - below[:n], above[:n] - above[n:])
        return np.maximum(mass, 0.0)

    def event(self, event: Node, y: Array) -> Estimates:
        return over_blocks(self._event, event, y, max(1, 2_000 // self.combos.count))

    def _event(self, event: Node, y: Array) -> Estimates:
        parts = self.by_combination(event, y)
        weights = self.combos.weights
        lost = None if parts.rounding is None else parts.rounding @ weights
        return Estimates(parts.value @ weights, parts.error @ weights, lost)

    def rate(self, event: Node, y: Array) -> Estimates:
        """d/dy P(event), as two integrals along the level curve: over one input where the curve is steep in
        the other, and the other way round, joined by a smooth partition of unity. Neither has the poles at
        turning points and ends that a single integral has, which is tried first: it is often smooth."""
        return over_blocks(self._rate, event, y, max(1, 1_000 // self.combos.count))

    def _rate(self, event: Node, y: Array) -> Estimates:
        weights = self.combos.weights
        value, error = self._density(event, y)
        error += self._relative_error * value
        shape = (y.size, self.combos.count)
        return Estimates(value.reshape(shape) @ weights, error.reshape(shape) @ weights)

    def _density(self, event: Node, y: Array) -> tuple[Array, Array]:
        """d/dy P(event | combination): by one integral where that settles it, else by the two."""
        environment, count = environment_of(y, self.combos), y.size * self.combos.count
        value, error = np.zeros(count), np.full(count, np.inf)
        if self._alone:
            one = self._chart(event, environment, count, self.outer, self.inner, True)
            value, error = one.value, one.error
        open_ = np.flatnonzero(~(error <= _SETTLED * value))
        self._alone &= open_.size <= 0.5 * count
        if open_.size:
            part = {key: column[open_] for key, column in environment.items()}
            charts = [
                self._chart(event, part, open_.size, *pair, False)
                for pair in ((self.outer, self.inner), (self.inner, self.outer))
            ]
            value[open_] = charts[0].value + charts[1].value
            error[open_] = charts[0].error + charts[1].error
        return value, error

    def _chart(
        self,
        event: Node,
        environment: Mapping[str, Array],
        count: int,
        outer: str,
        inner: str,
        alone: bool,
    ) -> Estimates:
        """The integral of the density along the level curve over one input; unless `alone`, of the share of
        it that falls to this input."""
        axis, law, solver = self.axes[outer], self.laws[inner], self._solver(event, inner)
        panels = self._panels(event, environment, count, outer, inner)

        def integrand(t: Array, who: Index) -> Array:
            x = axis.to_x(t)
            local = {key: value[who] for key, value in environment.items()}
            local[outer] = x
            edge = boundary(solver(local, x.size))
            local = {key: value[edge.problem] for key, value in local.items()}
            local[inner] = edge.x
            given = self.correlation * axis.scores(local[outer]) if self.correlation else None
            with np.errstate(all="ignore"):
                whole = law.pdf(edge.x, given) * edge.rate
                if alone:
                    density, lost = whole, self._bent(whole, local, edge, inner)
                else:
                    density, lost = self._shared(whole, local, edge, outer, inner)
                blurred = self._blurred(density, local, edge, inner)
            lost += np.where(np.isfinite(blurred), blurred, 0.0)
            density = np.where(np.isfinite(density), density, 0.0)
            sums = [np.bincount(edge.problem, part, x.size) for part in (density, lost)]
            return np.stack(sums) * axis.weight(x)

        share = 100 if alone or self._floor else 2_500
        result = integrate(
            integrand, panels.lower, panels.upper, panels.owner, count, origins=panels.origins, components=2,
            control=1, absolute=1e-300, noise=1, share=share, rounds=6 if alone else 130,
            relative=max(self.relative, _STEPPED) if self._floor else self.relative,
        )  # fmt: skip
        self.effort.evaluations += result.evaluations
        return Estimates(result.value[0], result.error[0] + result.value[1])

    def _shared(
        self, whole: Array, local: Mapping[str, Array], edge: Boundary, outer: str, inner: str
    ) -> tuple[Array, Array]:
        """The part of the density that falls to this chart, and what is in doubt."""
        across = self._slopes[outer](local, edge.x.size)
        # the two slopes lose the same digits at one point: their ratio, unlike slope times rate,
        # is the same from both charts, so that the shares add up to 1
        ratio = across / self._slopes[inner](local, edge.x.size)
        told = np.isfinite(ratio)
        ratio = np.where(told, ratio, across * edge.rate)
        share = (ratio * self.axes[outer].length(local[outer]) / self.axes[inner].length(edge.x)) ** 2
        # where the slopes cannot be told apart any more, all of the density is in doubt
        return whole / (1 + share), np.where(~told & np.isfinite(whole), whole, 0.0)

    def _bent(self, whole: Array, local: Mapping[str, Array], edge: Boundary, inner: str) -> Array:
        """What rounding does to the density by moving the point along a curve that bends: near a turning
        point its rate is not known."""
        if inner not in self._bends:
            twice = derivative(derivative(self.problem.expression, inner), inner)
            self._bends[inner] = compiled(twice)
        shift = self._rounding * (np.abs(local[PARAMETER]) * edge.rate + np.abs(edge.x))
        unsure = np.abs(self._bends[inner](local, edge.x.size)) * edge.rate * shift
        lost = whole * np.where(np.isnan(unsure), 1.0, np.minimum(unsure, 1.0))
        return np.where(np.isfinite(lost), lost, np.where(np.isfinite(whole), whole, 1e300))

    def _blurred(self, density: Array, local: Mapping[str, Array], edge: Boundary, inner: str) -> Array:
        """Close to an end of the law, rounding moves the point by a share of its distance to it."""
        low, high = self.problem.laws[inner].support()
        shift = ROUNDING * (np.abs(local[PARAMETER]) * edge.rate + np.abs(edge.x))
        near = np.minimum(np.abs(edge.x - low), np.abs(edge.x - high))
        return np.asarray(density * np.minimum(4 * shift / near, 1.0), float)

    def _panels(
        self, event: Node, environment: Mapping[str, Array], count: int, outer: str, inner: str
    ) -> CutPanels:
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
        low, high = self.axes[inner].start, self.axes[inner].end

        def structure(t: Array, who: Index) -> Index:
            local = {key: value[who] for key, value in environment.items()}
            local[outer] = axis.to_x(t)
            where = solver(local, t.size)
            kind = signature(where, low, high)
            return kind + 64 * sides(where, self._kinks_at(where, local, inner)) if self._kinks else kind

        return structure_cuts(structure, panels)

    def _kinks_at(self, where: Sets, local: Mapping[str, Array], inner: str) -> Array:
        """What vanishes at the kinks of the formula, at the ends of the slices (see `folds.sides`)."""
        ends = np.concatenate([where.lower, where.upper])
        finite = np.where(np.isfinite(ends), ends, 0.0)
        columns = {key: np.broadcast_to(value, ends.shape).ravel() for key, value in local.items()}
        columns[inner] = finite.ravel()
        with np.errstate(all="ignore"):
            found = [kink(columns, finite.size).reshape(ends.shape) for kink in self._kinks]
        return np.stack(found)
