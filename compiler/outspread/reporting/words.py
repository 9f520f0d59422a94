"""The sentences of a report: the answer in one line, names of routes and distributions, general cautions.

Plain text only; numbers come from `numbers`, layout from the templates.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from outspread.findings.results import Figure, OutputResults, Results, Verdict
from outspread.formula.text import to_text
from outspread.formula.tree import Node
from outspread.laws.registry import FAMILIES
from outspread.reading.model import Dependence, Distribution, Model
from outspread.reporting.numbers import brief, exact, unit_suffix
from outspread.reporting.tables import central

ROUTES = {
    "closed_form": "known closed form",
    "change_of_variables": "change of variables",
    "region_integral": "integral over a region",
    "jacobian": "inverse map and Jacobian",
    "enumeration": "enumeration of the points",
    "conditioning": "integration over an input that is given",
    "sampling": "randomised quasi-Monte Carlo sampling",
}
_COUNTS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")


def route(key: str) -> str:
    return ROUTES.get(key, key.replace("_", " "))


def count(number: int) -> str:
    return _COUNTS[number] if 0 <= number < len(_COUNTS) else str(number)


def listed(items: Sequence[str], last: str = "and") -> str:
    if len(items) < 2:
        return "".join(items)
    return f"{', '.join(items[:-1])} {last} {items[-1]}"


@dataclass(frozen=True)
class Answer:
    """`state`: met | not met | undecided | none | void; `text` for who reads one sentence only."""

    state: str
    text: str
    detail: str


def answer(results: Results) -> Answer:
    """What the report says, in one sentence, and the results behind it in a second."""
    detail = " ".join(filter(None, (_range_sentence(output) for output in results.outputs[:3])))
    failed = sorted({evidence.output for evidence in results.evidence if not evidence.agrees})
    if failed:
        text = f"Do not use this result: a second derivation of {listed(failed)} disagrees with the first."
        return Answer("void", text, "See Evidence.")
    verdicts = results.requirements
    if not verdicts:
        return Answer("none", "The model states no requirement; this report gives the distribution.", detail)
    by_state = {
        state: [verdict.name for verdict in verdicts if verdict.verdict == state]
        for state in ("met", "not met", "undecided")
    }
    if len(by_state["met"]) == len(verdicts):
        total = len(verdicts)
        text = {1: "The requirement is met.", 2: "Both requirements are met."}.get(
            total, f"All {count(total)} requirements are met."
        )
        return Answer("met", text, detail)
    parts = [
        f"{_share(len(names), len(verdicts))} {state}: {listed([f'“{name}”' for name in names])}"
        for state, names in by_state.items()
        if state != "met" and names
    ]
    text = "; ".join(parts) + "."
    return Answer("not met" if by_state["not met"] else "undecided", text[0].upper() + text[1:], detail)


def _share(number: int, total: int) -> str:
    if total == 1:
        return "the requirement is"
    return f"{count(number)} of {count(total)} requirements {'is' if number == 1 else 'are'}"


def _range_sentence(output: OutputResults) -> str:
    """The interval that stands for the whole, in words."""
    unit = unit_suffix(output.unit)
    interval = central(output)
    if interval is None:
        return ""
    probability, lower, upper = interval
    middle = output.median
    median = ""
    if isinstance(middle, Figure):
        median = f"; its median is {brief(middle.value, middle.error)}{unit}"
    ends = f"{brief(lower.value, lower.error)} and {brief(upper.value, upper.error)}{unit}"
    return f"With probability {exact(probability)}, {output.name} lies between {ends}{median}."


def verdict_reason(verdict: Verdict) -> str:
    """Why a requirement is undecided."""
    if verdict.verdict != "undecided":
        return ""
    if isinstance(verdict.value, Figure):
        return "the limit lies within the stated error of the figure"
    return verdict.value.because


def required(verdict: Verdict) -> str:
    sign = "at least" if verdict.sense == "at_least" else "at most"
    return f"{sign} {exact(verdict.limit)}{unit_suffix(verdict.unit)}"


def parameter(value: object) -> str:
    """A parameter's value as written, a formula of other inputs by its kind, a long column by its length."""
    if isinstance(value, bool) or value is None:
        return str(value)
    if isinstance(value, (int, float)):
        return exact(float(value))
    if isinstance(value, Node):
        return to_text(value)
    if isinstance(value, Mapping):
        return ", ".join(f"{parameter(key)}: {parameter(entry)}" for key, entry in value.items())
    if isinstance(value, (tuple, list)):
        if len(value) > 12:
            return f"{len(value)} values from {parameter(value[0])} to {parameter(value[-1])}"
        return ", ".join(parameter(entry) for entry in value)
    return str(value)


def family_title(key: str) -> str:
    return FAMILIES[key].title if key in FAMILIES else key.replace("_", " ")


def distribution(stated: Distribution) -> str:
    """The distribution as the model writes it, in words."""
    name = stated.family.replace("_", " ")
    if stated.components:
        weights = stated.parameters.get("weights", ())
        shares = [parameter(weight) for weight in weights] if isinstance(weights, (tuple, list)) else []
        shares += ["?"] * (len(stated.components) - len(shares))
        pairs = zip(shares, stated.components, strict=False)
        parts = [f"{share} of {distribution(part)}" for share, part in pairs]
        text = f"{name}: " + "; ".join(parts)
    else:
        words = [f"{key.replace('_', ' ')} {parameter(value)}" for key, value in stated.parameters.items()]
        text = f"{name}: {', '.join(words)}" if words else name
    return text + truncation(stated)


def truncation(stated: Distribution) -> str:
    if stated.lower is None and stated.upper is None:
        return ""
    if stated.lower is None and stated.upper is not None:
        return f"; cut above {exact(stated.upper)}"
    if stated.upper is None and stated.lower is not None:
        return f"; cut below {exact(stated.lower)}"
    ends = [exact(end) for end in (stated.lower, stated.upper) if end is not None]
    return f"; cut to {' … '.join(ends)}"


_MEASURES = {
    "pearson": "Pearson's correlation of the inputs themselves",
    "spearman": "Spearman's rank correlation",
    "kendall": "Kendall's rank correlation",
    "normal_scores": "correlation of the normal scores",
    "parameter": "the copula's own parameter",
}


def dependence(entry: Dependence) -> str:
    """One dependence in words; a matrix of three or more inputs is shown as a table beside."""
    names = listed(list(entry.inputs))
    if entry.kind == "joint_density":
        return f"{names} have the joint density stated in the model"
    if entry.kind == "joint_sample":
        return f"{names} are drawn together from a joint sample"
    family = {"gaussian": "Gaussian", "student_t": "Student t"}.get(entry.family, entry.family.capitalize())
    measure = _MEASURES.get(entry.measure, entry.measure)
    strength = f" {exact(entry.matrix[0][1])}" if len(entry.matrix) == 2 else ""
    further = [f"{key.replace('_', ' ')} {parameter(value)}" for key, value in entry.parameters.items()]
    tail = f"; {', '.join(further)}" if further else ""
    return f"{names}: {family} copula, {measure}{strength}{tail}"


GENERAL_CAUTIONS = (
    "The result holds for the model as written: its distributions, its dependence and its formula. That they "
    "describe the real thing is for the author to show; the column “Basis” says on what each input rests.",
    "The errors stated here cover the mathematics and the arithmetic. They do not cover how well the "
    "distributions of the inputs are known, which is usually the larger share.",
    "A small probability rests on the tails of the inputs, where data are few. Judge the basis of the tails "
    "before the result.",
    "The report is to be checked by a person qualified in the field before a decision rests on it.",
)
SAFETY_CAUTIONS = (
    "People may be hurt where this result is wrong. It does not replace the codes, standards and regulations "
    "that apply where it is used; where they ask for more, or for another method, they prevail.",
    "Have the model, its inputs and this report reviewed and approved by an engineer licensed or chartered "
    "for this kind of work. Nothing in this report is such an approval.",
)


def cautions(model: Model, results: Results) -> tuple[tuple[str, bool], ...]:
    """The cautions in order, each with whether it is a matter of safety."""
    found: list[tuple[str, bool]] = []
    if model.safety:
        found += [(text, True) for text in SAFETY_CAUTIONS]
    found += [(text, model.safety) for text in model.cautions]
    if any(verdict.verdict == "undecided" for verdict in results.requirements):
        undecided = "An undecided requirement is not a met one: the accuracy reached does not settle it."
        found.append((undecided, False))
    found += [(text, False) for text in GENERAL_CAUTIONS]
    return tuple(found)
