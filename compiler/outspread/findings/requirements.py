"""Judges requirements: met, not met, or undecided where the limit lies within the error of the value."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

from outspread.findings.figures import nearer_tail, quantile
from outspread.findings.results import Absent, Figure, Finding, Verdict
from outspread.findings.writing import rounded
from outspread.formula.tree import Node
from outspread.laws.law import Law
from outspread.reading.model import Model, Requirement

Probability = Callable[[Node], Finding]


def judge(value: Finding, limit: float, sense: str) -> str:
    """The verdict for a value with its error: no limit inside the error is called met or not met."""
    if isinstance(value, Absent) or not math.isfinite(value.error):
        return "undecided"
    # judged on the figures as they are printed, so that a reader who checks them finds the same verdict
    shown, error = rounded(value.value, value.error)
    low, high = shown - error, shown + error
    if sense == "at_least":
        return "met" if low >= limit else "not met" if high < limit else "undecided"
    return "met" if high <= limit else "not met" if low > limit else "undecided"


def judge_requirements(
    model: Model, laws: Mapping[str, Law], probability: Probability
) -> tuple[Verdict, ...]:
    """A verdict for each limit of each requirement, in the model's order.

    `laws` holds the law of each output; `probability` gives the probability of an event over outputs.
    """
    return tuple(
        verdict
        for requirement in model.requirements
        for verdict in _verdicts(model, requirement, laws, probability)
    )


def _verdicts(
    model: Model, requirement: Requirement, laws: Mapping[str, Law], probability: Probability
) -> list[Verdict]:
    if requirement.kind == "probability":
        assert requirement.event is not None
        value = probability(requirement.event)
        subject, unit = f"P({requirement.text})", ""
    else:
        value = quantile(laws[requirement.output], *nearer_tail(requirement.at))
        unit = next(output.unit for output in model.outputs if output.name == requirement.output)
        subject = f"the {requirement.at:g} quantile of {requirement.output}"
    shown = f" {unit}" if unit and unit != "1" else ""
    found = []
    for sense, limit in (("at_least", requirement.at_least), ("at_most", requirement.at_most)):
        if limit is not None:
            statement = f"{subject} is {sense.replace('_', ' ')} {limit:.10g}{shown}"
            found.append(
                Verdict(requirement.name, judge(value, limit, sense), statement, value, limit, sense, unit)
            )
    return found


def combined(verdicts: tuple[Verdict, ...]) -> str:
    """met only where all are met; not met where one is not; else undecided."""
    all_of_them = {verdict.verdict for verdict in verdicts}
    return "not met" if "not met" in all_of_them else "undecided" if "undecided" in all_of_them else "met"


def clipped(estimate: Figure) -> Figure:
    """A probability brought into [0, 1], which can only bring it nearer to the true one."""
    return Figure(min(max(estimate.value, 0.0), 1.0), estimate.error)
