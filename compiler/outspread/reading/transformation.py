"""Builds steps and outputs: reads each formula, orders them, resolves units and puts steps and constants in.

The expression of an output holds names of inputs only. Limits on its size hold after everything is put in,
so that a short model cannot grow into an expression that no later stage could walk.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from graphlib import CycleError, TopologicalSorter

from outspread.formula.builder import MAXIMUM_NODES
from outspread.formula.tree import Apply, Name, Node, names, substitute
from outspread.reading.context import Context
from outspread.reading.document import Path
from outspread.reading.model import Output, Step
from outspread.reading.words import quoted

DEEPEST_EXPRESSION = 200


@dataclass(frozen=True)
class _Formula:
    """One formula of the transformation: where it stands, and its unit as declared (None: as it follows)."""

    name: str
    path: Path  # of the formula's text
    key: Path  # of the step or output
    unit: str | None
    node: Node


def build_transformation(context: Context) -> tuple[tuple[Step, ...], tuple[Output, ...]]:
    """Steps and outputs in the model's order; where one has a fault it is left out, the fault noted."""
    steps, outputs = _written(context, "where"), _written(context, "outputs")
    known = [*context.inputs, *context.constants, *steps, *outputs]
    formulas: dict[str, _Formula] = {}
    for name, path in {**steps, **outputs}.items():
        inner = (*path, "formula") if isinstance(context.get(path), dict) else path
        node = context.parsed(inner, known, "inputs, constants, steps and outputs")
        if node is not None:
            unit = context.text((*path, "unit")) if isinstance(context.get(path), dict) else ""
            formulas[name] = _Formula(name, inner, path, unit or None, node)
    expressions = _expressions(context, formulas)
    return (
        tuple(_step(context, formulas[name]) for name in steps if name in expressions),
        tuple(_output(context, formulas[name], expressions[name]) for name in outputs if name in expressions),
    )


def _written(context: Context, group: str) -> dict[str, Path]:
    path: Path = ("transformation", group)
    return {name: (*path, name) for name in context.get(path) or ()}


def _step(context: Context, formula: _Formula) -> Step:
    unit = context.units[formula.name]
    description = context.text((*formula.key, "description"))
    text, place = context.written(formula.path), context.place(formula.key)
    return Step(formula.name, text, formula.node, unit, place, description)


def _output(context: Context, formula: _Formula, expression: Node) -> Output:
    if not names(expression):
        context.fault(
            formula.path,
            f"the output {quoted(formula.name)} contains no input, so that it has no distribution; "
            "use at least one input",
        )
    return Output(
        name=formula.name,
        text=context.written(formula.path),
        written=formula.node,
        expression=expression,
        unit=context.units[formula.name],
        symbol=context.text((*formula.key, "symbol")),
        description=context.text((*formula.key, "description")),
        route=context.text((*formula.key, "route")),
        place=context.place(formula.key),
    )


def _expressions(context: Context, formulas: Mapping[str, _Formula]) -> dict[str, Node]:
    """Each formula with steps, outputs and constants put in; those with a fault are left out."""
    order = _order(context, formulas)
    expressions: dict[str, Node] = {}
    measures: dict[str, tuple[int, int]] = {}
    for name in order:
        formula = formulas[name]
        used = [other for other in names(formula.node) if other not in context.inputs]
        # A name whose own formula or unit is at fault is not reported again by those who use it.
        if any(other not in expressions and other not in context.constants for other in used):
            continue
        if any(other not in context.units for other in names(formula.node)):
            continue
        found = context.resolved(formula.path, formula.node, formula.unit)
        if found is None:
            continue
        size, depth = _measure(found[0], measures)
        if size > MAXIMUM_NODES or depth > DEEPEST_EXPRESSION:
            what = f"{size:,} parts" if size > MAXIMUM_NODES else f"{depth} levels"
            most = f"{MAXIMUM_NODES:,} parts" if size > MAXIMUM_NODES else f"{DEEPEST_EXPRESSION} levels"
            context.fault(
                formula.path,
                f"with its steps put in, {quoted(name)} has {what}, and at most {most} are "
                "possible; use fewer steps within steps",
            )
            continue
        measures[name] = size, depth
        context.units[name] = found[1]
        expressions[name] = context.with_constants(substitute(found[0], expressions))
    return expressions


def _order(context: Context, formulas: Mapping[str, _Formula]) -> list[str]:
    """The names so that each comes after those it uses; nothing, with the cycle named, where there is one."""
    graph = {
        name: [other for other in names(formula.node) if other in formulas]
        for name, formula in formulas.items()
    }
    try:
        return list(TopologicalSorter(graph).static_order())
    except CycleError as error:
        report_cycle(context, error.args[1], {name: formula.path for name, formula in formulas.items()})
        return []


def report_cycle(context: Context, cycle: list[str], paths: Mapping[str, Path]) -> None:
    """Note a cycle, from the member that stands first in the file, each followed by one that it uses."""
    members = list(reversed(cycle[1:]))  # graphlib gives each before the one that uses it
    first = min(members, key=lambda name: context.place(paths[name]))
    start = members.index(first)
    members = [*members[start:], *members[:start]]
    if len(members) == 1:
        message = f"{quoted(first)} is defined by itself; define it without its own name"
    else:
        message = (
            f"{' uses '.join(quoted(name) for name in [*members, first])}: a cycle; define one of "
            "them without the others"
        )
    context.fault(paths[first], message)


def _measure(node: Node, measures: Mapping[str, tuple[int, int]]) -> tuple[int, int]:
    """Number of nodes and depth of the tree once the measured names are put in."""
    if isinstance(node, Name):
        return measures.get(node.name, (1, 1))
    if not isinstance(node, Apply):
        return 1, 1
    parts = [_measure(argument, measures) for argument in node.arguments]
    return 1 + sum(size for size, _ in parts), 1 + max(depth for _, depth in parts)
