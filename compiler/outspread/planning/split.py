"""Splits a formula into sub-formulas that share no input, and finds the inputs whose removal splits the rest.

A sub-formula whose inputs occur nowhere else has a law of its own; it is replaced by one new name. Operands
of sums, products, minima, maxima and hypot are grouped by the inputs they share, and many groups are paired
in a balanced way, so that chains stay short. Inputs that depend on each other count as one. Pure structure:
no probability is computed here.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

from outspread.formula.tree import Apply, Name, Node, names

ASSOCIATIVE = frozenset({"add", "multiply", "min", "max", "hypot", "and", "or"})


@dataclass(frozen=True)
class Part:
    """A sub-formula with a law of its own: `expression` in inputs and in the names of its own `parts`."""

    name: str
    expression: Node
    parts: tuple[Part, ...] = ()

    def inputs(self) -> tuple[str, ...]:
        """The inputs that enter, through parts too, in order of first occurrence."""
        own = {part.name: part for part in self.parts}
        found: dict[str, None] = {}
        for name in names(self.expression):
            for deep in own[name].inputs() if name in own else (name,):
                found.setdefault(deep)
        return tuple(found)


class Splitter:
    """`random`: the inputs that vary; `linked`: a key shared by inputs that depend on each other; `families`:
    what is alike stands together when operands are paired, since it may have a closed form."""

    def __init__(
        self,
        random: Iterable[str],
        linked: Mapping[str, str],
        taken: Iterable[str],
        families: Mapping[str, str],
    ):
        self._random = frozenset(random)
        self._linked, self._families = dict(linked), dict(families)
        self._taken = set(taken)
        self._made = 0
        self._seen: dict[int, tuple[Node, Counter[str]]] = {}

    def split(self, name: str, expression: Node) -> Part:
        """The formula with every sub-formula of two or more inputs of its own replaced by a part."""
        if len(self.entering(expression)) <= 2:
            return Part(name, expression)
        total = self._count(expression)
        parts: list[Part] = []
        reduced = self._visit(expression, total, parts, root=True)
        return Part(name, reduced, tuple(parts))

    def entering(self, node: Node) -> tuple[str, ...]:
        """The random inputs of a formula."""
        return tuple(name for name in names(node) if name in self._random)

    # --- structure ----------------------------------------------------------------------------------

    def _key(self, name: str) -> str:
        return self._linked.get(name, name)

    def _count(self, node: Node) -> Counter[str]:
        """How often each random input, or group of dependent ones, occurs."""
        known = self._seen.get(id(node))
        if known is not None:
            return known[1]
        if isinstance(node, Name):
            found = Counter([self._key(node.name)] if node.name in self._random else [])
        elif isinstance(node, Apply):
            found = Counter()
            for argument in node.arguments:
                found.update(self._count(argument))
        else:
            found = Counter()
        self._seen[id(node)] = (node, found)  # the node is kept, so that its id stays its own
        return found

    def _closed(self, count: Counter[str], total: Counter[str]) -> bool:
        return all(total[key] == number for key, number in count.items())

    def _visit(self, node: Node, total: Counter[str], parts: list[Part], root: bool = False) -> Node:
        if not isinstance(node, Apply) or not self._count(node):
            return node
        if not root and self._closed(self._count(node), total):
            return self._replaced(node, parts)
        arguments = node.arguments
        if node.operator in ASSOCIATIVE:
            groups = self._groups(arguments)
            closed = [group for group in groups if self._closed(self._sum(group), total)]
            if root and len(groups) > 1:
                return self._paired(node, groups, parts)
            if len(closed) < len(groups) and (len(closed) > 1 or (closed and len(closed[0]) > 1)):
                inside = {id(argument) for group in closed for argument in group}
                rest = [a for a in arguments if id(a) not in inside]
                own = [a for a in arguments if id(a) in inside]
                joined = self._replaced(Apply(node.operator, tuple(own), node.span), parts)
                visited = [self._visit(argument, total, parts) for argument in rest]
                return Apply(node.operator, (*visited, joined), node.span)
        changed = tuple(self._visit(argument, total, parts) for argument in arguments)
        return Apply(node.operator, changed, node.span)

    def _sum(self, arguments: Sequence[Node]) -> Counter[str]:
        found: Counter[str] = Counter()
        for argument in arguments:
            found.update(self._count(argument))
        return found

    def _groups(self, arguments: Sequence[Node]) -> list[list[Node]]:
        """The operands in groups that share no input; operands without inputs make no group."""
        groups: list[tuple[set[str], list[int]]] = []
        for index, argument in enumerate(arguments):
            keys, members = set(self._count(argument)), [index]
            if not keys:
                continue
            apart = []
            for other in groups:
                if keys & other[0]:
                    keys |= other[0]
                    members += other[1]
                else:
                    apart.append(other)
            groups = [*apart, (keys, members)]
        ordered = sorted(sorted(members) for _, members in groups)
        return [[arguments[i] for i in members] for members in ordered]

    def _paired(self, node: Apply, groups: list[list[Node]], parts: list[Part]) -> Node:
        """Two halves of about as many operands; constant operands stay beside them."""
        order = [self._alike(group) for group in groups]
        first = {key: order.index(key) for key in order}
        places = sorted(range(len(groups)), key=lambda place: (first[order[place]], place))
        groups = [groups[place] for place in places]
        half = (len(groups) + 1) // 2
        sides = []
        for chosen in (groups[:half], groups[half:]):
            members = [argument for group in chosen for argument in group]
            side = members[0] if len(members) == 1 else Apply(node.operator, tuple(members), node.span)
            sides.append(self._replaced(side, parts))
        constants = [argument for argument in node.arguments if not self._count(argument)]
        return Apply(node.operator, (*constants, *sides), node.span)

    def _alike(self, group: list[Node]) -> str:
        families = {self._families.get(name, "") for node in group for name in self.entering(node)}
        return families.pop() if len(families) == 1 else ""

    def _replaced(self, node: Node, parts: list[Part]) -> Node:
        """A name for a sub-formula of two or more inputs; one of a single input stays as it is."""
        if len(self.entering(node)) < 2:
            return node
        bare, wrap = _peeled(node)
        part = self.split(self._fresh(), bare)
        parts.append(part)
        return wrap(Name(part.name))

    def _fresh(self) -> str:
        while True:
            self._made += 1
            name = f"part_{self._made}"
            if name not in self._taken:
                return name


def _peeled(node: Node) -> tuple[Node, Callable[[Node], Node]]:
    """A sign around a sub-formula stays outside: its law is that of what is inside."""
    if isinstance(node, Apply) and node.operator == "negate":
        return node.arguments[0], lambda inside: Apply("negate", (inside,), node.span)
    return node, lambda inside: inside
