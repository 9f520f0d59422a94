"""Conversion of the parts of a formula between units, with the numbers that go in where scales differ.

Which operators want what is in `units`.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NoReturn

from outspread.errors import FormulaError
from outspread.formula.tree import Apply, Name, Node, Number
from outspread.formula.unit import Unit, counts_hertz, counts_turns

DECIBEL = Unit("plain", Fraction(1), (("level", Fraction(1)),), (("dB", Fraction(1)),), text="dB")
RADIAN = Unit("plain", Fraction(1), (), (("rad", Fraction(1)),), Fraction(1), text="rad")
KELVIN = Unit("plain", Fraction(1), (("kelvin", Fraction(1)),), (("K", Fraction(1)),), text="K")


@dataclass(frozen=True)
class Part:
    """A node whose number is right in `unit`; `free`: it holds no name, so its number has no unit yet."""

    node: Node
    unit: Unit
    free: bool = False


def scaled(node: Node, factor: Fraction) -> Node:
    """node * factor, as an exact division where the factor is 1/n, and in front of a product."""
    if factor == 1:
        return node
    span = node.span if isinstance(node, Number | Name | Apply) else (-1, -1)
    if factor.numerator == 1 and factor.denominator < 2**53:
        return Apply("divide", (node, Number(float(factor.denominator))), span)
    number = Number(float(factor))
    if isinstance(node, Apply) and node.operator == "multiply":
        return Apply("multiply", (number, *node.arguments), span)
    return Apply("multiply", (number, node), span)


def shifted(node: Node, by: float) -> Node:
    if by == 0.0:
        return node
    span = node.span if isinstance(node, Number | Name | Apply) else (-1, -1)
    terms = node.arguments if isinstance(node, Apply) and node.operator == "add" else (node,)
    return Apply("add", (*terms, Number(by)), span)


def ratio_in_decibel(factor: Fraction) -> float:
    """10 log10(factor), exact for powers of ten."""
    exponent = round(math.log10(factor))
    if factor == Fraction(10) ** exponent:
        return 10.0 * exponent
    return 10.0 * math.log10(factor)


class Converter(ABC):
    """Converts parts of one formula text, and words what does not fit."""

    def __init__(self, units: Mapping[str, str], text: str, numbers_take_units: bool):
        self.units = units
        self.text = text
        self.numbers_take_units = numbers_take_units

    @abstractmethod
    def part(self, node: Node) -> Part:
        """The node with its unit."""

    # -- messages ----------------------------------------------------------------------------------

    def fail(self, node: Node, message: str) -> NoReturn:
        start, end = node.span if isinstance(node, Number | Name | Apply) else (-1, -1)
        if start < 0:
            start, end = 0, len(self.text)
        raise FormulaError(message, self.text, start, end)

    def quote(self, node: Node) -> str:
        start, end = node.span if isinstance(node, Number | Name | Apply) else (-1, -1)
        written = self.text[start:end] if start >= 0 else "the formula"
        return written if len(written) <= 40 else written[:37] + "..."

    # -- conversion --------------------------------------------------------------------------------

    def converted(self, part: Part, target: Unit) -> Node | None:
        """The part's node with its number in `target`; None where the units do not fit."""
        unit = part.unit
        if unit.dimension != target.dimension or (unit.kind == "level") != (target.kind == "level"):
            return None
        if unit.kind == "level":
            return shifted(part.node, ratio_in_decibel(unit.factor / target.factor))
        number = scaled(part.node, unit.factor / target.factor)
        return shifted(number, float((unit.zero - target.zero) / target.factor))

    def check_turns(self, unit: Unit, target: Unit, node: Node) -> None:
        mixed = (counts_turns(unit) and counts_hertz(target)) or (counts_hertz(unit) and counts_turns(target))
        if mixed:
            self.fail(
                node,
                f"{unit} and {target} differ by the angle of a turn, 2*pi; "
                "write the frequency in 1/s and divide by 2*pi, or use rad/s throughout",
            )

    def absolute(self, part: Part, node: Node, what: str) -> Part:
        """The part as a plain quantity: temperatures with an offset in kelvin; a level is an error."""
        if part.unit.kind == "level":
            self.fail(
                node,
                f"{self.quote(node)} is a level {part.unit.described()} and cannot stand in {what}; "
                f"write from_decibel({self.quote(node)}) there",
            )
        if part.unit.kind == "offset":
            kelvin = self.converted(part, KELVIN)
            assert kelvin is not None
            return Part(kelvin, KELVIN)
        return part

    def rebuilt(self, node: Apply, parts: Sequence[Part], unit: Unit) -> Part:
        """The node with new arguments, or the node itself where none changed."""
        free = all(part.free for part in parts)
        if all(part.node is old for part, old in zip(parts, node.arguments, strict=True)):
            return Part(node, unit, free)
        return Part(Apply(node.operator, tuple(part.node for part in parts), node.span), unit, free)

    def target(self, parts: Sequence[Part], nodes: Sequence[Node]) -> tuple[Unit, Node]:
        """The unit of the first part that has one, and that part as written."""
        pairs = zip(parts, nodes, strict=True)
        return next(((part.unit, node) for part, node in pairs if not part.free), (parts[0].unit, nodes[0]))

    def fitted(self, part: Part, node: Node, target: Unit, reference: Node, what: str) -> Part:
        """The part in the unit `target`, which `reference` has."""
        if part.free and part.unit.bare and not target.bare:
            return self.literal(part, node, target, reference, what)
        self.check_turns(part.unit, target, node)
        found = self.converted(part, target)
        if found is None:
            self.fail(
                node,
                f"{self.quote(node)} is {part.unit.described()}, and {self.quote(reference)} is "
                f"{self.part(reference).unit.described()}; {what} must have one dimension",
            )
        return Part(found, target, part.free)

    def literal(self, part: Part, node: Node, target: Unit, reference: Node, what: str) -> Part:
        """A number without a unit beside quantities: taken in their unit, or refused."""
        zero = isinstance(node, Number) and node.value == 0.0
        if not (self.numbers_take_units or (zero and target.kind == "plain" and what != "a sum")):
            self.fail(
                node,
                f"{self.quote(node)} is a plain number, and {self.quote(reference)} is "
                f"{self.part(reference).unit.described()}; write the number as a constant with a unit",
            )
        return Part(part.node, target, True)
