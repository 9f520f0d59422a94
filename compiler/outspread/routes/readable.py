"""Rewrites inverses and their derivatives for reading: equal terms collected, quotients left as quotients.

The value stays the same up to rounding; typesetting is left to `formula.latex`, the inverse itself to
`jacobian.branches`.
"""

from __future__ import annotations

import math
from collections.abc import Iterable

from outspread.formula.tree import Apply, Node, Number, multiply, rebuild, walk
from outspread.routes.jacobian.construct import add, is_integer, tidy

_SHORT = 6  # significant digits of a number that is written out
_ROUNDING = 4e-16


def readable(node: Node, formula: Node) -> Node:
    """`node` tidied for a reader of `formula`: v + x + v - x as 2 v, -(v - 0.78 R) as 0.78 R - v, and
    24.390243902439025 as 1 / 0.041 where the formula has the factor 0.041."""
    return shortened(_positive_first(tidy(node)), formula)


def shortened(node: Node, formula: Node) -> Node:
    """Computed numbers written as quotients by a number of the formula where that is short, else to nine
    digits; numbers as typed stay."""
    divisors = tuple(
        dict.fromkeys(abs(part.value) for part in walk(formula) if isinstance(part, Number) and part.value)
    )

    def change(part: Node) -> Node | None:
        if isinstance(part, Number) and _is_long(part):
            found = _quotient(part.value, divisors)
            return _rounded(part) if found is None else _fraction(found, ())
        if isinstance(part, Apply) and part.operator == "multiply":
            first, *rest = part.arguments
            if isinstance(first, Number) and _is_long(first):
                found = _quotient(first.value, divisors)
                if found is not None:
                    return _fraction(found, tuple(rebuild(factor, change) for factor in rest))
        return None

    return rebuild(node, change)


def _is_long(part: Number) -> bool:
    return not part.text and math.isfinite(part.value) and len(repr(part.value)) > 11


def _rounded(part: Number) -> Number:
    return Number(part.value, f"{part.value:.9g}")


def _quotient(value: float, divisors: Iterable[float]) -> tuple[float, float] | None:
    """(a, b) with value = a / b to the last digit, a short and b a number of the formula."""
    for divisor in divisors:
        over = value * divisor
        short = float(f"{over:.{_SHORT}g}")
        if math.isclose(over, short, rel_tol=_ROUNDING) and not is_integer(divisor):
            return short, divisor
    return None


def _fraction(quotient: tuple[float, float], factors: tuple[Node, ...]) -> Node:
    over, under = quotient
    size = abs(over)
    above = multiply(*factors) if factors and size == 1.0 else multiply(Number(size), *factors)
    found = Apply("divide", (above, Number(under)))
    return Apply("negate", (found,)) if over < 0.0 else found


def _positive_first(node: Node) -> Node:
    """-(a - b) as b - a."""
    if isinstance(node, Apply) and node.operator == "negate":
        inner = node.arguments[0]
        if isinstance(inner, Apply) and inner.operator == "add":
            return add(node)
    return node
