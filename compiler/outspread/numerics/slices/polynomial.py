"""Comparisons that are quadratic (or linear) in the variable after clearing a denominator.

The formula left - right is written as P / Q with P and Q polynomials of degree at most 2 in the variable,
whose coefficients are formulas of the other names; {P/Q <= 0} follows from the signs of both.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
import numpy.typing as npt

from outspread.formula.calculus import derivative
from outspread.formula.evaluate import fold
from outspread.formula.tree import Apply, Name, Node, Number, add, multiply, names, subtract
from outspread.numerics import sets
from outspread.numerics.sets import Array, Sets

Coefficients = tuple[Node, ...]  # ascending powers
Environment = Mapping[str, Array]
Function = Callable[[Environment, int], Array]
ONE, ZERO = Number(1.0), Number(0.0)
HIGHEST = 2


def _plus(a: Coefficients, b: Coefficients) -> Coefficients:
    size = max(len(a), len(b))
    return tuple(fold(add(*(c[i] for c in (a, b) if i < len(c)))) for i in range(size))


def _times(a: Coefficients, b: Coefficients) -> Coefficients | None:
    if len(a) + len(b) - 2 > HIGHEST:
        return None
    terms: list[list[Node]] = [[] for _ in range(len(a) + len(b) - 1)]
    for i, left in enumerate(a):
        for j, right in enumerate(b):
            if left != ZERO and right != ZERO:
                terms[i + j].append(right if left == ONE else left if right == ONE else multiply(left, right))
    return tuple(fold(add(*group)) if group else ZERO for group in terms)


def rational(node: Node, name: str) -> tuple[Coefficients, Coefficients] | None:
    """(P, Q) with node = P / Q, both polynomials in `name` of degree at most 2; None where it is not."""
    if name not in names(node):
        return (node,), (ONE,)
    if isinstance(node, Name):
        return (ZERO, ONE), (ONE,)
    assert isinstance(node, Apply)
    if node.operator == "power":
        exponent = node.arguments[1]
        if not isinstance(exponent, Number) or exponent.value not in (1.0, 2.0, -1.0, -2.0):
            return None
        base = node.arguments[0]
        raised = rational(base if abs(exponent.value) == 1 else multiply_all((base, base)), name)
        return raised if raised is None or exponent.value > 0 else (raised[1], raised[0])
    if node.operator not in ("add", "multiply", "divide", "negate"):
        return None
    parts = [rational(argument, name) for argument in node.arguments]
    result = parts[0]
    for part in parts[1:]:
        if result is None or part is None:
            return None
        result = _combine(node.operator, result, part)
    if result is None:
        return None
    if node.operator == "negate":
        return tuple(fold(Apply("negate", (c,))) for c in result[0]), result[1]
    return result


def multiply_all(factors: tuple[Node, ...]) -> Node:
    return Apply("multiply", factors)


def _combine(
    operator: str, left: tuple[Coefficients, Coefficients], right: tuple[Coefficients, Coefficients]
) -> tuple[Coefficients, Coefficients] | None:
    (p, q), (r, s) = left, right
    if operator == "divide":
        r, s = s, r
    if operator in ("multiply", "divide"):
        top, bottom = _times(p, r), _times(q, s)
    elif q == s:
        top, bottom = _plus(p, r), q
    else:
        one, two, bottom = _times(p, s), _times(r, q), _times(q, s)
        top = None if one is None or two is None else _plus(one, two)
    return None if top is None or bottom is None else (top, bottom)


def quadratic_program(
    left: Node, right: Node, operator: str, name: str, parameter: str, function: Callable[[Node], Function]
) -> Callable[[Environment, int], Sets] | None:
    """Solves `left operator right` (right free of `name`); None where it is not quadratic over quadratic."""
    found = rational(subtract(left, right), name)
    if found is None:
        return None
    top, bottom = found
    below = operator in ("less", "less_equal")
    top_negative = _sign_program(top, parameter, function)
    if len(bottom) == 1:
        scale = function(bottom[0])

        def simple(environment: Environment, count: int) -> Sets:
            negative = top_negative(environment, count)
            if bottom != (ONE,):
                size = scale(environment, count)
                flipped = sets.where(size < 0, sets.complement(negative))
                negative = sets.stack([sets.where(size > 0, negative), flipped])
            return negative if below else sets.complement(negative)

        return simple
    bottom_negative = _sign_program(bottom, parameter, function)

    def quotient(environment: Environment, count: int) -> Sets:
        one, two = top_negative(environment, count), bottom_negative(environment, count)
        differ = sets.symmetric_difference(one, two)
        return differ if below else sets.complement(differ)

    return quotient


def _sign_program(
    coefficients: Coefficients, parameter: str, function: Callable[[Node], Function]
) -> Callable[[Environment, int], Sets]:
    """Where a polynomial of degree <= 2 is negative."""
    padded = (*coefficients, *([ZERO] * (3 - len(coefficients))))
    values = [function(c) for c in padded]
    moving = any(parameter in names(c) for c in padded)
    rates = [function(derivative(c, parameter)) for c in padded] if moving else []

    def solve(environment: Environment, count: int) -> Sets:
        c, b, a = (value(environment, count) for value in values)
        low, high, real = _roots(a, b, c)
        low_rate, high_rate = np.zeros((2, count))
        if moving:
            dc, db, da = (rate(environment, count) for rate in rates)
            low_rate = -((da * low + db) * low + dc) / (2 * a * low + b)
            high_rate = -((da * high + db) * high + dc) / (2 * a * high + b)
            low_rate, high_rate = (
                np.where(np.isfinite(x), rate, 0.0) for x, rate in ((low, low_rate), (high, high_rate))
            )
        between = Sets(low[None], high[None], low_rate[None], high_rate[None])
        between = sets.where(real & (low < high), between)
        outside = sets.complement(between)
        linear = a == 0
        up = np.where(linear, b > 0, a > 0)
        # linear with b > 0 is negative below its root: (-inf, root) is `between` with low = -inf
        inside = sets.where(up & (real | linear), between)
        beyond = sets.where(~up & ((a != 0) | (b != 0)), outside)
        constant = sets.where((a == 0) & (b == 0) & (c < 0), sets.everything(count))
        known = ~(np.isnan(a) | np.isnan(b) | np.isnan(c))
        return sets.where(known, sets.stack([inside, beyond, constant]))

    return solve


def _roots(a: Array, b: Array, c: Array) -> tuple[Array, Array, npt.NDArray[np.bool_]]:
    """Ordered real roots of a x^2 + b x + c; for a = 0 the lower (or upper) one is infinite.

    The discriminant is formed with a fused error term (Kahan 2004), so that it keeps its digits where
    b^2 and 4ac nearly cancel.
    """
    discriminant = _difference_of_products(b, b, 4 * a, c)
    real: npt.NDArray[np.bool_] = discriminant >= 0
    root = np.sqrt(np.where(real, discriminant, 0.0))
    q = -0.5 * (b + np.where(b >= 0, root, -root))
    one, two = q / a, np.where(q == 0, 0.0, c / q)
    one = np.where((a != 0) & (q == 0), 0.0, one)
    low, high = np.minimum(one, two), np.maximum(one, two)
    linear = a == 0
    single = -c / b
    low = np.where(linear, -np.inf, low)
    high = np.where(linear, single, high)
    real = np.where(linear, b != 0, real)
    return low, high, real


def _split(x: Array) -> tuple[Array, Array]:
    high = 134217729.0 * x
    high = high - (high - x)
    return high, x - high


def _product_error(x: Array, y: Array, product: Array) -> Array:
    """x*y - product exactly, by Dekker's splitting (1971)."""
    xh, xl = _split(x)
    yh, yl = _split(y)
    error = ((xh * yh - product) + xh * yl + xl * yh) + xl * yl
    return np.where(np.isfinite(error), error, 0.0)


def _difference_of_products(a: Array, b: Array, c: Array, d: Array) -> Array:
    first, second = a * b, c * d
    return np.asarray((first - second) + (_product_error(a, b, first) - _product_error(c, d, second)))
