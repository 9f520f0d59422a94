"""What measures in one and in two continuous inputs share: effort, environments, blocks of values."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.laws.law import Array, Estimates
from outspread.numerics.slices.problem import Combinations
from outspread.numerics.slices.solve import PARAMETER

ROUNDING = 2.3e-16 * 4  # units in the last place lost on the way through a formula, relative to its terms


@dataclass
class Effort:
    """Counts evaluations; a plain number that routes report."""

    evaluations: int = 0


def environment_of(y: Array, combos: Combinations) -> dict[str, Array]:
    environment = {name: np.tile(value, y.size) for name, value in combos.values.items()}
    environment[PARAMETER] = np.repeat(y, combos.count)
    return environment


def compiled(node: Node) -> Callable[[Mapping[str, Array], int], Array]:
    arguments = names(node)
    function = compile_numpy(node, arguments)

    def evaluate(environment: Mapping[str, Array], count: int) -> Array:
        return np.broadcast_to(np.asarray(function(*(environment[n] for n in arguments)), float), (count,))

    return evaluate


def over_blocks(
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
