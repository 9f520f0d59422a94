"""Differentiates expressions symbolically, and names the places where they are not smooth.

The result stays in the operators of `tree`; algebra beyond light folding is left to `symbolic`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from itertools import combinations

from outspread.formula.folding import depends, fold
from outspread.formula.linear import postorder
from outspread.formula.tree import (
    COMPARISONS,
    Apply,
    Name,
    Node,
    Number,
    add,
    multiply,
    names,
    occurrences,
    subtract,
    walk,
)

_ZERO, _ONE, _TWO = Number(0.0), Number(1.0), Number(2.0)
_PI = Number(math.pi, "pi")


def derivative(node: Node, name: str) -> Node:
    """d(node)/d(name), folded lightly.

    max, min, abs and if are differentiated branch by branch (abs through its sign), sign, floor and ceil
    have the derivative 0: right everywhere except where `nonsmooth` has a zero. The derivative of gamma
    holds the internal operator polygamma. Raises ValueError where `node` is a condition.
    """
    if isinstance(node, Apply) and (node.operator in COMPARISONS or node.operator in ("and", "or", "not")):
        raise ValueError("a condition has no derivative")
    found: dict[int, Node] = {}
    for part in postorder(node):
        if isinstance(part, Name):
            found[id(part)] = _ONE if part.name == name else _ZERO
        elif isinstance(part, Apply):
            inner = tuple(found[id(argument)] for argument in part.arguments)
            constant = all(_is_zero(slope) for slope in inner)
            found[id(part)] = _ZERO if constant else fold(_differentiate(part, inner))
        else:
            found[id(part)] = _ZERO
    return found[id(node)]


def _is_zero(node: Node) -> bool:
    return isinstance(node, Number) and node.value == 0.0


def _apply(operator: str, *arguments: Node) -> Node:
    return Apply(operator, arguments)


def _differentiate(node: Apply, slopes: tuple[Node, ...]) -> Node:
    """Derivative of one operator, given the derivatives of its arguments, of which one at least is not 0."""
    if node.operator in COMPARISONS or node.operator in ("and", "or", "not"):
        return _ZERO  # met only inside an `if`, where the condition decides and has no slope
    special = _SPECIAL.get(node.operator)
    if special is not None:
        return special(node, slopes)
    return multiply(_OUTER[node.operator](node, node.arguments[0]), slopes[0])


def _sum(node: Apply, slopes: Sequence[Node]) -> Node:
    return add(*(slope for slope in slopes if not _is_zero(slope)))


def _product(node: Apply, slopes: Sequence[Node]) -> Node:
    terms = []
    for index, slope in enumerate(slopes):
        if not _is_zero(slope):
            others = node.arguments[:index] + node.arguments[index + 1 :]
            terms.append(multiply(slope, *others))
    return add(*terms)


def _quotient(node: Apply, slopes: Sequence[Node]) -> Node:
    over, under = node.arguments
    first = _apply("divide", slopes[0], under)
    if _is_zero(slopes[1]):
        return first
    second = _apply("divide", multiply(over, slopes[1]), _apply("power", under, _TWO))
    return _apply("negate", second) if _is_zero(slopes[0]) else subtract(first, second)


def _power(node: Apply, slopes: Sequence[Node]) -> Node:
    base, exponent = node.arguments
    terms = []
    if not _is_zero(slopes[0]):
        lowered = _apply("power", base, fold(subtract(exponent, _ONE)))
        terms.append(multiply(exponent, lowered, slopes[0]))
    if not _is_zero(slopes[1]):
        terms.append(multiply(node, _apply("log", base), slopes[1]))
    return add(*terms)


def _chosen(node: Apply, slopes: Sequence[Node]) -> Node:
    return Apply("if", (node.arguments[0], slopes[1], slopes[2]))


def _extreme(operator: str, comparison: str) -> Callable[[Apply, Sequence[Node]], Node]:
    """max and min by halves, so that the depth grows with the logarithm of the number of arguments."""

    def of(arguments: Sequence[Node], slopes: Sequence[Node]) -> Node:
        if len(arguments) == 1 or all(slope == slopes[0] for slope in slopes[1:]):
            return slopes[0]
        middle = len(arguments) // 2
        left, right = arguments[:middle], arguments[middle:]
        condition = _apply(comparison, _joined(operator, left), _joined(operator, right))
        return _apply("if", condition, of(left, slopes[:middle]), of(right, slopes[middle:]))

    return lambda node, slopes: of(node.arguments, slopes)


def _joined(operator: str, arguments: Sequence[Node]) -> Node:
    return arguments[0] if len(arguments) == 1 else Apply(operator, tuple(arguments))


def _hypot(node: Apply, slopes: Sequence[Node]) -> Node:
    if len(node.arguments) == 1:
        return multiply(_apply("sign", node.arguments[0]), slopes[0])
    terms = [
        multiply(u, slope) for u, slope in zip(node.arguments, slopes, strict=True) if not _is_zero(slope)
    ]
    return _apply("divide", add(*terms), node)


def _atan2(node: Apply, slopes: Sequence[Node]) -> Node:
    y, x = node.arguments
    over = subtract(multiply(x, slopes[0]), multiply(y, slopes[1]))
    return _apply("divide", over, add(_square(x), _square(y)))


def _polygamma(node: Apply, slopes: Sequence[Node]) -> Node:
    order, u = node.arguments
    return multiply(_apply("polygamma", fold(add(order, _ONE)), u), slopes[1])


def _flat_steps(node: Apply, slopes: Sequence[Node]) -> Node:
    return _ZERO


_SPECIAL: dict[str, Callable[[Apply, Sequence[Node]], Node]] = {
    "add": _sum,
    "multiply": _product,
    "divide": _quotient,
    "power": _power,
    "negate": lambda node, slopes: _apply("negate", slopes[0]),
    "if": _chosen,
    "max": _extreme("max", "greater_equal"),
    "min": _extreme("min", "less_equal"),
    "hypot": _hypot,
    "atan2": _atan2,
    "polygamma": _polygamma,
    "sign": _flat_steps,
    "floor": _flat_steps,
    "ceil": _flat_steps,
    "exp": lambda node, slopes: multiply(node, slopes[0]),
    "sqrt": lambda node, slopes: _apply("divide", slopes[0], multiply(_TWO, node)),
    "log": lambda node, slopes: _apply("divide", slopes[0], node.arguments[0]),
    "log10": lambda node, slopes: _apply(
        "divide", slopes[0], multiply(Number(math.log(10.0)), node.arguments[0])
    ),
    "decibel": lambda node, slopes: _apply(
        "divide", multiply(Number(10.0 / math.log(10.0)), slopes[0]), node.arguments[0]
    ),
    "tan": lambda node, slopes: _apply("divide", slopes[0], _square(_apply("cos", node.arguments[0]))),
    "atan": lambda node, slopes: _apply("divide", slopes[0], add(_ONE, _square(node.arguments[0]))),
    "asin": lambda node, slopes: _apply("divide", slopes[0], _cathetus(node.arguments[0])),
    "acos": lambda node, slopes: _apply("negate", _apply("divide", slopes[0], _cathetus(node.arguments[0]))),
}


def _square(u: Node) -> Node:
    return _apply("power", u, _TWO)


def _cathetus(u: Node) -> Node:
    """sqrt(1 - u^2), written so that it keeps its digits near u = 1 and u = -1."""
    return _apply("sqrt", multiply(subtract(_ONE, u), add(_ONE, u)))


# Derivatives f'(u) of the functions that are left; the chain rule multiplies them by u'.
_OUTER: dict[str, Callable[[Node, Node], Node]] = {
    "abs": lambda node, u: _apply("sign", u),
    "sin": lambda node, u: _apply("cos", u),
    "cos": lambda node, u: _apply("negate", _apply("sin", u)),
    "sinh": lambda node, u: _apply("cosh", u),
    "cosh": lambda node, u: _apply("sinh", u),
    "tanh": lambda node, u: _apply("power", _apply("cosh", u), Number(-2.0)),
    "erf": lambda node, u: multiply(
        Number(2.0 / math.sqrt(math.pi)), _apply("exp", _apply("negate", _square(u)))
    ),
    "gamma": lambda node, u: multiply(node, _apply("polygamma", _ZERO, u)),
    "from_decibel": lambda node, u: multiply(Number(math.log(10.0) / 10.0), node),
}


def nonsmooth(node: Node, name: str) -> tuple[Node, ...]:
    """Sub-expressions in `name` at whose zeros `node` may have a kink, jump, pole or end of its domain.

    Each occurs once, folded, in the order of the formula. A zero need not be such a place (the parts are
    sufficient to look at, not necessary); outside these zeros `node` is smooth in `name`, where defined.
    """
    found: dict[Node, None] = {}
    for part in postorder(node):
        if isinstance(part, Apply):
            for candidate in _suspects(part):
                simple = fold(candidate)
                if depends(simple, name):
                    found.setdefault(simple)
    return tuple(found)


def one_piece(node: Node) -> bool:
    """Whether the formula is surely one analytic function all over its domain: it cannot be constant in an
    input on one part and vary on another. False where that is not plain to see."""
    for part in walk(node):
        if not isinstance(part, Apply):
            continue
        operator, arguments = part.operator, part.arguments
        if operator in _ENTIRE:
            continue
        if operator == "power":
            exponent = fold(arguments[1])
            if isinstance(exponent, Number) and exponent.value == int(exponent.value):
                continue
        elif operator not in ("sqrt", "log", "log10", "decibel"):
            return False
        # the domain ends where the operand vanishes, unless that is a square of something
        if not _multilinear(arguments[0]):
            return False
    return True


def _multilinear(node: Node) -> bool:
    """Whether the operand is of the first degree in each of its names."""
    plain = all(
        not isinstance(part, Apply) or part.operator in ("add", "multiply", "divide", "negate")
        for part in walk(node)
    )
    return plain and all(occurrences(node, name) == 1 for name in names(node))


_ENTIRE = frozenset(
    {"add", "multiply", "divide", "negate", "exp", "sin", "cos", "tan", "sinh", "cosh", "tanh", "atan"}
)


def _suspects(node: Apply) -> Sequence[Node]:
    operator, arguments = node.operator, node.arguments
    if operator in ("abs", "sign", "sqrt", "log", "log10", "decibel"):
        return arguments[:1]
    if operator in ("max", "min"):
        return [subtract(a, b) for a, b in combinations(arguments, 2)]
    if operator in COMPARISONS:
        return [subtract(arguments[0], arguments[1])]
    if operator == "divide":
        return [arguments[1]]
    if operator == "power":
        return _power_suspects(node)
    if operator == "atan2":
        return [arguments[0]]
    if operator == "hypot":
        return [node]
    if operator == "tan":
        return [_apply("cos", arguments[0])]
    if operator in ("floor", "ceil", "gamma"):
        return [_apply("sin", multiply(_PI, arguments[0]))]
    if operator == "polygamma":
        return [_apply("sin", multiply(_PI, arguments[1]))]
    if operator in ("asin", "acos"):
        return [subtract(_ONE, _square(arguments[0]))]
    return []


def _power_suspects(node: Apply) -> Sequence[Node]:
    base, exponent = node.arguments
    fixed = fold(exponent)
    if isinstance(fixed, Number) and fixed.value >= 0.0 and fixed.value == math.floor(fixed.value):
        return []
    return [base]
