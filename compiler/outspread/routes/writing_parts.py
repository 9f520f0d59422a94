"""Writes out a derivation by parts: what each part is and how its law is derived, then the last step.

The mathematics of a single step is `writing`'s.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from outspread.formula.latex import estimated_width, to_latex
from outspread.formula.latex_lines import breakable
from outspread.planning.plan import PlanStep
from outspread.reading.model import Output
from outspread.routes.derived import Statement
from outspread.routes.readable import shortened
from outspread.routes.tree import TreeLaw
from outspread.routes.writing import PAGE, finished, numeric

_MOST_PARTS = 24  # written out one by one


def by_parts(
    output: Output, step: PlanStep, symbols: Mapping[str, str], found: TreeLaw
) -> tuple[Statement, ...]:
    """The statements of a derivation by parts: each part, then the last step on their laws."""
    given = step.route == "conditioning"
    top = step.substeps[0] if given else step
    steps = _steps_below(top)
    named = {**symbols}
    for number, part in enumerate(steps, 1):
        named[part.output] = f"S_{{{number}}}"
    named[top.output] = symbols[output.name]
    statements: list[Statement] = []
    if given:
        c = symbols[step.outer[0]]
        statements.append(Statement(
            f"For a given value of ${c}$ the formula falls into parts that share no other input. The steps "
            f"below hold for a given ${c}$."
        ))  # fmt: skip
    for number, part in enumerate(steps, 1):
        if number > _MOST_PARTS:
            more = len(steps) - _MOST_PARTS
            text = f"{more} further parts are derived in the same way; the plan lists them."
            statements.append(Statement(text))
            break
        statements.append(_part_statement(part, number, named))
    if given:
        y, c = symbols[output.name], symbols[step.outer[0]]
        statements.append(Statement(
            f"The law is the mean of the laws given ${c}$, by the trapezoidal rule in the normal score of "
            f"${c}$:",
            rf"F_{{{y}}}(§)=\int f_{{{c}}}({c})\,F_{{{y}\mid {c}}}(§\mid {c})\;\mathrm{{d}}{c}", "cdf",
        ))  # fmt: skip
        return finished(output, named, statements)
    last = replace(output, expression=step.expression or output.expression)
    assert found.last is not None
    (again, *rest), _ = numeric(last, step, found.laws, named, found.last)
    again = replace(again, text="In the parts whose laws are now known the result reads:")
    return (*finished(output, named, statements), again, *rest)


def _steps_below(step: PlanStep) -> list[PlanStep]:
    """All substeps, each after those that it needs."""
    found: list[PlanStep] = []
    for part in step.substeps:
        found += [*_steps_below(part), part]
    return found


def _part_statement(part: PlanStep, number: int, named: Mapping[str, str]) -> Statement:
    """What a part is and how its law is derived."""
    assert part.expression is not None
    symbol = named[part.output]
    shown = shortened(part.expression, part.expression)
    text = to_latex(shown, dict(named))
    if estimated_width(text) > PAGE - 10:
        text = r"\\ \quad ".join(breakable(shown, dict(named), PAGE - 10))
    latex = rf"{symbol}={text}"
    how = part.route.replace("_", " ")
    if part.route == "region_integral":
        x = named[part.outer[0]]
        how = f"region integral over ${x}$, exact in ${named[part.inner]}$"
    elif part.route == "closed_form":
        how = f"closed form ({dict(part.details)['closed form']})"
    return Statement(f"Part {number}: the law of ${symbol}$ by {how}.", latex, "note")
