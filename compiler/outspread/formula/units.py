"""Checks the units of a formula and makes its numbers right: factors go in only where scales differ.

Where all is coherent the tree comes back unchanged, so that closed forms stay recognisable. Reading unit
text is in `unit`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from outspread.formula.folding import fold
from outspread.formula.tree import COMPARISONS, Apply, Name, Node, Number
from outspread.formula.unit import (
    BARE,
    LEVELS,
    Unit,
    UnitError,
    difference,
    level_text,
    parse_unit,
    power,
    same_dimension,
    times,
    unit_is_known,
)
from outspread.formula.unit_conversion import DECIBEL, RADIAN, Converter, Part, ratio_in_decibel, shifted

__all__ = ["resolve_units", "same_dimension", "unit_is_known"]

_PURE = frozenset(
    {"exp", "log", "log10", "sin", "cos", "tan", "sinh", "cosh", "tanh", "erf", "gamma", "floor", "ceil"}
)
_ANGLES = frozenset({"asin", "acos", "atan"})


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


class _Resolver(Converter):
    def result(self, part: Part, target: Unit, node: Node, wanted: str) -> Node:
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

    def pure(self, node: Node, where: str) -> Part:
        """The node as a pure number: ratios of different scales, percent and degrees get their factor."""
        part = self.part(node)
        found = self.converted(part, BARE) if part.unit.kind == "plain" else None
        if found is None:
            self.fail(
                node,
                f"{self.quote(node)} is {part.unit.described()}, and {where} takes a plain number or "
                "an angle; divide it by a reference in that unit",
            )
        return Part(found, BARE, part.free)

    # -- walking -----------------------------------------------------------------------------------

    def part(self, node: Node) -> Part:
        if isinstance(node, Number):
            return Part(node, BARE, True)
        if isinstance(node, Name):
            try:
                return Part(node, parse_unit(self.units.get(node.name, "")))
            except UnitError as error:
                self.fail(node, str(error))
        assert isinstance(node, Apply)
        return self.applied(node)

    def applied(self, node: Apply) -> Part:
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

    def function(self, node: Apply) -> Part:
        operator, arguments = node.operator, node.arguments
        if operator in _PURE or operator in _ANGLES:
            part = self.pure(arguments[0], operator)
            return self.rebuilt(node, [part], RADIAN if operator in _ANGLES else BARE)
        if operator == "decibel":
            part = self.pure(arguments[0], "decibel")
            return self.rebuilt(node, [part], DECIBEL)
        if operator == "from_decibel":
            return self.from_decibel(node)
        if operator in ("abs", "sign"):
            part = self.absolute(self.part(arguments[0]), arguments[0], operator)
            return self.rebuilt(node, [part], part.unit if operator == "abs" else BARE)
        parts = self.alike(node, arguments, operator, proportional=True)
        return self.rebuilt(node, parts, RADIAN if operator == "atan2" else parts[0].unit)

    def from_decibel(self, node: Apply) -> Part:
        argument = node.arguments[0]
        part = self.part(argument)
        if part.unit.kind == "level":
            reference = Unit("plain", part.unit.factor, part.unit.dimension, part.unit.words)
            return self.rebuilt(node, [part], reference)
        if part.free and part.unit.bare:
            return self.rebuilt(node, [part], BARE)
        found = self.converted(part, DECIBEL)
        if found is None:
            self.fail(
                argument,
                f"{self.quote(argument)} is {part.unit.described()}, and from_decibel takes dB or a level; "
                "give it the unit dB or dBm",
            )
        return self.rebuilt(node, [Part(found, DECIBEL, part.free)], BARE)

    # -- products and powers -----------------------------------------------------------------------

    def product(self, node: Apply) -> Part:
        what = "a product" if node.operator == "multiply" else "a quotient"
        parts = [self.absolute(self.part(argument), argument, what) for argument in node.arguments]
        sign = Fraction(1) if node.operator == "multiply" else Fraction(-1)
        unit = parts[0].unit
        for part in parts[1:]:
            # a pure number leaves the unit as it was written
            unit = unit if part.unit == BARE else times(unit, part.unit, sign)
        return self.rebuilt(node, parts, unit)

    def powered(self, node: Apply) -> Part:
        base = self.absolute(self.part(node.arguments[0]), node.arguments[0], "a power")
        if node.operator == "sqrt":
            return self.rebuilt(node, [base], power(base.unit, Fraction(1, 2)))
        exponent = self.pure(node.arguments[1], "an exponent")
        if base.unit.bare:
            return self.rebuilt(node, [Part(base.node, BARE, base.free), exponent], BARE)
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
        return self.rebuilt(node, [Part(found, BARE, base.free), exponent], BARE)

    # -- things that must be alike -----------------------------------------------------------------

    def alike(
        self, node: Apply, arguments: Sequence[Node], what: str, proportional: bool = False
    ) -> list[Part]:
        """The arguments in one unit, that of the first which has one (hypot, atan2: kelvin for degC)."""
        parts = [self.part(argument) for argument in arguments]
        if proportional:
            parts = [self.absolute(p, a, what) for p, a in zip(parts, arguments, strict=True)]
        target, reference = self.target(parts, arguments)
        return [
            self.fitted(part, argument, target, reference, what)
            for part, argument in zip(parts, arguments, strict=True)
        ]

    # -- sums --------------------------------------------------------------------------------------

    def sum(self, node: Apply) -> Part:
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

    def joined(self, node: Apply, signs: list[int], found: list[Part], unit: Unit, shift: float) -> Part:
        terms: list[Part] = []
        for sign, part, old in zip(signs, found, node.arguments, strict=True):
            if sign > 0:
                terms.append(part)
            else:
                assert isinstance(old, Apply)
                terms.append(self.rebuilt(old, [part], part.unit))
        result = self.rebuilt(node, terms, unit)
        return Part(shifted(result.node, shift), unit, result.free)

    def plain_sum(self, nodes: Sequence[Node], parts: Sequence[Part]) -> tuple[list[Part], Unit]:
        target, reference = self.target(parts, nodes)
        # 1 + x with x in percent: the sum is a pure number
        ratio = not target.dimension and not target.angle and any(part.free for part in parts)
        if ratio and not self.numbers_take_units and all(not part.unit.angle for part in parts):
            target = BARE
        pairs = zip(parts, nodes, strict=True)
        return [self.fitted(part, term, target, reference, "a sum") for part, term in pairs], target

    def offset_sum(
        self, node: Apply, signs: Sequence[int], nodes: Sequence[Node], parts: Sequence[Part]
    ) -> tuple[list[Part], Unit]:
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
                found.append(Part(number, scale))
            else:
                found.append(self.fitted(part, term, steps, reference, "a sum"))
        return found, scale if count == 1 else steps

    def level_sum(
        self, node: Apply, signs: Sequence[int], nodes: Sequence[Node], parts: Sequence[Part]
    ) -> tuple[list[Part], Unit, float]:
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
                found.append(self.fitted(part, term, DECIBEL, reference, "a sum of levels"))
        if not total.dimension:
            return found, DECIBEL, ratio_in_decibel(total.factor)
        known = [part.unit for part in parts if part.unit.kind == "level"]
        known += [parse_unit(name) for name in LEVELS]
        target = next((unit for unit in known if unit.dimension == total.dimension), None)
        if target is None:
            self.fail(
                node,
                f"levels in {first} cannot be added like this ({level_text(total)} would result); "
                "add powers as from_decibel(a) + from_decibel(b), or a gain in dB",
            )
        return found, target, ratio_in_decibel(total.factor / target.factor)
