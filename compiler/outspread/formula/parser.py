"""Reads formula text into the expression tree: tokens, precedence, kinds (number or condition), limits.

It never evaluates text as a program and knows nothing of units or of which names exist, except through
`check_names`. Every error is a FormulaError with the offsets of the offending part.
"""

from __future__ import annotations

import math
from collections.abc import Collection
from typing import NoReturn

from outspread.errors import FormulaError
from outspread.formula.builder import MAXIMUM_LENGTH, MAXIMUM_NESTING, Builder, Part
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
from outspread.formula.tree import OPERATORS, Name, Node, walk

__all__ = ["FUNCTIONS", "RESERVED", "check_names", "near_miss", "parse", "parse_event"]

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


def _read(text: str) -> Part:
    if len(text) > MAXIMUM_LENGTH:
        raise FormulaError(
            f"the formula has {len(text):,} characters, and the limit is {MAXIMUM_LENGTH:,}; "
            "split it into named steps",
            text, 0, len(text),
        )  # fmt: skip
    if not text.strip():
        raise FormulaError("the formula is empty; write an expression such as a + b", text, 0, len(text))
    return _Reader(text).read()


class _Reader(Builder):
    """Precedence climbing over the tokens of one formula."""

    def __init__(self, text: str):
        super().__init__(text)
        self.tokens = tokens(text)
        self.position = 0
        self.nesting = 0  # open parentheses
        self.calls = 0  # levels of this reader's own recursion

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

    # -- grammar ---------------------------------------------------------------------------------

    def read(self) -> Part:
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

    def expression(self, strength: int) -> Part:
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

    def power(self, base: Part) -> Part:
        self.number_wanted(base, "under a power")
        self.advance()
        exponent = self.expression(_UNARY)  # right-associative, and a sign may follow
        self.number_wanted(exponent, "in an exponent")
        return self.make("power", [base, exponent], base.start, exponent.end)

    def product(self, first: Part) -> Part:
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

    def sum(self, first: Part) -> Part:
        self.number_wanted(first, "in a sum")
        terms = [first]
        while self.operator() in ("+", "-"):
            sign = self.advance()
            term = self.expression(_PRODUCT)
            self.number_wanted(term, "in a sum")
            terms.append(term if sign.text == "+" else self.make("negate", [term], sign.start, term.end))
        return self.flat("add", terms)

    def comparison(self, first: Part) -> Part:
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

    def connective(self, first: Part, operator: str) -> Part:
        parts = [first]
        while self.operator() == operator:
            self.advance()
            parts.append(self.expression(_STRENGTH[operator] + 1))
        for part in parts:
            self.condition_wanted(part, f"beside {operator}")
        return self.flat(operator, parts)

    def operand(self) -> Part:
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

    def number(self, token: Token) -> Part:
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
        return self.constant(value, token.text, token)

    def parenthesised(self, opening: Token) -> Part:
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

    def word(self, token: Token) -> Part:
        name = token.text
        called = self.token.text == "("
        if name == "not":
            part = self.expression(_COMPARE)
            self.condition_wanted(part, "behind not")
            return self.make("not", [part], token.start, part.end, True)
        if name in WORDS:
            self.fail(f"a condition is missing before {name}", token.start, token.end)
        if name == "pi" and not called:
            return self.constant(math.pi, "pi", token)
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

    def call(self, token: Token) -> Part:
        opening = self.advance()
        self.nesting += 1
        if self.nesting > MAXIMUM_NESTING:
            self.too_deep(opening)
        parts: list[Part] = []
        if self.token.text != ")":
            parts.append(self.expression(0))
            while self.token.text == ",":
                self.advance()
                parts.append(self.expression(0))
        closing = self.close(opening)
        self.nesting -= 1
        self.check_arity(token, parts, closing)
        return self.applied(token, parts, closing)

    def check_arity(self, token: Token, parts: list[Part], closing: Token) -> None:
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

    def applied(self, token: Token, parts: list[Part], closing: Token) -> Part:
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
