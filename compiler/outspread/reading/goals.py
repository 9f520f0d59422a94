"""Builds what is asked of the outputs: requirements, readings and accuracy. It judges none of them."""

from __future__ import annotations

import re
from collections.abc import Mapping

from outspread.errors import FormulaError
from outspread.formula.tree import COMPARISONS, Apply, Node, Number, names, walk
from outspread.reading.context import Context
from outspread.reading.document import Path
from outspread.reading.model import Accuracy, Readings, Requirement
from outspread.reading.words import number, quoted, suggestion

_TIME = re.compile(r"\s*([0-9]*\.?[0-9]+(?:[eE][-+]?[0-9]+)?)\s*([a-z]*)\s*\Z")
_SECONDS = {"s": 1.0, "min": 60.0, "h": 3600.0}


def build_requirements(context: Context, outputs: tuple[str, ...]) -> tuple[Requirement, ...]:
    found: list[Requirement] = []
    names: dict[str, int] = {}
    for index, written in enumerate(context.get(("requirements",)) or ()):
        path: Path = ("requirements", index)
        name = context.text((*path, "name"))
        if name in names:
            message = (
                f"the requirement {quoted(name)} occurs twice, first as entry {names[name] + 1}; "
                "give each its own name"
            )
            context.fault((*path, "name"), message)
        names.setdefault(name, index)
        entry = (
            _probability(context, path, name, outputs)
            if "event" in written
            else _quantile(context, path, name, outputs)
        )
        if entry is not None:
            found.append(entry)
    return tuple(found)


def _bounds(context: Context, path: Path) -> tuple[float | None, float | None] | None:
    """at_least and at_most under `path`; None with the fault noted where they contradict each other."""
    lower, upper = context.get((*path, "at_least")), context.get((*path, "at_most"))
    if lower is not None and upper is not None and lower > upper:
        message = (
            f"`at_least` is {number(lower)} and `at_most` is {number(upper)}: nothing meets both; "
            "exchange them"
        )
        context.fault((*path, "at_most"), message)
        return None
    return None if lower is None else float(lower), None if upper is None else float(upper)


def _probability(context: Context, path: Path, name: str, outputs: tuple[str, ...]) -> Requirement | None:
    event = _event(context, (*path, "event"), outputs)
    bounds = _bounds(context, (*path, "probability"))
    if event is None or bounds is None:
        return None
    text = context.text((*path, "event"))
    return Requirement(
        name, "probability", text, event, at_least=bounds[0], at_most=bounds[1], place=context.place(path)
    )


def _quantile(context: Context, path: Path, name: str, outputs: tuple[str, ...]) -> Requirement | None:
    inner = (*path, "quantile")
    output = context.get((*inner, "output"))
    bounds = _bounds(context, inner)
    if output not in outputs:
        context.fault(
            (*inner, "output"), f"{quoted(output)} is no output; {suggestion(output, outputs, 'outputs')}"
        )
        return None
    if bounds is None:
        return None
    at = float(context.get((*inner, "at")))
    return Requirement(
        name,
        "quantile",
        output=output,
        at=at,
        at_least=bounds[0],
        at_most=bounds[1],
        place=context.place(path),
    )


def _event(context: Context, path: Path, outputs: tuple[str, ...]) -> Node | None:
    """The event with numbers in the outputs' units and factors where outputs of two units are compared."""
    node = context.parsed(path, outputs, "outputs", event=True)
    if node is None:
        return None
    units = {name: context.units[name] for name in outputs if name in context.units}
    if len(units) < len(outputs):
        return None  # an output's unit is at fault, and that is reported
    for part in walk(node):
        compares = isinstance(part, Apply) and part.operator in COMPARISONS
        if compares and _ambiguous(context, path, part, units):
            return None
    found = context.resolved(path, node, None, units=units, numbers=True)
    return None if found is None else found[0]


def _ambiguous(context: Context, path: Path, comparison: Node, units: Mapping[str, str]) -> bool:
    """Whether a number in the comparison could be in the units of two outputs; if so, the fault is noted."""
    from outspread.formula.units import resolve_units, same_dimension

    used = names(comparison)
    text = context.written(path)
    pairs = [
        (first, second)
        for first in used
        for second in used
        if units[first] != units[second] and same_dimension(units[first], units[second])
    ]
    if not pairs or not any(isinstance(part, Number) for part in walk(comparison)):
        return False
    try:
        resolve_units(comparison, units, None, text)  # numbers are factors only
    except FormulaError:
        first, second = pairs[0]
        message = (
            f"{quoted(first)} is in {units[first]} and {quoted(second)} in {units[second]}, so that the "
            "number could be in either; give both outputs one unit, or compare them in an output of their own"
        )
        span = comparison.span if isinstance(comparison, Apply) else (0, len(text))
        context.formula_fault(path, FormulaError(message, text, *span))
        return True
    return False


def build_readings(context: Context, outputs: tuple[str, ...]) -> Readings:
    default = Readings()
    written = context.get(("readings",)) or {}
    events: list[tuple[str, Node]] = []
    for index in range(len(written.get("probabilities", ()))):
        path = ("readings", "probabilities", index)
        event = _event(context, path, outputs)
        if event is not None:
            events.append((context.text(path), event))
    values: dict[str, tuple[float, ...]] = {}
    for name, points in written.get("values", {}).items():
        if name in outputs:
            values[name] = tuple(float(point) for point in points)
        else:
            context.key_fault(
                ("readings", "values", name),
                f"{quoted(name)} is no output; {suggestion(name, outputs, 'outputs')}",
            )
    for key in ("coverage", "quantiles"):
        for index, point in enumerate(written.get(key, ())):
            if point in written[key][:index]:
                context.fault(
                    ("readings", key, index), f"{quoted(key)} has {number(point)} twice; remove one"
                )
    return Readings(
        coverage=tuple(float(value) for value in written.get("coverage", default.coverage)),
        quantiles=tuple(float(value) for value in written.get("quantiles", default.quantiles)),
        probabilities=tuple(events),
        values=values,
        headline=max(map(float, written.get("coverage", ())), default=default.headline),
    )


def build_accuracy(context: Context) -> Accuracy:
    default = Accuracy()
    written = context.get(("accuracy",)) or {}
    return Accuracy(
        digits=int(written.get("digits", default.digits)),
        seed=int(written.get("seed", default.seed)),
        time_limit=_time_limit(context) if "time_limit" in written else default.time_limit,
    )


def _time_limit(context: Context) -> float | None:
    path = ("accuracy", "time_limit")
    match = _TIME.match(context.text(path))
    unit = (match[2] or "s") if match else ""
    seconds = float(match[1]) * _SECONDS.get(unit, 0.0) if match else 0.0
    if not 0 < seconds < 1e9:
        context.fault(
            path,
            f"`time_limit` is {quoted(context.text(path))}; write a time such as `60 s`, `5 min` or `1 h`",
        )
        return None
    return seconds
