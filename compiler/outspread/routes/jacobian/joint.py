"""Derives the joint density of n outputs of n inputs: pieces, inverse of each, Jacobian, sum over branches.

The density is f_Y(y) = Σ f_X(x_b) / |det J(x_b)| over all solutions x_b of y = g(x) (change of variables).
How an inverse is found is in `elimination` and `numeric`; how it is written in `writing`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Name, Node
from outspread.laws.law import Array, Law
from outspread.routes.derived import JointLaw
from outspread.routes.jacobian.checks import (
    NotPossible,
    draw_inputs,
    holds,
    proven_empty,
    refusal,
    singular,
    with_parameters,
)
from outspread.routes.jacobian.elimination import Solution, solve_system
from outspread.routes.jacobian.numeric import SearchedInverse
from outspread.routes.jacobian.pieces import smooth_pieces
from outspread.routes.jacobian.smooth import ROUNDING, Mask, SmoothMap, Solutions
from outspread.routes.jacobian.symbolic import TooManyBranches, WrittenInverse
from outspread.routes.jacobian.writing import Writer

NEGLIGIBLE = 1e-18  # a solution that adds less than this, relative to the sum, is not refined
_CHUNK = 65_536
_TESTED = 300  # draws through which a written inverse must lead back to the inputs


@dataclass(frozen=True)
class PieceInverse:
    """One smooth piece with its inverse."""

    smooth: SmoothMap
    inverse: WrittenInverse | SearchedInverse

    @property
    def solutions(self) -> tuple[Solution, ...]:
        return self.inverse.solutions if isinstance(self.inverse, WrittenInverse) else ()


def derive_joint(
    outputs: Mapping[str, Node],
    laws: Mapping[str, Law],
    density: Callable[[Array], Array],
    symbols: Mapping[str, str],
    *,
    written: bool = True,
) -> JointLaw | NotPossible:
    """The joint law of `outputs`, expressions in the inputs named in `laws`, by inverse and Jacobian.

    `density` is the joint density of the inputs: from an array of shape (n, k), rows in the order of `laws`,
    to shape (k,). `symbols` gives LaTeX for names of inputs and outputs. `written=False` leaves symbolic
    inverses aside and finds every solution numerically (for checks). The result's `pdf` and `region` take
    outputs of shape (n, k); where the number of solutions could not be settled the density is nan.
    Returns NotPossible with its reason where inputs and outputs differ in number, an input has atoms, or
    outputs are functionally dependent on a part of the support.
    """
    refused = refusal(outputs, laws)
    if refused is not None:
        return refused
    pieces = smooth_pieces(outputs, laws)
    if pieces is None:
        return NotPossible("the formulas fall into too many smooth pieces")
    draws = draw_inputs(laws)
    found: list[PieceInverse] = []
    for piece in pieces:
        smooth = SmoothMap(piece, tuple(outputs), laws)
        judged = _judge(smooth, laws, draws)
        if isinstance(judged, NotPossible):
            return judged
        if judged:
            try:
                found.append(_inverse(smooth, laws, draws, written))
            except TooManyBranches:
                return NotPossible("a periodic function or a whole part takes too many values on the support")
    return _joint_law(tuple(outputs), found, laws, density, symbols)


def _judge(smooth: SmoothMap, laws: Mapping[str, Law], draws: Array) -> bool | NotPossible:
    """Whether the piece counts: False if it is empty, NotPossible if its Jacobian vanishes throughout."""
    named = with_parameters(smooth, draws)
    inside = holds(smooth.piece.conditions, named)
    if np.any(inside):
        at = {name: values[inside] for name, values in named.items()}
    elif proven_empty(smooth, laws):
        return False
    else:
        at = named
    if not singular(smooth, at):
        return True
    names = " and ".join((", ".join(smooth.outputs[:-1]), smooth.outputs[-1]))
    if len(smooth.outputs) == 1:
        return NotPossible(f"{smooth.outputs[0]} is constant over a part of the support")
    part = "over a part of the support " if smooth.piece.conditions else ""
    return NotPossible(f"the outputs {names} are functionally dependent {part}(the Jacobian vanishes)")


def _inverse(smooth: SmoothMap, laws: Mapping[str, Law], draws: Array, written: bool) -> PieceInverse:
    if written:
        equations = [
            (expression, Name(name))
            for name, expression in zip(smooth.outputs, smooth.piece.outputs, strict=True)
        ]
        solutions = solve_system(equations, smooth.inputs)
        if solutions is not None:
            inverse = WrittenInverse(smooth, solutions, laws)
            if _leads_back(smooth, inverse, draws):
                return PieceInverse(smooth, inverse)
    return PieceInverse(smooth, SearchedInverse(smooth, laws))


def _leads_back(smooth: SmoothMap, inverse: WrittenInverse, draws: Array) -> bool:
    """Whether, from the outputs of draws of the inputs, some branch leads back to those inputs."""
    named = with_parameters(smooth, draws[:, :_TESTED])
    inside = holds(smooth.piece.conditions, named)
    at = {name: values[inside] for name, values in named.items()}
    inputs = np.stack([at[name] for name in smooth.inputs])
    points = np.stack([compile_numpy(output, tuple(at))(*at.values()) for output in smooth.piece.outputs])
    usable = np.all(np.isfinite(points), axis=0)
    inputs, points = inputs[:, usable], points[:, usable]
    reached = np.zeros(points.shape[1], dtype=bool)
    floor = 1e-8 * np.subtract(*np.quantile(draws, [0.75, 0.25], axis=1))[:, None]
    for candidates in inverse.candidates(points):
        solutions = smooth.settle(candidates, points)
        start = inputs[:, solutions.columns]
        allowed = 1e-5 * (np.abs(start) + np.abs(solutions.inputs)) + floor + solutions.inputs_error
        near = np.abs(solutions.inputs - start) <= allowed
        reached[solutions.columns[np.all(near, axis=0)]] = True
    return bool(np.all(reached))


@dataclass(frozen=True)
class _Density:
    """The density of the outputs at points of shape (n, k), its error and where it can be positive."""

    pieces: Sequence[PieceInverse]
    laws: Mapping[str, Law]
    density: Callable[[Array], Array]

    def pdf(self, points: Array) -> Array:
        return self._in_chunks(points, lambda chunk: self._sums(chunk)[0])

    def pdf_error(self, points: Array) -> Array:
        return self._in_chunks(points, lambda chunk: self._sums(chunk, with_error=True)[1])

    def region(self, points: Array) -> Array:
        return self._in_chunks(points, lambda chunk: self._sums(chunk)[2])

    def _in_chunks(self, points: Array, function: Callable[[Array], Array]) -> Array:
        given = np.asarray(points, dtype=float)
        flat = given.reshape(given.shape[0], -1)
        parts = [function(flat[:, i : i + _CHUNK]) for i in range(0, flat.shape[1], _CHUNK)]
        return np.concatenate(parts).reshape(given.shape[1:]) if parts else np.zeros(given.shape[1:])

    def _sums(self, points: Array, with_error: bool = False) -> tuple[Array, Array, Array]:
        """Sum over all solutions, its error, and where there is a solution; enclosures that are too wide are
        made narrow first, except where what they add is beyond the last digit."""
        count = points.shape[1]
        first, total, error = np.zeros(count), np.zeros(count), np.zeros(count)
        reached = np.zeros(count, dtype=bool)
        found = []
        for piece in self.pieces:
            for candidates in piece.inverse.candidates(points):
                solutions = piece.smooth.settle(candidates, points)
                if solutions.columns.size:
                    _, part = self._parts(solutions)
                    np.add.at(first, solutions.columns, np.where(solutions.uncertain, 0.0, part))
                    found.append((piece, candidates, solutions))
        for piece, candidates, solutions in found:
            which = solutions.uncertain | (solutions.wide & ~self._negligible(solutions, first))
            if np.any(which):
                solutions = piece.smooth.refined(candidates, solutions, which, points)
            value, part = self._parts(solutions)
            np.add.at(total, solutions.columns, part)
            reached[solutions.columns] = True
            if with_error:
                relative = np.where(part > 0.0, self._relative_error(solutions, value), 0.0)
                np.add.at(error, solutions.columns, part * relative)
        for piece in self.pieces:
            if isinstance(piece.inverse, SearchedInverse):
                total[piece.inverse.unresolved] = np.nan
                error[piece.inverse.unresolved] = np.nan
        undefined = ~np.all(np.isfinite(points), axis=0)
        total[undefined], error[undefined] = np.nan, np.nan
        return total, error, reached

    def _parts(self, solutions: Solutions) -> tuple[Array, Array]:
        value = self.density(solutions.inputs)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            return value, np.where(value > 0.0, value / solutions.determinant, 0.0)

    def _negligible(self, solutions: Solutions, total: Array) -> Mask:
        value = self.density(solutions.inputs)
        smallest = solutions.determinant - solutions.determinant_error
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            small = value <= NEGLIGIBLE * total[solutions.columns] * smallest
        close = np.all(solutions.inputs_error <= 1e-9 * np.abs(solutions.inputs), axis=0)
        return np.asarray((smallest > 0.0) & small & close)

    def _relative_error(self, solutions: Solutions, value: Array) -> Array:
        """First-order bound: error of the inputs through the density's slope, of det J, and of the laws."""
        with np.errstate(all="ignore"):
            result = solutions.determinant_error / solutions.determinant
            result = result + sum(law.relative_error for law in self.laws.values()) + 4 * ROUNDING
            for index, row in enumerate(solutions.inputs):
                step = 1e-6 * np.abs(row) + 1e-300
                slopes = []
                for sign in (1.0, -1.0):
                    moved = solutions.inputs.copy()
                    moved[index] = row + sign * step
                    slopes.append(np.abs(self.density(moved) - value) / step)
                slope = np.minimum(*slopes)  # one of the two may lie across a jump of the density
                result = result + slope * solutions.inputs_error[index] / value
        return np.asarray(result)


def _joint_law(
    outputs: tuple[str, ...],
    pieces: list[PieceInverse],
    laws: Mapping[str, Law],
    density: Callable[[Array], Array],
    symbols: Mapping[str, str],
) -> JointLaw:
    computed = _Density(tuple(pieces), dict(laws), density)
    used = used_branches(pieces, laws)
    parts = [
        (piece.smooth, tuple(piece.solutions[number] for number in numbers), not piece.solutions)
        for piece, numbers in zip(pieces, used, strict=True)
    ]
    writer = Writer(outputs, tuple(laws), symbols, draw_inputs(laws, _TESTED))
    return JointLaw(
        outputs=outputs,
        pdf=computed.pdf,
        mathematics=writer.statements(parts),
        branches=sum(len(numbers) if numbers else 1 for numbers in used),
        region=computed.region,
        pdf_error=computed.pdf_error,
    )


def used_branches(pieces: Sequence[PieceInverse], laws: Mapping[str, Law]) -> list[tuple[int, ...]]:
    """For each piece, the numbers of the written solutions that some draw of the inputs needs."""
    draws = draw_inputs(laws, _TESTED)
    result: list[tuple[int, ...]] = []
    for piece in pieces:
        if not isinstance(piece.inverse, WrittenInverse):
            result.append(())
            continue
        named = with_parameters(piece.smooth, draws)
        inside = holds(piece.smooth.piece.conditions, named)
        at = {name: values[inside] for name, values in named.items()}
        outputs = piece.smooth.piece.outputs
        points = np.stack([compile_numpy(output, tuple(at))(*at.values()) for output in outputs])
        result.append(
            tuple(
                number
                for number in range(len(piece.inverse.solutions))
                if any(
                    not np.all(piece.smooth.settle(one, points).uncertain)
                    for one in piece.inverse.candidates_of(number, points)
                )
            )
        )
    return result
