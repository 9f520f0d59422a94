"""Solves a system of equations symbolically by successive elimination, keeping every branch.

The steps, in the order in which they are tried: undo outer operators; put one equation's left side into
another that contains it; join R·cos a, R·sin a into R and a; open atan2 with an auxiliary radius; solve an
equation with one unknown as a polynomial in one sub-expression; solve any equation for an unknown that
occurs once (with backtracking). Whether a branch holds at a point is left to `evaluation`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from dataclasses import replace as evolve
from fractions import Fraction

from outspread.formula.tree import Apply, Name, Node, Number, names, occurrences
from outspread.routes.jacobian.affine import exact_inverse
from outspread.routes.jacobian.branches import IntegerParameter, branches_for, fresh_name, undo
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
    size,
    split_coefficient,
    split_factors,
    subtract,
    tidy,
)
from outspread.routes.jacobian.rational import generator, roots

LARGEST_SIZE = 1200  # nodes in one equation or solution
LARGEST_EFFORT = 400  # states looked at
LARGEST_BRANCHES = 64
_CANDIDATES = 5

Equation = tuple[Node, Node]  # left side with unknowns, right side without


@dataclass(frozen=True)
class Solution:
    """One branch of the inverse: each unknown by its name, conditions and integer parameters."""

    values: dict[str, Node]
    conditions: tuple[Node, ...]
    parameters: tuple[IntegerParameter, ...]
    complete: bool = True  # found by equivalences alone: with the other branches, no solution is missing


@dataclass(frozen=True)
class _State:
    equations: tuple[Equation, ...]
    unknowns: tuple[str, ...]
    definitions: tuple[tuple[str, Node], ...] = ()
    conditions: tuple[Node, ...] = ()
    parameters: tuple[IntegerParameter, ...] = ()
    meanings: dict[str, Node] = field(default_factory=dict)  # auxiliary unknown -> expression in unknowns
    reserved: frozenset[str] = frozenset()  # every name of the original equations

    def taken(self) -> set[str]:
        return {*self.reserved, *self.meanings, *(parameter.name for parameter in self.parameters)}


class _OutOfEffort(Exception):
    """The search has looked at more states than it may."""


class _Search:
    def __init__(self) -> None:
        self.states = 0

    def count(self) -> None:
        self.states += 1
        if self.states > LARGEST_EFFORT:
            raise _OutOfEffort


def solve_system(equations: Sequence[Equation], unknowns: Sequence[str]) -> tuple[Solution, ...] | None:
    """All solutions of left = right for the unknowns, or None where elimination does not get through.

    The right sides must not contain unknowns. Besides the solutions there may be spurious branches, which
    fail their conditions or do not satisfy the equations; solutions on a set of measure zero may be missing.
    """
    reserved = frozenset(name for equation in equations for side in equation for name in names(side))
    tidied = tuple((tidy(left), tidy(right)) for left, right in equations)
    start = _State(tidied, tuple(unknowns), reserved=reserved | set(unknowns))
    try:
        ends = _solve(start, _Search())
    except _OutOfEffort:
        return None
    return None if ends is None else tuple(_finished(end, unknowns) for end in ends)


def _solve(state: _State, search: _Search) -> list[_State] | None:
    search.count()
    if not state.equations:
        return [state] if not state.unknowns else None
    if any(size(left) + size(right) > LARGEST_SIZE for left, right in state.equations):
        return None
    for rule in (_peel, _define_known, _put_in, _linear_parts, _join_circle, _open_angle, _polynomial):
        successors = rule(state)
        if successors is not None:
            return _solve_all(successors, search)
    for successors in _choices(state):
        found = _solve_all(successors, search)
        if found is not None:
            return found
    return None


def _solve_all(states: list[_State], search: _Search) -> list[_State] | None:
    ends: list[_State] = []
    for state in states:
        found = _solve(state, search)
        if found is None or len(ends) + len(found) > LARGEST_BRANCHES:
            return None
        ends.extend(found)
    return ends


def _with_equation(state: _State, index: int, *equations: Equation) -> _State:
    return evolve(state, equations=(*state.equations[:index], *equations, *state.equations[index + 1 :]))


def _peel(state: _State) -> list[_State] | None:
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


def _undone(state: _State, index: int, inner: Node, undone: tuple[Node, tuple[Node, ...], float]) -> _State:
    value, conditions, period = undone
    parameters = state.parameters
    if period:
        fresh = fresh_name("k", state.taken())
        value = replace(value, {"k": Name(fresh)}) if fresh != "k" else value
        parameters = (*parameters, IntegerParameter(fresh, inner, period))
    moved = _with_equation(state, index, (inner, value))
    return evolve(moved, conditions=(*state.conditions, *conditions), parameters=parameters)


def _defined(state: _State, index: int, name: str, value: Node) -> _State:
    """The state after equation `index` was solved as name = value."""
    others = (*state.equations[:index], *state.equations[index + 1 :])
    substituted = tuple((replace(left, {name: value}), right) for left, right in others)
    unknowns = tuple(unknown for unknown in state.unknowns if unknown != name)
    return evolve(
        state, equations=substituted, unknowns=unknowns, definitions=(*state.definitions, (name, value))
    )


def _define_known(state: _State) -> list[_State] | None:
    for index, (left, right) in enumerate(state.equations):
        if isinstance(left, Name) and left.name in state.unknowns:
            return [_defined(state, index, left.name, right)]
    return None


def _put_in(state: _State) -> list[_State] | None:
    """Replace one equation's left side, where another equation contains it, by its right side."""
    for i, (whole, value) in enumerate(state.equations):
        for j, (left, right) in enumerate(state.equations):
            if i != j and isinstance(whole, Apply):
                changed = _with_part_replaced(left, whole, value)
                if changed != left:
                    return [_with_equation(state, j, (changed, right))]
    return None


def _with_part_replaced(node: Node, part: Node, value: Node) -> Node:
    if node == part:
        return value
    if not isinstance(node, Apply):
        return node
    arguments = tuple(_with_part_replaced(argument, part, value) for argument in node.arguments)
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
    return multiply(number(coefficient / part_coefficient**ratio), from_factors(1.0, rest), power(value, ratio))


def _linear_parts(state: _State) -> list[_State] | None:
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


def _join_circle(state: _State) -> list[_State] | None:
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
    state: _State, indices: tuple[int, int], radius: Node, angle: Node, pair: tuple[Node, Node]
) -> list[_State]:
    fresh = fresh_name("k", state.taken())
    turns = multiply(number(2.0), Name(fresh), PI)
    parameters = (*state.parameters, IntegerParameter(fresh, angle, 2 * math.pi))
    others = tuple(equation for i, equation in enumerate(state.equations) if i not in indices)
    s, t = pair
    length = Apply("hypot", (s, t))
    states = []
    for sign in (1.0,) if _never_negative(radius) else (1.0, -1.0):
        direction = Apply("atan2", (scaled(sign, t), scaled(sign, s)))
        pieces = ((radius, scaled(sign, length)), (angle, add(direction, turns)))
        states.append(evolve(state, equations=(*pieces, *others), parameters=parameters))
    return states


def _never_negative(node: Node) -> bool:
    coefficient, powers = split_factors(node)
    return coefficient >= 0.0 and all(
        exponent != math.floor(exponent)
        or (isinstance(base, Number) and base.value >= 0.0)
        or (exponent / 2.0).is_integer()
        or (isinstance(base, Apply) and base.operator in ("sqrt", "exp", "abs", "hypot", "from_decibel"))
        for base, exponent in powers.items()
    )


def _open_angle(state: _State) -> list[_State] | None:
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


def _polynomial(state: _State) -> list[_State] | None:
    """Solve an equation in one unknown that is a polynomial in one sub-expression."""
    for index, (left, right) in enumerate(state.equations):
        inside = [name for name in names(left) if name in state.unknowns]
        if len(inside) != 1:
            continue
        atom = generator(left, inside[0])
        found = roots(left, right, atom, inside[0]) if atom is not None and atom != left else None
        if found is not None and atom is not None:
            return [
                evolve(_with_equation(state, index, (atom, value)), conditions=(*state.conditions, *conditions))
                for value, conditions in found
            ]
    return None


def _choices(state: _State) -> list[list[_State]]:
    """Ways to solve one equation for one of its unknowns in terms of the others, the simplest first."""
    ways: list[tuple[tuple[bool, int, int, int], list[_State]]] = []
    for index, (left, right) in enumerate(state.equations):
        for name in names(left):
            if name not in state.unknowns:
                continue
            states = _solved_for(state, index, left, right, name)
            if states:
                auxiliary = name in state.meanings
                largest = max(sum(size(part) for part, _ in one.equations) for one in states)
                ways.append(((auxiliary, len(states), largest, len(ways)), states))
    ways.sort(key=lambda way: way[0])
    return [states for _, states in ways[:_CANDIDATES]]


def _solved_for(state: _State, index: int, left: Node, right: Node, name: str) -> list[_State] | None:
    if occurrences(left, name) == 1:
        found = branches_for(left, name, right)
        if found is None:
            return None
        return [_chosen(state, index, name, branch.value, branch.conditions, branch.parameters) for branch in found]
    if generator(left, name) != Name(name):
        return None
    values = roots(left, right, Name(name), name)
    if values is None:
        return None
    return [_chosen(state, index, name, value, conditions, ()) for value, conditions in values]


def _chosen(
    state: _State,
    index: int,
    name: str,
    value: Node,
    conditions: tuple[Node, ...],
    parameters: tuple[IntegerParameter, ...],
) -> _State:
    taken = {*state.taken(), *names(value)}
    renamed: dict[str, Node] = {}
    own: list[IntegerParameter] = []
    for parameter in parameters:
        fresh = fresh_name("k", taken | {one.name for one in own})
        renamed[parameter.name] = Name(fresh)
        own.append(evolve(parameter, name=fresh))
    value = replace(value, renamed) if renamed else value
    state = evolve(
        state, conditions=(*state.conditions, *conditions), parameters=(*state.parameters, *own)
    )
    return _defined(state, index, name, value)


def _finished(state: _State, unknowns: Sequence[str]) -> Solution:
    """Put the definitions into each other, last first, and into the conditions."""
    values: dict[str, Node] = {}
    for name, value in reversed(state.definitions):
        values[name] = replace(value, values)
    conditions = tuple(dict.fromkeys(replace(condition, values) for condition in state.conditions))
    sized = _without_absolute(conditions)
    values = {name: replace_absolute(value, sized) for name, value in values.items()}
    conditions = tuple(
        dict.fromkeys(replace_absolute(one, sized) for one in conditions if not _always_true(one))
    )
    meanings = state.meanings
    parameters = tuple(
        evolve(parameter, inner=_in_unknowns(parameter.inner, meanings)) for parameter in state.parameters
    )
    return Solution({name: values[name] for name in unknowns}, conditions, parameters)


def _without_absolute(conditions: Sequence[Node]) -> dict[Node, Node]:
    """abs(a) -> a for the expressions that the conditions say are not negative."""
    return {
        Apply("abs", (core,)): core
        for one in conditions
        if isinstance(one, Apply) and one.operator in ("greater", "greater_equal") and one.arguments[1] == ZERO
        for coefficient, core in (split_coefficient(one.arguments[0]),)
        if core is not None and coefficient > 0.0
    }


def replace_absolute(node: Node, sized: dict[Node, Node]) -> Node:
    """`node` with every key of `sized` replaced by its value, tidied."""
    if node in sized:
        return sized[node]
    if not isinstance(node, Apply) or not sized:
        return node
    arguments = tuple(replace_absolute(part, sized) for part in node.arguments)
    return node if arguments == node.arguments else apply(node.operator, *arguments)


def _always_true(condition: Node) -> bool:
    """Whether a condition `a >= 0` holds for every real a of its form (squares, roots, lengths)."""
    if not (isinstance(condition, Apply) and condition.operator == "greater_equal"):
        return False
    left, right = condition.arguments
    terms = left.arguments if isinstance(left, Apply) and left.operator == "add" else (left,)
    return right == ZERO and all(_never_negative(term) for term in terms)


def _in_unknowns(node: Node, meanings: dict[str, Node]) -> Node:
    for _ in meanings:
        node = replace(node, meanings)
    return node


