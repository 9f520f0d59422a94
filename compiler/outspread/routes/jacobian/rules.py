"""The steps of symbolic elimination: each takes a state of the system to the states that follow from it.

A step returns None where it does not apply, and an empty list where there is no solution. In which order
the steps are tried, and how choices are searched, is in `elimination`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from dataclasses import replace as evolve
from fractions import Fraction

from outspread.formula.tree import Apply, Name, Node, Number, names
from outspread.routes.jacobian.affine import exact_inverse
from outspread.routes.jacobian.branches import IntegerParameter, fresh_name, undo
from outspread.routes.jacobian.construct import (
    PI,
    ZERO,
    add,
    apply,
    contains,
    divide,
    from_factors,
    multiply,
    negate,
    number,
    power,
    replace,
    scaled,
    split_coefficient,
    split_factors,
    subtract,
)
from outspread.routes.jacobian.rational import generator, roots

Equation = tuple[Node, Node]  # left side with unknowns, right side without


@dataclass(frozen=True)
class State:
    equations: tuple[Equation, ...]
    unknowns: tuple[str, ...]
    definitions: tuple[tuple[str, Node], ...] = ()
    conditions: tuple[Node, ...] = ()
    parameters: tuple[IntegerParameter, ...] = ()
    meanings: dict[str, Node] = field(default_factory=dict)  # auxiliary unknown -> expression in unknowns
    reserved: frozenset[str] = frozenset()  # every name of the original equations

    def taken(self) -> set[str]:
        return {*self.reserved, *self.meanings, *(parameter.name for parameter in self.parameters)}


def _with_equation(state: State, index: int, *equations: Equation) -> State:
    return evolve(state, equations=(*state.equations[:index], *equations, *state.equations[index + 1 :]))


def peel(state: State) -> list[State] | None:
    """Undo the outermost operator of an equation where only one of its arguments has unknowns."""
    for index, (left, right) in enumerate(state.equations):
        if not isinstance(left, Apply):
            continue
        open_arguments = [i for i, part in enumerate(left.arguments) if contains(part, state.unknowns)]
        if not open_arguments:
            return []  # no unknown left: solvable for no point but those of probability zero
        if len(open_arguments) == 1:
            undone = undo(left, open_arguments[0], right)
            if undone is not None:
                return [_undone(state, index, left.arguments[open_arguments[0]], one) for one in undone]
        elif left.operator == "hypot":
            total = add(*(power(part, 2.0) for part in left.arguments))
            positive = Apply("greater_equal", (right, ZERO))
            moved = _with_equation(state, index, (total, power(right, 2.0)))
            return [evolve(moved, conditions=(*state.conditions, positive))]
        elif left.operator in ("add", "multiply") and len(open_arguments) < len(left.arguments):
            known = [part for i, part in enumerate(left.arguments) if i not in open_arguments]
            rest = [left.arguments[i] for i in open_arguments]
            if left.operator == "add":
                return [_with_equation(state, index, (add(*rest), subtract(right, add(*known))))]
            return [_with_equation(state, index, (multiply(*rest), divide(right, multiply(*known))))]
        elif left.operator == "add":
            coefficient, core = split_coefficient(left)
            if core is not None and coefficient < 0.0:
                return [_with_equation(state, index, (negate(left), negate(right)))]
    return None


def _undone(state: State, index: int, inner: Node, undone: tuple[Node, tuple[Node, ...], float]) -> State:
    value, conditions, period = undone
    parameters = state.parameters
    if period:
        fresh = fresh_name("k", state.taken())
        value = replace(value, {"k": Name(fresh)}) if fresh != "k" else value
        parameters = (*parameters, IntegerParameter(fresh, inner, period))
    moved = _with_equation(state, index, (inner, value))
    return evolve(moved, conditions=(*state.conditions, *conditions), parameters=parameters)


def defined(state: State, index: int, name: str, value: Node) -> State:
    """The state after equation `index` was solved as name = value."""
    others = (*state.equations[:index], *state.equations[index + 1 :])
    substituted = tuple((replace(left, {name: value}), right) for left, right in others)
    unknowns = tuple(unknown for unknown in state.unknowns if unknown != name)
    return evolve(
        state, equations=substituted, unknowns=unknowns, definitions=(*state.definitions, (name, value))
    )


def define_known(state: State) -> list[State] | None:
    for index, (left, right) in enumerate(state.equations):
        if isinstance(left, Name) and left.name in state.unknowns:
            return [defined(state, index, left.name, right)]
    return None


def put_in(state: State) -> list[State] | None:
    """Replace one equation's left side, where another equation contains it, by its right side."""
    for i, (whole, value) in enumerate(state.equations):
        for j, (left, right) in enumerate(state.equations):
            if i != j and isinstance(whole, Apply):
                changed = part_replaced(left, whole, value)
                if changed != left:
                    return [_with_equation(state, j, (changed, right))]
    return None


def part_replaced(node: Node, part: Node, value: Node) -> Node:
    """`node` with `part` replaced by `value`, also where it is some of the terms of a sum or factors of a
    product, or a multiple or power of it."""
    if node == part:
        return value
    if not isinstance(node, Apply):
        return node
    arguments = tuple(part_replaced(argument, part, value) for argument in node.arguments)
    if arguments != node.arguments:
        node = apply(node.operator, *arguments)
    if isinstance(part, Apply) and isinstance(node, Apply) and part.operator == node.operator == "add":
        return _sum_replaced(node, part, value)
    if isinstance(part, Apply) and part.operator == "multiply":
        return _product_replaced(node, part, value)
    return node


def _sum_replaced(node: Apply, part: Apply, value: Node) -> Node:
    have = _coefficients(node)
    wanted = _coefficients(part)
    ratios = {have[core] / coefficient if core in have else math.nan for core, coefficient in wanted.items()}
    if len(ratios) != 1 or math.isnan(ratio := ratios.pop()):
        return node
    rest = [scaled(coefficient, core) for core, coefficient in have.items() if core not in wanted]
    return add(scaled(ratio, value), *rest)


def _coefficients(node: Apply) -> dict[Node, float]:
    parts = [split_coefficient(argument) for argument in node.arguments]
    return {core if core is not None else number(1.0): coefficient for coefficient, core in parts}


def _product_replaced(node: Node, part: Apply, value: Node) -> Node:
    coefficient, have = split_factors(node)
    part_coefficient, wanted = split_factors(part)
    ratios = {have[base] / exponent if base in have else math.nan for base, exponent in wanted.items()}
    if len(ratios) != 1 or not (ratio := ratios.pop()).is_integer():
        return node
    rest = {base: exponent for base, exponent in have.items() if base not in wanted}
    return multiply(
        number(coefficient / part_coefficient**ratio), from_factors(1.0, rest), power(value, ratio)
    )


def linear_parts(state: State) -> list[State] | None:
    """Solve a system that is linear in as many sub-expressions as there are equations."""
    rows = [_coefficients_of(left) for left, _ in state.equations]
    parts = tuple(dict.fromkeys(core for row in rows for core in row))
    if len(parts) != len(rows) or all(len(row) == 1 for row in rows) or len(rows) < 2:
        return None
    matrix = [[Fraction(row.get(core, 0.0)) for core in parts] for row in rows]
    inverse = exact_inverse(matrix)
    if inverse is None:
        return None
    rights = [right for _, right in state.equations]
    solved = (
        (core, add(*(scaled(float(c), right) for c, right in zip(row, rights, strict=True))))
        for core, row in zip(parts, inverse, strict=True)
    )
    return [evolve(state, equations=tuple(solved))]


def _coefficients_of(node: Node) -> dict[Node, float]:
    if isinstance(node, Apply) and node.operator == "add":
        return _coefficients(node)
    coefficient, core = split_coefficient(node)
    return {core if core is not None else number(1.0): coefficient}


def join_circle(state: State) -> list[State] | None:
    """R·cos a = s and R·sin a = t: R = ±√(s² + t²) and a is the angle of (s, t), up to whole turns."""
    for i, (left, s) in enumerate(state.equations):
        c, powers = split_factors(left)
        for base, exponent in powers.items():
            if exponent != 1.0 or not (isinstance(base, Apply) and base.operator == "cos"):
                continue
            rest = {key: value for key, value in powers.items() if key != base}
            sine = Apply("sin", base.arguments)
            for j, (other, t) in enumerate(state.equations):
                d, other_powers = split_factors(other)
                if j != i and rest and other_powers == {**rest, sine: 1.0} and c and d:
                    radius = from_factors(c, rest)
                    return _circle_states(state, (i, j), radius, base.arguments[0], (s, scaled(c / d, t)))
    return None


def _circle_states(
    state: State, indices: tuple[int, int], radius: Node, angle: Node, pair: tuple[Node, Node]
) -> list[State]:
    fresh = fresh_name("k", state.taken())
    turns = multiply(number(2.0), Name(fresh), PI)
    parameters = (*state.parameters, IntegerParameter(fresh, angle, 2 * math.pi))
    others = tuple(equation for i, equation in enumerate(state.equations) if i not in indices)
    s, t = pair
    length = Apply("hypot", (s, t))
    states = []
    for sign in (1.0,) if never_negative(radius) else (1.0, -1.0):
        direction = Apply("atan2", (scaled(sign, t), scaled(sign, s)))
        pieces = ((radius, scaled(sign, length)), (angle, add(direction, turns)))
        states.append(evolve(state, equations=(*pieces, *others), parameters=parameters))
    return states


def never_negative(node: Node) -> bool:
    coefficient, powers = split_factors(node)
    return coefficient >= 0.0 and all(
        exponent != math.floor(exponent)
        or (isinstance(base, Number) and base.value >= 0.0)
        or (exponent / 2.0).is_integer()
        or (isinstance(base, Apply) and base.operator in ("sqrt", "exp", "abs", "hypot", "from_decibel"))
        for base, exponent in powers.items()
    )


def open_angle(state: State) -> list[State] | None:
    """atan2(b, a) = t with unknowns in both: a = ρ·cos t, b = ρ·sin t with an auxiliary radius ρ > 0."""
    for index, (left, right) in enumerate(state.equations):
        if isinstance(left, Apply) and left.operator == "atan2":
            b, a = left.arguments
            name = fresh_name("rho", state.taken())
            rho = Name(name)
            pair = (
                (subtract(a, multiply(rho, apply("cos", right))), ZERO),
                (subtract(b, multiply(rho, apply("sin", right))), ZERO),
            )
            conditions = (
                Apply("greater", (rho, ZERO)),
                Apply("greater_equal", (right, negate(PI))),
                Apply("less_equal", (right, PI)),
            )
            opened = _with_equation(state, index, *pair)
            return [
                evolve(
                    opened,
                    unknowns=(*state.unknowns, name),
                    conditions=(*state.conditions, *conditions),
                    meanings={**state.meanings, name: Apply("hypot", (a, b))},
                )
            ]
    return None


def polynomial(state: State) -> list[State] | None:
    """Solve an equation in one unknown that is a polynomial in one sub-expression."""
    for index, (left, right) in enumerate(state.equations):
        inside = [name for name in names(left) if name in state.unknowns]
        if len(inside) != 1:
            continue
        atom = generator(left, inside[0])
        found = roots(left, right, atom, inside[0]) if atom is not None and atom != left else None
        if found is not None and atom is not None:
            return [
                evolve(
                    _with_equation(state, index, (atom, value)), conditions=(*state.conditions, *conditions)
                )
                for value, conditions in found
            ]
    return None
