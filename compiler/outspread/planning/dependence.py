"""The dependence of a model as correlations of normal scores, where it is a Gaussian one.

Spearman and Kendall: rho_s = (6/pi) asin(rho/2), tau = (2/pi) asin(rho) (Kruskal 1958, Journal of the
American Statistical Association 53, 814–861). Pearson of the inputs themselves: the inputs' own for normals,
the closed relation for two lognormals, otherwise solved by quadrature over the two scores (Liu and
Der Kiureghian 1986, Probabilistic Engineering Mechanics 1, 105–112, use the same relation).
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from outspread.errors import DerivationError
from outspread.laws.law import Array, Law
from outspread.numerics.slices.problem import Scores
from outspread.reading.model import Dependence, Model


def normal_scores(model: Model, laws: Mapping[str, Law]) -> Scores | None:
    """The correlation matrix of the scores of all inputs that depend on each other; None where none does.

    Raises DerivationError for a kind of dependence that is not derived yet, and for a Pearson correlation
    that the two distributions cannot reach.
    """
    order: list[str] = []
    blocks: list[Array] = []
    for entry in model.dependence:
        if entry.kind != "copula" or entry.family != "gaussian":
            kind = entry.kind.replace("_", " ") if entry.kind != "copula" else f"{entry.family} copula"
            raise DerivationError(
                f"inputs joined by a {kind} ({', '.join(entry.inputs)}) cannot be derived by this version; "
                "a gaussian copula can"
            )
        order.extend(entry.inputs)
        blocks.append(_block(entry, laws))
    if not order:
        return None
    matrix = np.eye(len(order))
    at = 0
    for block in blocks:
        matrix[at : at + len(block), at : at + len(block)] = block
        at += len(block)
    smallest = float(np.linalg.eigvalsh(matrix)[0])
    if smallest <= 1e-12:
        raise DerivationError(
            f"the correlations of the normal scores are not positive definite (smallest eigenvalue "
            f"{smallest:.3g}); lower the correlations of {', '.join(order)}"
        )
    return Scores(tuple(order), matrix)


def _block(entry: Dependence, laws: Mapping[str, Law]) -> Array:
    given = np.array(entry.matrix, float)
    if entry.measure in ("normal_scores", "parameter"):
        return given
    if entry.measure == "spearman":
        return np.asarray(2 * np.sin(np.pi * given / 6)) * (1 - np.eye(len(given))) + np.eye(len(given))
    if entry.measure == "kendall":
        return np.asarray(np.sin(np.pi * given / 2)) * (1 - np.eye(len(given))) + np.eye(len(given))
    result = np.eye(len(given))
    for i, left in enumerate(entry.inputs):
        for j, right in enumerate(entry.inputs[:i]):
            result[i, j] = result[j, i] = _from_pearson(float(given[i, j]), laws, left, right)
    return result


def _from_pearson(target: float, laws: Mapping[str, Law], left: str, right: str) -> float:
    a, b = laws[left], laws[right]
    kinds = (a.family, b.family)
    if kinds == ("normal", "normal") or target == 0:
        return target
    if not (np.isfinite(a.variance()) and np.isfinite(b.variance())):
        raise DerivationError(f"{left} or {right} has no variance, so no Pearson correlation; give spearman")
    if kinds == ("lognormal", "lognormal"):
        return _lognormal_scores(target, a, b, left, right)
    return _solved_scores(target, a, b, left, right)


def _unreachable(target: float, left: str, right: str, low: float, high: float) -> DerivationError:
    return DerivationError(
        f"a Pearson correlation of {target:g} between {left} and {right} cannot be reached with their "
        f"distributions; a value between {low:.6g} and {high:.6g} can"
    )


def _lognormal_scores(target: float, a: Law, b: Law, left: str, right: str) -> float:
    s, t = (float(law.parameters["log_sd"]) for law in (a, b))
    size = float(np.sqrt(np.expm1(s * s) * np.expm1(t * t)))
    low, high = float(np.expm1(-s * t)) / size, float(np.expm1(s * t)) / size
    if not low < target < high:
        raise _unreachable(target, left, right, low, high)
    return float(np.log1p(target * size) / (s * t))


def _solved_scores(target: float, a: Law, b: Law, left: str, right: str) -> float:
    """The score correlation with which the inputs have the Pearson correlation asked for."""
    nodes, weights = _score_rule()
    z = nodes[:, None]
    first = (_quantiles(a, nodes) - a.mean()) / a.standard_deviation()

    def pearson(rho: float) -> float:
        other = rho * z + np.sqrt((1 - rho) * (1 + rho)) * nodes
        second = (_quantiles(b, other.ravel()).reshape(other.shape) - b.mean()) / b.standard_deviation()
        return float((weights * first) @ (second @ weights))

    from scipy.optimize import brentq

    low, high = pearson(-1.0), pearson(1.0)
    if not low < target < high:
        raise _unreachable(target, left, right, low, high)
    return float(brentq(lambda rho: pearson(rho) - target, -1.0, 1.0, xtol=1e-13, rtol=1e-13))


def _score_rule() -> tuple[Array, Array]:
    """A rule for the standard normal law on [-9, 9]: composite Gauss–Legendre, 24 panels of 16 points."""
    base, weight = np.polynomial.legendre.leggauss(16)
    edges = np.linspace(-9.0, 9.0, 25)
    half = 0.5 * np.diff(edges)
    nodes = (0.5 * (edges[1:] + edges[:-1]))[:, None] + half[:, None] * base
    weights = half[:, None] * weight * np.exp(-0.5 * nodes**2) / np.sqrt(2 * np.pi)
    return nodes.ravel(), weights.ravel()


def _quantiles(law: Law, z: Array) -> Array:
    from scipy.special import ndtr

    return np.where(z < 0, law.icdf(ndtr(np.minimum(z, 0.0))), law.iccdf(ndtr(-np.maximum(z, 0.0))))
