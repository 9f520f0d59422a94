"""Reads an equation as a polynomial in one sub-expression and solves degree 1, degree 2 and their powers.

It serves `elimination` where an unknown occurs more than once; higher degrees are left to other methods.
"""

from __future__ import annotations

from outspread.formula.tree import Apply, Node
from outspread.routes.jacobian.construct import (
    ONE,
    ZERO,
    add,
    contains,
    divide,
    is_integer,
    known_number,
    multiply,
    negate,
    number,
    power,
    square_root,
    subtract,
)

LARGEST_DEGREE = 8
_RATIONAL = frozenset({"add", "negate", "multiply", "divide"})

Polynomial = list[Node]  # coefficients, lowest power first
Root = tuple[Node, tuple[Node, ...]]  # a value and the conditions under which it is a root


def generator(node: Node, name: str) -> Node | None:
    """The one sub-expression through which `node` depends on `name` rationally; None if there are more."""
    leaves: list[Node] = []
    _collect_leaves(node, name, leaves)
    return leaves[0] if leaves and all(leaf == leaves[0] for leaf in leaves) else None


def _collect_leaves(node: Node, name: str, leaves: list[Node]) -> None:
    if not contains(node, (name,)):
        return
    if isinstance(node, Apply) and node.operator in _RATIONAL:
        for argument in node.arguments:
            _collect_leaves(argument, name, leaves)
    elif isinstance(node, Apply) and node.operator == "power" and _whole(node.arguments[1]) is not None:
        _collect_leaves(node.arguments[0], name, leaves)
    else:
        leaves.append(node)


def roots(left: Node, right: Node, atom: Node, name: str) -> list[Root] | None:
    """Values of `atom` with left = right, both rational in it; None beyond degree 2 in a power of it."""
    fraction = _as_fraction(subtract(left, right), atom, name)
    if fraction is None:
        return None
    coefficients = list(fraction[0])
    while coefficients and coefficients[-1] == ZERO:
        coefficients.pop()
    step = next((i for i, part in enumerate(coefficients[1:], 1) if part != ZERO), 0)
    if step == 0:
        return None
    used = [i for i, part in enumerate(coefficients) if part != ZERO]
    if coefficients[0] == ZERO:  # 0 is a root of probability zero: divide it out
        lowest = used[0]
        coefficients, used = coefficients[lowest:], [i - lowest for i in used]
        if len(used) == 1:
            return None
        step = used[1]
    if any(i % step for i in used) or used[-1] > 2 * step:
        return None
    values = _low_roots(coefficients[0], *coefficients[step::step])
    return [root for value in values for root in _power_roots(value, step)]


def _low_roots(constant: Node, linear: Node, square: Node | None = None) -> list[Root]:
    if square is None:
        return [(negate(divide(constant, linear)), ())]
    if linear == ZERO:
        inside = negate(divide(constant, square))
        return [(square_root(inside), ()), (negate(square_root(inside)), ())]
    discriminant = subtract(power(linear, 2.0), multiply(number(4.0), square, constant))
    root, twice = square_root(discriminant), multiply(number(2.0), square)
    real = (Apply("greater_equal", (discriminant, ZERO)),)
    return [
        (divide(add(negate(linear), root), twice), real),
        (divide(subtract(negate(linear), root), twice), real),
    ]


def _power_roots(root: Root, step: int) -> list[Root]:
    """Solutions of atom^step = value."""
    value, conditions = root
    if step == 1:
        return [root]
    if step % 2:
        size = power(Apply("abs", (value,)), 1.0 / step)
        return [(multiply(Apply("sign", (value,)), size), conditions)]
    size = power(value, 1.0 / step)
    conditions = (*conditions, Apply("greater_equal", (value, ZERO)))
    return [(size, conditions), (negate(size), conditions)]


def _whole(node: Node) -> int | None:
    value = known_number(node)
    if value is None or not is_integer(value) or abs(value) > LARGEST_DEGREE:
        return None
    return int(value)


def _as_fraction(node: Node, atom: Node, name: str) -> tuple[Polynomial, Polynomial] | None:
    """(numerator, denominator) of `node` as polynomials in `atom`."""
    if node == atom:
        return [ZERO, ONE], [ONE]
    if not contains(node, (name,)):
        return [node], [ONE]
    if not isinstance(node, Apply):
        return None
    if node.operator == "power":
        exponent = _whole(node.arguments[1])
        base = _as_fraction(node.arguments[0], atom, name)
        if exponent is None or base is None:
            return None
        top, bottom = base if exponent >= 0 else (base[1], base[0])
        return _checked(_to_power(top, abs(exponent)), _to_power(bottom, abs(exponent)))
    if node.operator not in _RATIONAL:
        return None
    parts = [_as_fraction(argument, atom, name) for argument in node.arguments]
    known = [part for part in parts if part is not None]
    if len(known) < len(parts):
        return None
    return _combined(node.operator, known)


def _combined(
    operator: str, parts: list[tuple[Polynomial, Polynomial]]
) -> tuple[Polynomial, Polynomial] | None:
    top, bottom = parts[0]
    if operator == "negate":
        return [negate(part) for part in top], bottom
    for other_top, other_bottom in parts[1:]:
        if operator == "add" and bottom == other_bottom:
            top = _sum(top, other_top)
        elif operator == "add":
            top = _sum(_product(top, other_bottom), _product(other_top, bottom))
            bottom = _product(bottom, other_bottom)
        elif operator == "multiply":
            top, bottom = _product(top, other_top), _product(bottom, other_bottom)
        else:
            top, bottom = _product(top, other_bottom), _product(bottom, other_top)
    return _checked(top, bottom)


def _checked(top: Polynomial, bottom: Polynomial) -> tuple[Polynomial, Polynomial] | None:
    return (top, bottom) if max(len(top), len(bottom)) <= 2 * LARGEST_DEGREE + 1 else None


def _sum(left: Polynomial, right: Polynomial) -> Polynomial:
    length = max(len(left), len(right))
    padded = [[*part, *[ZERO] * (length - len(part))] for part in (left, right)]
    return [add(a, b) for a, b in zip(*padded, strict=True)]


def _product(left: Polynomial, right: Polynomial) -> Polynomial:
    result: Polynomial = [ZERO] * (len(left) + len(right) - 1)
    for i, a in enumerate(left):
        for j, b in enumerate(right):
            result[i + j] = add(result[i + j], multiply(a, b))
    return result


def _to_power(base: Polynomial, exponent: int) -> Polynomial:
    result: Polynomial = [ONE]
    for _ in range(exponent):
        result = _product(result, base)
    return result
