"""Gaussian and Student t copulas in any dimension, given the positive definite matrix of their scores.

Conditionals of the multivariate t: a t with more degrees of freedom and a scale that grows with the
Mahalanobis distance of what is given (Kotz and Nadarajah 2004, Multivariate t Distributions, section 1.11).
A singular matrix has no density and is refused here; `matrices` says which combination is constant.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable, Sequence
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from outspread.errors import LawError
from outspread.laws.dependence.copula import Copula
from outspread.laws.dependence.levels import LARGEST_SCORE, Levels
from outspread.laws.dependence.score_table import ScoreTable
from outspread.laws.functions.student import log_inverse_beta, student_tail, student_tail_inverse
from outspread.laws.law import Array
from outspread.numerics.quadrature import Index

#: below this smallest eigenvalue the conditionals would lose more than four of sixteen digits
LEAST_EIGENVALUE = 1e-12


def checked_matrix(matrix: npt.ArrayLike) -> Array:
    """The matrix as an array, after the checks that make it the correlation matrix of a density.

    Raises LawError: not square, not symmetric, diagonal not 1, not positive definite.
    """
    own = np.array(matrix, float)
    if own.ndim != 2 or own.shape[0] != own.shape[1] or own.shape[0] < 2:
        raise LawError("a copula's matrix has as many rows as columns, at least two", "matrix")
    if not np.array_equal(own, own.T) or not np.all(np.diag(own) == 1.0):
        raise LawError("a copula's matrix is symmetric with ones on its diagonal", "matrix")
    smallest = float(np.linalg.eigvalsh(own)[0])
    if smallest < LEAST_EIGENVALUE:
        raise LawError(
            f"the copula's matrix is not positive definite (smallest eigenvalue {smallest:.3g}); inputs that "
            "determine one another are stated by a formula, other correlations are brought closer to 0",
            "matrix",
        )
    return own


class EllipticalCopula(Copula):
    """Copula of scores L e, with L the Cholesky factor of the scores' correlation matrix."""

    def __init__(self, matrix: npt.ArrayLike):
        self.matrix = checked_matrix(matrix)
        self.size = len(self.matrix)
        self._factor = np.linalg.cholesky(self.matrix)

    @abstractmethod
    def _scores(self, levels: Levels) -> Array:
        """The quantiles of the levels under the scores' own marginal law."""

    def _whitened(self, given: Levels) -> Array:
        """e of shape (k, …) with L e = the scores of what is given."""
        scores = self._scores(given)
        result = np.zeros_like(scores)
        for k in range(len(scores)):
            row = self._factor[k]
            result[k] = (scores[k] - np.tensordot(row[:k], result[:k], axes=1)) / row[k]
        return result

    def _place(self, given: Levels) -> tuple[Array, float, Array]:
        """Centre and scale of the next score given the first ones, and these whitened."""
        white = self._whitened(given)
        k = len(white)
        row = self._factor[k]
        return np.asarray(np.tensordot(row[:k], white, axes=1)), float(row[k]), white


class GaussianCopula(EllipticalCopula):
    """Copula of jointly normal scores with the correlation matrix `matrix` (size, size).

    Raises LawError where the matrix is no positive definite correlation matrix.
    """

    family = "gaussian"

    def _scores(self, levels: Levels) -> Array:
        return levels.scores()

    def conditional(self, given: Levels, at: Levels) -> Levels:
        centre, scale, _ = self._place(given)
        return Levels.from_scores((at.scores() - centre) / scale)

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        centre, scale, _ = self._place(given)
        return Levels.from_scores(centre + scale * at.scores())

    def conditional_log_density(self, given: Levels, at: Levels) -> Array:
        centre, scale, _ = self._place(given)
        score = at.scores()
        white = (score - centre) / scale
        # e² - z² as (e - z)(e + z), with e - z from its parts: no cancellation where both are large
        difference = ((1.0 - scale) * score - centre) / scale
        return np.asarray(-0.5 * difference * (white + score) - np.log(scale))

    def following_score(self, scores: Array) -> Callable[[Array, Index], Array]:
        centre, scale = self.matrix[1, 0] * scores, self._factor[1, 1]
        return lambda conditional, owner: centre[owner] + scale * conditional

    def margin(self, order: Sequence[int]) -> Copula:
        return GaussianCopula(self.matrix[np.ix_(order, order)])


class StudentCopula(EllipticalCopula):
    """Copula of a multivariate t with `degrees_of_freedom` and the correlation matrix `matrix`.

    Raises LawError where the matrix is no positive definite correlation matrix or the degrees of freedom
    are below 1/8 (scores would leave the range of double precision).
    """

    family = "student_t"

    def __init__(self, matrix: npt.ArrayLike, degrees_of_freedom: float):
        super().__init__(matrix)
        if not degrees_of_freedom >= 0.125:
            raise LawError(
                f"the degrees of freedom of a Student t copula are {degrees_of_freedom:g}; "
                "write a number of at least 0.125",
                "degrees_of_freedom",
            )
        self.degrees_of_freedom = float(degrees_of_freedom)
        # a score beyond 1e280 would overflow with its neighbours: it is taken for 1e280
        self._least = float(student_tail(self.degrees_of_freedom, np.array(1e280)))

    def _scores(self, levels: Levels) -> Array:
        return _student_scores(self.degrees_of_freedom, levels, self._least)

    def _stretch(self, white: Array) -> Array:
        """sqrt((ν + |e|²) / (ν + k)) without overflow."""
        nu = self.degrees_of_freedom
        length = np.full(white.shape[1:], np.sqrt(nu))
        for row in white:
            length = np.hypot(length, row)
        return np.asarray(length / np.sqrt(nu + len(white)))

    def conditional(self, given: Levels, at: Levels) -> Levels:
        centre, scale, white = self._place(given)
        ratio = (self._scores(at) - centre) / (scale * self._stretch(white))
        return _student_levels(self.degrees_of_freedom + len(white), ratio)

    def conditional_inverse(self, given: Levels, at: Levels) -> Levels:
        centre, scale, white = self._place(given)
        ratio = _student_scores(self.degrees_of_freedom + len(white), at, 0.0)
        with np.errstate(over="ignore"):  # an infinite score has the smallest level
            scores = centre + scale * self._stretch(white) * ratio
        return _student_levels(self.degrees_of_freedom, scores)

    def conditional_log_density(self, given: Levels, at: Levels) -> Array:
        centre, scale, white = self._place(given)
        score, spread = self._scores(at), scale * self._stretch(white)
        nu = self.degrees_of_freedom
        inner = log_student_pdf(nu + len(white), (score - centre) / spread)
        return np.asarray(inner - np.log(spread) - log_student_pdf(nu, score))

    def following_score(self, scores: Array) -> Callable[[Array, Index], Array]:
        nu = self.degrees_of_freedom
        own, conditional_table, back = _score_table(nu), _score_table(nu + 1.0), _normal_score_table(nu)
        first = np.sinh(own(scores))
        centre = self.matrix[1, 0] * first
        spread = self._factor[1, 1] * self._stretch(first[None])

        def following(conditional: Array, owner: Index) -> Array:
            return back(np.arcsinh(centre[owner] + spread[owner] * np.sinh(conditional_table(conditional))))

        return following

    def margin(self, order: Sequence[int]) -> Copula:
        return StudentCopula(self.matrix[np.ix_(order, order)], self.degrees_of_freedom)


def _student_scores(nu: float, levels: Levels, least: float) -> Array:
    tail = np.maximum(np.minimum(np.minimum(levels.lower, levels.upper), 0.5), least)
    with np.errstate(all="ignore"):
        size = student_tail_inverse(nu, tail)
    return np.asarray(np.where(levels.lower <= levels.upper, -size, size))


def _student_levels(nu: float, scores: Array) -> Levels:
    with np.errstate(all="ignore"):
        tail = student_tail(nu, np.abs(scores))
    rest = 1.0 - tail
    return Levels.pair(np.where(scores < 0, tail, rest), np.where(scores < 0, rest, tail))


def log_student_pdf(nu: float, t: Array) -> Array:
    """Logarithm of the standard Student t density."""
    ratio = np.abs(t) / np.sqrt(nu)
    with np.errstate(all="ignore"):
        power = np.where(ratio < 1e7, 0.5 * np.log1p(np.minimum(ratio, 1e7) ** 2), np.log(ratio))
    return np.asarray(log_inverse_beta(nu / 2) - 0.5 * np.log(nu) - (nu + 1.0) * power)


@lru_cache(maxsize=16)
def _score_table(nu: float) -> ScoreTable:
    """asinh of the Student t quantile as a function of the normal score."""
    least = float(student_tail(nu, np.array(1e280)))
    return ScoreTable(
        lambda z: np.arcsinh(_student_scores(nu, Levels.from_scores(z), least)),
        np.array([-LARGEST_SCORE, -8.0, 0.0, 8.0, LARGEST_SCORE]),
        4e-15,
    )


@lru_cache(maxsize=16)
def _normal_score_table(nu: float) -> ScoreTable:
    """The normal score as a function of asinh of the Student t quantile."""
    end = float(np.arcsinh(1e280))
    edges = np.array([-end, -64.0, -8.0, 0.0, 8.0, 64.0, end])
    return ScoreTable(lambda w: _student_levels(nu, np.sinh(w)).scores(), edges, 4e-15)
