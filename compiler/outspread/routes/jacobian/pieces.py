"""Splits a map with min, max, abs, sign, if, floor and ceil into smooth pieces, each with its conditions.

Every input point (ties, of probability zero, apart) satisfies the conditions of exactly one piece. Whether
a piece is empty is judged here only from the order of its own comparisons; `checks` looks further.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from dataclasses import replace as evolve

from outspread.formula.tree import Apply, Name, Node, Number, rebuild, walk
from outspread.routes.jacobian.branches import IntegerParameter, fresh_name
from outspread.routes.jacobian.construct import ONE, ZERO, negate

LARGEST_NUMBER = 200

_PIECEWISE = frozenset({"abs", "sign", "min", "max", "if", "floor", "ceil"})
_ORDERS = frozenset({"less", "less_equal", "greater", "greater_equal"})


@dataclass(frozen=True)
class Piece:
    """Smooth `outputs` that hold where all `conditions` do; floor and ceil are integer parameters in them."""

    outputs: tuple[Node, ...]
    conditions: tuple[Node, ...] = ()
    parameters: tuple[IntegerParameter, ...] = ()
    below: frozenset[tuple[Node, Node]] = frozenset()  # (a, b): a < b is among the conditions
    reserved: frozenset[str] = frozenset()  # names that a parameter may not have


def smooth_pieces(outputs: Mapping[str, Node], inputs: Iterable[str]) -> tuple[Piece, ...] | None:
    """The smooth pieces of the map; None where there are more than LARGEST_NUMBER."""
    unfinished, finished = [Piece(tuple(outputs.values()), reserved=frozenset((*outputs, *inputs)))], []
    while unfinished:
        piece = unfinished.pop(0)
        corner = _innermost(piece.outputs)
        if corner is None:
            finished.append(piece)
        else:
            unfinished[:0] = _split(piece, corner)
        if len(unfinished) + len(finished) > LARGEST_NUMBER:
            return None
    return tuple(finished)


def _innermost(outputs: Sequence[Node]) -> Apply | None:
    """A piecewise operator with no other one among its arguments, the first from the left."""
    for output in outputs:
        for node in walk(output):
            if isinstance(node, Apply) and node.operator in _PIECEWISE:
                inner = _innermost(node.arguments)
                return node if inner is None else inner
    return None


def _split(piece: Piece, corner: Apply) -> list[Piece]:
    first = corner.arguments[0]
    if corner.operator in ("abs", "sign"):
        values = (first, negate(first)) if corner.operator == "abs" else (ONE, negate(ONE))
        return _kept(
            _with(piece, corner, values[0], [Apply("greater_equal", (first, ZERO))]),
            _with(piece, corner, values[1], [Apply("less", (first, ZERO))]),
        )
    if corner.operator in ("min", "max"):
        different = tuple(dict.fromkeys(corner.arguments))
        return _kept(*(_chosen(piece, corner, different, index) for index in range(len(different))))
    if corner.operator == "if":
        condition, yes, no = corner.arguments
        return _kept(_with(piece, corner, yes, [condition]), _with(piece, corner, no, [opposite(condition)]))
    return [_whole_steps(piece, corner)]


def _kept(*pieces: Piece) -> list[Piece]:
    return [piece for piece in pieces if not _contradicts_itself(piece.below)]


def _chosen(piece: Piece, corner: Apply, arguments: Sequence[Node], index: int) -> Piece:
    """min or max taken by `arguments[index]`; of equal ones the first counts."""
    value = arguments[index]
    strict, loose = ("less", "less_equal") if corner.operator == "min" else ("greater", "greater_equal")
    conditions: list[Node] = [
        Apply(strict if other_index < index else loose, (value, other))
        for other_index, other in enumerate(arguments)
        if other_index != index
    ]
    return _with(piece, corner, value, conditions)


def _whole_steps(piece: Piece, corner: Apply) -> Piece:
    inner = corner.arguments[0]
    whole = Name(fresh_name("m", piece.reserved | {parameter.name for parameter in piece.parameters}))
    if corner.operator == "floor":
        conditions = [
            Apply("less_equal", (whole, inner)),
            Apply("less", (inner, Apply("add", (whole, ONE)))),
        ]
    else:
        conditions = [
            Apply("less", (Apply("add", (whole, Number(-1.0))), inner)),
            Apply("less_equal", (inner, whole)),
        ]
    parameters = (*piece.parameters, IntegerParameter(whole.name, inner, 1.0, corner.operator == "ceil"))
    split = _with(piece, corner, whole, list(conditions))
    return evolve(split, parameters=parameters)


def _with(piece: Piece, corner: Apply, value: Node, conditions: list[Node]) -> Piece:
    outputs = tuple(_put(output, corner, value) for output in piece.outputs)
    kept = tuple(_put(condition, corner, value) for condition in piece.conditions)
    below = {(_put(a, corner, value), _put(b, corner, value)) for a, b in piece.below}
    for condition in conditions:
        below |= _order(condition)
    joined = tuple(dict.fromkeys((*kept, *conditions)))
    return evolve(piece, outputs=outputs, conditions=joined, below=frozenset(below))


def _put(node: Node, corner: Apply, value: Node) -> Node:
    return rebuild(node, lambda part: value if part == corner else None)


def _order(condition: Node) -> set[tuple[Node, Node]]:
    if isinstance(condition, Apply) and condition.operator in _ORDERS:
        a, b = condition.arguments
        return {(a, b)} if condition.operator.startswith("less") else {(b, a)}
    return set()


def _contradicts_itself(below: frozenset[tuple[Node, Node]]) -> bool:
    """Whether the order a < b, b < c, … has a cycle (then it holds only on ties, with probability zero)."""
    after: dict[Node, list[Node]] = {}
    for a, b in below:
        after.setdefault(a, []).append(b)
    for start in after:
        seen, open_nodes = set(), list(after[start])
        while open_nodes:
            node = open_nodes.pop()
            if node == start:
                return True
            if node not in seen:
                seen.add(node)
                open_nodes.extend(after.get(node, ()))
    return False


_OPPOSITE = {
    "less": "greater_equal", "less_equal": "greater", "greater": "less_equal", "greater_equal": "less",
    "equal": "not_equal", "not_equal": "equal",
}  # fmt: skip


def opposite(condition: Node) -> Node:
    """The condition that holds exactly where the given one does not."""
    if isinstance(condition, Apply):
        if condition.operator in _OPPOSITE:
            return Apply(_OPPOSITE[condition.operator], condition.arguments)
        if condition.operator == "not":
            return condition.arguments[0]
    return Apply("not", (condition,))
