"""Reads formula text into the expression tree: tokens, precedence, kinds (number or condition), limits.

It never evaluates text as a program and knows nothing of units or of which names exist, except through
`check_names`. Every error is a FormulaError with the offsets of the offending part.
"""

from __future__ import annotations

import math
from collections.abc import Collection
from typing import NamedTuple, NoReturn

from outspread.errors import FormulaError
from outspread.formula.constants import NoValue, constant_value
from outspread.formula.tokens import (
    FUNCTIONS,
    OTHER_SPELLINGS,
    RESERVED,
    WORDS,
    Token,
    near_miss,
    shape,
    tokens,
)
from outspread.formula.tree import OPERATORS, Apply, Name, Node, Number, walk

__all__ = ["FUNCTIONS", "RESERVED", "check_names", "near_miss", "parse", "parse_event"]

MAXIMUM_LENGTH = 20_000
MAXIMUM_NESTING = 100
MAXIMUM_NODES = 20_000

_COMPARISON = {
    "<": "less",
    "<=": "less_equal",
    ">": "greater",
    ">=": "greater_equal",
    "==": "equal",
    "!=": "not_equal",
}

# Binding strengths; a higher number binds tighter.
_OR, _AND, _NOT, _COMPARE, _SUM, _PRODUCT, _UNARY, _POWER = range(1, 9)
_STRENGTH = {
    "or": _OR, "and": _AND, **dict.fromkeys(_COMPARISON, _COMPARE),
    "+": _SUM, "-": _SUM, "*": _PRODUCT, "/": _PRODUCT, "^": _POWER,
}  # fmt: skip


class _Part(NamedTuple):
    """A node with the text it takes up (parentheses included), its kind and its depth."""

    node: Node
    start: int
    end: int
    condition: bool
    depth: int


def parse(text: str) -> Node:
    """The tree of a formula whose value is a number. Raises FormulaError."""
    part = _read(text)
    if part.condition:
        raise FormulaError(
            "the formula is a condition, and a number is wanted; write if(condition, 1, 0) to count it",
            text, part.start, part.end,
        )  # fmt: skip
    return part.node


def parse_event(text: str) -> Node:
    """The tree of a condition, such as `clearance > 0 and load < 3`. Raises FormulaError."""
    part = _read(text)
    if not part.condition:
        raise FormulaError(
            "the event is a number, and a condition is wanted; compare it, as in a > 0",
            text, part.start, part.end,
        )  # fmt: skip
    return part.node


def check_names(node: Node, known: Collection[str], text: str) -> None:
    """Raises FormulaError for the first name that is not in `known`, with a near miss where there is one."""
    for part in walk(node):
        if isinstance(part, Name) and part.name not in known:
            raise FormulaError(_unknown_name(part.name, known), text, part.span[0], part.span[1])


def _unknown_name(name: str, known: Collection[str]) -> str:
    near = near_miss(name, known)
    if near:
        return f"{name} is not defined; did you mean {near}?"
    if name == "e":
        return "e is not defined; write exp(1) for the base of natural logarithms"
    if not known:
        return f"{name} is not defined, and no name may be used here; write a number"
    listed = sorted(known)
    shown = ", ".join(listed[:8]) + (", ..." if len(listed) > 8 else "")
    return f"{name} is not defined; write one of {shown}"


def _read(text: str) -> _Part:
    if len(text) > MAXIMUM_LENGTH:
        raise FormulaError(
            f"the formula has {len(text):,} characters, and the limit is {MAXIMUM_LENGTH:,}; "
            "split it into named steps",
            text, 0, len(text),
        )  # fmt: skip
    if not text.strip():
        raise FormulaError("the formula is empty; write an expression such as a + b", text, 0, len(text))
    return _Reader(text).read()


class _Reader:
    """Precedence climbing over the tokens of one formula."""

    def __init__(self, text: str):
        self.text = text
        self.tokens = tokens(text)
        self.position = 0
        self.nesting = 0  # open parentheses
        self.calls = 0  # levels of this reader's own recursion
        self.count = 0

    # -- errors and bookkeeping ------------------------------------------------------------------

    def fail(self, message: str, start: int, end: int) -> NoReturn:
        raise FormulaError(message, self.text, start, end)

    def too_deep(self, token: Token) -> NoReturn:
        self.fail(
            f"the formula is nested deeper than {MAXIMUM_NESTING} levels; split it into named steps",
            token.start,
            token.end,
        )

    @property
    def token(self) -> Token:
        return self.tokens[self.position]

    def operator(self) -> str:
        """The infix operator at the present position, `**` as `^`, or an empty string."""
        token = self.token
        if token.kind == "symbol":
            return "^" if token.text == "**" else token.text if token.text in _STRENGTH else ""
        return token.text if token.kind == "name" and token.text in ("and", "or") else ""

    def advance(self) -> Token:
        token = self.token
        self.position += 1
        return token

    def leaf(self, node: Node, token: Token) -> _Part:
        self.counted(token.start, token.end)
        return _Part(node, token.start, token.end, False, 1)

    def counted(self, start: int, end: int) -> None:
        self.count += 1
        if self.count > MAXIMUM_NODES:
            self.fail(
                f"the formula has more than {MAXIMUM_NODES:,} parts; split it into named steps", start, end
            )

    def make(self, operator: str, parts: list[_Part], start: int, end: int, condition: bool = False) -> _Part:
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
        return _Part(node, start, end, condition, depth)

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

    # -- grammar ---------------------------------------------------------------------------------

    def read(self) -> _Part:
        self.constants: dict[int, float] = {}
        self.kept: list[Node] = []  # keeps the nodes behind the ids of `constants` alive
        part = self.expression(0)
        token = self.token
        if token.kind != "end":
            self.unexpected(token)
        return part

    def unexpected(self, token: Token) -> NoReturn:
        if token.text == ")":
            self.fail("this ) closes nothing; remove it, or open a ( before", token.start, token.end)
        if token.text == ",":
            self.fail(
                "a comma stands outside a function's arguments; write a decimal point, as in 1.5",
                token.start,
                token.end,
            )
        before = self.tokens[self.position - 1]
        if token.text == "(" and before.kind == "name":
            self.not_a_function(before)
        if token.kind in ("number", "name") or token.text == "(":
            left, right = before.text, token.text
            if left == "*" or right in WORDS:
                self.fail(f"{right} does not fit here; join conditions with and, or", token.start, token.end)
            self.fail(
                f"an operator is missing between {left} and {right}; write {left}*{right} for a product",
                token.start,
                token.end,
            )
        self.fail(f"{token.text} does not fit here", token.start, token.end)

    def not_a_function(self, token: Token) -> NoReturn:
        name = token.text
        other = OTHER_SPELLINGS.get(name) or OTHER_SPELLINGS.get(name.lower())
        near = near_miss(name, FUNCTIONS)
        if other:
            advice = f"write {other}"
        elif near:
            advice = f"did you mean {near}?"
        else:
            advice = f"write {name}*(...) for a product, or one of the functions {', '.join(FUNCTIONS)}"
        self.fail(f"{name} is not a function; {advice}", token.start, token.end)

    def expression(self, strength: int) -> _Part:
        """Operand, then every infix operator that binds at least as tightly as `strength`."""
        self.calls += 1
        if self.calls > 2 * MAXIMUM_NESTING:
            self.too_deep(self.token)
        part = self.operand()
        while True:
            operator = self.operator()
            binding = _STRENGTH.get(operator, -1)
            if binding < max(strength, 1):
                break
            if binding == _POWER:
                part = self.power(part)
            elif binding == _PRODUCT:
                part = self.product(part)
            elif binding == _SUM:
                part = self.sum(part)
            elif binding == _COMPARE:
                part = self.comparison(part)
            else:
                part = self.connective(part, operator)
        self.calls -= 1
        return part

    def number_wanted(self, part: _Part, where: str) -> None:
        if part.condition:
            self.fail(
                f"a condition stands {where}, and a number is wanted; write if(condition, 1, 0) to count it",
                part.start,
                part.end,
            )

    def condition_wanted(self, part: _Part, where: str) -> None:
        if not part.condition:
            self.fail(
                f"a number stands {where}, and a condition is wanted; compare it, as in a > 0",
                part.start,
                part.end,
            )

    def power(self, base: _Part) -> _Part:
        self.number_wanted(base, "under a power")
        self.advance()
        exponent = self.expression(_UNARY)  # right-associative, and a sign may follow
        self.number_wanted(exponent, "in an exponent")
        return self.make("power", [base, exponent], base.start, exponent.end)

    def product(self, first: _Part) -> _Part:
        self.number_wanted(first, "in a product")
        factors = [first]
        while self.operator() in ("*", "/"):
            sign = self.advance().text
            factor = self.expression(_UNARY)
            self.number_wanted(factor, "in a product" if sign == "*" else "in a quotient")
            if sign == "*":
                factors.append(factor)
            else:
                over = self.flat("multiply", factors)
                factors = [self.make("divide", [over, factor], over.start, factor.end)]
        return self.flat("multiply", factors)

    def sum(self, first: _Part) -> _Part:
        self.number_wanted(first, "in a sum")
        terms = [first]
        while self.operator() in ("+", "-"):
            sign = self.advance()
            term = self.expression(_PRODUCT)
            self.number_wanted(term, "in a sum")
            terms.append(term if sign.text == "+" else self.make("negate", [term], sign.start, term.end))
        return self.flat("add", terms)

    def flat(self, operator: str, parts: list[_Part]) -> _Part:
        """The n-ary node; arguments that are sums in a sum (products in a product) are taken in."""
        if len(parts) == 1:
            return parts[0]
        taken: list[_Part] = []
        for part in parts:
            if isinstance(part.node, Apply) and part.node.operator == operator:
                depth = part.depth - 1
                taken.extend(
                    _Part(argument, part.start, part.end, part.condition, depth)
                    for argument in part.node.arguments
                )
            else:
                taken.append(part)
        return self.make(operator, taken, parts[0].start, parts[-1].end, operator in ("and", "or"))

    def comparison(self, first: _Part) -> _Part:
        sides, operators = [first], []
        while self.operator() in _COMPARISON:
            operators.append(_COMPARISON[self.advance().text])
            sides.append(self.expression(_SUM))
        for side in sides:
            self.number_wanted(side, "in a comparison")
        compared = [
            self.make(operator, [left, right], left.start, right.end, True)
            for operator, left, right in zip(operators, sides, sides[1:], strict=False)
        ]
        return self.flat("and", compared)

    def connective(self, first: _Part, operator: str) -> _Part:
        parts = [first]
        while self.operator() == operator:
            self.advance()
            parts.append(self.expression(_STRENGTH[operator] + 1))
        for part in parts:
            self.condition_wanted(part, f"beside {operator}")
        return self.flat(operator, parts)

    def operand(self) -> _Part:
        token = self.advance()
        if token.kind == "number":
            return self.number(token)
        if token.text == "(":
            return self.parenthesised(token)
        if token.text in ("-", "+"):
            part = self.expression(_UNARY)
            self.number_wanted(part, f"behind a {token.text} sign")
            if token.text == "+":
                return part._replace(start=token.start)
            return self.make("negate", [part], token.start, part.end)
        if token.kind == "name":
            return self.word(token)
        return self.missing(token)

    def missing(self, token: Token) -> NoReturn:
        if token.kind == "end":
            before = self.tokens[self.position - 2]
            self.fail(
                f"the formula ends behind {before.text}; write a number or a name there",
                before.start,
                before.end,
            )
        behind = f" behind {self.tokens[self.position - 2].text}" if self.position > 1 else ""
        self.fail(f"a number or a name is missing{behind}; found {token.text}", token.start, token.end)

    def number(self, token: Token) -> _Part:
        value = float(token.text)
        if math.isinf(value):
            self.fail(
                f"{token.text} is too large for a number; the limit is about 1.8e308", token.start, token.end
            )
        following = self.token
        if following.kind in ("name", "number") and following.start == token.end:
            if following.text in WORDS or following.kind == "number":
                self.unexpected(following)
            self.fail(
                f"an operator is missing between {token.text} and {following.text}; "
                f"write {token.text}*{following.text} for a product",
                token.start,
                following.end,
            )
        node = Number(value, token.text, (token.start, token.end))
        self.constants[id(node)] = value
        self.kept.append(node)
        return self.leaf(node, token)

    def parenthesised(self, opening: Token) -> _Part:
        self.nesting += 1
        if self.nesting > MAXIMUM_NESTING:
            self.too_deep(opening)
        if self.token.text == ")":
            self.fail(
                "the parentheses are empty; write a number or a name in them", opening.start, self.token.end
            )
        part = self.expression(0)
        closing = self.close(opening)
        self.nesting -= 1
        return part._replace(start=opening.start, end=closing.end)

    def close(self, opening: Token) -> Token:
        token = self.token
        if token.text != ")":
            self.unclosed(opening, token)
        return self.advance()

    def unclosed(self, opening: Token, token: Token) -> NoReturn:
        if token.kind == "end":
            self.fail("this ( is never closed; write the ) that belongs to it", opening.start, opening.end)
        self.unexpected(token)

    def word(self, token: Token) -> _Part:
        name = token.text
        called = self.token.text == "("
        if name == "not":
            part = self.expression(_COMPARE)
            self.condition_wanted(part, "behind not")
            return self.make("not", [part], token.start, part.end, True)
        if name in WORDS:
            self.fail(f"a condition is missing before {name}", token.start, token.end)
        if name == "pi" and not called:
            node: Node = Number(math.pi, "pi", (token.start, token.end))
            self.constants[id(node)] = math.pi
            self.kept.append(node)
            return self.leaf(node, token)
        if called:
            if name not in FUNCTIONS:
                self.not_a_function(token)
            return self.call(token)
        if name in FUNCTIONS:
            self.fail(
                f"{name} is a function, and its arguments are missing; write {name}({shape(name)})",
                token.start,
                token.end,
            )
        return self.leaf(Name(name, (token.start, token.end)), token)

    def call(self, token: Token) -> _Part:
        opening = self.advance()
        self.nesting += 1
        if self.nesting > MAXIMUM_NESTING:
            self.too_deep(opening)
        parts: list[_Part] = []
        if self.token.text != ")":
            parts.append(self.expression(0))
            while self.token.text == ",":
                self.advance()
                parts.append(self.expression(0))
        closing = self.close(opening)
        self.nesting -= 1
        self.check_arity(token, parts, closing)
        return self.applied(token, parts, closing)

    def check_arity(self, token: Token, parts: list[_Part], closing: Token) -> None:
        least, most = OPERATORS[token.text]
        if len(parts) < least or (most is not None and len(parts) > most):
            wanted = f"{least}" if least == most else f"at least {least}"
            plural = "" if wanted.endswith(" 1") or wanted == "1" else "s"
            self.fail(
                f"{token.text} takes {wanted} argument{plural} and has {len(parts)}; "
                f"write {token.text}({shape(token.text)})",
                token.start,
                closing.end,
            )

    def applied(self, token: Token, parts: list[_Part], closing: Token) -> _Part:
        name = token.text
        if name != "if":
            for part in parts:
                self.number_wanted(part, f"in {name}(...)")
            return self.make(name, parts, token.start, closing.end)
        self.condition_wanted(parts[0], "as the first argument of if")
        if parts[1].condition != parts[2].condition:
            odd = parts[1] if parts[1].condition else parts[2]
            self.number_wanted(odd, "as one branch of if")
        if parts[1].condition:
            self.number_wanted(parts[1], "as a branch of if")
        return self.make("if", parts, token.start, closing.end)
