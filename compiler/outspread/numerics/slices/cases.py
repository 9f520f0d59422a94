"""Rewriting events: comparisons split at their piecewise operations, and the constant cases of a formula.

It only rewrites trees; solving them for a variable is `solve`'s business.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterable
from itertools import product

from outspread.formula.tree import COMPARISONS, Apply, Name, Node, Number, names, occurrences, rebuild, walk

ZERO = Number(0.0)
TRUE = Apply("less_equal", (Number(0.0), Number(0.0)))
FALSE = Apply("less", (Number(0.0), Number(0.0)))
PIECEWISE = frozenset({"min", "max", "abs", "if", "sign"})
FLIPPED = {
    "less": "greater", "less_equal": "greater_equal", "greater": "less", "greater_equal": "less_equal",
    "equal": "equal", "not_equal": "not_equal",
}  # fmt: skip
OPPOSITE = {
    "less": "greater_equal", "less_equal": "greater", "greater": "less_equal", "greater_equal": "less",
    "equal": "not_equal", "not_equal": "equal",
}  # fmt: skip
MOST_CASES = 4_000


def both(*events: Node) -> Node:
    kept = list(dict.fromkeys(event for event in _flat("and", events) if event != TRUE))
    if FALSE in kept:
        return FALSE
    return TRUE if not kept else kept[0] if len(kept) == 1 else Apply("and", tuple(kept))


def either(*events: Node) -> Node:
    kept = list(dict.fromkeys(event for event in _flat("or", events) if event != FALSE))
    if TRUE in kept:
        return TRUE
    return FALSE if not kept else kept[0] if len(kept) == 1 else Apply("or", tuple(kept))


def _flat(operator: str, events: Iterable[Node]) -> Iterable[Node]:
    for event in events:
        if isinstance(event, Apply) and event.operator == operator:
            yield from event.arguments
        else:
            yield event


def opposite(event: Node) -> Node:
    """The complementary event, with `not` moved into the comparisons."""
    assert isinstance(event, Apply)
    if event.operator in COMPARISONS:
        return Apply(OPPOSITE[event.operator], event.arguments)
    if event.operator == "not":
        return event.arguments[0]
    if event.operator == "and":
        return either(*(opposite(part) for part in event.arguments))
    if event.operator == "or":
        return both(*(opposite(part) for part in event.arguments))
    condition, yes, no = event.arguments
    return Apply("if", (condition, opposite(yes), opposite(no)))


def comparison(operator: str, left: Node, right: Node) -> Node:
    return Apply(operator, (left, right))


def split(event: Node, name: str) -> Node:
    """The event as and/or of comparisons that are smooth in `name`, wherever `name` occurs more than once
    in a comparison with a piecewise operation above it; where it occurs once, the comparison stays."""
    assert isinstance(event, Apply)
    if event.operator in ("and", "or"):
        parts = [split(part, name) for part in event.arguments]
        return both(*parts) if event.operator == "and" else either(*parts)
    if event.operator == "not":
        return split(opposite(event.arguments[0]), name)
    if event.operator == "if":
        condition, yes, no = event.arguments
        return either(both(split(condition, name), split(yes, name)),
                      both(split(opposite(condition), name), split(no, name)))  # fmt: skip
    return _split_comparison(event, name)


def _split_comparison(event: Apply, name: str) -> Node:
    left, right = event.arguments
    if event.operator == "equal":
        return split(
            both(comparison("less_equal", left, right), comparison("greater_equal", left, right)), name
        )
    if event.operator == "not_equal":
        return split(either(comparison("less", left, right), comparison("greater", left, right)), name)
    if occurrences(event, name) <= 1 and not _conditional(event, name):
        return event
    if name not in names(left):
        left, right = right, left
        event = Apply(FLIPPED[event.operator], (left, right))
    if name not in names(right) and isinstance(left, Apply) and left.operator in ("min", "max", "abs"):
        return _split_outermost(event, left, right, name)
    piece = next(
        (p for p in walk(event) if isinstance(p, Apply) and p.operator in PIECEWISE and name in names(p)),
        None,
    )
    if piece is None:
        return event

    def put(value: Node) -> Node:
        return rebuild(event, lambda part: value if part == piece else None)

    return split(either(*(both(condition, put(value)) for condition, value in _branches(piece))), name)


def _conditional(event: Node, name: str) -> bool:
    """Whether an `if` whose condition or branches hold the name stands in a comparison."""
    return any(
        isinstance(part, Apply) and part.operator == "if" and name in names(part) for part in walk(event)
    )


def _split_outermost(event: Apply, left: Apply, right: Node, name: str) -> Node:
    """max(a, b) <= t is a <= t and b <= t; and so on."""
    below = event.operator in ("less", "less_equal")
    if left.operator == "abs":
        inner = left.arguments[0]
        mirrored = comparison(event.operator, Apply("negate", (inner,)), right)
        parts = [comparison(event.operator, inner, right), mirrored]
        joined = both(*parts) if below else either(*parts)
    else:
        parts = [comparison(event.operator, argument, right) for argument in left.arguments]
        joined = both(*parts) if (left.operator == "max") == below else either(*parts)
    return split(joined, name)


def _branches(piece: Apply) -> list[tuple[Node, Node]]:
    """The cases of a piecewise operation: (condition, value)."""
    if piece.operator == "if":
        condition, yes, no = piece.arguments
        return [(condition, yes), (opposite(condition), no)]
    if piece.operator == "abs":
        inner = piece.arguments[0]
        return [(comparison("greater_equal", inner, Number(0.0)), inner),
                (comparison("less", inner, Number(0.0)), Apply("negate", (inner,)))]  # fmt: skip
    if piece.operator == "sign":
        inner = piece.arguments[0]
        return [(comparison("greater", inner, Number(0.0)), Number(1.0)),
                (comparison("less", inner, Number(0.0)), Number(-1.0))]  # fmt: skip
    wins = "greater_equal" if piece.operator == "max" else "less_equal"
    beats = "greater" if piece.operator == "max" else "less"
    cases = []
    for index, argument in enumerate(piece.arguments):
        conditions = [
            comparison(beats if other_index < index else wins, argument, other)
            for other_index, other in enumerate(piece.arguments)
            if other_index != index
        ]
        cases.append((both(*conditions), argument))
    return cases


Case = tuple[Node, Node]  # condition, value free of continuous inputs


def constant_cases(
    node: Node, continuous: Collection[str], whole_numbers: Callable[[Node], range | None]
) -> list[Case]:
    """Cases in which the formula has one value on a set of positive probability, found from its structure.

    Each case is (condition, value): wherever the condition holds, the formula equals `value`, which holds
    no continuous input. Cases may overlap where they have the same value. `whole_numbers(u)` is the range
    of whole values that floor(u) can take, or None where that is unbounded or too wide.
    """
    if not any(name in continuous for name in names(node)):
        return [(TRUE, node)]
    if isinstance(node, (Name, Number)):
        return []
    assert isinstance(node, Apply)
    cases = _own_cases(node, continuous, whole_numbers)
    if len(cases) > MOST_CASES:
        raise OverflowError
    return cases


def _own_cases(
    node: Apply, continuous: Collection[str], whole_numbers: Callable[[Node], range | None]
) -> list[Case]:
    def cases_of(part: Node) -> list[Case]:
        return constant_cases(part, continuous, whole_numbers)

    if node.operator in ("min", "max"):
        return _extreme_cases(node, [cases_of(argument) for argument in node.arguments])
    if node.operator == "if":
        condition, yes, no = node.arguments
        return [(both(condition, c), v) for c, v in cases_of(yes)] + [
            (both(opposite(condition), c), v) for c, v in cases_of(no)
        ]
    if node.operator == "sign":
        inner = node.arguments[0]
        zero = [(c, Apply("sign", (v,))) for c, v in cases_of(inner)]
        return [*((c, v) for c, v in _branches(node)), *zero]
    if node.operator in ("floor", "ceil"):
        return _whole_cases(node, whole_numbers)
    lists = [cases_of(argument) for argument in node.arguments]
    cases: list[Case] = []
    if node.operator == "multiply" or node.operator == "divide":
        factors = lists if node.operator == "multiply" else lists[:1]
        cases += [case for part in factors for c, v in part for case in _where_equal(c, v, 0.0, ZERO)]
    if node.operator == "power":
        base, exponent = lists
        one = Number(1.0)
        cases += [case for c, v in exponent for case in _where_equal(c, v, 0.0, one)]
        cases += [case for c, v in base for case in _where_equal(c, v, 1.0, one)]
        positive = comparison("greater", node.arguments[1], ZERO)
        cases += [case for c, v in base for case in _where_equal(both(c, positive), v, 0.0, ZERO)]
    if all(lists):
        for combination in product(*lists):
            condition = both(*(c for c, _ in combination))
            cases.append((condition, Apply(node.operator, tuple(v for _, v in combination))))
    return cases


def _where_equal(condition: Node, value: Node, special: float, result: Node) -> list[Case]:
    """The case that a part takes a special value, at which the other parts do not matter."""
    if isinstance(value, Number):
        return [(condition, result)] if value.value == special else []
    return [(both(condition, comparison("equal", value, Number(special))), result)]


def _extreme_cases(node: Apply, lists: list[list[Case]]) -> list[Case]:
    wins = "less_equal" if node.operator == "max" else "greater_equal"
    cases: list[Case] = []
    for index, own in enumerate(lists):
        others = [other for position, other in enumerate(node.arguments) if position != index]
        for condition, value in own:
            cases.append((both(condition, *(comparison(wins, other, value) for other in others)), value))
    return cases


def _whole_cases(node: Apply, whole_numbers: Callable[[Node], range | None]) -> list[Case]:
    inner = node.arguments[0]
    values = whole_numbers(inner)
    if values is None:
        raise OverflowError
    down = node.operator == "floor"
    cases: list[Case] = []
    for k in values:
        number, neighbour = Number(float(k)), Number(float(k + 1 if down else k - 1))
        low, high = (number, neighbour) if down else (neighbour, number)
        cases.append((
            both(comparison("greater_equal" if down else "greater", inner, low),
                 comparison("less" if down else "less_equal", inner, high)), number,
        ))  # fmt: skip
    return cases
