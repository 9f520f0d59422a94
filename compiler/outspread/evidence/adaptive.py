"""Adaptive quadrature of many integrals at once, with a bound on each error; what is integrated is not its
business.

Smooth panels by Gauss's rules, panels that end in a singularity or at infinity by the double exponential
rule (Takahasi and Mori 1974), what neither settles by halving. An error is twice the change between two
rules of different order: what the weaker one misses.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np
import numpy.typing as npt

from outspread.laws.law import Array, Estimates

Index = npt.NDArray[np.int64]
#: values of the integrand of the integral `row` at x, arrays of one length
Integrand = Callable[[Index, Array], Array]

ORDERS = (14, 21)  # one even and one odd: a jump in the middle of a panel cannot give both the same
REACH, STEP = 6.0, 1.0 / 12.0  # to 1e-275 of a panel: the power -0.95 of the distance can be integrated
SMOOTH_ROUNDS, ROUNDS, EVALUATIONS = 4, 40, 1_500_000
ROUNDING = 2e-15  # of a sum of at most some hundred products


@dataclass(frozen=True)
class Panels:
    """Pieces of integrals: from `start` to `stop`, one of which may be infinite; then `scale` is the length
    over which the integrand changes."""

    row: Index
    start: Array
    stop: Array
    scale: Array

    def of(self, chosen: npt.NDArray[np.bool_]) -> Panels:
        return Panels(self.row[chosen], self.start[chosen], self.stop[chosen], self.scale[chosen])

    def halves(self) -> Panels:
        """Each panel in two; an infinite one is cut a scale from its end, and the rest doubles its scale."""
        low, high = np.isinf(self.start), np.isinf(self.stop)
        with np.errstate(invalid="ignore"):
            middle = self.start + 0.5 * (self.stop - self.start)
        middle = np.where(low, self.stop - self.scale, np.where(high, self.start + self.scale, middle))
        twice = 2.0 * self.scale
        return Panels(
            np.concatenate([self.row, self.row]),
            np.concatenate([self.start, middle]),
            np.concatenate([middle, self.stop]),
            np.concatenate([np.where(low, twice, self.scale), np.where(high, twice, self.scale)]),
        )


@dataclass(frozen=True)
class _Rule:
    """Nodes by their shares of the way from the start and from the stop, and weights for the unit interval
    of this rule and of a weaker one."""

    low: Array
    high: Array
    weights: Array
    weaker: Array


@cache
def _gauss() -> _Rule:
    """Gauss's rules after a substitution, by the smooth step u^2 (3 - 2 u), that takes the edge off a square
    root and off its reciprocal at either end."""
    parts = [np.polynomial.legendre.leggauss(order) for order in ORDERS]
    u = 0.5 * (1.0 + np.concatenate([nodes for nodes, _ in parts]))
    factor = 6.0 * u * (1.0 - u)
    weaker, weights = np.zeros(u.size), np.zeros(u.size)
    first = slice(0, ORDERS[0])
    second = slice(ORDERS[0], None)
    weaker[first], weights[second] = parts[0][1] * factor[first] / 2, parts[1][1] * factor[second] / 2
    return _Rule(u**2 * (3.0 - 2.0 * u), (1.0 - u) ** 2 * (1.0 + 2.0 * u), weights, weaker)


@cache
def _double_exponential() -> _Rule:
    """Every second node alone makes the weaker rule."""
    t = np.arange(-round(REACH / STEP), round(REACH / STEP) + 1) * STEP
    turn = np.pi * np.sinh(t)
    low, high = 1.0 / (1.0 + np.exp(-turn)), 1.0 / (1.0 + np.exp(turn))
    weights = STEP * np.pi * np.cosh(t) * low * high
    weaker = np.where(np.arange(t.size) % 2 == 0, 2.0 * weights, 0.0)
    return _Rule(low, high, weights, weaker)


def integrate(
    function: Integrand, doubt: Integrand, panels: Panels, rows: int, relative: float = 1e-13
) -> Estimates:
    """The integrals of `function` over their panels, with bounds on the errors; `doubt` bounds the rounding
    of the function. Values that are not finite count as 0: they may stand at single points only.

    Panels are refined until each is known to `relative` of its integral, or the evaluations run out; then
    the error says so.
    """
    work = _Work(function, doubt, rows, relative)
    infinite = np.isinf(panels.start) | np.isinf(panels.stop)
    smooth = panels.of(~infinite)
    for _ in range(SMOOTH_ROUNDS):  # near a singular end Gauss's nodes round less than the other rule's
        smooth = work.settle(_gauss(), smooth, final=False).halves()
    pending = _joined(panels.of(infinite), smooth)
    # halves of an infinite panel may hold a peak between Gauss's nodes, so that only the other rule is used
    for turn in range(ROUNDS):
        last = turn == ROUNDS - 1 or work.evaluations > EVALUATIONS
        pending = work.settle(_double_exponential(), pending, final=last).halves()
    return Estimates(work.value, work.error + ROUNDING * np.abs(work.value))


class _Work:
    """The sums so far, row by row."""

    def __init__(self, function: Integrand, doubt: Integrand, rows: int, relative: float):
        self.function, self.doubt, self.relative = function, doubt, relative
        self.value, self.error = np.zeros(rows), np.zeros(rows)
        self.evaluations = 0

    def settle(self, rule: _Rule, panels: Panels, final: bool) -> Panels:
        """Adds the panels that the rule knows well enough (all, where `final`); returns the others."""
        if not panels.row.size:
            return panels
        x, factor = _nodes(panels, rule)
        values = self._at(self.function, panels, x, factor)
        result, error = values @ rule.weights, 2.0 * np.abs(values @ (rule.weights - rule.weaker))
        rounding = self._at(self.doubt, panels, x, factor) @ rule.weights
        rows = self.value.size
        total = np.abs(self.value) + np.bincount(panels.row, np.abs(result), rows)
        # a difference that is rounding would not become smaller
        good = (error <= np.maximum(self.relative * total[panels.row], rounding)) | final
        self.value += np.bincount(panels.row[good], result[good], rows)
        self.error += np.bincount(panels.row[good], (error + rounding)[good], rows)
        return panels.of(~good)

    def _at(self, function: Integrand, panels: Panels, x: Array, factor: Array) -> Array:
        self.evaluations += x.size
        row = np.repeat(panels.row, x.shape[1])
        with np.errstate(all="ignore"):
            values = np.asarray(function(row, x.ravel()), float).reshape(x.shape)
            product = np.abs(factor) * values
        return np.where(np.isfinite(product), product, 0.0)


def _nodes(panels: Panels, rule: _Rule) -> tuple[Array, Array]:
    """Points of shape (panels, nodes) and the lengths by which the weights are multiplied there."""
    start, stop, scale = panels.start[:, None], panels.stop[:, None], panels.scale[:, None]
    low, high = rule.low[None, :], rule.high[None, :]
    with np.errstate(all="ignore"):
        width = stop - start
        x = np.where(low <= 0.5, start + width * low, stop - width * high)
        above, below = start + scale * low / high, stop - scale * high / low
        x = np.where(np.isinf(stop), above, np.where(np.isinf(start), below, x))
        factor = np.where(
            np.isinf(stop), scale / high**2, np.where(np.isinf(start), scale / low**2, width + 0.0 * low)
        )
    return x, factor


def _joined(first: Panels, second: Panels) -> Panels:
    return Panels(
        np.concatenate([first.row, second.row]),
        np.concatenate([first.start, second.start]),
        np.concatenate([first.stop, second.stop]),
        np.concatenate([first.scale, second.scale]),
    )
