"""Derives a law by randomised quasi-Monte Carlo: scrambled Sobol' points, one input integrated exactly.

For each sampled combination of the other inputs the probability of {formula <= y} is the exact probability of
a set of the inner input (pre-integration, Griewank, Kuo, Leövey and Sloan 2018, Journal of Computational and
Applied Mathematics 344, 259–274). Independent scramblings (Owen 1995) give the error: a Student bound at the
confidence stated below, widened where few points carry the probability.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Name, Node, names
from outspread.laws.derived import DerivedLaw
from outspread.laws.law import Array, Atoms, Estimates, Law
from outspread.laws.tails import Tail
from outspread.numerics.slices import cases
from outspread.numerics.slices.axis import Axis
from outspread.numerics.slices.extent import extent
from outspread.numerics.slices.inner import ConditionalInner, IndependentInner, Inner, boundary, probability
from outspread.numerics.slices.problem import Problem, Scores, take_apart
from outspread.numerics.slices.solve import PARAMETER, Solver
from outspread.numerics.tail_index import TailIndex, tail_index

REPLICATES = 16
POINTS = 4096  # a replicate
CONFIDENCE = 1 - 1e-6
_BLOCK = 40_000  # points whose quantiles are computed at a time: they stay in the cache of the processor


@dataclass(frozen=True)
class Design:
    """Sampled inputs, flat over replicates, and the conditional mean of the inner input's normal score."""

    values: Mapping[str, Array]
    given: Array | None
    inner: Inner | None
    replicates: int
    points: int


class SampledLaw(DerivedLaw):
    """A derived law whose moments are sampled too; which exist is decided from the structure."""

    moment_values: Estimates

    def moment_estimates(self) -> Estimates:
        return self.moment_values

    def moment_exists(self, order: float) -> bool:
        return all(tail.exponent > order for tail in self.tails())


def derive_sampled(
    expression: Node, laws: Mapping[str, Law], scores: Scores | None, inner: str, seed: int
) -> tuple[SampledLaw, int]:
    """(law, evaluations): the law by sampling, with `inner` ("" for none) integrated exactly."""
    used = tuple(name for name in laws if name in names(expression))
    sampler = _Sampler(expression, laws, scores, used, inner, seed)
    atoms, mass = sampler.atoms()
    spread = extent(expression, laws, used)
    index = tail_index(expression, laws)
    tail = Tail(index.far, False)
    ends = Tail(np.inf, True)
    law = SampledLaw(
        sampler.evaluate, (spread.lower, spread.upper), sampler.nodes(), atoms, mass,
        (spread.lower_error, spread.upper_error), tail_probability=1e-7,
        tails=(ends if np.isfinite(spread.lower) else tail, ends if np.isfinite(spread.upper) else tail),
    )  # fmt: skip
    law.moment_values = sampler.moments(index)
    return law, REPLICATES * POINTS * 2


def sampled_probability(
    event: Node, laws: Mapping[str, Law], scores: Scores | None, seed: int
) -> tuple[float, float]:
    """P(event) and its error, with all inputs sampled."""
    used = tuple(name for name in laws if name in names(event))
    points = design(laws, scores, used, "", seed + 2, REPLICATES, 4 * POINTS)
    with np.errstate(all="ignore"):
        holds = np.asarray(compile_numpy(event, used)(*(points.values[name] for name in used)), float)
    return _judge(holds.reshape(REPLICATES, -1), False)


class _Sampler:
    def __init__(
        self,
        expression: Node,
        laws: Mapping[str, Law],
        scores: Scores | None,
        used: tuple[str, ...],
        inner: str,
        seed: int,
    ):
        self.expression, self.laws, self.used, self.inner = expression, laws, used, inner
        continuous = tuple(name for name in used if laws[name].continuous_mass > 0)
        discrete = tuple(name for name in used if laws[name].continuous_mass == 0)
        problem = take_apart(expression, laws, scores, continuous, discrete)
        self.problem: Problem = problem
        outer = tuple(name for name in used if name != inner)
        self.design = design(laws, scores, outer, inner, seed, REPLICATES, POINTS)
        self.solvers: dict[str, Solver] = {}
        self.full = design(laws, scores, used, "", seed + 1, REPLICATES, POINTS)
        self.formula = compile_numpy(expression, used)
        with np.errstate(all="ignore"):
            self.sample = np.asarray(self.formula(*(self.full.values[name] for name in used)), float)
        self.frame = Axis(inner, laws[inner]).frame if inner else None
        if np.isnan(self.sample).any():
            from outspread.errors import DerivationError

            share = float(np.isnan(self.sample).mean())
            raise DerivationError(
                f"the formula has no value with probability about {share:.2g} (a root or logarithm of a "
                "negative number, for example); limit the inputs by `truncate`, or say with if(…) what "
                "holds there"
            )

    def evaluate(self, kind: str, y: Array) -> Estimates:
        value, error = np.zeros(y.size), np.zeros(y.size)
        for i, point in enumerate(y.tolist()):
            weights = self._weights(kind, point)
            value[i], error[i] = _judge(weights.reshape(self.design.replicates, -1), kind == "pdf")
        return Estimates(value, error)

    def _weights(self, kind: str, y: float) -> Array:
        """The exact conditional probability (or density) at each sampled point."""
        if not self.inner:
            sample = self.sample.reshape(-1)
            if kind == "pdf":
                width = max(float(np.quantile(sample, 0.75) - np.quantile(sample, 0.25)) * 0.02, 1e-300)
                return (np.abs(sample - y) < width) / (2 * width)
            return (sample <= y if kind == "cdf" else sample > y).astype(float)
        operator = "greater" if kind == "ccdf" else "less_equal"
        event = self.problem.moving_event(cases.comparison(operator, self.expression, Name(PARAMETER)))
        return self._conditional(event, y, kind == "pdf")

    def _conditional(self, event: Node, y: float, density: bool) -> Array:
        assert self.design.inner is not None
        assert self.frame is not None
        key = repr(event)
        if key not in self.solvers:
            self.solvers[key] = Solver(event, self.frame)
        count = self.design.replicates * self.design.points
        environment = {**self.design.values, PARAMETER: np.full(count, y)}
        where = self.solvers[key](environment, count)
        if not density:
            return probability(where, self.design.inner, self.design.given).value
        edge = boundary(where)
        given = None if self.design.given is None else self.design.given[edge.problem]
        with np.errstate(all="ignore"):
            rate = self.design.inner.pdf(edge.x, given) * edge.rate
        return np.asarray(np.bincount(edge.problem, np.where(np.isfinite(rate), rate, 0.0), count), float)

    def atoms(self) -> tuple[Atoms, float]:
        """Atoms from the constant cases, or from repeated values where nothing is integrated exactly."""
        from outspread.routes.numeric import merge_atoms

        if not self.inner:
            return self._repeated()
        values, masses, errors = [], [], []
        for condition, value in self.problem.constant:
            arguments = names(value)
            with np.errstate(all="ignore"):
                at = compile_numpy(value, arguments)(*(self.design.values[name] for name in arguments))
            at = np.broadcast_to(np.asarray(at, float), (self.design.replicates * self.design.points,))
            distinct = np.unique(at)
            weights = self._conditional(condition, 0.0, False)
            for point in distinct.tolist():
                mass, error = _judge((weights * (at == point)).reshape(self.design.replicates, -1), False)
                values.append(point)
                masses.append(mass)
                errors.append(error)
        if not values:
            return Atoms.none(), 1.0
        atoms = merge_atoms(np.array(values), np.array(masses), np.array(errors))
        return atoms, max(1.0 - float(atoms.masses.sum()), 0.0)

    def _repeated(self) -> tuple[Atoms, float]:
        from outspread.routes.numeric import merge_atoms

        if any(self.laws[name].continuous_mass > 0 for name in self.used):
            return Atoms.none(), 1.0
        rows = self.sample.reshape(self.full.replicates, -1)
        distinct = np.unique(self.sample)
        judged = [_judge((rows == point).astype(float), False) for point in distinct.tolist()]
        masses, errors = (np.array(column) for column in zip(*judged, strict=True))
        return merge_atoms(distinct, masses, errors), 0.0

    def nodes(self) -> Array:
        ordered = np.sort(self.sample)
        ranks = np.concatenate([[0, 1, 3, 10, 30], np.linspace(100, ordered.size - 101, 41)])
        ranks = np.unique(np.concatenate([ranks, ordered.size - 1 - ranks[:5]]).astype(int))
        spread = ordered[-1] - ordered[0]
        return np.unique(np.concatenate([ordered[ranks], [ordered[0] - spread, ordered[-1] + spread]]))

    def moments(self, index: TailIndex) -> Estimates:
        """Mean, standard deviation, skewness, kurtosis with errors from the replicates."""
        rows = self.sample.reshape(self.full.replicates, -1)
        centre = float(np.median(self.sample))
        value, error = np.full(4, np.nan), np.zeros(4)
        statistics = np.array([_statistics(row - centre) for row in rows])
        pooled = _statistics(self.sample - centre)
        factor = student_factor(self.full.replicates)
        for k in range(4):
            if index.far > k + 1:
                column = statistics[:, k]
                value[k] = pooled[k] + (centre if k == 0 else 0.0)
                bias = abs(float(column.mean()) - pooled[k])
                error[k] = factor * float(column.std(ddof=1)) / np.sqrt(column.size) + bias
        # a fourth moment far beyond the sample makes its own error estimate unreliable
        if index.far < 8:
            error[1:] = np.where(np.isnan(value[1:]), 0.0, np.maximum(error[1:], np.abs(value[1:])))
        if index.sure:
            value[1] = np.inf if 1 < index.far <= 2 else value[1]
            value[3] = np.inf if 2 < index.far <= 4 else value[3]
        return Estimates(value, error)


def _statistics(x: Array) -> Array:
    mean = x.mean()
    d = x - mean
    variance = float((d * d).mean())
    if variance <= 0:
        return np.array([mean, 0.0, 0.0, 0.0])
    return np.array([mean, np.sqrt(variance), (d**3).mean() / variance**1.5, (d**4).mean() / variance**2])


def student_factor(replicates: int) -> float:
    from scipy.special import stdtrit

    return float(stdtrit(replicates - 1, 1 - (1 - CONFIDENCE) / 2))


def _judge(weights: Array, density: bool) -> tuple[float, float]:
    """Mean over all points and its error, from the replicates' means."""
    means = weights.mean(axis=1)
    value = float(means.mean())
    error = student_factor(means.size) * float(means.std(ddof=1)) / np.sqrt(means.size)
    count = weights.size
    total = float(weights.sum())
    if density:
        return value, error if total > 0 else float(np.max(weights, initial=0.0))
    if total == 0:
        return 0.0, 14.0 / count  # nothing seen: exp(-14) < 1e-6 is the chance to miss more than that
    # weights are scaled first: the squares of tiny ones would underflow
    largest = float(weights.max())
    effective = (total / largest) ** 2 / float(((weights / largest) ** 2).sum())
    if effective < 400:  # few points carry the probability: their own scatter is not to be trusted
        error = max(error, 10 * value / np.sqrt(effective))
    return value, error + 1e-14 * value


def design(
    laws: Mapping[str, Law],
    scores: Scores | None,
    outer: tuple[str, ...],
    inner: str,
    seed: int,
    replicates: int,
    points: int,
) -> Design:
    """Scrambled Sobol' points for the outer inputs, dependent ones through their normal scores."""
    from scipy.special import ndtr, ndtri

    order = (*outer, *((inner,) if inner else ()))
    matrix = np.array(
        [[1.0 if a == b else (0.0 if scores is None else scores.between(a, b)) for b in order] for a in order]
    )
    factor = np.linalg.cholesky(matrix) if order else np.zeros((0, 0))
    uniform = _uniforms(len(outer), seed, replicates, points)
    values: dict[str, Array] = {}
    normal: list[Array] = []
    for i, name in enumerate(outer):
        law = laws[name]
        row = factor[i, : i + 1]
        u = uniform[:, i]
        if np.count_nonzero(factor[i:, i]) > 1 or np.count_nonzero(row) > 1:
            independent = ndtri(u)
        else:
            independent = np.zeros(0)
        normal.append(independent)
        if np.count_nonzero(row) > 1:
            score = sum((row[j] * normal[j] for j in range(i + 1) if row[j] != 0), np.zeros(u.size))
            values[name] = _quantiles(law, score < 0, ndtr(-np.abs(score)))
        else:
            values[name] = _quantiles(law, u <= 0.5, np.minimum(u, 1 - u))
    if not inner:
        return Design(values, None, None, replicates, points)
    last = factor[-1]
    if np.count_nonzero(last) == 1:
        return Design(values, None, IndependentInner(laws[inner]), replicates, points)
    given = sum(
        (last[j] * normal[j] for j in range(len(outer)) if last[j] != 0), np.zeros(replicates * points)
    )
    return Design(values, given, ConditionalInner(laws[inner], float(last[-1])), replicates, points)


def _quantiles(law: Law, lower: npt.NDArray[np.bool_], tail: Array) -> Array:
    """Quantiles of tail probabilities, counted from below where `lower`, from above elsewhere."""
    value = np.empty(tail.size)
    for start in range(0, tail.size, _BLOCK):
        part = slice(start, start + _BLOCK)
        below, level = lower[part], tail[part]
        value[part][below] = law.icdf(level[below])
        value[part][~below] = law.iccdf(level[~below])
    return value


def _uniforms(dimensions: int, seed: int, replicates: int, points: int) -> Array:
    """(replicates * points, dimensions) in the open unit cube; each replicate is scrambled anew."""
    if dimensions == 0:
        return np.zeros((replicates * points, 0))
    from scipy.stats.qmc import Sobol

    blocks = []
    for replicate in range(replicates):
        generator = np.random.Generator(np.random.PCG64(np.random.SeedSequence((seed, replicate))))
        blocks.append(Sobol(dimensions, scramble=True, rng=generator).random(points))
    half = 2.0**-33
    return np.asarray(np.clip(np.concatenate(blocks), half, 1 - half), float)
