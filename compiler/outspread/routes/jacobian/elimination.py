"""Solves a system of equations symbolically by successive elimination, keeping every branch.

The steps, in the order in which they are tried: undo outer operators; put one equation's left side into
another that contains it; join R·cos a, R·sin a into R and a; open atan2 with an auxiliary radius; solve an
equation with one unknown as a polynomial in one sub-expression; solve any equation for an unknown that
occurs once (with backtracking). The steps are in `rules`; whether a branch holds at a
point is judged in `smooth`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from dataclasses import replace as evolve

from outspread.formula.tree import Apply, Name, Node, names, occurrences
from outspread.routes.jacobian.branches import IntegerParameter, branches_for, fresh_name
from outspread.routes.jacobian.construct import (
    ZERO,
    apply,
    replace,
    size,
    split_coefficient,
    tidy,
)
from outspread.routes.jacobian.rational import generator, roots
from outspread.routes.jacobian.rules import (
    Equation,
    State,
    define_known,
    defined,
    join_circle,
    linear_parts,
    never_negative,
    open_angle,
    peel,
    polynomial,
    put_in,
)

LARGEST_SIZE = 1200  # nodes in one equation or solution
LARGEST_EFFORT = 400  # states looked at
LARGEST_BRANCHES = 64
_CANDIDATES = 5


@dataclass(frozen=True)
class Solution:
    """One branch of the inverse: each unknown by its name, conditions and integer parameters."""

    values: dict[str, Node]
    conditions: tuple[Node, ...]
    parameters: tuple[IntegerParameter, ...]


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
    start = State(tidied, tuple(unknowns), reserved=reserved | set(unknowns))
    try:
        ends = _solve(start, _Search())
    except _OutOfEffort:
        return None
    return None if ends is None else tuple(_finished(end, unknowns) for end in ends)


def _solve(state: State, search: _Search) -> list[State] | None:
    search.count()
    if not state.equations:
        return [state] if not state.unknowns else None
    if any(size(left) + size(right) > LARGEST_SIZE for left, right in state.equations):
        return None
    for rule in (peel, define_known, put_in, linear_parts, join_circle, open_angle, polynomial):
        successors = rule(state)
        if successors is not None:
            return _solve_all(successors, search)
    for successors in _choices(state):
        found = _solve_all(successors, search)
        if found is not None:
            return found
    return None


def _solve_all(states: list[State], search: _Search) -> list[State] | None:
    ends: list[State] = []
    for state in states:
        found = _solve(state, search)
        if found is None or len(ends) + len(found) > LARGEST_BRANCHES:
            return None
        ends.extend(found)
    return ends


def _choices(state: State) -> list[list[State]]:
    """Ways to solve one equation for one of its unknowns in terms of the others, the simplest first."""
    ways: list[tuple[tuple[bool, int, int, int], list[State]]] = []
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


def _solved_for(state: State, index: int, left: Node, right: Node, name: str) -> list[State] | None:
    if occurrences(left, name) == 1:
        found = branches_for(left, name, right)
        if found is None:
            return None
        return [
            _chosen(state, index, name, branch.value, branch.conditions, branch.parameters)
            for branch in found
        ]
    if generator(left, name) != Name(name):
        return None
    values = roots(left, right, Name(name), name)
    if values is None:
        return None
    return [_chosen(state, index, name, value, conditions, ()) for value, conditions in values]


def _chosen(
    state: State,
    index: int,
    name: str,
    value: Node,
    conditions: tuple[Node, ...],
    parameters: tuple[IntegerParameter, ...],
) -> State:
    taken = {*state.taken(), *names(value)}
    renamed: dict[str, Node] = {}
    own: list[IntegerParameter] = []
    for parameter in parameters:
        fresh = fresh_name("k", taken | {one.name for one in own})
        renamed[parameter.name] = Name(fresh)
        own.append(evolve(parameter, name=fresh))
    value = replace(value, renamed) if renamed else value
    state = evolve(state, conditions=(*state.conditions, *conditions), parameters=(*state.parameters, *own))
    return defined(state, index, name, value)


def _finished(state: State, unknowns: Sequence[str]) -> Solution:
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
        if isinstance(one, Apply)
        and one.operator in ("greater", "greater_equal")
        and one.arguments[1] == ZERO
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
    return right == ZERO and all(never_negative(term) for term in terms)


def _in_unknowns(node: Node, meanings: dict[str, Node]) -> Node:
    for _ in meanings:
        node = replace(node, meanings)
    return node
