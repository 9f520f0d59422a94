"""Says why a set of outputs has no joint density, and samples the support to look.

A map is refused where outputs are functionally dependent on a set of positive probability, so that part of
the probability has no density. A piece is taken for empty only where interval enclosures prove it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.formula.evaluate import compile_numpy
from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import Node, names
from outspread.laws.law import Array, Law
from outspread.routes.jacobian.construct import tidy
from outspread.routes.jacobian.smooth import SmoothMap
from outspread.routes.jacobian.symbolic import reach

DRAWS = 2000
_SEED = 20260401
_SINGULAR = 1e-11  # |det| against the sum of the absolute products in it
_DEEPEST = 14


@dataclass(frozen=True)
class NotPossible:
    """The joint density cannot be derived this way; `reason` is a clause for the plan."""

    reason: str


def refusal(outputs: Mapping[str, Node], laws: Mapping[str, Law]) -> NotPossible | None:
    """Why these outputs have no joint density, as far as names and laws tell."""
    used = tuple(dict.fromkeys(name for node in outputs.values() for name in names(node)))
    if len(used) != len(outputs) or len(used) != len(laws):
        return NotPossible(
            f"inverse and Jacobian need as many inputs as outputs: "
            f"{_count(len(used), 'input')} for {_count(len(outputs), 'output')}"
        )
    for name, law in laws.items():
        if law.atoms().values.size:
            return NotPossible(f"the input {name} has atoms, so the outputs have no joint density")
    return None


def _count(number: int, noun: str) -> str:
    return f"{number} {noun}" if number == 1 else f"{number} {noun}s"


def draw_inputs(laws: Mapping[str, Law], count: int = DRAWS) -> Array:
    """Independent draws of the inputs, shape (n, count): the same at every call."""
    generator = np.random.default_rng(_SEED)
    return np.stack([law.icdf(generator.uniform(size=count)) for law in laws.values()])


def holds(conditions: Sequence[Node], inputs: Mapping[str, Array]) -> npt.NDArray[np.bool_]:
    shape = np.shape(next(iter(inputs.values())))
    result = np.ones(shape, dtype=bool)
    for condition in conditions:
        result &= compile_numpy(condition, tuple(inputs))(*inputs.values()).astype(bool)
    return result


def with_parameters(smooth: SmoothMap, draws: Array) -> dict[str, Array]:
    """The draws by name, with the integer parameters of the piece as the draws determine them."""
    named = dict(zip(smooth.inputs, draws, strict=True))
    for parameter in smooth.piece.parameters:
        inner = compile_numpy(parameter.inner, tuple(named))(*named.values())
        named[parameter.name] = np.ceil(inner) if parameter.rounds_up else np.floor(inner)
    return named


def singular(smooth: SmoothMap, inputs: Mapping[str, Array]) -> bool:
    """Whether det J vanishes at every one of the given inputs, to rounding."""
    order = len(smooth.inputs)
    matrix = np.empty((*np.shape(next(iter(inputs.values()))), order, order))
    for i, row in enumerate(smooth.jacobian):
        for j, entry in enumerate(row):
            matrix[..., i, j] = compile_numpy(tidy(entry), tuple(inputs))(*inputs.values())
    usable = np.all(np.isfinite(matrix), axis=(-2, -1))
    if not np.any(usable):
        return False
    size = np.abs(np.linalg.det(matrix[usable]))
    return bool(np.all(size <= _SINGULAR * _permanent(np.abs(matrix[usable]))))


def _permanent(matrix: Array) -> Array:
    """Permanent of non-negative matrices, shape (k, n, n): the sum of the products without their signs."""
    order = matrix.shape[-1]
    if order == 1:
        return np.asarray(matrix[..., 0, 0])
    total = np.zeros(matrix.shape[:-2])
    for column in range(order):
        rest = np.delete(matrix[..., 1:, :], column, axis=-1)
        total = total + matrix[..., 0, column] * _permanent(rest)
    return total


def proven_empty(smooth: SmoothMap, laws: Mapping[str, Law]) -> bool:
    """Whether no point of the support satisfies the piece's conditions, proven by enclosures."""
    low = np.array([[reach(law)[0]] for law in laws.values()])
    high = np.array([[reach(law)[1]] for law in laws.values()])
    for depth in range(_DEEPEST):
        box = {name: Interval(low[i], high[i]) for i, name in enumerate(smooth.inputs)}
        for parameter in smooth.piece.parameters:
            box[parameter.name] = enclose(parameter.inner, box)
        open_boxes = np.ones(low.shape[1], dtype=bool)
        for condition in smooth.piece.conditions:
            open_boxes &= enclose(condition, box).upper == 1.0
        low, high = low[:, open_boxes], high[:, open_boxes]
        if not low.shape[1]:
            return True
        side = depth % low.shape[0]
        middle = 0.5 * low[side] + 0.5 * high[side]
        left, right = high.copy(), low.copy()
        left[side], right[side] = middle, middle
        low, high = np.concatenate([low, right], axis=1), np.concatenate([left, high], axis=1)
    return False
