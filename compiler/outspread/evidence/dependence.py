"""Draws of dependent inputs: copulas by their standard constructions, joint samples by their rows.

Marginals of a copula come from `inverses`; where an input has none there, the program says so.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from outspread.errors import DerivationError
from outspread.evidence.families import Generator
from outspread.evidence.inverses import INVERSES, Inverse
from outspread.evidence.marginals import canonical
from outspread.laws.law import Array
from outspread.reading.model import Dependence, Distribution, Input

Matrix = Array
#: Gauss-Hermite nodes for the correlation that a Gaussian copula gives to its inputs
NODES = 120


def draw_group(
    entry: Dependence, inputs: Mapping[str, Input], generator: Generator, count: int
) -> dict[str, Array]:
    """`count` draws of the inputs that one entry of `dependence` joins.

    Raises DerivationError where the entry cannot be drawn by an independent construction yet.
    """
    if entry.kind == "joint_sample":
        return _rows(entry, generator, count)
    if entry.kind != "copula":
        raise DerivationError("a joint density cannot be drawn yet, so that there is no second check")
    distributions = [_marginal(inputs[name]) for name in entry.inputs]
    if entry.family == "gaussian" and all(_is_normal(d) for d in distributions):
        scores = _correlated(generator, count, score_matrix(entry, distributions))
        return {
            name: parameters["mean"] + parameters["sd"] * scores[i]
            for i, (name, parameters) in enumerate(
                (name, canonical(d)) for name, d in zip(entry.inputs, distributions, strict=True)
            )
        }
    lower, upper = copula_probabilities(entry, distributions, generator, count)
    with np.errstate(all="ignore"):
        return {
            name: np.asarray(_quantile(d)(lower[i], upper[i]), float)
            for i, (name, d) in enumerate(zip(entry.inputs, distributions, strict=True))
        }


def copula_probabilities(
    entry: Dependence, distributions: list[Distribution], generator: Generator, count: int
) -> tuple[Array, Array]:
    """Lower and upper probabilities of shape (inputs, count) that follow the entry's copula."""
    if entry.family in ("gaussian", "student_t"):
        return _elliptical(entry, distributions, generator, count)
    strength = _archimedean_parameter(entry)
    size = len(entry.inputs)
    exponential = generator.standard_exponential((size, count))
    if entry.family == "clayton":  # Marshall and Olkin (1988): a gamma frailty
        lower = (1.0 + exponential / generator.standard_gamma(1.0 / strength, count)) ** (-1.0 / strength)
    elif entry.family == "gumbel":  # a positive stable frailty, by Chambers, Mallows and Stuck (1976)
        lower = np.exp(
            -((exponential / _positive_stable(generator, 1.0 / strength, count)) ** (1.0 / strength))
        )
    elif entry.family == "frank" and strength > 0:  # a frailty with the logarithmic series law
        frailty = generator.logseries(-math.expm1(-strength), count)
        lower = -np.log1p(np.exp(-exponential / frailty) * math.expm1(-strength)) / strength
    elif entry.family == "frank" and size == 2:  # by the inverse of the conditional distribution
        first, other = generator.random(count), generator.random(count)
        decay = np.exp(-strength * first)
        step = other * math.expm1(-strength) / (other + (1.0 - other) * decay)
        lower = np.stack([first, -np.log1p(step) / strength])
    else:
        raise DerivationError(f"the {entry.family} copula cannot be drawn yet: no second check")
    return lower, 1.0 - lower


def _elliptical(
    entry: Dependence, distributions: list[Distribution], generator: Generator, count: int
) -> tuple[Array, Array]:
    from scipy.special import ndtr, stdtr

    scores = _correlated(generator, count, score_matrix(entry, distributions))
    if entry.family == "gaussian":
        return ndtr(scores), ndtr(-scores)
    degrees = entry.parameters["degrees_of_freedom"]
    assert isinstance(degrees, int | float)  # as the reader of the model makes it
    scores = scores / np.sqrt(generator.chisquare(degrees, count) / degrees)
    return stdtr(degrees, scores), stdtr(degrees, -scores)


def _correlated(generator: Generator, count: int, matrix: Matrix) -> Array:
    try:
        root = np.linalg.cholesky(matrix)
    except np.linalg.LinAlgError:
        raise DerivationError("the correlation matrix of the dependence is not positive definite") from None
    return np.asarray(root @ generator.standard_normal((matrix.shape[0], count)))


def score_matrix(entry: Dependence, distributions: list[Distribution]) -> Matrix:
    """The correlation matrix of the normal scores that gives the inputs the strength asked for.

    Kendall: sin(pi tau / 2); Spearman: 2 sin(pi rho / 6) (Kruskal 1958, for a Gaussian copula); Pearson of
    the inputs: equal for normals, log(1 + rho v_i v_j)/(s_i s_j) for lognormals, else by the expansion of
    both quantile functions in Hermite polynomials (Liu and Der Kiureghian 1986, by another computation).
    """
    given = np.asarray(entry.matrix, float)
    if entry.measure == "normal_scores":
        scores = given
    elif entry.measure == "kendall":
        scores = np.sin(0.5 * np.pi * given)
    elif entry.measure == "spearman" and entry.family == "gaussian":
        scores = 2.0 * np.sin(np.pi * given / 6.0)
    elif entry.measure == "pearson" and entry.family == "gaussian":
        scores = np.eye(len(distributions))
        for i in range(len(distributions)):
            for j in range(i):
                scores[i, j] = scores[j, i] = _from_pearson(given[i, j], distributions[i], distributions[j])
    else:
        raise DerivationError(
            f"a {entry.family} copula with the strength given by {entry.measure} cannot be drawn yet"
        )
    np.fill_diagonal(scores, 1.0)
    return scores


def _is_normal(distribution: Distribution) -> bool:
    return distribution.family == "normal" and distribution.lower is None and distribution.upper is None


def _from_pearson(pearson: float, first: Distribution, second: Distribution) -> float:
    if pearson == 0.0 or (_is_normal(first) and _is_normal(second)):
        return pearson
    pair = (first, second)
    if all(d.family == "lognormal" and d.lower is None and d.upper is None for d in pair):
        s, t = (float(canonical(d)["log_sd"]) for d in pair)
        spread = math.sqrt(math.expm1(s * s) * math.expm1(t * t))
        return math.log1p(pearson * spread) / (s * t)
    weights = [_hermite(d) for d in pair]
    scale = math.sqrt(float(np.sum(weights[0] ** 2)) * float(np.sum(weights[1] ** 2)))
    products = weights[0] * weights[1] / scale
    powers = np.arange(1, products.size + 1)
    low, high = -1.0, 1.0

    def at(score: float) -> float:
        return float(np.sum(products * score**powers))

    if not at(low) <= pearson <= at(high):
        raise DerivationError("the correlation asked for cannot be reached by these two distributions")
    for _ in range(100):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if at(middle) < pearson else (low, middle)
    return 0.5 * (low + high)


def _hermite(distribution: Distribution) -> Array:
    """Coefficients of the quantile of a normal score in normalised Hermite polynomials, from degree 1 on."""
    from scipy.special import ndtr

    nodes, weights = np.polynomial.hermite_e.hermegauss(NODES)
    weights = weights / weights.sum()
    with np.errstate(all="ignore"):
        values = np.asarray(_quantile(distribution)(ndtr(nodes), ndtr(-nodes)), float)
    before, current = np.ones(NODES), nodes.copy()
    coefficients = []
    for degree in range(1, 41):
        coefficients.append(float(np.sum(weights * values * current)))
        following = (nodes * current - math.sqrt(degree) * before) / math.sqrt(degree + 1)
        before, current = current, following
    return np.array(coefficients)


def _quantile(distribution: Distribution) -> Quantile:
    inverse = INVERSES.get(distribution.family)
    if inverse is None or distribution.lower is not None or distribution.upper is not None:
        cut = "truncated " if inverse is not None else ""
        raise DerivationError(
            f"a {cut}{distribution.family} under a copula cannot be drawn yet: no second check"
        )
    return Quantile(inverse, distribution)


class Quantile:
    """The quantile function of one distribution of lower and upper probabilities."""

    def __init__(self, inverse: Inverse, distribution: Distribution):
        self._inverse, self._parameters = inverse, canonical(distribution)

    def __call__(self, lower: Array, upper: Array) -> Array:
        return np.asarray(self._inverse(lower, upper, self._parameters))


def _marginal(described: Input) -> Distribution:
    if described.distribution is None:
        raise DerivationError(f"{described.name} has no distribution of its own to join by a copula")
    return described.distribution


def _archimedean_parameter(entry: Dependence) -> float:
    matrix = np.asarray(entry.matrix, float)
    off = matrix[~np.eye(matrix.shape[0], dtype=bool)] if matrix.size else np.zeros(0)
    if off.size == 0 or bool(np.any(off != off[0])):
        raise DerivationError(f"a {entry.family} copula has one strength for all pairs")
    value = float(off[0])
    if entry.measure == "parameter":
        return value
    if entry.measure == "kendall" and entry.family == "clayton":
        return 2.0 * value / (1.0 - value)
    if entry.measure == "kendall" and entry.family == "gumbel":
        return 1.0 / (1.0 - value)
    raise DerivationError(
        f"a {entry.family} copula with the strength given by {entry.measure} cannot be drawn yet"
    )


def _positive_stable(generator: Generator, alpha: float, count: int) -> Array:
    """Positive stable law with Laplace transform exp(-t^alpha) (Kanter 1975)."""
    if alpha == 1.0:
        return np.ones(count)
    angle = np.pi * (1.0 - generator.random(count))
    exponential = generator.standard_exponential(count)
    first = np.sin(alpha * angle) / np.sin(angle) ** (1.0 / alpha)
    second = (np.sin((1.0 - alpha) * angle) / exponential) ** ((1.0 - alpha) / alpha)
    return np.asarray(first * second)


def _rows(entry: Dependence, generator: Generator, count: int) -> dict[str, Array]:
    columns = np.asarray(entry.parameters["columns"], float)  # one row for each of the entry's inputs
    chosen = generator.integers(0, columns.shape[1], count)
    return {name: column[chosen] for name, column in zip(entry.inputs, columns, strict=True)}
