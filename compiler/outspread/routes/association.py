"""Pearson's correlation of two outputs as an expectation over their inputs.

Up to two continuous inputs: a product Gauss rule on panels graded by probability, with the difference of two
orders as error; more: randomised quasi-Monte Carlo with the error from replicates.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node
from outspread.laws.law import Array, Law
from outspread.numerics.slices.problem import Scores
from outspread.routes.derived import Value
from outspread.routes.sampling import REPLICATES, design, student_factor

POINTS = 32_768
_MOST_NODES = 4_000_000
_EDGES = np.array([0, 0.1, 0.25, 0.5, 0.8, 1.2, 1.7, 2.3, 3, 3.8, 4.7, 5.8, 7.2, 9, 12, 17, 25, 37.5])


def correlation(left: Node, right: Node, laws: Mapping[str, Law], scores: Scores | None, seed: int) -> Value:
    """The correlation of two formulas of the inputs in `laws`; both must have a variance."""
    continuous = [name for name, law in laws.items() if law.continuous_mass > 0]
    if all(laws[n].continuous_mass in (0.0, 1.0) for n in laws) and len(continuous) <= 2:
        coarse, fine = (_by_rule(left, right, laws, scores, order) for order in (10, 14))
        if coarse is not None and fine is not None:
            error = 2 * abs(fine - coarse) + 1e-13
            if error < 1e-6:
                return Value(fine, error)
    return _sampled(left, right, laws, scores, seed)


def _by_rule(
    left: Node, right: Node, laws: Mapping[str, Law], scores: Scores | None, order: int
) -> float | None:
    """By a product rule over the normal scores; None where discrete inputs are dependent or too many."""
    axes: list[tuple[str, Array, Array]] = []
    total = 1
    for name, law in laws.items():
        if law.continuous_mass > 0:
            nodes, weights = _score_rule(law, order)
        else:
            if scores is not None and scores.touches(name):
                return None
            atoms = law.atoms()
            nodes, weights = atoms.values, atoms.masses
        axes.append((name, nodes, weights))
        total *= nodes.size
        if total > _MOST_NODES:
            return None
    mesh = list(np.meshgrid(*(nodes for _, nodes, _ in axes), indexing="ij"))
    weight = np.ones(())
    for _, _, weights in axes:
        weight = np.multiply.outer(weight, weights)
    values = _inputs(axes, mesh, laws, scores)
    return _weighted(left, right, list(laws), values, weight.ravel())


def _inputs(
    axes: list[tuple[str, Array, Array]], mesh: list[Array], laws: Mapping[str, Law], scores: Scores | None
) -> dict[str, Array]:
    values: dict[str, Array] = {}
    normal: list[tuple[str, Array]] = []
    for (name, _, _), grid in zip(axes, mesh, strict=True):
        flat = grid.ravel()
        if laws[name].continuous_mass == 0:
            values[name] = flat
            continue
        score = flat
        if normal and scores is not None and (rho := scores.between(normal[0][0], name)):
            score = rho * normal[0][1] + np.sqrt((1 - rho) * (1 + rho)) * flat
        normal.append((name, score))
        values[name] = _from_score(laws[name], score)
    return values


def _from_score(law: Law, score: Array) -> Array:
    """The input with this normal score; equal scores are looked up once."""
    from scipy.special import ndtr

    distinct, index = np.unique(score, return_inverse=True)
    lower = law.icdf(ndtr(np.minimum(distinct, 0.0)))
    upper = law.iccdf(ndtr(-np.maximum(distinct, 0.0)))
    return np.asarray(np.where(distinct < 0, lower, upper)[index])


def _score_rule(law: Law, order: int) -> tuple[Array, Array]:
    """Nodes and weights for the standard normal law, panels broken where the input passes 0 or a break."""
    from outspread.numerics.slices.inner import normal_score

    marks = np.array([*law.breaks(), 0.0])
    with np.errstate(all="ignore"):
        marks = normal_score(law, marks)
    marks = marks[np.isfinite(marks) & (np.abs(marks) < 37)]
    edges = np.unique(np.concatenate([-_EDGES, _EDGES, marks]))
    base, weight = np.polynomial.legendre.leggauss(order)
    half = 0.5 * np.diff(edges)
    nodes = 0.5 * (edges[1:] + edges[:-1])[:, None] + half[:, None] * base
    weights = half[:, None] * weight * np.exp(-0.5 * nodes**2) / np.sqrt(2 * np.pi)
    return nodes.ravel(), weights.ravel()


def _weighted(
    left: Node, right: Node, used: list[str], values: Mapping[str, Array], weight: Array
) -> float | None:
    columns = [values[name] for name in used]
    with np.errstate(all="ignore"):
        a = np.broadcast_to(np.asarray(compile_numpy(left, used)(*columns), float), weight.shape)
        b = np.broadcast_to(np.asarray(compile_numpy(right, used)(*columns), float), weight.shape)
    keep = weight > 1e-300
    a, b, w = a[keep], b[keep], weight[keep]
    if not (np.isfinite(a).all() and np.isfinite(b).all()):
        return None
    w = w / w.sum()
    a, b = a - np.dot(w, a), b - np.dot(w, b)
    return float(np.dot(w, a * b) / np.sqrt(np.dot(w, a * a) * np.dot(w, b * b)))


def _sampled(left: Node, right: Node, laws: Mapping[str, Law], scores: Scores | None, seed: int) -> Value:
    used = list(laws)
    points = design(laws, scores, tuple(used), "", seed + 3, REPLICATES, POINTS)
    rows = []
    for replicate in range(REPLICATES):
        part = slice(replicate * POINTS, (replicate + 1) * POINTS)
        values = {name: points.values[name][part] for name in used}
        found = _weighted(left, right, used, values, np.ones(POINTS))
        rows.append(np.nan if found is None else found)
    column = np.array(rows)
    return Value(
        float(column.mean()), student_factor(REPLICATES) * float(column.std(ddof=1)) / np.sqrt(REPLICATES)
    )
