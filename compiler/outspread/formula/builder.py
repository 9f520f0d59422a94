"""Builds the nodes of a formula being read; refuses too deep, too many, or constants without a value.

The grammar is in `parser`; this knows which kind (number or condition) stands where, and the limits.
"""

from __future__ import annotations

from typing import NamedTuple, NoReturn

from outspread.errors import FormulaError
from outspread.formula.constants import NoValue, constant_value
from outspread.formula.tokens import Token
from outspread.formula.tree import Apply, Node, Number

MAXIMUM_LENGTH = 20_000
MAXIMUM_NESTING = 100
MAXIMUM_NODES = 20_000


class Part(NamedTuple):
    """A node with the text it takes up (parentheses included), its kind and its depth."""

    node: Node
    start: int
    end: int
    condition: bool
    depth: int


class Builder:
    """Makes nodes of one formula text, and keeps count of them."""

    def __init__(self, text: str):
        self.text = text
        self.count = 0
        self.constants: dict[int, float] = {}
        self.kept: list[Node] = []  # keeps the nodes behind the ids of `constants` alive

    def fail(self, message: str, start: int, end: int) -> NoReturn:
        raise FormulaError(message, self.text, start, end)

    def too_deep(self, token: Token) -> NoReturn:
        self.fail(
            f"the formula is nested deeper than {MAXIMUM_NESTING} levels; split it into named steps",
            token.start,
            token.end,
        )

    def leaf(self, node: Node, token: Token) -> Part:
        self.counted(token.start, token.end)
        return Part(node, token.start, token.end, False, 1)

    def constant(self, value: float, written: str, token: Token) -> Part:
        """A number of the text, remembered as constant."""
        node = Number(value, written, (token.start, token.end))
        self.constants[id(node)] = value
        self.kept.append(node)
        return self.leaf(node, token)

    def counted(self, start: int, end: int) -> None:
        self.count += 1
        if self.count > MAXIMUM_NODES:
            self.fail(
                f"the formula has more than {MAXIMUM_NODES:,} parts; split it into named steps", start, end
            )

    def make(self, operator: str, parts: list[Part], start: int, end: int, condition: bool = False) -> Part:
        """The node of an operator, checked for depth, size and a finite value where it is constant."""
        self.counted(start, end)
        depth = 1 + max(part.depth for part in parts)
        if depth > MAXIMUM_NESTING:
            self.fail(
                f"the formula is nested deeper than {MAXIMUM_NESTING} levels; split it into named steps",
                start,
                end,
            )
        node = Apply(operator, tuple(part.node for part in parts), (start, end))
        if not condition and operator != "if":
            self.check_constant(node)
        return Part(node, start, end, condition, depth)

    def check_constant(self, node: Apply) -> None:
        # A constant argument was itself checked, so only its value is wanted: `constant_of` is cached by id.
        if not all(id(argument) in self.constants for argument in node.arguments):
            if node.operator == "divide" and self.constants.get(id(node.arguments[1])) == 0.0:
                self.fail(f"{self.quote(node)} divides by zero; the divisor must not be 0", *node.span)
            return
        values = [self.constants[id(argument)] for argument in node.arguments]
        try:
            value = constant_value(node.operator, values)
        except NoValue as reason:
            self.fail(f"{self.quote(node)} {reason}; write a constant with a finite value", *node.span)
        if value is not None:
            self.constants[id(node)] = value
            self.kept.append(node)

    def quote(self, node: Apply) -> str:
        written = self.text[node.span[0] : node.span[1]]
        return written if len(written) <= 40 else written[:37] + "..."

    def number_wanted(self, part: Part, where: str) -> None:
        if part.condition:
            self.fail(
                f"a condition stands {where}, and a number is wanted; write if(condition, 1, 0) to count it",
                part.start,
                part.end,
            )

    def condition_wanted(self, part: Part, where: str) -> None:
        if not part.condition:
            self.fail(
                f"a number stands {where}, and a condition is wanted; compare it, as in a > 0",
                part.start,
                part.end,
            )

    def flat(self, operator: str, parts: list[Part]) -> Part:
        """The n-ary node; arguments that are sums in a sum (products in a product) are taken in."""
        if len(parts) == 1:
            return parts[0]
        taken: list[Part] = []
        for part in parts:
            if isinstance(part.node, Apply) and part.node.operator == operator:
                depth = part.depth - 1
                taken.extend(
                    Part(argument, part.start, part.end, part.condition, depth)
                    for argument in part.node.arguments
                )
            else:
                taken.append(part)
        return self.make(operator, taken, parts[0].start, parts[-1].end, operator in ("and", "or"))
