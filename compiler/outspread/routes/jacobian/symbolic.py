"""Turns the written branches of an inverse into candidate solutions at given points of the outputs."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from outspread.formula.interval import Interval, enclose
from outspread.formula.tree import Node, substitute
from outspread.laws.law import Array, Law
from outspread.routes.jacobian.branches import IntegerParameter
from outspread.routes.jacobian.elimination import Solution
from outspread.routes.jacobian.precise import Precise, evaluate_precisely
from outspread.routes.jacobian.smooth import Candidates, SmoothMap

LARGEST_RANGE = 4096  # values of all integer parameters of one branch together
_SLACK = 1e-9  # of a period
FARTHEST = 1e-300  # inputs are followed to the quantiles at this probability


class TooManyBranches(Exception):
    """A periodic function runs through more periods than can be summed."""


def reach(law: Law) -> tuple[float, float]:
    """The support, cut at the quantiles with 1e-300 beyond them where it is infinite."""
    lower, upper = law.support()
    if not math.isfinite(lower):
        lower = float(law.icdf(FARTHEST))
    if not math.isfinite(upper):
        upper = float(law.iccdf(FARTHEST))
    return lower, upper


def parameter_ranges(
    parameters: Sequence[IntegerParameter], laws: Mapping[str, Law], meanings: Mapping[str, Node]
) -> dict[str, range]:
    """The integers that each parameter can take while the inputs stay in their supports.

    `meanings` gives the outputs as expressions in the inputs. Raises TooManyBranches.
    """
    box = {name: Interval.of(*reach(law)) for name, law in laws.items()}
    ranges: dict[str, range] = {}
    for parameter in parameters:
        inner = enclose(substitute(parameter.inner, meanings), box)
        first, last = float(inner.lower) / parameter.period, float(inner.upper) / parameter.period
        if math.isnan(first):
            ranges[parameter.name] = range(0)
        elif not (math.isfinite(first) and math.isfinite(last)) or last - first > LARGEST_RANGE:
            raise TooManyBranches
        else:
            ranges[parameter.name] = _integers(parameter, first, last)
        found = ranges[parameter.name]
        box[parameter.name] = Interval.of(float(found.start), float(max(found.stop - 1, found.start)))
    if math.prod(len(one) for one in ranges.values()) > LARGEST_RANGE:
        raise TooManyBranches
    return ranges


def _integers(parameter: IntegerParameter, first: float, last: float) -> range:
    """The integers k with base + k·period in period·[first, last]: a principal value lies between -1/2 and
    3/4 of the period, a whole part is the floor or the ceil itself."""
    if parameter.period == 1.0:
        return range(math.floor(first), math.ceil(last) + 1)
    return range(math.ceil(first - 0.75 - _SLACK), math.floor(last + 0.5 + _SLACK) + 1)


class WrittenInverse:
    """The inverse of one smooth piece as formulas in the outputs."""

    def __init__(self, smooth: SmoothMap, solutions: Sequence[Solution], laws: Mapping[str, Law]):
        """Raises TooManyBranches."""
        self.smooth = smooth
        self.solutions = tuple(solutions)
        meanings = dict(zip(smooth.outputs, smooth.piece.outputs, strict=True))
        own = smooth.piece.parameters
        self.ranges = [parameter_ranges((*own, *one.parameters), laws, meanings) for one in self.solutions]

    def candidates(self, points: Array) -> Iterator[Candidates]:
        """Candidates at points of shape (n, k), branch by branch."""
        for number in range(len(self.solutions)):
            yield from self.candidates_of(number, points)

    def candidates_of(self, number: int, points: Array) -> Iterator[Candidates]:
        """Candidates of the written solution `number`, for every value of its integer parameters."""
        ranges = self.ranges[number]
        for values in itertools.product(*ranges.values()):
            parameters = dict(zip(ranges, map(float, values), strict=True))
            yield self._branch(self.solutions[number], parameters, points)

    def _branch(self, solution: Solution, parameters: dict[str, float], points: Array) -> Candidates:
        count = points.shape[1]
        known = {name: Interval.of(row) for name, row in zip(self.smooth.outputs, points, strict=True)}
        known |= {name: Interval.of(np.full(count, value)) for name, value in parameters.items()}
        box = {name: enclose(solution.values[name], known) for name in self.smooth.inputs}
        possible, undecided = (
            ~np.logical_or.reduce([part.empty for part in box.values()]),
            np.zeros(count, bool),
        )
        for condition in solution.conditions:
            held = enclose(condition, known)
            with np.errstate(invalid="ignore"):
                possible &= held.upper == 1.0
                undecided |= held.lower != 1.0
        columns = np.flatnonzero(possible)

        def precise(index: int) -> Mapping[str, Precise] | None:
            return _precisely(self.smooth, solution, parameters, points[:, columns[index]])

        return Candidates(
            columns,
            {name: Interval(part.lower[columns], part.upper[columns]) for name, part in box.items()},
            {name: np.full(len(columns), value) for name, value in parameters.items()},
            undecided[columns],
            precise,
        )


def _precisely(
    smooth: SmoothMap, solution: Solution, parameters: Mapping[str, float], point: Array
) -> Mapping[str, Precise] | None:
    import mpmath

    known = {name: mpmath.mpf(float(value)) for name, value in zip(smooth.outputs, point, strict=True)}
    known |= {name: mpmath.mpf(value) for name, value in parameters.items()}
    if not all(evaluate_precisely(solution.conditions, known)):
        return None
    values = evaluate_precisely([solution.values[name] for name in smooth.inputs], known)
    if any(value is None for value in values):
        return None
    return dict(zip(smooth.inputs, values, strict=True))
