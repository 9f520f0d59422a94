"""The expression tree: immutable nodes that every reader of a formula shares.

It holds no behaviour beyond walking and replacing; evaluation, enclosure, differentiation, units and
typesetting live in their own modules beside this one.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

Span = tuple[int, int]
NOWHERE: Span = (-1, -1)

#: operator -> (smallest, largest) number of arguments; None: no upper limit.
#: There is no "subtract": a - b is add(a, negate(b)). Sums and products are n-ary and flat.
OPERATORS: dict[str, tuple[int, int | None]] = {
    "add": (2, None), "multiply": (2, None), "divide": (2, 2), "power": (2, 2), "negate": (1, 1),
    "less": (2, 2), "less_equal": (2, 2), "greater": (2, 2), "greater_equal": (2, 2),
    "equal": (2, 2), "not_equal": (2, 2),
    "and": (2, None), "or": (2, None), "not": (1, 1), "if": (3, 3),
    "sqrt": (1, 1), "exp": (1, 1), "log": (1, 1), "log10": (1, 1), "abs": (1, 1), "sign": (1, 1),
    "min": (1, None), "max": (1, None), "hypot": (1, None),
    "sin": (1, 1), "cos": (1, 1), "tan": (1, 1), "asin": (1, 1), "acos": (1, 1), "atan": (1, 1),
    "atan2": (2, 2), "sinh": (1, 1), "cosh": (1, 1), "tanh": (1, 1), "erf": (1, 1), "gamma": (1, 1),
    "floor": (1, 1), "ceil": (1, 1), "decibel": (1, 1), "from_decibel": (1, 1),
    # polygamma(n, x), n a whole number: not typed in formulas, it comes from differentiating gamma
    "polygamma": (2, 2),
}  # fmt: skip

COMPARISONS = frozenset({"less", "less_equal", "greater", "greater_equal", "equal", "not_equal"})
CONNECTIVES = frozenset({"and", "or", "not"})


@dataclass(frozen=True, slots=True)
class Node:
    """One node; `span` is (start, end) in the source text and takes no part in comparison."""


@dataclass(frozen=True, slots=True)
class Number(Node):
    """A constant. `text` is how it was written ("pi", "11.5e-6", a constant's name); not compared."""

    value: float
    text: str = field(default="", compare=False)
    span: Span = field(default=NOWHERE, compare=False)


@dataclass(frozen=True, slots=True)
class Name(Node):
    """A reference to an input, constant, step, output or parameter."""

    name: str
    span: Span = field(default=NOWHERE, compare=False)


@dataclass(frozen=True, slots=True)
class Apply(Node):
    """An operator of OPERATORS applied to its arguments."""

    operator: str
    arguments: tuple[Node, ...]
    span: Span = field(default=NOWHERE, compare=False)


def add(*terms: Node) -> Node:
    """Sum of the terms, flat; one term is returned as it is."""
    flat: list[Node] = []
    for term in terms:
        if isinstance(term, Apply) and term.operator == "add":
            flat.extend(term.arguments)
        else:
            flat.append(term)
    return flat[0] if len(flat) == 1 else Apply("add", tuple(flat))


def multiply(*factors: Node) -> Node:
    """Product of the factors, flat; one factor is returned as it is."""
    flat: list[Node] = []
    for factor in factors:
        if isinstance(factor, Apply) and factor.operator == "multiply":
            flat.extend(factor.arguments)
        else:
            flat.append(factor)
    return flat[0] if len(flat) == 1 else Apply("multiply", tuple(flat))


def subtract(left: Node, right: Node) -> Node:
    return add(left, Apply("negate", (right,)))


def walk(node: Node) -> Iterator[Node]:
    """Every node, parents before children, left to right."""
    stack = [node]
    while stack:
        current = stack.pop()
        yield current
        if isinstance(current, Apply):
            stack.extend(reversed(current.arguments))


def names(node: Node) -> tuple[str, ...]:
    """The names that occur, each once, in order of first occurrence."""
    found: dict[str, None] = {}
    seen: set[int] = set()  # parts that several places share are walked once
    stack = [node]
    while stack:
        part = stack.pop()
        if id(part) in seen:
            continue
        seen.add(id(part))
        if isinstance(part, Name):
            found.setdefault(part.name)
        elif isinstance(part, Apply):
            stack.extend(reversed(part.arguments))
    return tuple(found)


def occurrences(node: Node, name: str) -> int:
    return sum(1 for part in walk(node) if isinstance(part, Name) and part.name == name)


def rebuild(node: Node, change: Callable[[Node], Node | None]) -> Node:
    """A copy in which each node for which `change` returns a node is replaced by that (not walked again).

    Parts that several places share are rebuilt once and stay shared; depth is not limited by recursion.
    """
    done: dict[int, Node] = {}
    stack: list[tuple[Node, bool]] = [(node, False)]
    while stack:
        part, ready = stack.pop()
        if id(part) in done:
            continue
        if isinstance(part, Apply) and ready:
            arguments = tuple(done[id(argument)] for argument in part.arguments)
            same = all(new is old for new, old in zip(arguments, part.arguments, strict=True))
            done[id(part)] = part if same else Apply(part.operator, arguments, part.span)
            continue
        replacement = change(part)
        if replacement is not None:
            done[id(part)] = replacement
        elif isinstance(part, Apply):
            stack.append((part, True))
            stack.extend((argument, False) for argument in reversed(part.arguments))
        else:
            done[id(part)] = part
    return done[id(node)]


def substitute(node: Node, values: Mapping[str, Node]) -> Node:
    """A copy in which names are replaced by the nodes given for them."""
    return rebuild(node, lambda part: values.get(part.name) if isinstance(part, Name) else None)
