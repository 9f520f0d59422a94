"""The plan: pure data that says how each output will be derived and why, before any number is computed."""

from __future__ import annotations

from dataclasses import dataclass

from outspread.formula.tree import Node


@dataclass(frozen=True)
class RuledOut:
    route: str
    reason: str


@dataclass(frozen=True)
class PlanStep:
    """One step: `derives` (what comes out, in words), `route` (closed_form | change_of_variables |
    region_integral | jacobian | enumeration | conditioning | sampling), `reason`, what was ruled out and why.

    `inputs` the random inputs that enter; `inner` the variable whose limits are found exactly, `outer`
    the ones integrated (or sampled) over. `expression`: the formula of the step, in inputs and in the
    `output` names of its substeps, whose laws enter it; of a conditioning step, given its `outer`, the one
    substep.
    """

    output: str
    derives: str
    route: str
    reason: str
    inputs: tuple[str, ...]
    inner: str = ""
    outer: tuple[str, ...] = ()
    ruled_out: tuple[RuledOut, ...] = ()
    details: tuple[tuple[str, str], ...] = ()  # further facts, e.g. ("closed form", "Rice")
    substeps: tuple[PlanStep, ...] = ()
    expression: Node | None = None


@dataclass(frozen=True)
class Plan:
    steps: tuple[PlanStep, ...]  # one tree per output, in the model's order
    joint: tuple[PlanStep, ...] = ()  # derivations of joint laws (n -> n)

    def step(self, output: str) -> PlanStep:
        return next(step for step in self.steps if step.output == output)
