"""Derives the law of a formula of at most two continuous inputs (and any discrete ones) as a `DerivedLaw`.

One continuous input: change of variables, every branch of the inverse. Two: the region integral. None:
every combination of the discrete inputs. What has more continuous inputs is left to `sampling`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from outspread.errors import DerivationError
from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Name, Node, Number, names, substitute
from outspread.laws.derived import DerivedLaw, Evaluate
from outspread.laws.law import Array, Atoms, Estimates, Law
from outspread.numerics.panels import LEAST
from outspread.numerics.slices import cases
from outspread.numerics.slices.axis import Axis
from outspread.numerics.slices.extent import Extent, extent
from outspread.numerics.slices.isolate import Isolator, TooManyBoundaries
from outspread.numerics.slices.landmarks import MOST, landmarks
from outspread.numerics.slices.line import LineMeasure
from outspread.numerics.slices.measure import PlaneMeasure
from outspread.numerics.slices.problem import (
    Combinations,
    Problem,
    Scores,
    combinations,
    evaluate_cases,
    parts,
    take_apart,
)
from outspread.numerics.slices.solve import PARAMETER

Measure = LineMeasure | PlaneMeasure
NO_PARAMETER = np.zeros(1)
_NODES = 56
_WORST_TOTAL = 1e-6
_MOST_TURNS = 400
_SAME = 2e-13  # values of discrete results closer than this (relatively) are one value


@dataclass(frozen=True)
class Piece:
    """One way to take the partly discrete inputs: a problem and how its probabilities are measured."""

    problem: Problem
    combos: Combinations
    measure: Measure | None

    @property
    def evaluations(self) -> int:
        return self.combos.count if self.measure is None else self.measure.effort.evaluations


@dataclass(frozen=True)
class NumericLaw:
    law: DerivedLaw
    pieces: tuple[Piece, ...]

    @property
    def evaluations(self) -> int:
        return sum(piece.evaluations for piece in self.pieces)


def derive(
    expression: Node,
    laws: Mapping[str, Law],
    scores: Scores | None,
    outer: tuple[str, ...] = (),
    relative: float = 1e-12,
    least: float = 0.0,
) -> NumericLaw:
    """The law of the expression. `outer` names the input to integrate over where there are two.

    Raises DerivationError where the formula has more than two continuous inputs in some part, has no value
    with a probability that matters, or is constant on infinitely many pieces. With `least`, probabilities
    below it need no digits.
    """
    pieces = []
    for continuous, discrete in parts(expression, laws):
        problem = take_apart(expression, laws, scores, continuous, discrete)
        pieces.append(Piece(problem, combinations(problem), _measure(problem, outer, relative, least)))
    atoms, continuous_mass = _all_atoms(pieces)
    spread = extent(expression, laws, names(expression))
    nodes = _nodes(pieces, spread)
    evaluate = _evaluator(pieces)
    spread = _tightened(spread, evaluate, atoms) if continuous_mass else spread
    law = DerivedLaw(
        evaluate, (spread.lower, spread.upper), nodes, atoms, continuous_mass,
        (spread.lower_error, spread.upper_error),
    )  # fmt: skip
    law.turning_values = tuple(
        value for piece in pieces for value in _turning_values(piece) if spread.lower < value < spread.upper
    )
    result = NumericLaw(law, tuple(pieces))
    _check_whole(result)
    return result


def tabulate(result: NumericLaw, laws: Mapping[str, Law], density: bool = True, least: float = LEAST) -> None:
    """Keep the law on panels (`laws.tabulated`) where its values are integrals, each of them dear, or where,
    without `density`, it is to be an input of a next step."""
    planes = [piece for piece in result.pieces if isinstance(piece.measure, PlaneMeasure)]
    if planes or not density:
        low, high = result.law.support()
        marks = {value for piece in result.pieces for value in _landmarks(piece) if low < value < high}
        inherited = sum(laws[name].relative_error for name in laws)
        least = max(least, *(min(10 * laws[name].floor, 1e-35) for name in laws))
        result.law.tabulate(sorted(marks) if len(marks) <= 2 * MOST else (), density, inherited, least)


def _landmarks(piece: Piece) -> tuple[float, ...]:
    if isinstance(piece.measure, LineMeasure):
        return tuple(_end_values(piece))
    if piece.measure is None:
        return ()
    axes = piece.measure.axes
    grids = {name: axis.grid for name, axis in axes.items()}
    marks = {name: np.array(values, float) for name, values in piece.measure.grading.marks.items()}
    spots = piece.measure.grading.spot_values
    return landmarks(piece.problem.expression, piece.problem.laws, grids, marks, piece.combos, spots)


def _end_values(piece: Piece) -> list[float]:
    """Values at the ends and breaks of the continuous input, for the combinations that are most likely."""
    assert isinstance(piece.measure, LineMeasure)
    name = piece.measure.name
    law = piece.problem.laws[name]
    points = np.array([p for p in (*law.support(), *law.breaks()) if np.isfinite(p)])
    likely = np.argsort(-piece.combos.weights, kind="stable")[: MOST // max(points.size, 1)]
    arguments = names(piece.problem.expression)
    columns = {key: np.repeat(value[likely], points.size) for key, value in piece.combos.values.items()}
    columns[name] = np.tile(points, likely.size)
    with np.errstate(all="ignore"):
        values = compile_numpy(piece.problem.expression, arguments)(*(columns[key] for key in arguments))
    return [float(value) for value in np.ravel(np.asarray(values, float)) if np.isfinite(value)]


def _turning_values(piece: Piece) -> list[float]:
    """Values at turning points, kinks and breaks of a formula of one continuous input: its density is
    unbounded or jumps there."""
    if not isinstance(piece.measure, LineMeasure) or piece.combos.count > 1:
        return []
    problem, axis = piece.problem, piece.measure.axis
    marks = [*problem.laws[axis.name].breaks()]
    expression = substitute(
        problem.expression, {name: Number(float(value[0])) for name, value in piece.combos.values.items()}
    )
    for node in (derivative(expression, axis.name), *nonsmooth(expression, axis.name)):
        if names(node) == (axis.name,):
            finder = Isolator(node, Number(0.0), "less_equal", axis.name, axis.grid, PARAMETER)
            try:
                marks.extend(finder.boundaries({}, 1)[0].tolist())
            except TooManyBoundaries:
                return []
    points = np.array(marks, float)
    with np.errstate(all="ignore"):
        points = points[axis.law.pdf(points) * axis.scale > 1e-20]  # far out in the tails nothing shows
        values = np.asarray(compile_numpy(expression, (axis.name,))(points), float)
    found = sorted(set(values[np.isfinite(values)].tolist()))
    return found if len(found) <= _MOST_TURNS else []


def _tightened(spread: Extent, evaluate: Evaluate, atoms: Atoms) -> Extent:
    """Finite ends whose enclosure is loose, moved to where the probability beyond them vanishes."""
    ends = []
    for end, doubt, kind, side in (
        (spread.lower, spread.lower_error, "cdf", 1.0), (spread.upper, spread.upper_error, "ccdf", -1.0)
    ):  # fmt: skip
        empty, full = 0.0, doubt
        if np.isfinite(end) and doubt > 1e-6 * (abs(end) + doubt):
            limit = atoms.values[0 if side > 0 else -1] if atoms.values.size else end + side * doubt
            full = min(doubt, side * (float(limit) - end))
            for _ in range(5):
                steps = np.linspace(empty, full, 34)[1:-1]
                reached = evaluate(kind, end + side * steps).value > 0
                first = int(np.argmax(reached)) if reached.any() else steps.size
                empty, full = (
                    float(steps[first - 1]) if first else empty,
                    float(steps[first]) if first < steps.size else full,
                )
        ends.append((end + side * empty, full - empty))
    return Extent(ends[0][0], ends[1][0], ends[0][1], ends[1][1])


def _measure(problem: Problem, outer: tuple[str, ...], relative: float, least: float) -> Measure | None:
    if not problem.constant_known:
        raise DerivationError(
            "the formula takes a constant value on too many pieces to go through one by one"
        )
    if not problem.continuous:
        return None
    if len(problem.continuous) == 1:
        return LineMeasure(problem)
    if len(problem.continuous) > 2:
        raise DerivationError(
            f"{len(problem.continuous)} continuous inputs enter; two at most can be integrated"
        )
    first, second = problem.continuous
    if outer and outer[0] == second:
        first, second = second, first
    return PlaneMeasure(problem, first, second, relative, least)


def _evaluator(pieces: list[Piece]) -> Evaluate:
    def evaluate(kind: str, y: Array) -> Estimates:
        value, error, rounding = np.zeros((3, y.size))
        for piece in pieces:
            if piece.measure is None:
                continue
            operator = "greater" if kind == "ccdf" else "less_equal"
            event = piece.problem.moving_event(
                cases.comparison(operator, piece.problem.expression, Name(PARAMETER))
            )
            if event == cases.FALSE:
                continue
            method = piece.measure.rate if kind == "pdf" else piece.measure.event
            part = method(event, y)
            value += part.value
            error += part.error
            if part.rounding is not None:
                rounding += part.rounding
        return Estimates(value, error, rounding)

    return evaluate


def _all_atoms(pieces: list[Piece]) -> tuple[Atoms, float]:
    """The atoms of all pieces, equal values together, and the mass of the continuous part."""
    values: list[Array] = []
    masses: list[Array] = []
    errors: list[Array] = []
    covered = False
    for piece in pieces:
        for value, mass, error in _piece_atoms(piece):
            values.append(value)
            masses.append(mass)
            errors.append(error)
        covered = covered or piece.measure is not None
    if not values:
        return Atoms.none(), 1.0
    atoms = merge_atoms(np.concatenate(values), np.concatenate(masses), np.concatenate(errors))
    if not covered:
        return atoms, 0.0
    rest = 1.0 - float(atoms.masses.sum())
    return atoms, rest if rest > 1e-13 + 5 * float(atoms.errors.sum()) else 0.0


def _piece_atoms(piece: Piece) -> list[tuple[Array, Array, Array]]:
    problem, combos = piece.problem, piece.combos
    if piece.measure is None:
        arguments = names(problem.expression)
        with np.errstate(all="ignore"):
            value = compile_numpy(problem.expression, arguments)(*(combos.values[n] for n in arguments))
        value = np.broadcast_to(np.asarray(value, float), (combos.count,))
        return [(value, combos.weights, 1e-15 * combos.weights)]
    found = []
    for condition, value in _disjoint(problem, evaluate_cases(problem, combos)):
        if condition == cases.FALSE:
            continue
        mass = piece.measure.by_combination(condition, NO_PARAMETER)
        found.append((value, mass.value[0] * combos.weights, mass.error[0] * combos.weights))
    return found


def _disjoint(problem: Problem, values: list[Array]) -> list[tuple[Node, Array]]:
    """Constant cases with equal values joined by `or`; others, which may overlap, one outside the other."""
    by_number: dict[float, list[Node]] = {}
    rest: list[tuple[Node, Array]] = []
    for (condition, value), numbers in zip(problem.constant, values, strict=True):
        if isinstance(value, Number) or not names(value):
            by_number.setdefault(float(numbers[0]), []).append(condition)
        else:
            rest.append((condition, numbers))
    joined = [
        (cases.either(*conditions), np.full(1, number).repeat(values[0].size))
        for number, conditions in by_number.items()
    ]
    if not rest:
        return joined
    before: list[Node] = [condition for condition, _ in joined]
    for condition, numbers in rest:
        joined.append((cases.both(condition, *(cases.opposite(earlier) for earlier in before)), numbers))
        before.append(condition)
    return joined


def merge_atoms(values: Array, masses: Array, errors: Array) -> Atoms:
    """Sort, join values that differ by rounding only, and print each to its shortest equal decimal."""
    if np.isnan(values[masses > 0]).any():
        raise DerivationError("the formula has no value for some combinations of its discrete inputs")
    keep = masses > 0
    if not keep.any():
        return Atoms.none()
    values, masses, errors = values[keep], masses[keep], errors[keep]
    order = np.argsort(values, kind="stable")
    values, masses, errors = values[order], masses[order], errors[order]
    gap = np.diff(values) > _SAME * np.maximum(np.abs(values[1:]), np.abs(values[:-1]))
    group = np.concatenate([[0], np.cumsum(gap)])
    first = np.flatnonzero(np.concatenate([[True], gap]))
    tidy = np.array([float(f"{value:.14g}") for value in values[first].tolist()])
    sums = (np.asarray(np.bincount(group, column), float) for column in (masses, errors))
    return Atoms(tidy, *sums)


def _nodes(pieces: list[Piece], spread: Extent) -> Array:
    """Values that grade the result from tail to tail: the formula at a grid of graded inputs."""
    found: list[Array] = []
    for piece in pieces:
        if piece.measure is None:
            continue
        value = _on_grid(piece)
        found.append(np.unique(value[np.isfinite(value)]))
    if not found:
        return np.zeros(0)
    points = np.unique(np.concatenate(found))
    if points.size > _NODES:
        points = points[np.unique(np.round(np.linspace(0, points.size - 1, _NODES)).astype(int))]
    return np.unique(np.concatenate([points, _far(points, spread)]))


def _on_grid(piece: Piece) -> Array:
    """The formula at a grid of graded continuous inputs, for up to some 24 combinations of discrete ones."""
    problem = piece.problem
    grids = [Axis(name, problem.laws[name]).grid for name in problem.continuous]
    step = max(1, piece.combos.count // 24)
    mesh = np.meshgrid(*grids, np.arange(0, piece.combos.count, step), indexing="ij")
    environment = {name: axis.ravel() for name, axis in zip(problem.continuous, mesh, strict=False)}
    index = mesh[-1].ravel().astype(int)
    environment.update({name: value[index] for name, value in piece.combos.values.items()})
    arguments = names(problem.expression)
    with np.errstate(all="ignore"):
        value = compile_numpy(problem.expression, arguments)(*(environment[n] for n in arguments))
    return np.ravel(np.asarray(value, float))


def _far(points: Array, spread: Extent) -> Array:
    """Ever further points towards infinite ends, ever closer ones towards finite ends."""
    middle = float(np.median(points))
    size = max(float(np.quantile(points, 0.75) - np.quantile(points, 0.25)), 1e-12 * abs(middle), 1e-300)
    powers = 10.0 ** np.array([0.5, 1, 1.5, 2, 3, 4, 6, 8, 12, 16, 24, 40, 70, 120, 200, 290])
    found: list[Array] = []
    with np.errstate(over="ignore"):
        for end, side in ((spread.lower, -1.0), (spread.upper, 1.0)):
            if np.isinf(end):
                found.append(middle + side * size * powers)
            else:
                reach = abs(end - middle)
                found.append(np.append(end - side * reach / powers, end))
    far = np.concatenate(found)
    return far[np.isfinite(far)]


def _check_whole(result: NumericLaw) -> None:
    """cdf and ccdf must add up to 1; what is missing is where the formula has no value."""
    law = result.law
    if law.continuous_mass == 0:
        total, doubt = float(law.atoms().masses.sum()), 1e-12
    else:
        inner = law.nodes[1:-1] if law.nodes.size > 2 else law.nodes
        points = inner[np.unique(np.linspace(0, inner.size - 1, 5).astype(int))]
        totals = law.raw_total(points)
        if np.isnan(totals.value).any():
            raise DerivationError("the derived probabilities are not numbers at some values of the result")
        worst = int(np.argmax(np.abs(totals.value - 1)))
        total, doubt = float(totals.value[worst]), float(totals.error[worst])
    missing = 1.0 - total
    if abs(missing) <= 5 * doubt + 1e-12:
        return
    if missing > 0 and _undefined(result):
        raise DerivationError(
            f"the formula has no value with probability {missing:.3g} (a root or logarithm of a negative "
            "number, for example); limit the inputs by `truncate`, or say with if(…) what holds there"
        )
    if abs(missing) > _WORST_TOTAL:
        raise DerivationError(
            f"the probabilities of the result, derived apart from each other, add up to {total!r}, not 1"
        )
    law.floor_error = 2 * abs(missing)


def _undefined(result: NumericLaw) -> bool:
    """Whether the formula has no value somewhere on a grid over its inputs."""
    pieces = [piece for piece in result.pieces if piece.measure is not None]
    return any(bool(np.isnan(_on_grid(piece)).any()) for piece in pieces)
