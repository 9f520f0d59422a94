"""Breaks a long formula into lines of LaTeX that each fit a width, so that nothing is clipped on a page.

Each line is LaTeX on its own: parentheses that span lines are plain ones. Setting one operator is for
`latex`.
"""

from __future__ import annotations

from collections.abc import Mapping

from outspread.formula.latex import Typesetter, estimated_width, product_sign
from outspread.formula.tree import COMPARISONS, Apply, Node

_SIGNS = {
    "less": " < ", "less_equal": r" \le ", "greater": " > ", "greater_equal": r" \ge ", "equal": " = ",
    "not_equal": r" \ne ", "and": r"\;\text{and}\;", "or": r"\;\text{or}\;",
}  # fmt: skip


def breakable(node: Node, symbols: Mapping[str, str], width: float) -> list[str]:
    """Lines of LaTeX of at most `width` (in average characters; a single symbol or number may be wider).

    A formula that fits comes back as one line. Lines after the first begin with their operator, so that
    they can be set one below another.
    """
    pieces = _Breaker(symbols, width).pieces(node, 0)
    lines = [pieces[0]]
    for piece in pieces[1:]:
        if estimated_width(lines[-1]) + estimated_width(piece) <= width:
            lines[-1] += piece
        else:
            lines.append(piece.lstrip() if not piece.startswith(r"\,") else rf"\cdot {piece[2:]}")
    return lines


class _Breaker:
    def __init__(self, symbols: Mapping[str, str], width: float):
        self.set = Typesetter(symbols)
        self.width = width

    def pieces(self, node: Node, wanted: int) -> list[str]:
        """The node as pieces between which a line may end; in parentheses where weaker than `wanted`."""
        text, strength = self.set.written(node, 0)
        if not isinstance(node, Apply) or estimated_width(text) <= self.width:
            return [text if strength >= wanted else rf"\left({text}\right)"]
        found, strength = self.split(node)
        return found if strength >= wanted else self.wrapped("(", found, ")")

    def wrapped(self, before: str, pieces: list[str], after: str) -> list[str]:
        pieces = [before + pieces[0], *pieces[1:]]
        pieces[-1] += after
        return pieces

    def split(self, node: Apply) -> tuple[list[str], int]:
        """Pieces and strength of a node that is too wide for a line; strengths as in `Typesetter`."""
        operator, arguments = node.operator, node.arguments
        if operator == "add":
            return self.sum(arguments), 5
        if operator == "negate":
            return self.wrapped("-", self.pieces(arguments[0], 7), ""), 6
        if operator == "multiply":
            return self.product(arguments), 7
        if operator == "divide":
            below = self.wrapped(" / ", self.pieces(arguments[1], 9), "")
            return self.pieces(arguments[0], 7) + below, 7
        if operator == "power":
            raised = self.set.written(arguments[1], 2)[0]
            if estimated_width(raised) <= self.width / 2:
                return self.wrapped("", self.pieces(arguments[0], 9), f"^{{{raised}}}"), 8
            return self.call(r"\mathrm{pow}", arguments), 9
        if operator in COMPARISONS or operator in ("and", "or"):
            sign = _SIGNS[operator]
            rest = [self.wrapped(sign, self.pieces(part, 5), "") for part in arguments[1:]]
            return self.pieces(arguments[0], 5) + [piece for part in rest for piece in part], 1
        if operator in ("sqrt", "hypot"):
            return self.root(node), 8
        if operator == "abs":
            return self.wrapped("|", self.pieces(arguments[0], 0), "|"), 9
        return self.call(self.name(operator), arguments), 9

    def name(self, operator: str) -> str:
        names = {"log": r"\ln", "log10": r"\log_{10}", "decibel": r"10\,\log_{10}", "gamma": r"\Gamma"}
        known = ("sin", "cos", "tan", "sinh", "cosh", "tanh", "exp", "min", "max")
        return names.get(operator) or (f"\\{operator}" if operator in known else rf"\mathrm{{{operator}}}")

    def call(self, name: str, arguments: tuple[Node, ...]) -> list[str]:
        pieces: list[str] = []
        for index, argument in enumerate(arguments):
            last = index == len(arguments) - 1
            pieces += self.wrapped("", self.pieces(argument, 0), "" if last else ", ")
        return self.wrapped(f"{name}(", pieces, ")")

    def root(self, node: Apply) -> list[str]:
        if node.operator == "sqrt":
            return self.wrapped("(", self.pieces(node.arguments[0], 0), ")^{1/2}")
        squares: list[str] = []
        for index, argument in enumerate(node.arguments):
            squares += self.wrapped(" + " if index else "", self.pieces(argument, 9), "^{2}")
        return self.wrapped("(", squares, ")^{1/2}")

    def sum(self, terms: tuple[Node, ...]) -> list[str]:
        pieces: list[str] = []
        for index, term in enumerate(terms):
            sign, text = self.set.term(term, not index, 0)
            if estimated_width(text) <= self.width:
                pieces.append(sign + text)
                continue
            inner = term.arguments[0] if isinstance(term, Apply) and term.operator == "negate" else term
            pieces += self.wrapped(sign, self.pieces(inner, 7), "")
        return pieces

    def product(self, factors: tuple[Node, ...]) -> list[str]:
        pieces = self.pieces(factors[0], 6)
        before = pieces[-1]
        for factor in factors[1:]:
            found = self.pieces(factor, 8)
            pieces += self.wrapped(product_sign(before, found[0]), found, "")
            before = found[-1]
        return pieces
