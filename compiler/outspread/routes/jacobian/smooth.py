"""One smooth piece of a map with its derivatives, and the judgement of a candidate solution in it.

Candidates come as interval boxes that enclose the exact solution, from `symbolic` or `numeric`; a box that
is too wide to decide on, or to give the determinant to 12 digits, is asked for again with 60 digits.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative
from outspread.formula.interval import Interval, enclose
from outspread.formula.interval_arithmetic import add, multiply, negate
from outspread.laws.law import Array, Law
from outspread.routes.jacobian.pieces import Piece
from outspread.routes.jacobian.precise import DIGITS, Precise, evaluate_precisely

Mask = npt.NDArray[np.bool_]

#: a candidate is recomputed with 60 digits where its enclosure is wider than this, relative to itself
NARROW = 64 * 2.0**-52
#: the same for the determinant
NARROW_DETERMINANT = 1024 * 2.0**-52
ROUNDING = 2.0**-53
_NEWTON_STEPS = 12
#: how far an enclosure of the outputs may miss the point before the candidate counts as spurious
NEAR = 1e-9
#: the same with 60 digits
PRECISELY_NEAR = 1e-40


@dataclass(frozen=True)
class Candidates:
    """Possible solutions at some of the points: `columns` says at which of them, `box` one interval an input.

    `undecided` marks those whose own conditions the enclosures leave open. `precise(i)` gives candidate i
    by input name with 60 digits, or None where it is no solution.
    """

    columns: npt.NDArray[np.int64]
    box: Mapping[str, Interval]
    parameters: Mapping[str, Array]
    undecided: Mask
    precise: Callable[[int], Mapping[str, Precise] | None]


@dataclass(frozen=True)
class Solutions:
    """Solutions at the points `columns`: inputs of shape (n, m) and |det J| of shape (m,), with bounds on
    the absolute errors of both.

    `uncertain`: the enclosures leave open whether it is a solution; `wide`: they are too wide for 12 digits.
    `candidate` is the number of each among the candidates it came from.
    """

    columns: npt.NDArray[np.int64]
    inputs: Array
    inputs_error: Array
    determinant: Array
    determinant_error: Array
    uncertain: Mask
    wide: Mask
    candidate: npt.NDArray[np.int64]

    def take(self, keep: Mask) -> Solutions:
        return Solutions(
            self.columns[keep], self.inputs[:, keep], self.inputs_error[:, keep], self.determinant[keep],
            self.determinant_error[keep], self.uncertain[keep], self.wide[keep], self.candidate[keep],
        )  # fmt: skip


class SmoothMap:
    """A piece of the map from `inputs` to `outputs` with its matrix of derivatives."""

    def __init__(self, piece: Piece, outputs: Sequence[str], laws: Mapping[str, Law]):
        self.piece = piece
        self.inputs = tuple(laws)
        self.outputs = tuple(outputs)
        self.jacobian = tuple(
            tuple(derivative(output, name) for name in self.inputs) for output in piece.outputs
        )
        self.limits = {name: law.support() for name, law in laws.items()}
        self.edges = {
            name: tuple(edge for edge in (*law.support(), *law.breaks()) if np.isfinite(edge))
            for name, law in laws.items()
        }

    def settle(self, candidates: Candidates, points: Array) -> Solutions:
        """The candidates that may be solutions at their points (outputs of shape (n, k))."""
        at = points[:, candidates.columns]
        constants = {name: Interval.of(value) for name, value in candidates.parameters.items()}
        box = {**candidates.box, **constants}
        possible, certain = self._judged(box, at)
        chosen = np.flatnonzero(possible)
        narrowed = {name: Interval(part.lower[chosen], part.upper[chosen]) for name, part in box.items()}
        determinant = absolute(self.determinant(narrowed))
        return Solutions(
            columns=candidates.columns[chosen],
            inputs=np.stack([_middle(narrowed[name]) for name in self.inputs]),
            inputs_error=np.stack([_half_width(narrowed[name]) for name in self.inputs]),
            determinant=_middle(determinant),
            determinant_error=_half_width(determinant),
            uncertain=~certain[chosen] | candidates.undecided[chosen],
            wide=self._wide(narrowed) | ~_narrow(determinant, NARROW_DETERMINANT),
            candidate=chosen,
        )

    def refined(self, candidates: Candidates, solutions: Solutions, which: Mask, points: Array) -> Solutions:
        """The solutions with those at `which` recomputed with 60 digits, and dropped where they are none."""
        inputs, error = solutions.inputs.copy(), solutions.inputs_error.copy()
        size, size_error = solutions.determinant.copy(), solutions.determinant_error.copy()
        keep = np.ones(len(solutions.columns), dtype=bool)
        for place in np.flatnonzero(which):
            at = points[:, solutions.columns[place]]
            settled = self._settled_precisely(candidates, int(solutions.candidate[place]), at)
            if settled is None:
                keep[place] = False
            else:
                inputs[:, place], size[place] = settled
                error[:, place], size_error[place] = ROUNDING * np.abs(settled[0]), ROUNDING * settled[1]
        doubt = solutions.uncertain & ~which, solutions.wide & ~which
        columns, candidate = solutions.columns, solutions.candidate
        return Solutions(columns, inputs, error, size, size_error, *doubt, candidate).take(keep)

    def _judged(self, box: Mapping[str, Interval], at: Array) -> tuple[Mask, Mask]:
        """(possible, certain): whether each candidate may be, and surely is, a solution in the support."""
        some = box[self.inputs[0]]
        possible = ~some.empty
        certain = possible.copy()
        for name in self.inputs:
            part, (lower, upper) = box[name], self.limits[name]
            with np.errstate(invalid="ignore"):
                possible &= (part.upper >= lower) & (part.lower <= upper)
                certain &= np.isfinite(part.lower) & np.isfinite(part.upper)
                for edge in self.edges[name]:
                    certain &= (part.upper <= edge) | (part.lower >= edge)
        for condition in self.piece.conditions:
            held = enclose(condition, box)
            with np.errstate(invalid="ignore"):
                possible &= held.upper == 1.0
                certain &= held.lower == 1.0
        for output, value in zip(self.piece.outputs, at, strict=True):
            forward = enclose(output, box)
            with np.errstate(invalid="ignore", over="ignore"):
                scale = NEAR * (np.abs(value) + np.abs(_middle(forward)) + (forward.upper - forward.lower))
                possible &= (forward.lower <= value + scale) & (forward.upper >= value - scale)
                width = forward.upper - forward.lower
                certain &= forward.contains(value) & (width <= NEAR * np.abs(value))
        return possible, certain & possible

    def _wide(self, box: Mapping[str, Interval]) -> Mask:
        wide = [~_narrow(box[name]) for name in self.inputs]
        return np.asarray(np.logical_or.reduce(wide))

    def determinant(self, box: Mapping[str, Interval]) -> Interval:
        """Enclosure of det J over the boxes, by expansion along rows with shared minors."""
        entries = [[enclose(entry, box) for entry in row] for row in self.jacobian]
        minors: dict[tuple[int, ...], Interval] = {}

        def minor(row: int, columns: tuple[int, ...]) -> Interval:
            if columns not in minors:
                if len(columns) == 1:
                    minors[columns] = entries[row][columns[0]]
                else:
                    terms = []
                    for place, column in enumerate(columns):
                        rest = columns[:place] + columns[place + 1 :]
                        term = multiply(entries[row][column], minor(row + 1, rest))
                        terms.append(negate(term) if place % 2 else term)
                    minors[columns] = add(*terms)
            return minors[columns]

        with np.errstate(all="ignore"):
            return minor(0, tuple(range(len(self.inputs))))

    def _settled_precisely(self, candidates: Candidates, index: int, at: Array) -> tuple[Array, float] | None:
        """The candidate's inputs and |det J| to double precision, or None where it is no solution."""
        import mpmath

        with mpmath.workdps(DIGITS):
            found = candidates.precise(index)
            if found is None:
                return None
            constants = {name: mpmath.mpf(float(p[index])) for name, p in candidates.parameters.items()}
            widths = [
                float(candidates.box[n].upper[index] - candidates.box[n].lower[index]) for n in self.inputs
            ]
            values = {**self.polished(found, at, constants, widths), **constants}
            if not self._holds_precisely(values, at):
                return None
            entries = evaluate_precisely([entry for row in self.jacobian for entry in row], values)
            if any(entry is None for entry in entries):
                return None
            order = len(self.inputs)
            rows = [entries[i * order : (i + 1) * order] for i in range(order)]
            size = abs(_determinant(rows))
            if size < _determinant_scale(rows) * mpmath.mpf(PRECISELY_NEAR):
                size = mpmath.mpf(0)
            return np.array([float(values[name]) for name in self.inputs]), float(size)

    def polished(
        self,
        start: Mapping[str, Precise],
        at: Array,
        constants: Mapping[str, Precise],
        widths: Sequence[float],
    ) -> Mapping[str, Precise]:
        """The solution by Newton's method from `start`; `start` itself where that does not settle near it."""
        import mpmath

        order = len(self.inputs)
        x = [start[name] for name in self.inputs]
        entries = [entry for row in self.jacobian for entry in row]
        for _ in range(_NEWTON_STEPS):
            values = {**dict(zip(self.inputs, x, strict=True)), **constants}
            forward = evaluate_precisely(self.piece.outputs, values)
            slopes = evaluate_precisely(entries, values)
            if any(value is None for value in (*forward, *slopes)):
                return start
            residual = [value - float(y) for value, y in zip(forward, at, strict=True) if value is not None]
            step = _solved([slopes[i * order : (i + 1) * order] for i in range(order)], residual)
            if step is None:
                return start
            x = [value - part for value, part in zip(x, step, strict=True)]
            if all(
                abs(part) <= mpmath.mpf(10) ** -52 * abs(value) for part, value in zip(step, x, strict=True)
            ):
                break
        found = dict(zip(self.inputs, x, strict=True))
        near = all(
            abs(found[name] - start[name]) <= 1e-6 * (abs(start[name]) + 1e-6) + 2.0 * width
            for name, width in zip(self.inputs, widths, strict=True)
        )
        return found if near else start

    def _holds_precisely(self, values: Mapping[str, Precise], at: Array) -> bool:
        import mpmath

        slack = mpmath.mpf(PRECISELY_NEAR)
        for name in self.inputs:
            lower, upper = self.limits[name]
            value = values[name]
            if value < lower and value < mpmath.mpf(lower) - slack * (1 + abs(lower)):
                return False
            if value > upper and value > mpmath.mpf(upper) + slack * (1 + abs(upper)):
                return False
        held = evaluate_precisely(self.piece.conditions, values)
        if not all(held):
            return False
        for forward, value in zip(evaluate_precisely(self.piece.outputs, values), at, strict=True):
            if forward is None or abs(forward - value) > 1e-20 * abs(value) + slack * (1 + abs(forward)):
                return False
        return True


def _determinant_scale(rows: Sequence[Sequence[Precise]]) -> Precise:
    """The products in the determinant added without their signs: what rounding is relative to."""
    if len(rows) == 1:
        return abs(rows[0][0])
    return sum(
        abs(entry) * _determinant_scale([[*row[:column], *row[column + 1 :]] for row in rows[1:]])
        for column, entry in enumerate(rows[0])
        if entry
    )


def _determinant(rows: Sequence[Sequence[Precise]]) -> Precise:
    """Expansion along the first row: unlike elimination it does not mind rows of very different size."""
    if len(rows) == 1:
        return rows[0][0]
    terms = (
        (-1) ** column * entry * _determinant([[*row[:column], *row[column + 1 :]] for row in rows[1:]])
        for column, entry in enumerate(rows[0])
        if entry
    )
    return sum(terms)


def _solved(rows: Sequence[Sequence[Precise]], right: Sequence[Precise]) -> list[Precise] | None:
    """The solution of rows · s = right by Cramer's rule; None where the determinant vanishes to rounding."""
    whole = _determinant(rows)
    if abs(whole) <= 1e-45 * _determinant_scale(rows):
        return None
    replaced = (
        [[*row[:i], value, *row[i + 1 :]] for row, value in zip(rows, right, strict=True)]
        for i in range(len(rows))
    )
    return [_determinant(one) / whole for one in replaced]


def _middle(part: Interval) -> Array:
    with np.errstate(invalid="ignore", over="ignore"):
        return np.asarray(0.5 * part.lower + 0.5 * part.upper)


def _half_width(part: Interval) -> Array:
    with np.errstate(invalid="ignore", over="ignore"):
        return np.asarray(0.5 * (part.upper - part.lower) + ROUNDING * np.abs(_middle(part)))


def _narrow(part: Interval, limit: float = NARROW) -> Mask:
    with np.errstate(invalid="ignore", over="ignore"):
        width = part.upper - part.lower
        return np.asarray(width <= limit * np.minimum(np.abs(part.lower), np.abs(part.upper)))


def absolute(part: Interval) -> Interval:
    """|part|, elementwise."""
    with np.errstate(invalid="ignore"):
        larger = np.maximum(np.abs(part.lower), np.abs(part.upper))
        smaller = np.minimum(np.abs(part.lower), np.abs(part.upper))
        return Interval(np.where((part.lower <= 0.0) & (part.upper >= 0.0), 0.0, smaller), larger)
