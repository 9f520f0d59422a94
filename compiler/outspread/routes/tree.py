"""Carries out a plan by parts: the law of each sub-formula is derived, kept on panels and put in as an input.

A conditioning step derives the law for many values of the input that is given and integrates over it last, by
the trapezoidal rule in the input's normal score: for a smooth integrand that falls off on both sides it
converges faster than any power of the step (Trefethen and Weideman 2014, SIAM Review 56, 385–458). The error
is judged from how the last halvings of the step changed each value.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from outspread.errors import DerivationError
from outspread.formula.tree import Name, Node, Number, names, substitute
from outspread.laws.derived import DerivedLaw
from outspread.laws.law import Array, Atoms, Estimates, Law
from outspread.numerics.slices.problem import Scores
from outspread.planning.plan import PlanStep
from outspread.planning.tree import Recognise
from outspread.routes import numeric
from outspread.routes.numeric import NumericLaw

_REACH = 9.5  # standard deviations of the score: beyond lies 2e-21
_OUTSIDE = 2.2e-21
_STEPS = (1.0, 0.5, 0.25, 0.125)
_GOOD = 2e-13  # relative to the smaller tail: no further halving
_USABLE = 1e-5  # absolute error of a probability beyond which the result is not handed on
_LEAST = 1e-45  # probabilities that matter to the law of a part
_GIVEN_LEAST = 1e-25  # probabilities that matter to the law given one value

Progress = Callable[[str], None]


@dataclass
class TreeLaw:
    """The law of a plan by parts: `last` is the step that gave it (None for conditioning), with the laws that
    entered it by name; `evaluations` of all steps."""

    law: Law
    evaluations: int
    last: NumericLaw | None = None
    laws: Mapping[str, Law] = field(default_factory=dict)


class TreeDeriver:
    """Derives steps; equal ones, up to the names of their inputs, only once."""

    def __init__(
        self,
        laws: Mapping[str, Law],
        scores: Scores | None,
        recognise: Recognise,
        progress: Progress | None = None,
    ):
        self._laws, self._scores, self._recognise = laws, scores, recognise
        self._say = progress or (lambda words: None)
        self._known: dict[tuple[object, ...], Law] = {}

    def derive(self, step: PlanStep) -> TreeLaw:
        """The law of the whole plan, with its density derived too. Raises DerivationError."""
        if step.route == "conditioning":
            return self._conditioned(step)
        if step.route == "closed_form":
            law, evaluations = self._part(step, {}, _LEAST)
            return TreeLaw(law, evaluations)
        laws, evaluations = self._entering(step, {}, _LEAST)
        result = self._numeric(step, laws, 0.0)
        numeric.tabulate(result, laws)
        return TreeLaw(result.law, evaluations + result.evaluations, result, laws)

    # --- steps --------------------------------------------------------------------------------------

    def _numeric(self, step: PlanStep, laws: Mapping[str, Law], least: float) -> NumericLaw:
        assert step.expression is not None
        return numeric.derive(step.expression, laws, self._scores, step.outer, least=least)

    def _entering(
        self, step: PlanStep, given: Mapping[str, Node], least: float
    ) -> tuple[dict[str, Law], int]:
        """The laws that enter a step by name, and the evaluations they took."""
        assert step.expression is not None
        parts = {part.output: part for part in step.substeps}
        laws: dict[str, Law] = {}
        evaluations = 0
        for name in names(step.expression):
            if name in parts:
                laws[name], cost = self._part(parts[name], given, least)
                evaluations += cost
            elif name in self._laws and name not in given:
                laws[name] = self._laws[name]
        return laws, evaluations

    def _part(self, step: PlanStep, given: Mapping[str, Node], least: float) -> tuple[Law, int]:
        """The law of a substep, ready to be an input of the next step."""
        assert step.expression is not None
        if step.route == "closed_form":
            used = {name: self._laws[name] for name in self._laws if name in names(step.expression)}
            found = self._recognise(step.expression, used, self._scores)
            law = getattr(found, "law", None)
            if not isinstance(law, Law):
                raise DerivationError("the closed form that was planned is not recognised")
            return law, 0
        laws, evaluations = self._entering(step, given, least)
        expression = substitute(step.expression, given)
        key = self._key(expression, laws)
        if key not in self._known:
            self._say(f"deriving {step.output}")
            result = self._numeric(replace(step, expression=expression), laws, least)
            numeric.tabulate(result, laws, density=False, least=least)
            self._known[key] = result.law
            evaluations += result.evaluations
        return self._known[key], evaluations

    def _key(self, expression: Node, laws: Mapping[str, Law]) -> tuple[object, ...]:
        """Equal for formulas that differ in the names of inputs with equal laws only."""
        if self._scores is not None and any(self._scores.touches(name) for name in laws):
            return (expression, *(id(law) for law in laws.values()))
        renamed = substitute(expression, {name: Name(f"${i}") for i, name in enumerate(laws)})
        return (renamed, *(_law_key(law) for law in laws.values()))

    # --- conditioning -------------------------------------------------------------------------------

    def _conditioned(self, step: PlanStep) -> TreeLaw:
        (name,), (inner,) = step.outer, step.substeps
        law = self._laws[name]
        mixture = _Mixture(law, lambda value: self._given(inner, name, value))
        mixture.refine()
        spread, nodes, atoms = mixture.span(), mixture.nodes(), mixture.atoms()
        mass = 1.0 - float(atoms.masses.sum())
        result = DerivedLaw(mixture.evaluate, spread, nodes, atoms, mass if mass > 1e-12 else 0.0)
        result.tail_probability = 1e-18
        result.relative_error = mixture.relative_error()
        return TreeLaw(result, mixture.evaluations)

    def _given(self, step: PlanStep, name: str, value: float) -> tuple[Law, int]:
        self._say(f"deriving the law given {name}")
        return self._part(step, {name: Number(value)}, _GIVEN_LEAST)


def _law_key(law: Law) -> object:
    if law.family:
        return (law.family, tuple(sorted((key, repr(value)) for key, value in law.parameters.items())))
    return id(law)


class _Mixture:
    """The law of y as the mean of its laws given the values of one input."""

    def __init__(self, law: Law, given: Callable[[float], tuple[Law, int]]):
        self._law, self._given = law, given
        self._laws: dict[float, Law] = {}
        self.evaluations = 0
        self._level = 1

    def refine(self) -> None:
        """Halve the step until the distribution function at graded points no longer changes."""
        self._fill(_STEPS[0])
        self._fill(_STEPS[1])
        while self._level < len(_STEPS) - 1:
            self._level += 1
            self._fill(_STEPS[self._level])
            worst = 0.0
            for kind in ("cdf", "ccdf"):
                found = self.evaluate(kind, self.nodes())
                body = (found.value > 1e-12) & (found.value < 0.6)
                worst = max(worst, float(np.max(found.error[body] / found.value[body], initial=0.0)))
            if worst <= _GOOD:
                return
        for kind in ("cdf", "ccdf"):
            doubt = float(self.evaluate(kind, self.nodes()).error.max())
            if doubt > _USABLE:
                raise DerivationError(
                    f"the integral over the input that is given is only known to {doubt:.1g}; the formula "
                    "depends on it in too jagged a way"
                )

    def _fill(self, step: float) -> None:
        for score in _scores(step).tolist():
            if score not in self._laws:
                self._laws[score], cost = self._given(self._value(score))
                self.evaluations += cost

    def _value(self, score: float) -> float:
        from scipy.special import ndtr

        return float(self._law.icdf(ndtr(score)) if score < 0 else self._law.iccdf(ndtr(-score)))

    def evaluate(self, kind: str, y: Array) -> Estimates:
        """The mean over the last level; its error from the last two changes of level."""
        values = {score: _estimates(law, kind, y) for score, law in self._laws.items()}
        sums, doubt = [], np.zeros(y.size)
        for level in range(self._level + 1):
            step = _STEPS[level]
            scores = _scores(step)
            weights = step * np.exp(-0.5 * scores**2) / np.sqrt(2 * np.pi)
            weights /= weights.sum()
            rows = np.stack([values[score].value for score in scores.tolist()])
            sums.append(weights @ rows)
            if level == self._level:
                doubt = weights @ np.stack([values[score].error for score in scores.tolist()])
        change = np.abs(sums[-1] - sums[-2])
        if len(sums) > 2:
            before = np.abs(sums[-2] - sums[-3])
            with np.errstate(all="ignore"):
                ratio = np.where(before > 0, change / before, 1.0)
            change = change * np.minimum(1.0, 4 * ratio)
        return Estimates(sums[-1], change + doubt + _OUTSIDE + 1e-15 * sums[-1])

    def relative_error(self) -> float:
        return max(law.relative_error for law in self._laws.values())

    def span(self) -> tuple[float, float]:
        ends = [law.support() for law in self._laws.values()]
        return min(end[0] for end in ends), max(end[1] for end in ends)

    def nodes(self) -> Array:
        levels = np.array([1e-16, 1e-12, 1e-9, 1e-6, 1e-4, 1e-3, 0.01, 0.05, 0.15, 0.3, 0.5])
        found = []
        for score in (-8.0, -6.0, -4.0, -2.0, -1.0, 0.0, 1.0, 2.0, 4.0, 6.0, 8.0):
            law = self._laws[score]
            found += [law.icdf(levels), law.iccdf(levels)]
        points = np.unique(np.concatenate(found))
        points = points[np.isfinite(points)]
        keep = np.unique(np.round(np.linspace(0, points.size - 1, 80)).astype(int))
        return np.asarray(points[keep], float)

    def atoms(self) -> Atoms:
        """Atoms that all laws share; atoms that move with the given value spread out, which is refused."""
        tables = [law.atoms() for law in self._laws.values()]
        if not any(table.values.size for table in tables):
            return Atoms.none()
        first = tables[0].values
        if any(table.values.shape != first.shape or np.any(table.values != first) for table in tables):
            raise DerivationError("the formula has atoms that move with the input that is given")
        step = _STEPS[self._level]
        scores = _scores(step)
        weights = step * np.exp(-0.5 * scores**2) / np.sqrt(2 * np.pi)
        masses = weights @ np.stack([self._laws[score].atoms().masses for score in scores.tolist()])
        errors = weights @ np.stack([self._laws[score].atoms().errors for score in scores.tolist()])
        return Atoms(first, masses, errors + 1e-13 * masses)


def _scores(step: float) -> Array:
    count = int(_REACH / step)
    return np.asarray(step * np.arange(-count, count + 1), float)


def _estimates(law: Law, kind: str, y: Array) -> Estimates:
    """Values of the continuous part with errors."""
    if isinstance(law, DerivedLaw):
        return law.continuous(kind, y)
    value = {"pdf": law.pdf, "cdf": law.cdf, "ccdf": law.ccdf}[kind](y)
    return Estimates(value, law.relative_error * value)
