"""Folds constants and normalises an expression lightly (x*1, x+0, --x), keeping its structure otherwise.

It does not expand, factor or reorder terms, and it leaves algebra to `symbolic`.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from outspread.formula.constants import NoValue, constant_truth, constant_value
from outspread.formula.linear import postorder
from outspread.formula.tree import COMPARISONS, Apply, Name, Node, Number


def fold(node: Node) -> Node:
    """The same expression with constant parts as numbers and neutral elements removed.

    Products with a literal 0 become 0: right wherever the other factors are finite. Constant parts without
    a finite value are left as they are.
    """
    folded: dict[int, Node] = {}
    result = node
    for part in postorder(node):
        result = part
        if isinstance(part, Apply):
            arguments = tuple(folded[id(argument)] for argument in part.arguments)
            same = all(new is old for new, old in zip(arguments, part.arguments, strict=True))
            result = _simplify(part if same else Apply(part.operator, arguments, part.span))
        folded[id(part)] = result
    return result


def truth(condition: Node) -> bool | None:
    """Whether a condition of plain numbers holds; None where it depends on names."""
    if not isinstance(condition, Apply):
        return None
    if condition.operator in COMPARISONS:
        left, right = condition.arguments
        if isinstance(left, Number) and isinstance(right, Number):
            return constant_truth(condition.operator, left.value, right.value)
        return None
    parts = [truth(argument) for argument in condition.arguments]
    if condition.operator == "not":
        return None if parts[0] is None else not parts[0]
    if condition.operator == "and":
        return False if False in parts else None if None in parts else True
    if condition.operator == "or":
        return True if True in parts else None if None in parts else False
    return None


def _simplify(node: Apply) -> Node:
    """`node`, whose arguments are folded already, simplified at its top."""
    if all(isinstance(argument, Number) for argument in node.arguments):
        value = _number(node.operator, node.arguments)
        if value is not None:
            return Number(value, "", node.span)
    rule = _RULES.get(node.operator)
    return node if rule is None else rule(node)


def _number(operator: str, arguments: Sequence[Node]) -> float | None:
    try:
        return constant_value(operator, [part.value for part in arguments if isinstance(part, Number)])
    except NoValue:
        return None


def _is(node: Node, value: float) -> bool:
    return isinstance(node, Number) and node.value == value


def _same(node: Apply, arguments: Sequence[Node]) -> Node:
    """`node` itself where its arguments did not change, so that shared parts stay shared."""
    unchanged = len(arguments) == len(node.arguments) and all(
        new is old for new, old in zip(arguments, node.arguments, strict=True)
    )
    return node if unchanged else Apply(node.operator, tuple(arguments), node.span)


def _flat(node: Apply) -> list[Node]:
    flat: list[Node] = []
    for argument in node.arguments:
        if isinstance(argument, Apply) and argument.operator == node.operator:
            flat.extend(argument.arguments)
        else:
            flat.append(argument)
    return flat


def _combined(operator: str, parts: list[Node]) -> tuple[list[Node], Number | None]:
    """The parts that are not numbers, and the one number that the rest makes (None: none, or overflow)."""
    numbers = [part for part in parts if isinstance(part, Number)]
    others = [part for part in parts if not isinstance(part, Number)]
    if len(numbers) == 1:
        return others, numbers[0]
    if not numbers:
        return others, None
    value = _number(operator, numbers)
    return (parts, None) if value is None else (others, Number(value))


def _add(node: Apply) -> Node:
    parts, number = _combined("add", _flat(node))
    if number is not None and number.value != 0.0:
        first = next(i for i, part in enumerate(_flat(node)) if isinstance(part, Number))
        parts.insert(first, number)  # the number stays where the first one stood
    if not parts:
        return Number(0.0, "", node.span)
    return parts[0] if len(parts) == 1 else _same(node, parts)


def _multiply(node: Apply) -> Node:
    parts, number = _combined("multiply", _flat(node))
    if number is not None and number.value == 0.0:
        return Number(0.0, "", node.span)
    negative = number is not None and number.value < 0.0
    bare: list[Node] = []
    for part in parts:
        if isinstance(part, Apply) and part.operator == "negate":
            negative = not negative
            bare.append(part.arguments[0])
        else:
            bare.append(part)
    if number is not None and abs(number.value) != 1.0:
        size = abs(number.value)
        factor = number if number.value > 0 else Number(size, number.text.lstrip("-"), number.span)
        if negative:
            factor = Number(-size, "", number.span)
            negative = False
        bare.insert(0, factor)
    result = bare[0] if len(bare) == 1 else _same(node, bare)
    return Apply("negate", (result,), node.span) if negative else result


def _negate(node: Apply) -> Node:
    (inner,) = node.arguments
    if isinstance(inner, Apply):
        if inner.operator == "negate":
            return inner.arguments[0]
        if inner.operator == "multiply" and isinstance(inner.arguments[0], Number):
            factor = Number(-inner.arguments[0].value, "", inner.arguments[0].span)
            return _simplify(Apply("multiply", (factor, *inner.arguments[1:]), node.span))
    return node


def _divide(node: Apply) -> Node:
    over, under = node.arguments
    if _is(under, 1.0):
        return over
    if _is(under, -1.0):
        return _simplify(Apply("negate", (over,), node.span))
    if _is(over, 0.0) and not isinstance(under, Number):
        return Number(0.0, "", node.span)
    return node


def _power(node: Apply) -> Node:
    base, exponent = node.arguments
    if _is(exponent, 1.0):
        return base
    if _is(exponent, 0.0) or _is(base, 1.0):
        return Number(1.0, "", node.span)
    return node


def _if(node: Apply) -> Node:
    condition, first, second = node.arguments
    decided = truth(condition)
    if decided is not None:
        return first if decided else second
    return first if first is second or first == second else node


def _extreme(node: Apply) -> Node:
    parts = list(dict.fromkeys(_flat(node)))
    numbers = [part for part in parts if isinstance(part, Number)]
    if len(numbers) > 1:
        choose = min if node.operator == "min" else max
        kept = choose(numbers, key=lambda part: part.value)
        parts = [part for part in parts if not isinstance(part, Number) or part is kept]
    return parts[0] if len(parts) == 1 else _same(node, parts)


def _hypot(node: Apply) -> Node:
    if len(node.arguments) == 1:
        return _simplify(Apply("abs", node.arguments, node.span))
    return node


def _abs(node: Apply) -> Node:
    (inner,) = node.arguments
    if isinstance(inner, Apply) and inner.operator in ("negate", "abs"):
        return Apply("abs", inner.arguments, node.span)
    return node


_RULES: dict[str, Callable[[Apply], Node]] = {
    "add": _add,
    "multiply": _multiply,
    "negate": _negate,
    "divide": _divide,
    "power": _power,
    "if": _if,
    "min": _extreme,
    "max": _extreme,
    "hypot": _hypot,
    "abs": _abs,
}


def depends(node: Node, name: str) -> bool:
    """Whether `name` occurs in `node`; walks shared parts once."""
    return any(isinstance(part, Name) and part.name == name for part in postorder(node))
