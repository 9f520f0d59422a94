"""Solving for a copula's parameter: where a measured strength takes its target, with an error bound.

What is measured, and how, is the caller's: `rank_strength` and `pearson`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.families import parameter_of_share, share_range


@dataclass(frozen=True)
class Solved:
    """A copula's parameter (or any figure) and the bound on its absolute error."""

    value: float
    error: float


def solve_parameter(family: str, target: float, measure: Callable[[float], Solved]) -> Solved:
    """The parameter at which a rising `measure` takes the value `target`.

    The error is that of the measure, over its slope there, and the width of the last bracket. Raises
    LawError where the target lies so near to an end of the range that no parameter within it is told apart.
    """
    from scipy.optimize import brentq

    known: dict[float, Solved] = {}

    def excess(share: float) -> float:
        if share not in known:
            known[share] = measure(parameter_of_share(family, share))
        return known[share].value - target

    low, high = _bracket(family, excess)
    share = float(brentq(excess, low, high, xtol=4e-15, rtol=4 * np.finfo(float).eps, maxiter=100))
    # the slope at the root, by a difference wide enough that the measure's error does not matter
    step = 1e-4 * min(1.0 - abs(share), 1.0) * (-1.0 if share > 0 else 1.0)
    if family in ("clayton", "gumbel") and share + step <= 0:
        step = abs(step)
    slope = abs(excess(share + step) - excess(share)) / abs(step)
    worst = max(found.error for found in known.values())
    error_in_share = 2.0 * (worst + 1e-15) / slope + 1e-14
    value = parameter_of_share(family, share)
    per_share = abs(parameter_of_share(family, share + step) - value) / abs(step)
    return Solved(value, 1.2 * per_share * error_in_share)


def _bracket(family: str, excess: Callable[[float], float]) -> tuple[float, float]:
    """Shares of the range of the parameter between which `excess` changes its sign."""
    low, high = share_range(family)
    inner = excess(0.5 * (low + high) + 0.1)
    at = 0.5 * (low + high) + 0.1
    other = high if inner < 0 else low
    for _ in range(12):
        following = other + 0.2 * (at - other)
        value = excess(following)
        if value == 0 or (value < 0) != (inner < 0):
            return min(at, following), max(at, following)
        at, inner = following, value
    raise LawError("the strength asked for is so near to an end of its range that no parameter is told apart")
