"""Checks the units of a formula and makes its numbers right: factors go in only where scales differ.

Where all is coherent the tree comes back unchanged, so that closed forms stay recognisable. Reading unit
text is in `unit`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NoReturn

from outspread.errors import FormulaError
from outspread.formula.folding import fold
from outspread.formula.tree import COMPARISONS, Apply, Name, Node, Number
from outspread.formula.unit import (
    BARE,
    LEVELS,
    Unit,
    UnitError,
    counts_hertz,
    counts_turns,
    difference,
    level_text,
    parse_unit,
    power,
    same_dimension,
    times,
    unit_is_known,
)

__all__ = ["resolve_units", "same_dimension", "unit_is_known"]

_DECIBEL = Unit("plain", Fraction(1), (("level", Fraction(1)),), (("dB", Fraction(1)),), text="dB")
_RADIAN = Unit("plain", Fraction(1), (), (("rad", Fraction(1)),), Fraction(1), text="rad")
_KELVIN = Unit("plain", Fraction(1), (("kelvin", Fraction(1)),), (("K", Fraction(1)),), text="K")
_TEMPERATURE = (("kelvin", Fraction(1)),)

_PURE = frozenset(
    {"exp", "log", "log10", "sin", "cos", "tan", "sinh", "cosh", "tanh", "erf", "gamma", "floor", "ceil"}
)
_ANGLES = frozenset({"asin", "acos", "atan"})


@dataclass(frozen=True)
class _Part:
    """A node whose number is right in `unit`; `free`: it holds no name, so its number has no unit yet."""

    node: Node
    unit: Unit
    free: bool = False


def resolve_units(
    node: Node, units: Mapping[str, str], wanted: str | None, text: str, *, numbers_take_units: bool = False
) -> tuple[Node, str]:
    """The tree that is numerically right for inputs in their own units, and the unit of its result.

    `units` gives the unit text of each name ("" or absent: a plain number). With `wanted` the result is
    converted to that unit, which is returned as written; with None the formula's own unit is returned ("" for
    a plain number or a condition). With `numbers_take_units` literal numbers beside quantities are taken in
    the unit of what they are added to or compared with (events over outputs). Where no unit is given at all,
    everything is a plain number. Raises FormulaError with the span of the sub-formula that does not fit.
    """
    if not wanted and not any(units.values()):
        return node, ""
    resolver = _Resolver(units, text, numbers_take_units)
    part = resolver.part(node)
    if wanted is None:
        return part.node, str(part.unit)
    try:
        target = parse_unit(wanted)
    except UnitError as error:
        resolver.fail(node, str(error))
    if part.free and numbers_take_units:
        return part.node, wanted
    return resolver.result(part, target, node, wanted), wanted


def _scaled(node: Node, factor: Fraction) -> Node:
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


def _shifted(node: Node, by: float) -> Node:
    if by == 0.0:
        return node
    span = node.span if isinstance(node, Number | Name | Apply) else (-1, -1)
    terms = node.arguments if isinstance(node, Apply) and node.operator == "add" else (node,)
    return Apply("add", (*terms, Number(by)), span)


def _ratio_in_decibel(factor: Fraction) -> float:
    """10 log10(factor), exact for powers of ten."""
    exponent = round(math.log10(factor))
    if factor == Fraction(10) ** exponent:
        return 10.0 * exponent
    return 10.0 * math.log10(factor)


class _Resolver:
    def __init__(self, units: Mapping[str, str], text: str, numbers_take_units: bool):
        self.units = units
        self.text = text
        self.numbers_take_units = numbers_take_units

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

    def converted(self, part: _Part, target: Unit) -> Node | None:
        """The part's node with its number in `target`; None where the units do not fit."""
        unit = part.unit
        if unit.dimension != target.dimension or (unit.kind == "level") != (target.kind == "level"):
            return None
        if unit.kind == "level":
            return _shifted(part.node, _ratio_in_decibel(unit.factor / target.factor))
        scaled = _scaled(part.node, unit.factor / target.factor)
        return _shifted(scaled, float((unit.zero - target.zero) / target.factor))

    def result(self, part: _Part, target: Unit, node: Node, wanted: str) -> Node:
        self.check_turns(part.unit, target, node)
        found = self.converted(part, target)
        if found is None:
            want = f"a result in {wanted}" if wanted else "a plain number"
            self.fail(
                node,
                f"the formula's result is {part.unit.described()}, and {want} is wanted; "
                "change the formula or the unit",
            )
        return found

    def check_turns(self, unit: Unit, target: Unit, node: Node) -> None:
        mixed = (counts_turns(unit) and counts_hertz(target)) or (counts_hertz(unit) and counts_turns(target))
        if mixed:
            self.fail(
                node,
                f"{unit} and {target} differ by the angle of a turn, 2*pi; "
                "write the frequency in 1/s and divide by 2*pi, or use rad/s throughout",
            )

    def absolute(self, part: _Part, node: Node, what: str) -> _Part:
        """The part as a plain quantity: temperatures with an offset in kelvin; a level is an error."""
        if part.unit.kind == "level":
            self.fail(
                node,
                f"{self.quote(node)} is a level {part.unit.described()} and cannot stand in {what}; "
                f"write from_decibel({self.quote(node)}) there",
            )
        if part.unit.kind == "offset":
            kelvin = self.converted(part, _KELVIN)
            assert kelvin is not None
            return _Part(kelvin, _KELVIN)
        return part

    def pure(self, node: Node, where: str) -> _Part:
        """The node as a pure number: ratios of different scales, percent and degrees get their factor."""
        part = self.part(node)
        found = self.converted(part, BARE) if part.unit.kind == "plain" else None
        if found is None:
            self.fail(
                node,
                f"{self.quote(node)} is {part.unit.described()}, and {where} takes a plain number or "
                "an angle; divide it by a reference in that unit",
            )
        return _Part(found, BARE, part.free)

    # -- walking -----------------------------------------------------------------------------------

    def part(self, node: Node) -> _Part:
        if isinstance(node, Number):
            return _Part(node, BARE, True)
        if isinstance(node, Name):
            try:
                return _Part(node, parse_unit(self.units.get(node.name, "")))
            except UnitError as error:
                self.fail(node, str(error))
        assert isinstance(node, Apply)
        return self.applied(node)

    def applied(self, node: Apply) -> _Part:
        operator = node.operator
        if operator == "add":
            return self.sum(node)
        if operator == "negate":
            inner = self.absolute(self.part(node.arguments[0]), node.arguments[0], "a product with -1")
            return self.rebuilt(node, [inner], inner.unit)
        if operator in ("multiply", "divide"):
            return self.product(node)
        if operator in ("power", "sqrt"):
            return self.powered(node)
        if operator in COMPARISONS:
            return self.rebuilt(node, self.alike(node, node.arguments, "a comparison"), BARE)
        if operator in ("and", "or", "not"):
            return self.rebuilt(node, [self.part(argument) for argument in node.arguments], BARE)
        if operator in ("min", "max"):
            parts = self.alike(node, node.arguments, operator)
            return self.rebuilt(node, parts, parts[0].unit)
        if operator == "if":
            condition = self.part(node.arguments[0])
            branches = self.alike(node, node.arguments[1:], "the branches of if")
            return self.rebuilt(node, [condition, *branches], branches[0].unit)
        return self.function(node)

    def rebuilt(self, node: Apply, parts: Sequence[_Part], unit: Unit) -> _Part:
        """The node with new arguments, or the node itself where none changed."""
        free = all(part.free for part in parts)
        if all(part.node is old for part, old in zip(parts, node.arguments, strict=True)):
            return _Part(node, unit, free)
        return _Part(Apply(node.operator, tuple(part.node for part in parts), node.span), unit, free)

    def function(self, node: Apply) -> _Part:
        operator, arguments = node.operator, node.arguments
        if operator in _PURE or operator in _ANGLES:
            part = self.pure(arguments[0], operator)
            return self.rebuilt(node, [part], _RADIAN if operator in _ANGLES else BARE)
        if operator == "decibel":
            part = self.pure(arguments[0], "decibel")
            return self.rebuilt(node, [part], _DECIBEL)
        if operator == "from_decibel":
            return self.from_decibel(node)
        if operator in ("abs", "sign"):
            part = self.absolute(self.part(arguments[0]), arguments[0], operator)
            return self.rebuilt(node, [part], part.unit if operator == "abs" else BARE)
        parts = self.alike(node, arguments, operator, proportional=True)
        return self.rebuilt(node, parts, _RADIAN if operator == "atan2" else parts[0].unit)

    def from_decibel(self, node: Apply) -> _Part:
        argument = node.arguments[0]
        part = self.part(argument)
        if part.unit.kind == "level":
            reference = Unit("plain", part.unit.factor, part.unit.dimension, part.unit.words)
            return self.rebuilt(node, [part], reference)
        if part.free and part.unit.bare:
            return self.rebuilt(node, [part], BARE)
        found = self.converted(part, _DECIBEL)
        if found is None:
            self.fail(
                argument,
                f"{self.quote(argument)} is {part.unit.described()}, and from_decibel takes dB or a level; "
                "give it the unit dB or dBm",
            )
        return self.rebuilt(node, [_Part(found, _DECIBEL, part.free)], BARE)

    # -- products and powers -----------------------------------------------------------------------

    def product(self, node: Apply) -> _Part:
        what = "a product" if node.operator == "multiply" else "a quotient"
        parts = [self.absolute(self.part(argument), argument, what) for argument in node.arguments]
        sign = Fraction(1) if node.operator == "multiply" else Fraction(-1)
        unit = parts[0].unit
        for part in parts[1:]:
            # a pure number leaves the unit as it was written
            unit = unit if part.unit == BARE else times(unit, part.unit, sign)
        return self.rebuilt(node, parts, unit)

    def powered(self, node: Apply) -> _Part:
        base = self.absolute(self.part(node.arguments[0]), node.arguments[0], "a power")
        if node.operator == "sqrt":
            return self.rebuilt(node, [base], power(base.unit, Fraction(1, 2)))
        exponent = self.pure(node.arguments[1], "an exponent")
        if base.unit.bare:
            return self.rebuilt(node, [_Part(base.node, BARE, base.free), exponent], BARE)
        fixed = fold(exponent.node)
        if isinstance(fixed, Number):
            exact = Fraction(fixed.value).limit_denominator(1000)
            unit = power(base.unit, exact) if float(exact) == fixed.value else None
            if unit is not None and abs(exact) <= 20:
                return self.rebuilt(node, [base, exponent], unit)
        found = self.converted(base, BARE)
        if found is None:
            self.fail(
                node.arguments[1],
                f"the exponent of {self.quote(node.arguments[0])}, which is {base.unit.described()}, must be "
                "a number such as 2 or 0.5; make the base a plain number for any other",
            )
        return self.rebuilt(node, [_Part(found, BARE, base.free), exponent], BARE)

    # -- things that must be alike -----------------------------------------------------------------

    def alike(
        self, node: Apply, arguments: Sequence[Node], what: str, proportional: bool = False
    ) -> list[_Part]:
        """The arguments in one unit, that of the first which has one (hypot, atan2: kelvin for degC)."""
        parts = [self.part(argument) for argument in arguments]
        if proportional:
            parts = [self.absolute(p, a, what) for p, a in zip(parts, arguments, strict=True)]
        target, reference = self.target(parts, arguments)
        return [
            self.fitted(part, argument, target, reference, what)
            for part, argument in zip(parts, arguments, strict=True)
        ]

    def target(self, parts: Sequence[_Part], nodes: Sequence[Node]) -> tuple[Unit, Node]:
        """The unit of the first part that has one, and that part as written."""
        pairs = zip(parts, nodes, strict=True)
        return next(((part.unit, node) for part, node in pairs if not part.free), (parts[0].unit, nodes[0]))

    def fitted(self, part: _Part, node: Node, target: Unit, reference: Node, what: str) -> _Part:
        """The part in the unit `target`, which `reference` has."""
        if part.free and part.unit.bare and not target.bare:
            return self.literal(part, node, target, reference, what)
        self.check_turns(part.unit, target, node)
        found = self.converted(part, target)
        if found is None:
            self.fail(
                node,
                f"{self.quote(node)} is {part.unit.described()}, and {self.quote(reference)} is "
                f"{self.part(reference).unit.described()}; {what} needs one dimension",
            )
        return _Part(found, target, part.free)

    def literal(self, part: _Part, node: Node, target: Unit, reference: Node, what: str) -> _Part:
        """A number without a unit beside quantities: taken in their unit, or refused."""
        zero = isinstance(node, Number) and node.value == 0.0
        if not (self.numbers_take_units or (zero and target.kind == "plain" and what != "a sum")):
            self.fail(
                node,
                f"{self.quote(node)} is a plain number, and {self.quote(reference)} is "
                f"{self.part(reference).unit.described()}; write the number as a constant with a unit",
            )
        return _Part(part.node, target, True)

    # -- sums --------------------------------------------------------------------------------------

    def sum(self, node: Apply) -> _Part:
        signs, inner = [], []
        for term in node.arguments:
            negative = isinstance(term, Apply) and term.operator == "negate"
            signs.append(-1 if negative else 1)
            inner.append(term.arguments[0] if negative and isinstance(term, Apply) else term)
        parts = [self.part(term) for term in inner]
        kinds = {part.unit.kind for part in parts}
        if "level" in kinds:
            found, unit, shift = self.level_sum(node, signs, inner, parts)
        elif "offset" in kinds:
            found, unit = self.offset_sum(node, signs, inner, parts)
            shift = 0.0
        else:
            found, unit = self.plain_sum(inner, parts)
            shift = 0.0
        return self.joined(node, signs, found, unit, shift)

    def joined(self, node: Apply, signs: list[int], found: list[_Part], unit: Unit, shift: float) -> _Part:
        terms: list[_Part] = []
        for sign, part, old in zip(signs, found, node.arguments, strict=True):
            if sign > 0:
                terms.append(part)
            else:
                assert isinstance(old, Apply)
                terms.append(self.rebuilt(old, [part], part.unit))
        result = self.rebuilt(node, terms, unit)
        return _Part(_shifted(result.node, shift), unit, result.free)

    def plain_sum(self, nodes: Sequence[Node], parts: Sequence[_Part]) -> tuple[list[_Part], Unit]:
        target, reference = self.target(parts, nodes)
        # 1 + x with x in percent: the sum is a pure number
        ratio = not target.dimension and not target.angle and any(part.free for part in parts)
        if ratio and not self.numbers_take_units and all(not part.unit.angle for part in parts):
            target = BARE
        pairs = zip(parts, nodes, strict=True)
        return [self.fitted(part, term, target, reference, "a sum") for part, term in pairs], target

    def offset_sum(
        self, node: Apply, signs: Sequence[int], nodes: Sequence[Node], parts: Sequence[_Part]
    ) -> tuple[list[_Part], Unit]:
        """Temperatures with an offset: one more added than taken is a temperature, as many a difference."""
        count = sum(sign for sign, part in zip(signs, parts, strict=True) if part.unit.kind == "offset")
        pairs = zip(parts, nodes, strict=True)
        scale, reference = next((part.unit, term) for part, term in pairs if part.unit.kind == "offset")
        if count not in (0, 1):
            self.fail(
                node,
                f"temperatures in {scale} cannot be added (their zero is arbitrary); "
                "add a difference in K, or use temperatures in K",
            )
        steps = difference(scale)
        found = []
        for part, term in zip(parts, nodes, strict=True):
            if part.unit.kind == "offset":
                number = self.converted(part, scale)
                assert number is not None
                found.append(_Part(number, scale))
            else:
                found.append(self.fitted(part, term, steps, reference, "a sum"))
        return found, scale if count == 1 else steps

    def level_sum(
        self, node: Apply, signs: Sequence[int], nodes: Sequence[Node], parts: Sequence[_Part]
    ) -> tuple[list[_Part], Unit, float]:
        """Levels add as their references multiply: dBm + dB is dBm, dBm - dBm is dB, dBm + dBm is nothing."""
        total = BARE
        pairs = list(zip(signs, parts, nodes, strict=True))
        first, reference = next((part.unit, term) for _, part, term in pairs if part.unit.kind == "level")
        found = []
        for sign, part, term in pairs:
            if part.unit.kind == "level":
                plain = Unit("plain", part.unit.factor, part.unit.dimension, part.unit.words)
                total = times(total, plain, Fraction(sign))
                found.append(part)
            else:
                found.append(self.fitted(part, term, _DECIBEL, reference, "a sum of levels"))
        if not total.dimension:
            return found, _DECIBEL, _ratio_in_decibel(total.factor)
        known = [part.unit for part in parts if part.unit.kind == "level"]
        known += [parse_unit(name) for name in LEVELS]
        target = next((unit for unit in known if unit.dimension == total.dimension), None)
        if target is None:
            self.fail(
                node,
                f"levels in {first} cannot be added like this ({level_text(total)} would result); "
                "add powers as from_decibel(a) + from_decibel(b), or a gain in dB",
            )
        return found, target, _ratio_in_decibel(total.factor / target.factor)
