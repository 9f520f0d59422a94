"""Chooses a route for each output from the structure of its formula, before any probability is computed.

The order of preference: a known closed form; one continuous input: change of variables; two: the region
integral; none: every combination of the discrete inputs; more: sampling with one input integrated exactly.
Recognising closed forms is the routes' knowledge and is handed in.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Protocol

import numpy as np

from outspread.errors import DerivationError
from outspread.formula.tree import Name, Node, names, occurrences
from outspread.laws.law import Law
from outspread.numerics.slices import cases
from outspread.numerics.slices.problem import MOST_COMBINATIONS, Scores
from outspread.numerics.slices.solve import PARAMETER, Frame, Solver
from outspread.planning.dependence import normal_scores
from outspread.planning.plan import Plan, PlanStep, RuledOut
from outspread.reading.model import Model, Output

ROUTES = ("closed_form", "change_of_variables", "region_integral", "enumeration", "sampling")
MOST_OWNERS = 5_000  # combinations of discrete inputs beside two continuous ones


class Recognised(Protocol):
    """What the planner must know of a closed form."""

    @property
    def name(self) -> str: ...

    @property
    def source(self) -> str: ...


Recognise = Callable[[Node, Mapping[str, Law], Scores | None], Recognised | None]


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
    facts = _Facts(expression, laws, scores, used)
    ruled_out: list[RuledOut] = []
    known = recognise(expression, {name: laws[name] for name in used}, scores)
    numeric = facts.numeric_route()
    if output.route:
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
    ruled_out.extend(facts.ruled_out(numeric[0]))
    return facts.step(output.name, numeric, tuple(ruled_out))


def _forced(output: Output, facts: _Facts, known: Recognised | None, numeric: tuple[str, str]) -> PlanStep:
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


class _Facts:
    """What the structure of one formula tells."""

    def __init__(
        self, expression: Node, laws: Mapping[str, Law], scores: Scores | None, used: tuple[str, ...]
    ):
        self.expression, self.laws, self.scores, self.used = expression, laws, scores, used
        self.continuous = tuple(name for name in used if laws[name].continuous_mass > 0)
        self.discrete = tuple(name for name in used if laws[name].continuous_mass < 1)
        self.mixed = tuple(name for name in used if 0 < laws[name].continuous_mass < 1)

    def combinations(self) -> int:
        size = 1
        for name in self.discrete:
            size *= int(self.laws[name].atoms().values.size) + (name in self.mixed)
        return size

    def _dependent_discrete(self) -> bool:
        return self.scores is not None and any(
            self.scores.between(name, other) != 0
            for name in self.discrete
            for other in self.used
            if other != name
        )

    def numeric_route(self) -> tuple[str, str]:
        """(route, reason) of the most exact numeric route."""
        if self._dependent_discrete():
            return "sampling", "a discrete input depends on another input"
        count, size = len(self.continuous), self.combinations()
        if count == 0 and size <= MOST_COMBINATIONS:
            return "enumeration", "all inputs are discrete: every combination of their values is gone through"
        beside = f", for each of {size:,} combinations of the discrete ones" if self.discrete else ""
        if count == 1 and size <= MOST_COMBINATIONS:
            return "change_of_variables", f"one continuous input: every branch of the inverse{beside}"
        if count == 2 and size <= MOST_OWNERS:
            return (
                "region_integral",
                f"two continuous inputs: the region where the formula stays below a value{beside}",
            )
        if count <= 2:
            return "sampling", f"the discrete inputs have {size:,} combinations of values"
        return "sampling", f"{count} continuous inputs enter"

    def ruled_out(self, route: str) -> list[RuledOut]:
        if route != "sampling":
            return [RuledOut("sampling", "a route with a deterministic error bound applies")]
        count = len(self.continuous)
        return [
            RuledOut("change_of_variables", f"{count} continuous inputs, not one"),
            RuledOut("region_integral", f"{count} continuous inputs; two can be integrated exactly")
            if count != 2
            else RuledOut(
                "region_integral", "too many combinations of discrete inputs, or they are dependent"
            ),
        ]

    def step(self, output: str, chosen: tuple[str, str], ruled_out: tuple[RuledOut, ...]) -> PlanStep:
        route, reason = chosen
        inner = ""
        outer: tuple[str, ...] = ()
        details: list[tuple[str, str]] = []
        if route == "change_of_variables":
            inner = self.continuous[0]
        elif route == "region_integral":
            inner, exact = self.inner()
            outer = tuple(name for name in self.continuous if name != inner)
            details.append(("limits", _limits(inner, exact)))
        elif route == "sampling" and self.continuous:
            inner, exact = self.inner()
            outer = tuple(name for name in self.used if name != inner)
            if exact:
                details.append(("integrated exactly", inner))
                reason += f"; {inner} is integrated exactly, the others are sampled"
            else:
                inner, outer = "", self.used
        return PlanStep(
            output, f"the law of {output}", route, reason, self.used, inner, outer, ruled_out, tuple(details)
        )

    def inner(self) -> tuple[str, bool]:
        """The input whose limits are found exactly: one for which the formula can be solved, if there is one,
        and among those the one that occurs least."""
        candidates = [name for name in self.continuous if name not in self.mixed] or list(self.continuous)
        if self.scores is not None and len(self.continuous) > 2:
            candidates = sorted(candidates, key=self.scores.touches)
        event = cases.comparison("less_equal", self.expression, Name(PARAMETER))
        ranked = sorted(
            candidates,
            key=lambda name: (
                not _solvable(event, name),
                occurrences(self.expression, name),
                any(self.laws[name].singular_ends()),
                -candidates.index(name),
            ),
        )
        return ranked[0], _solvable(event, ranked[0])


def _solvable(event: Node, name: str) -> bool:
    """Whether every comparison can be solved for the name by formula."""
    return Solver(event, Frame(name, np.array([-1.0, 0.0, 1.0])), structure_only=True).exact


def _limits(inner: str, exact: bool) -> str:
    if exact:
        return f"the formula is solved for {inner} in closed form"
    return f"the formula is solved for {inner} by isolating its roots in interval arithmetic"


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
