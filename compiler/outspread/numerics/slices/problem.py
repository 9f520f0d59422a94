"""A formula with its inputs, taken apart for derivation: continuous and discrete inputs, constant cases.

It holds what every numeric route needs to know and computes no probability itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import product

import numpy as np

from outspread.errors import DerivationError
from outspread.formula.evaluate import compile_numpy
from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import Node, names
from outspread.laws.law import Array, Law
from outspread.numerics.slices import cases

MOST_COMBINATIONS = 2_000_000
MOST_WHOLE_CASES = 3_500


@dataclass(frozen=True)
class Scores:
    """Gaussian dependence: correlation matrix of the normal scores of the inputs in `order`."""

    order: tuple[str, ...]
    matrix: Array

    def between(self, left: str, right: str) -> float:
        if left not in self.order or right not in self.order:
            return 0.0
        return float(self.matrix[self.order.index(left), self.order.index(right)])

    def touches(self, name: str) -> bool:
        """Whether the input depends on another one."""
        if name not in self.order:
            return False
        row = self.matrix[self.order.index(name)]
        return bool(np.count_nonzero(row) > 1)


@dataclass(frozen=True)
class Combinations:
    """Every combination of values of the discrete inputs: arrays of one length, and their probabilities."""

    values: Mapping[str, Array]
    weights: Array

    @property
    def count(self) -> int:
        return int(self.weights.size)


@dataclass(frozen=True)
class Problem:
    """`continuous` and `discrete` inputs that the formula uses, each in the model's order."""

    expression: Node
    laws: Mapping[str, Law]
    scores: Scores | None
    continuous: tuple[str, ...]
    discrete: tuple[str, ...]
    constant: tuple[tuple[Node, Node], ...] = field(default=())
    constant_known: bool = True

    @property
    def inputs(self) -> tuple[str, ...]:
        return tuple(name for name in self.laws if name in self.continuous or name in self.discrete)

    def correlated(self) -> bool:
        """Whether two continuous inputs of the formula depend on each other."""
        return self.scores is not None and any(
            self.scores.between(a, b) != 0 for a in self.continuous for b in self.continuous if a != b
        )

    def moving_event(self, comparison: Node) -> Node:
        """The comparison, outside all constant cases."""
        outside = [cases.opposite(condition) for condition, _ in self.constant]
        return cases.both(comparison, *outside)


def take_apart(
    expression: Node,
    laws: Mapping[str, Law],
    scores: Scores | None,
    continuous: tuple[str, ...],
    discrete: tuple[str, ...],
) -> Problem:
    """The problem of deriving `expression`, with each of its inputs taken as continuous or as discrete
    (`parts` lists the ways)."""
    try:
        constant = tuple(cases.constant_cases(expression, continuous, _whole_numbers(laws)))
        known = True
    except OverflowError:
        constant, known = (), False
    return Problem(expression, laws, scores, continuous, discrete, constant, known)


def _whole_numbers(laws: Mapping[str, Law]) -> Callable[[Node], range | None]:
    def span(node: Node) -> range | None:
        box = {}
        for name in names(node):
            low, high = laws[name].support()
            low = low if np.isfinite(low) else float(laws[name].icdf(1e-300))
            high = high if np.isfinite(high) else float(laws[name].iccdf(1e-300))
            box[name] = Interval(np.array([low]), np.array([high]))
        with np.errstate(all="ignore"):
            enclosure = enclose(node, box)
        first, last = float(np.ravel(enclosure.lower)[0]), float(np.ravel(enclosure.upper)[0])
        if not (np.isfinite(first) and np.isfinite(last)) or last - first > MOST_WHOLE_CASES:
            return None
        return range(int(np.floor(first)) - 1, int(np.ceil(last)) + 2)

    return span


def combinations(problem: Problem) -> Combinations:
    """All combinations of the discrete inputs (independent ones only); one empty combination if none."""
    if not problem.discrete:
        return Combinations({}, np.ones(1))
    atoms = [problem.laws[name].atoms() for name in problem.discrete]
    size = 1
    for part in atoms:
        size *= part.values.size
    if size > MOST_COMBINATIONS:
        raise DerivationError(
            f"the discrete inputs {', '.join(problem.discrete)} have {size:,} combinations of values; "
            f"at most {MOST_COMBINATIONS:,} can be gone through one by one"
        )
    grids = np.meshgrid(*(part.values for part in atoms), indexing="ij")
    masses = np.meshgrid(*(part.masses for part in atoms), indexing="ij")
    weights = np.prod(np.stack([m.ravel() for m in masses]), axis=0)
    values = {name: grid.ravel() for name, grid in zip(problem.discrete, grids, strict=True)}
    keep = weights > 1e-305
    return Combinations({name: value[keep] for name, value in values.items()}, weights[keep])


def parts(expression: Node, laws: Mapping[str, Law]) -> list[tuple[tuple[str, ...], tuple[str, ...]]]:
    """The ways to take each partly discrete input as continuous or as discrete: (continuous, discrete)."""
    used = [name for name in laws if name in names(expression)]
    choices: list[Sequence[str]] = []
    for name in used:
        mass = laws[name].continuous_mass
        choices.append(("c",) if mass == 1 else ("d",) if mass == 0 else ("c", "d"))
    return [
        (
            tuple(name for name, kind in zip(used, combination, strict=True) if kind == "c"),
            tuple(name for name, kind in zip(used, combination, strict=True) if kind == "d"),
        )
        for combination in product(*choices)
    ]


def evaluate_cases(problem: Problem, combos: Combinations) -> list[Array]:
    """The value of each constant case at each combination of the discrete inputs."""
    values = []
    for _, value in problem.constant:
        arguments = names(value)
        compiled = compile_numpy(value, arguments)
        with np.errstate(all="ignore"):
            result = compiled(*(combos.values[name] for name in arguments))
        values.append(np.broadcast_to(np.asarray(result, float), (combos.count,)).astype(float))
    return values
