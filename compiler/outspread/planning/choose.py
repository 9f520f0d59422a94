"""Chooses a route for each output from the structure of its formula, before any probability is computed.

The order of preference: a known closed form; one continuous input: change of variables; two: the region
integral; none: every combination of the discrete inputs; more: the formula split into parts that share no
input, maybe given the value of one (`tree`); else sampling with one input integrated exactly. Recognising
closed forms is the routes' knowledge and is handed in.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from outspread.errors import DerivationError
from outspread.formula.tree import names
from outspread.laws.law import Law
from outspread.numerics.slices.problem import Scores
from outspread.planning.dependence import normal_scores
from outspread.planning.facts import Facts, kind_of
from outspread.planning.plan import Plan, PlanStep, RuledOut
from outspread.planning.tree import Recognise, Recognised, TreePlanner
from outspread.reading.model import Model, Output

ROUTES = (
    "closed_form", "change_of_variables", "region_integral", "enumeration", "conditioning", "sampling",
)  # fmt: skip
_ENTANGLED = (
    "the formula does not fall into sub-formulas of at most two quantities that share no input, not even for "
    "a given value of one input"
)


def make_plan(model: Model, laws: Mapping[str, Law], recognise: Recognise) -> Plan:
    """The plan of every output, and of the joint law where there are as many outputs as inputs.

    Raises DerivationError where the model holds something that no route of this version derives.
    """
    for described in model.inputs:
        if described.name not in laws and not any(
            described.name in entry.inputs for entry in model.dependence if entry.kind != "copula"
        ):
            raise DerivationError(
                f"{described.name} has parameters that are formulas of other inputs; this version derives "
                "inputs with parameters that are numbers or constants"
            )
    scores = normal_scores(model, laws)
    steps = tuple(_step(output, laws, scores, recognise) for output in model.outputs)
    return Plan(steps, _joint(model, laws))


def _step(output: Output, laws: Mapping[str, Law], scores: Scores | None, recognise: Recognise) -> PlanStep:
    expression = output.expression
    used = tuple(name for name in laws if name in names(expression))
    facts = Facts(expression, {name: kind_of(laws[name]) for name in used}, scores, used)
    ruled_out: list[RuledOut] = []
    known = recognise(expression, {name: laws[name] for name in used}, scores)
    numeric = facts.numeric_route()
    if output.route:
        tree = None if numeric[0] != "sampling" else TreePlanner(laws, scores, recognise).plan(
            output.name, expression, any_work=True
        )  # fmt: skip
        if tree is not None and output.route == tree.route:
            return replace(tree, reason=f"the model asks for this route: {tree.reason}")
        return _forced(output, facts, known, numeric)
    if known is not None:
        details = [("closed form", known.name), ("source", known.source)]
        if numeric[0] != "sampling":
            details.append(("confirmed by", numeric[0].replace("_", " ")))
        return PlanStep(
            output.name, f"the law of {output.name}", "closed_form",
            f"the formula and the families of its inputs have a known closed form: {known.name}",
            used, ruled_out=(), details=tuple(details),
        )  # fmt: skip
    ruled_out.append(RuledOut("closed_form", "no known closed form fits this formula and these families"))
    if numeric[0] == "sampling":
        tree = TreePlanner(laws, scores, recognise).plan(output.name, expression)
        if tree is not None:
            ruled_out.append(RuledOut("sampling", "a route with a deterministic error bound applies"))
            return replace(tree, ruled_out=tuple(ruled_out))
        ruled_out.append(RuledOut("splitting", _ENTANGLED))
    ruled_out.extend(facts.ruled_out(numeric[0]))
    return facts.step(output.name, numeric, tuple(ruled_out))


def _forced(output: Output, facts: Facts, known: Recognised | None, numeric: tuple[str, str]) -> PlanStep:
    """The route that the model asks for, with what that costs."""
    wanted = output.route
    if wanted not in ROUTES:
        raise DerivationError(f"route {wanted} is unknown; the routes are {', '.join(ROUTES)}", output.name)
    best = "closed_form" if known is not None else numeric[0]
    if wanted not in (best, numeric[0], "sampling"):
        raise DerivationError(
            f"{output.name} cannot be derived by {wanted.replace('_', ' ')}; its route is "
            f"{best.replace('_', ' ')}", output.name,
        )  # fmt: skip
    cost = "" if wanted == best else f", though {best.replace('_', ' ')} would be more accurate"
    if wanted == "closed_form" and known is not None:
        return PlanStep(
            output.name, f"the law of {output.name}", wanted, "the model asks for it", facts.used,
            details=(("closed form", known.name), ("source", known.source)),
        )  # fmt: skip
    return facts.step(output.name, (wanted, f"the model asks for this route{cost}"), ())


def _joint(model: Model, laws: Mapping[str, Law]) -> tuple[PlanStep, ...]:
    """The joint law of all outputs where they are as many as the inputs they use."""
    if len(model.outputs) < 2:
        return ()
    used = tuple(n for n in laws if any(n in names(output.expression) for output in model.outputs))
    title = ", ".join(output.name for output in model.outputs)
    if len(used) != len(model.outputs) or any(laws[name].continuous_mass < 1 for name in used):
        return ()
    return (
        PlanStep(
            title, f"the joint density of {title}", "jacobian",
            f"as many outputs as inputs ({len(used)}): every branch of the inverse map and its Jacobian",
            used,
        ),
    )  # fmt: skip
