"""Evaluates expressions with 60 digits where double precision is not enough; slow, for single points.

pi is taken as π; every other number is the double of the formula.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from outspread.formula.linear import postorder
from outspread.formula.tree import Apply, Name, Node, Number

DIGITS = 60

Precise = Any  # an mpmath number; mpmath carries no types


def evaluate_precisely(nodes: Sequence[Node], values: Mapping[str, Precise]) -> list[Precise | None]:
    """The value of each node (True or False for a condition); None where it is not a finite real number.

    To be called within `mpmath.workdps(DIGITS)`.
    """
    return [_value(node, values) for node in nodes]


def _value(node: Node, values: Mapping[str, Precise]) -> Precise | None:
    import mpmath

    found: dict[int, Precise] = {}
    for part in postorder(node):
        if isinstance(part, Number):
            found[id(part)] = mpmath.pi() if part.text == "pi" else mpmath.mpf(part.value)
        elif isinstance(part, Name):
            found[id(part)] = values[part.name]
        elif isinstance(part, Apply):
            arguments = [found[id(argument)] for argument in part.arguments]
            found[id(part)] = _applied(part.operator, arguments)
    return found[id(node)]


def _applied(operator: str, arguments: list[Precise | None]) -> Precise | None:
    import mpmath

    if operator == "if":
        return None if arguments[0] is None else arguments[1] if arguments[0] else arguments[2]
    if any(argument is None for argument in arguments):
        return None
    try:
        value = _operation(operator)(*arguments)
    except (ZeroDivisionError, ValueError):
        return None
    if isinstance(value, bool):
        return value
    if isinstance(value, mpmath.mpc) or not mpmath.isfinite(value):
        return None
    return value


def _operation(operator: str) -> Callable[..., Precise]:
    import mpmath

    if operator in _PLAIN:
        return _PLAIN[operator]
    if operator in _SAME_NAME:
        named: Callable[..., Precise] = getattr(mpmath, operator)
        return named
    special: dict[str, Callable[..., Precise]] = {
        "abs": mpmath.fabs,
        "hypot": lambda *v: mpmath.sqrt(mpmath.fsum(x * x for x in v)),
        "log10": lambda x: mpmath.log(x) / mpmath.log(10),
        "decibel": lambda x: 10 * mpmath.log(x) / mpmath.log(10),
        "from_decibel": lambda x: mpmath.mpf(10) ** (x / 10),
        "polygamma": lambda n, x: mpmath.polygamma(int(n), x),
    }
    return special[operator]


def _product(*factors: Precise) -> Precise:
    return math.prod(factors[1:], start=factors[0])


_SAME_NAME = frozenset({
    "sqrt", "exp", "log", "sign", "sin", "cos", "tan", "asin", "acos", "atan", "atan2", "sinh", "cosh",
    "tanh", "erf", "gamma", "floor", "ceil",
})  # fmt: skip
_PLAIN: dict[str, Callable[..., Precise]] = {
    "add": lambda *v: sum(v[1:], v[0]),
    "multiply": _product,
    "divide": lambda a, b: a / b,
    "power": lambda a, b: a ** (int(b) if b == int(b) else b),
    "negate": lambda a: -a,
    "min": min,
    "max": max,
    "less": lambda a, b: bool(a < b),
    "less_equal": lambda a, b: bool(a <= b),
    "greater": lambda a, b: bool(a > b),
    "greater_equal": lambda a, b: bool(a >= b),
    "equal": lambda a, b: bool(a == b),
    "not_equal": lambda a, b: bool(a != b),
    "and": lambda *v: all(v),
    "or": lambda *v: any(v),
    "not": lambda a: not a,
}
