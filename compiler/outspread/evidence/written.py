"""Evaluates a density that a derivation wrote as an integral over one input, straight from what is written.

The inverse, its derivative and the densities of the inputs go through sympy; the quadrature is `adaptive`'s.
No code is shared with the routes, so that a slip in the formulas or in the numbers shows. Judging the
difference is left to `judging`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from outspread.evidence.adaptive import Index, Panels, integrate
from outspread.evidence.dependence import score_matrix
from outspread.evidence.marginal_density import MarginalDensity, NotWritten, marginal_density, typical
from outspread.evidence.marginals import canonical
from outspread.formula.symbolic import to_sympy
from outspread.formula.tree import Apply, Name, Node, Number, rebuild
from outspread.laws.law import Array, Estimates
from outspread.reading.model import Dependence, Distribution, Model
from outspread.routes.derived import SymbolicBranch, SymbolicIntegral

#: shares of the draws of an input at which panels are cut
LEVELS = (0.0, 0.02, 0.15, 0.5, 0.85, 0.98, 1.0)
GRID = 128
#: relative change of the leaves of a formula that stands for its rounding
SLIP = 8 * float(np.finfo(float).eps)
BISECTIONS, REFINEMENTS = 70, 48
MOST_BENT = 40  # cells a row; a formula that turns more often is noise
NEAR = 1e-14

Truth = npt.NDArray[np.bool_]


def written_density(written: SymbolicIntegral, model: Model, y: Array, finer: int = 1) -> Estimates:
    """The density at `y` by the integral as written, with a bound on the error of the quadrature and of
    the rounding; `finer` multiplies the points at which changes of structure are looked for.

    Raises NotWritten, with the reason, where there is nothing to evaluate.
    """
    if written.missing:
        raise NotWritten(written.missing)
    inputs = {described.name: described.distribution for described in model.inputs}
    outer, inner = inputs[written.outer], inputs[written.inner]
    if outer is None or inner is None:
        raise NotWritten("the inputs are described by a joint density or a joint sample")
    joint = _Joint(outer, inner, _correlation(written, model, outer, inner))
    integrand = _Integrand(written, joint)
    panels = _panels(integrand, y, finer)
    constants = np.array(integrand.constants)
    steps = 1.0 + SLIP * np.eye(2 + constants.size)  # y, x and each constant, changed one at a time

    def function(row: Index, x: Array) -> Array:
        return integrand(y[row], x, constants)

    def doubt(row: Index, x: Array) -> Array:
        right = function(row, x)
        total = np.zeros(x.size)
        for step in steps:
            change = np.abs(integrand(y[row] * step[0], x * step[1], constants * step[2:]) - right)
            total += np.where(np.isfinite(change), change, np.abs(right))
        return total

    return integrate(function, doubt, panels, y.size)


def _correlation(written: SymbolicIntegral, model: Model, outer: Distribution, inner: Distribution) -> float:
    """The correlation of the normal scores of the two inputs; 0 where they are independent."""
    for entry in model.dependence:
        places = [entry.inputs.index(name) for name in (written.outer, written.inner) if name in entry.inputs]
        if not places:
            continue
        if entry.kind != "copula" or entry.family != "gaussian":
            raise NotWritten(f"a dependence by {_kind(entry)} is not written as a formula here")
        if len(places) == 2:
            distributions = [d for name in entry.inputs if (d := _given(model, name)) is not None]
            return float(score_matrix(entry, distributions)[places[0], places[1]])
    return 0.0


def _kind(entry: Dependence) -> str:
    return f"a {entry.family} copula" if entry.kind == "copula" else entry.kind.replace("_", " ")


def _given(model: Model, name: str) -> Distribution | None:
    return next(described.distribution for described in model.inputs if described.name == name)


class _Joint:
    """The joint density of the two inputs, and where the inner one stands in its law given the outer one."""

    def __init__(self, outer: Distribution, inner: Distribution, correlation: float):
        self.outer, self.inner = marginal_density(outer), marginal_density(inner)
        self.outer_draws, self.inner_draws = typical(outer), typical(inner)
        self.correlation = correlation
        if correlation:
            self._scores = (_score(outer), _score(inner))
            self.rest = math.sqrt(1.0 - correlation**2)
            self.marks = np.array([-7.0, -3.5, -1.5, 0.0, 1.5, 3.5, 7.0])
        else:
            # powers and quotients turn or have a pole where a quantity is 0
            ends = (0.0, self.inner.lower, *self.inner.corners, self.inner.upper)
            levels = np.quantile(self.inner_draws, LEVELS)
            self.marks = np.unique(np.concatenate([levels, [end for end in ends if math.isfinite(end)]]))

    def position(self, x: Array, z: Array) -> Array:
        """What `marks` are compared with: z, or its normal score given that of x."""
        if not self.correlation:
            return z
        return np.asarray((self._scores[1](z) - self.correlation * self._scores[0](x)) / self.rest)

    def __call__(self, x: Array, z: Array) -> Array:
        density = self.outer(x) * self.inner(z)
        if not self.correlation:
            return np.asarray(density)
        score = self._scores[1](z)
        given = (score - self.correlation * self._scores[0](x)) / self.rest
        return np.asarray(density * np.exp(0.5 * (score - given) * (score + given)) / self.rest)


def _score(distribution: Distribution) -> Callable[[Array], Array]:
    """The standard normal score of a value, for the families where it is an elementary formula."""
    cut = distribution.lower is not None or distribution.upper is not None
    if cut or distribution.family not in ("normal", "lognormal"):
        kind = f"truncated {distribution.family}" if cut else distribution.family
        raise NotWritten(f"a Gaussian copula over a {kind} input is not written as a formula here")
    p = canonical(distribution)
    if distribution.family == "normal":
        return lambda x: np.asarray((x - p["mean"]) / p["sd"])
    return lambda x: np.asarray((np.log(x) - p["log_mean"]) / p["log_sd"])


class _Integrand:
    """f(x, z_k(y, x)) |dz_k/dy| summed over the branches, as a function of arrays y and x and of the
    constants that stand as terms of sums (so that their rounding can be told)."""

    def __init__(self, written: SymbolicIntegral, joint: _Joint):
        self.joint = joint
        self.constants: list[float] = []
        opened = [self._opened(branch) for branch in written.branches]
        self.branches = [_compiled(branch, written, len(self.constants)) for branch in opened]

    def _opened(self, branch: SymbolicBranch) -> SymbolicBranch:
        return SymbolicBranch(self._terms_named(branch.value), branch.slope, branch.conditions)

    def _terms_named(self, node: Node) -> Node:
        """Numbers that are terms of a sum replaced by names."""

        def named(part: Node) -> Node | None:
            if not isinstance(part, Apply) or part.operator != "add":
                return None
            return Apply("add", tuple(self._term(argument) for argument in part.arguments))

        return rebuild(node, named)

    def _term(self, node: Node) -> Node:
        if isinstance(node, Number) and node.value:
            self.constants.append(node.value)
            return Name(f"{_CONSTANT}{len(self.constants) - 1}")
        return self._terms_named(node)

    def solutions(self, y: Array, x: Array, constants: Array) -> list[tuple[Array, Array, Truth]]:
        """z_k, dz_k/dy and whether z_k is a solution, for every branch."""
        found = []
        for value, slope, conditions in self.branches:
            with np.errstate(all="ignore"):
                z, rate = (np.asarray(f(y, x, *constants) + np.zeros(x.shape), float) for f in (value, slope))
                holds = np.isfinite(z)
                for condition in conditions:
                    holds = holds & np.asarray(condition(y, x, *constants), bool)
            found.append((z, rate, holds))
        return found

    def __call__(self, y: Array, x: Array, constants: Array) -> Array:
        total = np.zeros(x.shape)
        for z, rate, holds in self.solutions(y, x, constants):
            with np.errstate(all="ignore"):
                term = self.joint(x, np.where(holds, z, np.nan)) * np.abs(rate)
            total += np.where(holds, term, 0.0)
        return total


_CONSTANT = "constant "


def _compiled(
    branch: SymbolicBranch, written: SymbolicIntegral, constants: int
) -> tuple[Any, Any, list[Any]]:
    """The branch by way of sympy, as functions of y, x and the constants."""
    import sympy

    symbols: Mapping[str, Any] = {
        written.value: sympy.Symbol("y", real=True),
        written.outer: sympy.Symbol("x", real=True),
        **{f"{_CONSTANT}{i}": sympy.Symbol(f"c{i}", real=True) for i in range(constants)},
    }

    def function(node: Node) -> Any:
        return sympy.lambdify(list(symbols.values()), to_sympy(node, symbols), ["scipy", "numpy"])

    return function(branch.value), function(branch.slope), [function(node) for node in branch.conditions]


def _panels(integrand: _Integrand, y: Array, finer: int) -> Panels:
    """The range of the outer input cut, for each y, where a limit passes a mark of the inner input's law or
    begins or ends, and at marks of the outer input's own law."""
    joint = integrand.joint
    outer, draws = joint.outer, joint.outer_draws
    scale = float(draws[-1] - draws[0])
    grid = _grid(outer, draws, finer)
    row, place, ends = _changes(integrand, y, grid)
    fixed = np.concatenate([np.quantile(draws, LEVELS), outer.corners, [outer.lower, 0.0, outer.upper]])
    fixed = np.unique(fixed[(fixed >= outer.lower) & (fixed <= outer.upper)])
    rows = np.concatenate([np.repeat(np.arange(y.size), fixed.size), row])
    places = np.concatenate([np.tile(fixed, y.size), place])
    firm = np.concatenate([np.tile((fixed == outer.lower) | (fixed == outer.upper), y.size), ends])
    order = np.lexsort((~firm, places, rows))
    rows, places, firm = rows[order], places[order], firm[order]
    kept = ~_too_near(rows, places, firm)
    rows, places = rows[kept], places[kept]
    whole = rows[1:] == rows[:-1]
    start, stop = places[:-1][whole], places[1:][whole]
    return Panels(rows[:-1][whole], start, stop, np.full(start.size, scale))


def _too_near(rows: Index, places: Array, firm: Truth) -> Truth:
    """Places within rounding of one before them, or of a firm one after them: a panel of a few last digits
    would hold nothing but rounding. Firm places, where solutions begin or end, stay unless they are equal."""
    same = rows[1:] == rows[:-1]
    with np.errstate(invalid="ignore"):
        gap = places[1:] - places[:-1]
        near = same & (gap <= NEAR * np.maximum(np.abs(places[1:]), np.abs(places[:-1])))
    equal = same & (gap == 0.0)
    drop = np.zeros(places.size, bool)
    drop[1:] = (near & ~firm[1:]) | equal
    drop[:-1] |= near & firm[1:] & ~firm[:-1]
    return drop


def _grid(outer: MarginalDensity, draws: Array, finer: int) -> Array:
    """Points of the outer input's range, dense where it is likely and closing in on its ends."""
    inner = np.quantile(draws, np.linspace(0.0, 1.0, GRID * finer + 1))
    spread = max(float(np.median(draws) - draws[0]), float(draws[-1] - np.median(draws)))
    away = spread * np.geomspace(1e-3, 1e4, 24 * finer)
    near = np.geomspace(1e-9, 1.0, 24 * finer)[:-1]
    low = inner[0] - away if math.isinf(outer.lower) else outer.lower + (inner[0] - outer.lower) * near
    high = inner[-1] + away if math.isinf(outer.upper) else outer.upper - (outer.upper - inner[-1]) * near
    middle = [0.0] if outer.lower < 0.0 < outer.upper else []
    points: Array = np.unique(np.concatenate([low, inner, high, middle]))
    return points


def _changes(integrand: _Integrand, y: Array, grid: Array) -> tuple[Index, Array, Truth]:
    """Rows of y and places x between neighbouring points of the grid at which a limit passes a mark, begins,
    ends or turns, bisected to the last digit; and whether it begins or ends there."""
    constants = np.array(integrand.constants)
    marks = np.array([-np.inf, *integrand.joint.marks])  # above minus infinity: there is a solution

    def position(row: Index, x: Array) -> tuple[Array, Array]:
        """Where the solutions stand (nan: none) and their derivatives, of shape (branches, places)."""
        found = integrand.solutions(y[row], x, constants)
        with np.errstate(all="ignore"):
            places = [integrand.joint.position(x, np.where(holds, z, np.nan)) for z, _, holds in found]
        return np.stack(places), np.stack([rate for _, rate, _ in found])

    def state(row: Index, x: Array) -> Truth:
        """Of shape (branches times marks and the sign of the derivative, places)."""
        z, rate = position(row, x)
        with np.errstate(invalid="ignore"):
            above = np.concatenate([z[:, None] > marks[:, None], (rate > 0.0)[:, None]], axis=1)
        return above.reshape(-1, x.size)

    rows, points, bent, turn = _refined(lambda row, x: np.concatenate(position(row, x)), y.size, grid)
    seen = state(rows, points)
    which, cell = np.nonzero((seen[:, 1:] != seen[:, :-1]) & (rows[1:] == rows[:-1]))
    row, low, high = rows[cell], points[cell], points[cell + 1]
    before = seen[which, cell]
    for _ in range(BISECTIONS):
        middle = low + 0.5 * (high - low)
        now = state(row, middle)[which, np.arange(row.size)]
        low, high = np.where(now == before, middle, low), np.where(now == before, high, middle)
    # where solutions begin or end, the side that has them is the end of the panel
    place, ends = np.where(before, low, high), which % (marks.size + 1) == 0
    return (
        np.concatenate([row, bent]), np.concatenate([place, turn]), np.concatenate([ends, bent < 0])
    )  # fmt: skip


def _refined(
    follow: Callable[[Index, Array], Array], count: int, grid: Array
) -> tuple[Index, Array, Index, Array]:
    """The grid for each row, with points added in cells over which a solution or its derivative does not run
    straight on: there is a pole or a turn inside, and what lies beside it may be narrow. And the rows and the
    places of these poles and turns, to within rounding."""
    rows = np.repeat(np.arange(count), grid.size - 1)
    low, high = np.tile(grid[:-1], count), np.tile(grid[1:], count)
    added_rows, added = [np.repeat(np.arange(count), grid.size)], [np.tile(grid, count)]
    for _ in range(REFINEMENTS):
        width = high - low
        ends = [follow(rows, at) for at in (low, low + width / 64, high - width / 64, high)]
        with np.errstate(invalid="ignore"):
            signs = [np.sign(ends[1] - ends[0]), np.sign(ends[3] - ends[2]), np.sign(ends[3] - ends[0])]
        bent = np.any((signs[0] != signs[2]) | (signs[1] != signs[2]), axis=0)
        bent &= np.any(np.isfinite(ends[0]) & np.isfinite(ends[3]), axis=0)
        rows, low, high = rows[bent], low[bent], high[bent]
        middle = low + 0.5 * (high - low)
        wide = high - low > NEAR * np.abs(middle)
        if not np.any(wide) or rows.size > MOST_BENT * count:
            break
        added_rows.append(rows[wide])
        added.append(middle[wide])
        rows, low, middle, high = rows[wide], low[wide], middle[wide], high[wide]
        rows, low, high = np.tile(rows, 2), np.concatenate([low, middle]), np.concatenate([middle, high])
    row, point = np.concatenate(added_rows), np.concatenate(added)
    order = np.lexsort((point, row))
    return row[order], point[order], rows, low + 0.5 * (high - low)
