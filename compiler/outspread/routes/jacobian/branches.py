"""Solves `expression = target` for a name that occurs once, one operator at a time, with every branch.

`solve_for` is meant for any derivation that writes an inverse out. Each branch carries the conditions
under which it is a solution and the integer parameters of periodic functions. Systems of equations are
left to `elimination`, and the choice of branch at a point to `smooth`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field

from outspread.formula.tree import Apply, Name, Node, names, occurrences
from outspread.routes.jacobian.construct import (
    ONE,
    PI,
    ZERO,
    add,
    apply,
    contains,
    divide,
    is_integer,
    known_number,
    multiply,
    negate,
    number,
    power,
    replace,
    square_root,
    subtract,
    tidy,
)


@dataclass(frozen=True)
class IntegerParameter:
    """`name` runs over the integers; `inner` is the expression whose value grows by `period` with it.

    `rounds_up` is meant for the whole part of `inner` itself: whether that is its ceil or its floor.
    """

    name: str
    inner: Node
    period: float
    rounds_up: bool = False


@dataclass(frozen=True)
class Branch:
    """One solution: `value` in the remaining names, the target's names and the parameters.

    `conditions` are comparisons that must all hold; where `value` is not a real number there is no solution
    either, so a condition that only says so (the argument of a square root) may be among them.
    """

    value: Node
    conditions: tuple[Node, ...] = ()
    parameters: tuple[IntegerParameter, ...] = field(default=())


#: what one operator undone gives: the value of the argument, its conditions, and the period if periodic
Undone = tuple[Node, tuple[Node, ...], float]


def solve_for(expression: Node, name: str, target: Node) -> list[Node] | None:
    """All solutions of `expression = target` for `name`, or None where this method has none.

    The name must occur exactly once; the solutions are in the remaining names and those of the target.
    Infinitely many solutions (sin, cos, tan) take an integer parameter: the name `k` stands in them for any
    integer (`k1`, `k2`, ... where `k` is taken). A solution holds only where it is real, where it
    satisfies the equation and, for even powers and the like, under the conditions that `branches_for` gives.
    """
    found = branches_for(expression, name, target)
    return None if found is None else [branch.value for branch in found]


def branches_for(expression: Node, name: str, target: Node) -> tuple[Branch, ...] | None:
    """As `solve_for`, with the conditions and the integer parameters of every branch."""
    if occurrences(expression, name) != 1:
        return None
    taken = {*names(expression), *names(target)}
    unfinished: list[tuple[Node, Branch]] = [(expression, Branch(target))]
    finished: list[Branch] = []
    while unfinished:
        node, branch = unfinished.pop(0)
        if node == Name(name):
            finished.append(branch)
            continue
        if not isinstance(node, Apply):
            return None
        position = next(i for i, part in enumerate(node.arguments) if contains(part, (name,)))
        undone = undo(node, position, branch.value)
        if undone is None:
            return None
        inner = node.arguments[position]
        unfinished.extend((inner, extend(branch, inner, one, taken)) for one in undone)
    return tuple(finished)


def extend(branch: Branch, inner: Node, undone: Undone, taken: Iterable[str]) -> Branch:
    """The branch after one more operator was undone, its integer parameter named."""
    value, conditions, period = undone
    parameters = branch.parameters
    if period:
        used = {*taken, *(parameter.name for parameter in parameters)}
        fresh = fresh_name("k", used)
        value = replace(value, {"k": Name(fresh)}) if fresh != "k" else value
        parameters = (*parameters, IntegerParameter(fresh, inner, period))
    return Branch(value, (*branch.conditions, *conditions), parameters)


def fresh_name(stem: str, used: Iterable[str]) -> str:
    """`stem`, or `stem1`, `stem2`, … : the first that is not in `used`."""
    taken = set(used)
    if stem not in taken:
        return stem
    count = 1
    while f"{stem}{count}" in taken:
        count += 1
    return f"{stem}{count}"


def undo(node: Apply, position: int, target: Node) -> list[Undone] | None:
    """Every value of `node.arguments[position]` for which `node = target`; None for an operator without
    an inverse that can be written with the operators of formulas."""
    others = tuple(part for i, part in enumerate(node.arguments) if i != position)
    if node.operator in _UNARY and not others:
        return _UNARY[node.operator](target)
    if node.operator in _N_ARY:
        return _N_ARY[node.operator](others, position, target)
    return None


def _real(value: Node, *conditions: Node) -> list[Undone]:
    return [(value, conditions, 0.0)]


def _at_least(left: Node, right: float | Node) -> Node:
    return Apply("greater_equal", (left, number(right) if isinstance(right, float) else right))


def _at_most(left: Node, right: float | Node) -> Node:
    return Apply("less_equal", (left, number(right) if isinstance(right, float) else right))


def _positive(node: Node) -> Node:
    return Apply("greater", (node, ZERO))


def _within_right_angles(node: Node) -> tuple[Node, Node]:
    right = divide(PI, number(2.0))
    return _at_least(node, negate(right)), _at_most(node, right)


def _both_signs(value: Node, *conditions: Node) -> list[Undone]:
    return [(value, conditions, 0.0), (negate(value), conditions, 0.0)]


def _undo_sine(target: Node) -> list[Undone]:
    angle, turn = Apply("asin", (target,)), multiply(number(2.0), Name("k"), PI)
    within = (_at_least(target, -1.0), _at_most(target, 1.0))
    return [(add(angle, turn), within, 2 * math.pi), (add(subtract(PI, angle), turn), within, 2 * math.pi)]


def _undo_cosine(target: Node) -> list[Undone]:
    angle, turn = Apply("acos", (target,)), multiply(number(2.0), Name("k"), PI)
    within = (_at_least(target, -1.0), _at_most(target, 1.0))
    return [(add(angle, turn), within, 2 * math.pi), (add(negate(angle), turn), within, 2 * math.pi)]


def _undo_hyperbolic_sine(target: Node) -> list[Undone]:
    root = square_root(add(power(target, 2.0), ONE))
    size = Apply("log", (add(Apply("abs", (target,)), root),))
    return _real(multiply(Apply("sign", (target,)), size))


def _undo_hyperbolic_cosine(target: Node) -> list[Undone]:
    root = square_root(multiply(subtract(target, ONE), add(target, ONE)))
    return _both_signs(Apply("log", (add(target, root),)), _at_least(target, 1.0))


def _undo_hyperbolic_tangent(target: Node) -> list[Undone]:
    ratio = divide(add(ONE, target), subtract(ONE, target))
    within = (Apply("greater", (target, number(-1.0))), Apply("less", (target, ONE)))
    return _real(divide(Apply("log", (ratio,)), number(2.0)), *within)


_UNARY: dict[str, Callable[[Node], list[Undone]]] = {
    "negate": lambda t: _real(negate(t)),
    "sqrt": lambda t: _real(power(t, 2.0), _at_least(t, 0.0)),
    "exp": lambda t: _real(apply("log", t), _positive(t)),
    "log": lambda t: _real(apply("exp", t)),
    "log10": lambda t: _real(Apply("power", (number(10.0), t))),
    "abs": lambda t: _both_signs(t, _at_least(t, 0.0)),
    "hypot": lambda t: _both_signs(t, _at_least(t, 0.0)),
    "min": lambda t: _real(t),
    "max": lambda t: _real(t),
    "sin": _undo_sine,
    "cos": _undo_cosine,
    "tan": lambda t: [(add(Apply("atan", (t,)), multiply(Name("k"), PI)), (), math.pi)],
    "asin": lambda t: _real(apply("sin", t), *_within_right_angles(t)),
    "acos": lambda t: _real(apply("cos", t), _at_least(t, 0.0), _at_most(t, PI)),
    "atan": lambda t: _real(apply("tan", t), *_within_right_angles(t)),
    "sinh": _undo_hyperbolic_sine,
    "cosh": _undo_hyperbolic_cosine,
    "tanh": _undo_hyperbolic_tangent,
    "decibel": lambda t: _real(apply("from_decibel", t)),
    "from_decibel": lambda t: _real(apply("decibel", t), _positive(t)),
}


def _undo_quotient(others: Sequence[Node], position: int, target: Node) -> list[Undone]:
    if position == 0:
        return _real(multiply(target, others[0]))
    return _real(divide(others[0], target))


def _undo_power(others: Sequence[Node], position: int, target: Node) -> list[Undone] | None:
    if position == 1:
        return _real(divide(apply("log", target), apply("log", others[0])), _positive(target))
    exponent = known_number(tidy(others[0]))
    if exponent is None:
        return _real(Apply("power", (target, divide(ONE, others[0]))), _at_least(target, 0.0))
    if exponent == 0.0:
        return None
    if not is_integer(exponent):
        return _real(power(target, 1.0 / exponent), _at_least(target, 0.0))
    if is_integer(exponent / 2.0):
        return _both_signs(power(target, 1.0 / exponent), _at_least(target, 0.0))
    if abs(exponent) == 1.0:
        return _real(power(target, exponent))
    size = power(Apply("abs", (target,)), 1.0 / exponent)
    return _real(multiply(Apply("sign", (target,)), size))


def _undo_length(others: Sequence[Node], position: int, target: Node) -> list[Undone]:
    if len(others) == 1:
        inside = multiply(subtract(target, others[0]), add(target, others[0]))
    else:
        inside = subtract(power(target, 2.0), add(*(power(other, 2.0) for other in others)))
    return _both_signs(square_root(inside), _at_least(target, 0.0), _at_least(inside, 0.0))


def _undo_angle(others: Sequence[Node], position: int, target: Node) -> list[Undone]:
    """atan2(a, b) = t for a or for b: a = b tan t, with the quadrant right."""
    other = others[0]
    if position == 0:
        quadrant = _positive(multiply(other, apply("cos", target)))
        value = multiply(other, apply("tan", target))
    else:
        quadrant = _positive(multiply(other, apply("sin", target)))
        value = divide(other, apply("tan", target))
    return _real(value, quadrant, _at_least(target, negate(PI)), _at_most(target, PI))


_N_ARY: dict[str, Callable[[Sequence[Node], int, Node], list[Undone] | None]] = {
    "add": lambda others, _, t: _real(subtract(t, add(*others))),
    "multiply": lambda others, _, t: _real(divide(t, multiply(*others))),
    "divide": _undo_quotient,
    "power": _undo_power,
    "hypot": _undo_length,
    "atan2": _undo_angle,
    "min": lambda others, _, t: _real(t, *(_at_most(t, other) for other in others)),
    "max": lambda others, _, t: _real(t, *(Apply("greater_equal", (t, other)) for other in others)),
}
