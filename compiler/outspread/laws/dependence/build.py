"""A copula from its strength as stated: a matrix of Pearson, Spearman, Kendall or the family's own measure.

It solves for every pair's parameter and judges the matrix they make; a matrix that no inputs can have is
answered with its smallest eigenvalue and the nearest valid one in the measure it was given in.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.laws.dependence.copula import Copula
from outspread.laws.dependence.correlation import correlation_of_margins
from outspread.laws.dependence.elliptical import LEAST_EIGENVALUE, GaussianCopula, StudentCopula
from outspread.laws.dependence.families import ARCHIMEDEAN, ELLIPTICAL, pair_copula
from outspread.laws.dependence.margins import Margin, margin_of
from outspread.laws.dependence.matrices import degeneracy, nearest_correlation, smallest_eigenvalue
from outspread.laws.dependence.pearson import parameter_from_pearson
from outspread.laws.dependence.rank_strength import (
    kendall,
    parameter_from_kendall,
    parameter_from_spearman,
    spearman,
)
from outspread.laws.dependence.solving import Solved
from outspread.laws.law import Array, Law

_DECIMALS = 4


@dataclass(frozen=True)
class BuiltCopula:
    """`parameter_error` bounds the error of the parameter, or of every entry of the scores' matrix."""

    copula: Copula
    parameter_error: float


def build_copula(
    family: str,
    measure: str,
    matrix: npt.ArrayLike,
    laws: Sequence[Law],
    names: Sequence[str],
    degrees_of_freedom: float | None = None,
) -> BuiltCopula:
    """The copula of `names` with marginals `laws` whose strength in `measure` is `matrix` (n, n).

    measure: pearson (of the inputs themselves), spearman, kendall, normal_scores (gaussian and student_t), or
    parameter (the family's own). Raises LawError for a strength that cannot be reached, with the reachable
    range, and for a matrix that is not positive definite, with its smallest eigenvalue and the nearest valid
    one; DerivationError where an input has no variance and `measure` is pearson.
    """
    given = np.array(matrix, float)
    if given.shape != (len(names), len(names)) or len(laws) != len(names) or len(names) < 2:
        raise LawError("a copula joins two or more inputs by a matrix with one row for each")
    solver = _solver(family, measure, laws, names, degrees_of_freedom)
    if family in ELLIPTICAL:
        scores, error = _solved_matrix(solver, given)
        _judge(solver, given, scores)
        if family == "gaussian":
            return BuiltCopula(GaussianCopula(scores), error)
        if degrees_of_freedom is None:
            raise LawError("a Student t copula needs degrees_of_freedom", "degrees_of_freedom")
        return BuiltCopula(StudentCopula(scores, degrees_of_freedom), error)
    if family not in ARCHIMEDEAN:
        known = ", ".join((*ELLIPTICAL, *ARCHIMEDEAN))
        raise LawError(f"{family!r} is no family of copulas; write one of {known}")
    return _exchangeable(solver, given)


@dataclass(frozen=True)
class _Solver:
    """What turns a stated strength of inputs i and j into the copula's parameter, and back."""

    family: str
    measure: str
    laws: tuple[Law, ...]
    names: tuple[str, ...]
    degrees_of_freedom: float | None
    margins: tuple[Margin, ...]  # for pearson

    def parameter(self, value: float, i: int, j: int) -> Solved:
        size = len(self.names)
        if self.measure == "kendall":
            return parameter_from_kendall(self.family, value, size)
        if self.measure == "spearman":
            return parameter_from_spearman(self.family, value, size, self.degrees_of_freedom)
        if self.measure == "pearson":
            return parameter_from_pearson(
                self.family, value, self.laws[i], self.laws[j],
                degrees_of_freedom=self.degrees_of_freedom, size=size, names=(self.names[i], self.names[j]),
                margins=(self.margins[i], self.margins[j]),
            )  # fmt: skip
        if self.measure in ("normal_scores", "parameter"):
            return Solved(value, 0.0)
        raise LawError(f"{self.measure!r} is no measure of dependence; write pearson, spearman or kendall")

    def strength(self, parameter: float, i: int, j: int) -> float:
        if self.measure == "kendall":
            return kendall(self.family, parameter)
        if self.measure == "spearman":
            return spearman(self.family, parameter, self.degrees_of_freedom).value
        if self.measure == "pearson":
            copula = pair_copula(self.family, parameter, self.degrees_of_freedom)
            return correlation_of_margins(copula, self.margins[i], self.margins[j]).value
        return parameter


def _solver(
    family: str, measure: str, laws: Sequence[Law], names: Sequence[str], degrees_of_freedom: float | None
) -> _Solver:
    pairs = zip(laws, names, strict=True) if measure == "pearson" else ()
    own = [margin_of(law, name) for law, name in pairs]
    return _Solver(family, measure, tuple(laws), tuple(names), degrees_of_freedom, tuple(own))


def _solved_matrix(solver: _Solver, given: Array) -> tuple[Array, float]:
    scores, error = np.eye(len(given)), 0.0
    for i in range(len(given)):
        for j in range(i):
            if given[i, j] != given[j, i]:
                raise LawError("the matrix of a copula is symmetric", "matrix")
            found = solver.parameter(float(given[i, j]), i, j)
            scores[i, j] = scores[j, i] = found.value
            error = max(error, found.error)
    return scores, error


def _judge(solver: _Solver, given: Array, scores: Array) -> None:
    """Raise LawError where the scores' matrix is not positive definite."""
    smallest = smallest_eigenvalue(scores)
    if smallest >= LEAST_EIGENVALUE:
        return
    what = "the matrix" if solver.measure == "normal_scores" else "the copula's matrix that belongs to it"
    if smallest > -LEAST_EIGENVALUE:
        words = "; ".join(degeneracy(scores, [f"score of {name}" for name in solver.names]).words)
        raise LawError(
            f"{what} is singular: {words}; state one of these inputs by a formula of the others, or bring "
            "the correlations closer to 0",
            "matrix",
        )
    suggestion = nearest_valid(solver.family, solver.measure, given, solver.laws, solver.names,
                               solver.degrees_of_freedom)  # fmt: skip
    rows = ", ".join("[" + ", ".join(f"{value:.{_DECIMALS}g}" for value in row) + "]" for row in suggestion)
    raise LawError(
        f"{what} is not positive definite (smallest eigenvalue {smallest:.3g}); the nearest valid matrix is "
        f"[{rows}]",
        "matrix",
    )


def nearest_valid(
    family: str,
    measure: str,
    matrix: npt.ArrayLike,
    laws: Sequence[Law],
    names: Sequence[str],
    degrees_of_freedom: float | None = None,
) -> Array:
    """A matrix (n, n) in the measure given, to four decimals, near to `matrix`, whose copula exists.

    It is the nearest in the scores' matrix (Frobenius norm), with its smallest eigenvalue just above 0 so
    that rounding cannot undo it. For gaussian and student_t; errors as `build_copula`.
    """
    solver = _solver(family, measure, laws, names, degrees_of_freedom)
    scores, _ = _solved_matrix(solver, np.array(matrix, float))
    least = 1e-3
    while least < 0.5:
        near = nearest_correlation(scores, least)
        result = np.eye(len(near))
        for i in range(len(near)):
            for j in range(i):
                value = round(solver.strength(float(near[i, j]), i, j), _DECIMALS)
                result[i, j] = result[j, i] = value
        if smallest_eigenvalue(_solved_matrix(solver, result)[0]) > 1e-6:
            return result
        least *= 2.0
    raise LawError("no valid matrix is near to the one given", "matrix")


def _exchangeable(solver: _Solver, given: Array) -> BuiltCopula:
    """An Archimedean copula: one strength, and one parameter that must give it to every pair."""
    size = len(given)
    off = given[~np.eye(size, dtype=bool)]
    if np.any(off != off[0]):
        raise LawError(f"a {solver.family} copula has one strength for all its inputs; write one number")
    value = float(off[0])
    pairs = [(i, j) for i in range(size) for j in range(i)]
    if solver.measure != "pearson" or _alike(solver.laws):
        pairs = pairs[:1]
    found = [solver.parameter(value, i, j) for i, j in pairs]
    spread = max(one.value for one in found) - min(one.value for one in found)
    if spread > 1e-9 * abs(found[0].value) + sum(one.error for one in found):
        raise LawError(
            f"no {solver.family} copula gives all pairs the Pearson correlation {value:g}, because their "
            "distributions differ; give kendall or spearman"
        )
    return BuiltCopula(ARCHIMEDEAN[solver.family](size, found[0].value), found[0].error)


def _alike(laws: Sequence[Law]) -> bool:
    """Whether all laws are one family's with the same parameters."""
    first = laws[0]
    return bool(first.family) and all(
        law.family == first.family and dict(law.parameters) == dict(first.parameters) for law in laws
    )
