"""The plan as indented lines of text, for the terminal."""

from __future__ import annotations

from outspread.planning.plan import Plan, PlanStep


def plan_lines(plan: Plan) -> list[str]:
    """The derivation of each output step by step, with reasons and what was ruled out."""
    lines: list[str] = []
    for step in (*plan.steps, *plan.joint):
        lines.extend(_step_lines(step, ""))
    return lines


def _step_lines(step: PlanStep, indent: str) -> list[str]:
    lines = [f"{indent}{step.derives}: {step.route.replace('_', ' ')}", f"{indent}  because {step.reason}"]
    if step.inputs:
        lines.append(f"{indent}  inputs: {', '.join(step.inputs)}")
    if step.inner and step.outer:
        verb = "sampled" if step.route == "sampling" else "integrated over"
        lines.append(f"{indent}  exact in {step.inner}; {verb}: {', '.join(step.outer)}")
    lines.extend(f"{indent}  {key}: {value}" for key, value in step.details)
    lines.extend(f"{indent}  not by {out.route.replace('_', ' ')}: {out.reason}" for out in step.ruled_out)
    for part in step.substeps:
        lines.extend(_step_lines(part, indent + "    "))
    return lines
