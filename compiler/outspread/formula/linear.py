"""Turns a tree into a list of operations in which equal sub-expressions occur once.

Shared by evaluation and enclosure; it computes nothing itself. Trees that share nodes (a step used twice)
are walked once per node object, so that the list stays as short as the formula.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from outspread.formula.tree import Apply, Name, Node, Number


@dataclass(frozen=True)
class Operation:
    """One entry: a number (`operator` "number"), a name ("name") or an operator on earlier entries."""

    operator: str
    arguments: tuple[int, ...] = ()
    value: float = 0.0
    name: str = ""


def postorder(node: Node) -> Iterator[Node]:
    """Every node object once, arguments before the nodes that use them, left to right."""
    seen: set[int] = set()
    stack: list[tuple[Node, bool]] = [(node, False)]
    while stack:
        current, ready = stack.pop()
        if id(current) in seen:
            continue
        if ready or not isinstance(current, Apply):
            seen.add(id(current))
            yield current
        else:
            stack.append((current, True))
            stack.extend((argument, False) for argument in reversed(current.arguments))


def linearise(node: Node) -> list[Operation]:
    """The operations of `node` in the order of computation; the last one is the result."""
    operations: list[Operation] = []
    slots: dict[object, int] = {}
    slot_of: dict[int, int] = {}
    for part in postorder(node):
        if isinstance(part, Number):
            # the sign keeps 0.0 and -0.0 apart, which compare equal
            key: object = ("number", part.value, math.copysign(1.0, part.value))
            operation = Operation("number", value=part.value)
        elif isinstance(part, Name):
            key = ("name", part.name)
            operation = Operation("name", name=part.name)
        elif isinstance(part, Apply):
            arguments = tuple(slot_of[id(argument)] for argument in part.arguments)
            key = (part.operator, arguments)
            operation = Operation(part.operator, arguments)
        else:
            raise TypeError(f"not a node of an expression: {part!r}")
        if key not in slots:
            slots[key] = len(operations)
            operations.append(operation)
        slot_of[id(part)] = slots[key]
    # A root equal to an earlier entry cannot occur: its arguments come before it and it comes last.
    return operations


def size(node: Node) -> int:
    """Number of nodes with every repetition counted, found in time linear in the distinct node objects."""
    sizes: dict[int, int] = {}
    for part in postorder(node):
        inner = part.arguments if isinstance(part, Apply) else ()
        sizes[id(part)] = 1 + sum(sizes[id(argument)] for argument in inner)
    return sizes[id(node)]
