"""Carries out a plan: derives every output by its route, joint laws, and probabilities of joint events."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from outspread.errors import DerivationError
from outspread.formula.tree import Apply, Node, Number, names, substitute
from outspread.laws.law import Estimates, Law
from outspread.planning.dependence import normal_scores
from outspread.planning.plan import Plan, PlanStep
from outspread.reading.model import Model, Output
from outspread.routes import numeric, writing
from outspread.routes.association import correlation
from outspread.routes.closed_form.scored import recognise_with_scores
from outspread.routes.derived import DerivedOutput, JointLaw, SymbolicDensity
from outspread.routes.events import event_of_one
from outspread.routes.jacobian import NotPossible, derive_joint, input_density
from outspread.routes.sampling import derive_sampled
from outspread.routes.tree import TreeDeriver
from outspread.routes.writing_parts import by_parts

Progress = Callable[[str], None]


class Engine:
    """Derives what a plan says; everything is computed once and kept."""

    def __init__(self, model: Model, laws: Mapping[str, Law], plan: Plan):
        self.model, self.plan = model, plan
        self.laws = {item.name: laws[item.name] for item in model.inputs if item.name in laws}
        self.scores = normal_scores(model, laws)
        self.symbols = writing.symbols(model)
        self._outputs: dict[str, DerivedOutput] = {}

    def derive(self, progress: Progress | None = None) -> tuple[DerivedOutput, ...]:
        """Every output in the model's order. Raises DerivationError with the output's name."""
        for output in self.model.outputs:
            if progress is not None:
                progress(f"deriving {output.name}")
            if output.name not in self._outputs:
                try:
                    self._outputs[output.name] = self._derive(output, progress)
                except DerivationError as error:
                    raise DerivationError(error.message, error.output or output.name) from error
        return tuple(self._outputs[output.name] for output in self.model.outputs)

    def _used(self, expression: Node) -> dict[str, Law]:
        return {name: law for name, law in self.laws.items() if name in names(expression)}

    def _derive(self, output: Output, progress: Progress | None) -> DerivedOutput:
        step = self.plan.step(output.name)
        if step.route == "closed_form":
            return self._closed_form(output, step)
        if step.route == "sampling":
            law, evaluations = derive_sampled(
                output.expression,
                self._used(output.expression),
                self.scores,
                step.inner,
                self.model.accuracy.seed,
            )
            text = writing.sampling(output, step, self.symbols)
            return DerivedOutput(output.name, step.route, law, text, evaluations=evaluations)
        if step.substeps:
            return self._by_parts(output, step, progress)
        laws = self._used(output.expression)
        result = numeric.derive(output.expression, laws, self.scores, step.outer)
        numeric.tabulate(result, laws)
        text, symbolic = writing.numeric(output, step, self.laws, self.symbols, result)
        return DerivedOutput(
            output.name, step.route, result.law, text, symbolic, evaluations=result.evaluations
        )

    def _by_parts(self, output: Output, step: PlanStep, progress: Progress | None) -> DerivedOutput:
        found = TreeDeriver(self.laws, self.scores, recognise_with_scores, progress).derive(step)
        text = by_parts(output, step, self.symbols, found)
        return DerivedOutput(output.name, step.route, found.law, text, evaluations=found.evaluations)

    def _closed_form(self, output: Output, step: PlanStep) -> DerivedOutput:
        laws = self._used(output.expression)
        found = recognise_with_scores(output.expression, laws, self.scores)
        if found is None:
            raise DerivationError("the closed form that was planned is not recognised", output.name)
        confirmed = dict(step.details).get("confirmed by")
        check = None
        if confirmed is not None:
            check = numeric.derive(output.expression, laws, self.scores)
        symbolic = SymbolicDensity(found.density_latex, found.density, found.name, found.source)
        return DerivedOutput(
            output.name, step.route, found.law, found.derivation, symbolic,
            None if check is None else check.law, 0 if check is None else check.evaluations,
        )  # fmt: skip

    # --- several outputs ----------------------------------------------------------------------------

    def joint(self) -> tuple[JointLaw, ...]:
        """The joint law of all outputs, where the plan has one and the inverse can be found."""
        if not self.plan.joint:
            return ()
        used = self.plan.joint[0].inputs
        laws = {name: self.laws[name] for name in used}
        matrix = None
        if self.scores is not None and any(self.scores.touches(name) for name in used):
            scores = self.scores
            matrix = [[1.0 if a == b else scores.between(a, b) for b in used] for a in used]
        outputs = {output.name: output.expression for output in self.model.outputs}
        found = derive_joint(outputs, laws, input_density(laws, matrix), self.symbols)
        return () if isinstance(found, NotPossible) else (found,)

    def probability(self, event: Node) -> Estimates:
        """P(event) for an event over outputs, with a bound on the error: derived jointly in the inputs."""
        involved = names(event)
        if len(involved) == 1:
            law = next(item.law for item in self.derive() if item.output == involved[0])
            found = event_of_one(event, involved[0], law)
            if found is not None:
                return found
        expressions = {output.name: output.expression for output in self.model.outputs}
        return self._event_in_inputs(substitute(event, expressions))

    def _event_in_inputs(self, event: Node) -> Estimates:
        laws = self._used(event)
        indicator = Apply("if", (event, Number(1.0), Number(0.0)))
        route = _numeric_or_sampling(laws, self.scores, indicator)
        if route:
            atoms = numeric.derive(indicator, laws, self.scores).law.atoms()
            at = np.flatnonzero(atoms.values == 1.0)
            value = float(atoms.masses[at[0]]) if at.size else 0.0
            error = float(atoms.errors[at[0]]) if at.size else 1e-300
            return Estimates(np.asarray(value), np.asarray(error))
        from outspread.routes.sampling import sampled_probability

        value, error = sampled_probability(event, laws, self.scores, self.model.accuracy.seed)
        return Estimates(np.asarray(value), np.asarray(error))

    def correlation(self, a: str, b: str) -> Estimates | str:
        """Pearson's correlation of two outputs with a bound on its error, or the reason why there is none."""
        outputs = {item.output: item.law for item in self.derive()}
        deviations = []
        for name in (a, b):
            deviation = outputs[name].standard_deviation()
            if not np.isfinite(deviation):
                return f"{name} has no variance, so there is no correlation"
            if deviation == 0:
                return f"{name} does not vary, so there is no correlation"
            deviations.append(deviation)
        expressions = {output.name: output.expression for output in self.model.outputs}
        laws = self._used(Apply("add", (expressions[a], expressions[b])))
        found = correlation(expressions[a], expressions[b], laws, self.scores, self.model.accuracy.seed)
        return Estimates(np.asarray(found.value), np.asarray(found.error))


def _numeric_or_sampling(laws: Mapping[str, Law], scores: object, expression: Node) -> bool:
    """Whether the numeric routes reach: at most two continuous inputs, discrete ones independent."""
    continuous = [name for name, law in laws.items() if law.continuous_mass > 0]
    discrete = [name for name, law in laws.items() if law.continuous_mass < 1]
    dependent = any(scores.touches(name) for name in discrete) if hasattr(scores, "touches") else False
    return len(continuous) <= 2 and not dependent
