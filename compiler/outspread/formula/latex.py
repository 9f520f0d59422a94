"""Typesets expressions as LaTeX, within the commands that ziamath is known to draw rightly.

Breaking long formulas over lines is in `latex_lines`; drawing is for `reporting`.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence

from outspread.formula.text import number_text
from outspread.formula.tree import Apply, Name, Node, Number

_GREEK = frozenset({
    "alpha", "beta", "gamma", "delta", "zeta", "eta", "theta", "iota", "kappa", "lambda", "mu", "nu", "xi",
    "pi", "rho", "sigma", "tau", "upsilon", "phi", "chi", "psi", "omega", "Gamma", "Delta", "Theta", "Lambda",
    "Xi", "Pi", "Sigma", "Upsilon", "Phi", "Psi", "Omega",
})  # fmt: skip
_RELATIONS = {
    "less": "<", "less_equal": r"\le", "greater": ">", "greater_equal": r"\ge", "equal": "=",
    "not_equal": r"\ne",
}  # fmt: skip
_FUNCTIONS = {
    "log": r"\ln", "log10": r"\log_{10}", "sign": r"\mathrm{sgn}", "min": r"\min", "max": r"\max",
    "sin": r"\sin", "cos": r"\cos", "tan": r"\tan", "asin": r"\arcsin", "acos": r"\arccos",
    "atan": r"\arctan", "atan2": r"\mathrm{atan2}",
    "sinh": r"\sinh", "cosh": r"\cosh", "tanh": r"\tanh", "erf": r"\mathrm{erf}",
    "gamma": r"\Gamma", "exp": r"\exp",
}  # fmt: skip

# A fraction within fractions this deep is written with a slash: small print, and the time that the
# typesetter takes grows exponentially with nesting.
_DEEPEST_FRACTION = 2
_LONGEST_EXPONENT = 12.0  # average characters; a longer one is set as exp(...)

_OR, _AND, _NOT, _COMPARE, _SUM, _NEGATIVE, _PRODUCT, _FACTOR, _ATOM = range(1, 10)


def to_latex(node: Node, symbols: Mapping[str, str]) -> str:
    """LaTeX of the expression; `symbols` gives the LaTeX of names, others are made by `symbol_for`."""
    return Typesetter(symbols).written(node, 0)[0]


def symbol_for(name: str) -> str:
    r"""Default LaTeX of an identifier: x as it is, sigma2 as \sigma_{2}, bore_d as \mathrm{bore}_{d}."""
    head, *rest = [part for part in name.split("_") if part] or [name]
    match = re.fullmatch(r"([A-Za-z]+)(\d+)", head)
    if match:
        head, rest = match.group(1), [match.group(2), *rest]
    if not rest:
        return _word(head)
    return f"{_word(head)}_{{{','.join(_word(part) for part in rest)}}}"


def _word(word: str) -> str:
    if word in _GREEK:
        return f"\\{word}"
    if word == "epsilon":
        return r"\varepsilon"
    if len(word) == 1 or word.isdigit():
        return word
    return f"\\mathrm{{{word}}}".replace("_", r"\_")


def number_latex(number: Number, symbols: Mapping[str, str]) -> str:
    """The number as it was written, with powers of ten set as such; a constant's name as its symbol."""
    written = number_text(number)
    if written == "pi":
        return r"\pi"
    if written and (written[0].isalpha() or written[0] == "_") and written not in ("inf", "nan"):
        return symbols.get(written, symbol_for(written))
    if written in ("inf", "-inf"):
        return written.replace("inf", r"\infty")
    mantissa, _, exponent = written.lower().partition("e")
    if not exponent:
        return mantissa
    power = f"10^{{{int(exponent)}}}"
    if mantissa in ("1", "-1"):
        return power if mantissa == "1" else f"-{power}"
    return rf"{mantissa}\times {power}"


class Typesetter:
    """The rules of one typesetting: how each operator is set, and where parentheses are needed."""

    def __init__(self, symbols: Mapping[str, str]):
        self.symbols = symbols

    def written(self, node: Node, depth: int) -> tuple[str, int]:
        """LaTeX and binding strength; `depth` counts the fractions around the node."""
        if isinstance(node, Number):
            text = number_latex(node, self.symbols)
            if text.startswith("-"):
                return text, _NEGATIVE
            return text, _PRODUCT if r"\times" in text else _ATOM
        if isinstance(node, Name):
            text = self.symbols.get(node.name) or symbol_for(node.name)
            return text, _FACTOR if "^" in text else _ATOM
        assert isinstance(node, Apply)
        if node.operator in _RELATIONS:
            left, right = (self.at(part, _SUM, depth) for part in node.arguments)
            return f"{left} {_RELATIONS[node.operator]} {right}", _COMPARE
        if node.operator in ("and", "or", "not"):
            return self.connective(node, depth)
        if node.operator == "add":
            return self.sum(node.arguments, depth), _SUM
        if node.operator == "negate":
            return f"-{self.at(node.arguments[0], _PRODUCT, depth)}", _NEGATIVE
        if node.operator == "multiply":
            return self.product(node.arguments, depth), _PRODUCT
        if node.operator == "divide":
            return self.quotient(node, depth)
        if node.operator == "power":
            return self.power(node, depth), _FACTOR
        return self.function(node, depth)

    def at(self, node: Node, wanted: int, depth: int) -> str:
        text, strength = self.written(node, depth)
        return text if strength >= wanted else parenthesised(text)

    def sum(self, terms: Sequence[Node], depth: int) -> str:
        return "".join(
            sign + text for sign, text in (self.term(term, not i, depth) for i, term in enumerate(terms))
        )

    def term(self, term: Node, first: bool, depth: int) -> tuple[str, str]:
        """Sign and body of one term of a sum."""
        if isinstance(term, Apply) and term.operator == "negate":
            return ("-" if first else " - "), self.at(term.arguments[0], _PRODUCT, depth)
        text, strength = self.written(term, depth)
        if text.startswith("-") and strength >= _NEGATIVE:
            return ("-" if first else " - "), text[1:]
        if strength < _NEGATIVE:
            text = parenthesised(text)
        return ("" if first else " + "), text

    def product(self, factors: Sequence[Node], depth: int) -> str:
        before = self.at(factors[0], _NEGATIVE, depth)
        result = before
        for factor in factors[1:]:
            text = self.at(factor, _FACTOR, depth)
            result += product_sign(before, text) + text
            before = text
        return result

    def quotient(self, node: Apply, depth: int) -> tuple[str, int]:
        over, under = node.arguments
        if isinstance(over, Apply) and over.operator == "negate":
            positive = Apply("divide", (over.arguments[0], under))
            return f"-{self.at(positive, _PRODUCT, depth)}", _NEGATIVE
        if depth >= _DEEPEST_FRACTION:
            return f"{self.at(over, _PRODUCT, depth)}/{self.at(under, _FACTOR, depth)}", _PRODUCT
        divisors = [under]
        while isinstance(over, Apply) and over.operator == "divide":  # a/b/c is set as a/(b c)
            over, divisor = over.arguments
            divisors.insert(0, divisor)
        above = self.written(over, depth + 1)[0]
        below = self.written(under, depth + 1)[0] if len(divisors) == 1 else self.product(divisors, depth + 1)
        # a fraction needs no parentheses as a factor, only under a power
        return rf"\frac{{{above}}}{{{below}}}", _FACTOR

    def power(self, node: Apply, depth: int) -> str:
        base, exponent = node.arguments
        raised = self.written(exponent, _DEEPEST_FRACTION)[0]
        return f"{self.at(base, _ATOM, depth)}^{{{raised}}}"

    def connective(self, node: Apply, depth: int) -> tuple[str, int]:
        if node.operator == "not":
            return rf"\text{{not}}\;{self.at(node.arguments[0], _NOT, depth)}", _NOT
        strength = _AND if node.operator == "and" else _OR
        parts = [self.at(part, strength + 1, depth) for part in node.arguments]
        joined = [parts[0]]
        for left, right, text in zip(node.arguments, node.arguments[1:], parts[1:], strict=False):
            tail = self.chained(left, right, depth) if node.operator == "and" else ""
            if tail:
                joined[-1] += tail
            else:
                joined.append(text)
        if len(joined) == 1:
            return joined[0], _COMPARE
        return rf"\;\text{{{node.operator}}}\;".join(joined), strength

    def chained(self, first: Node, second: Node, depth: int) -> str:
        """The tail of a < b and b < c set as a < b < c; empty where the two do not make a chain."""
        rising, falling = ("less", "less_equal"), ("greater", "greater_equal")
        if not (isinstance(first, Apply) and isinstance(second, Apply)):
            return ""
        same = any(first.operator in group and second.operator in group for group in (rising, falling))
        if not same or first.arguments[1] != second.arguments[0]:
            return ""
        return f" {_RELATIONS[second.operator]} {self.at(second.arguments[1], _SUM, depth)}"

    def function(self, node: Apply, depth: int) -> tuple[str, int]:
        operator, arguments = node.operator, node.arguments
        inside = self.written(arguments[0], depth)[0]
        if operator == "if":
            return self.cases(node, depth)
        if operator == "sqrt":
            return rf"\sqrt{{{inside}}}", _FACTOR
        if operator == "abs" or (operator == "hypot" and len(arguments) == 1):
            return rf"\left|{inside}\right|", _ATOM
        if operator == "hypot":
            squares = [f"{self.at(part, _ATOM, depth)}^{{2}}" for part in arguments]
            return rf"\sqrt{{{' + '.join(squares)}}}", _FACTOR
        if operator in ("floor", "ceil"):
            return rf"\left\l{operator} {inside}\right\r{operator}", _ATOM
        if operator == "exp":
            raised = self.written(arguments[0], _DEEPEST_FRACTION)[0]
            if estimated_width(raised) <= _LONGEST_EXPONENT and r"\begin" not in raised:
                return f"\\mathrm{{e}}^{{{raised}}}", _FACTOR
        if operator == "decibel":
            return rf"10\,\log_{{10}}\!{parenthesised(inside)}", _PRODUCT
        if operator == "from_decibel":
            return f"10^{{{self.at(arguments[0], _PRODUCT, _DEEPEST_FRACTION)}/10}}", _FACTOR
        if operator == "polygamma":
            return rf"\psi^{{({inside})}}\!{parenthesised(self.written(arguments[1], depth)[0])}", _FACTOR
        listed = ", ".join(self.written(part, depth)[0] for part in arguments)
        return rf"{_FUNCTIONS[operator]}\!{parenthesised(listed)}", _FACTOR

    def cases(self, node: Apply, depth: int) -> tuple[str, int]:
        """Rows for if, else-if, otherwise; inside fractions or other cases a one-line form."""
        if depth:
            listed = ", ".join(self.written(part, depth)[0] for part in node.arguments)
            return rf"\mathrm{{if}}\!{parenthesised(listed)}", _FACTOR
        rows = []
        rest: Node = node
        while isinstance(rest, Apply) and rest.operator == "if":
            condition, value, rest = rest.arguments
            shown, when = self.written(value, 1)[0], self.written(condition, 1)[0]
            rows.append(rf"{shown} & \text{{if}}\;{when}")
        rows.append(rf"{self.written(rest, 1)[0]} & \text{{otherwise}}")
        return r"\begin{cases}" + r" \\ ".join(rows) + r"\end{cases}", _SUM


def parenthesised(text: str) -> str:
    return rf"\left({text}\right)"


def product_sign(left: str, right: str) -> str:
    r"""The sign between two factors: a dot before a digit and beside a word, else a thin space."""
    word = r"\mathrm{"
    euler = r"\mathrm{e}^"
    worded = any(text.startswith(word) and not text.startswith(euler) for text in (left, right))
    return r" \cdot " if right[0].isdigit() or worded else r"\,"


# -- width -----------------------------------------------------------------------------------------

_PIECE = re.compile(r"\\[A-Za-z]+\*?|\\.|[{}_^&]|\s+|.", re.DOTALL)
_NO_WIDTH = frozenset(
    {r"\left", r"\right", r"\!", r"\mathrm", r"\mathit", r"\text", r"\begin", r"\end", r"\\"}
)
_WIDE = {
    r"\,": 0.3,
    r"\;": 0.5,
    r"\quad": 2.0,
    r"\cdot": 1.5,
    r"\times": 2.0,
    r"\le": 2.0,
    r"\ge": 2.0,
    r"\ne": 2.0,
}
_WORDS = frozenset({
    "ln", "log", "min", "max", "sin", "cos", "tan", "arcsin", "arccos", "arctan", "sinh", "cosh",
    "tanh", "exp",
})  # fmt: skip


def estimated_width(latex: str) -> float:
    """Width of typeset LaTeX in average characters: fractions count their wider half, scripts 0.7."""
    pieces = [piece for piece in _PIECE.findall(latex) if not piece.isspace()]
    return _Width(pieces).sequence()


class _Width:
    def __init__(self, pieces: list[str]):
        self.pieces = pieces
        self.position = 0

    def sequence(self) -> float:
        """Width up to the closing brace or the end; rows of cases count their sum, which is safe."""
        total = 0.0
        while self.position < len(self.pieces) and self.pieces[self.position] != "}":
            total += self.one()
        return total

    def group(self) -> float:
        """Width of a braced group or of the next piece."""
        if self.position < len(self.pieces) and self.pieces[self.position] == "{":
            self.position += 1
            width = self.sequence()
            self.position += 1
            return width
        return self.one() if self.position < len(self.pieces) else 0.0

    def one(self) -> float:
        piece = self.pieces[self.position]
        if piece == "{":
            return self.group()
        self.position += 1
        if piece == r"\frac":
            return max(self.group(), self.group()) + 0.5
        if piece == r"\sqrt":
            return self.group() + 1.0
        if piece in ("_", "^"):
            return 0.7 * self.group()
        if piece in (r"\begin", r"\end"):
            self.group()
            return 1.0
        if piece in _NO_WIDTH or piece == "&":
            return 0.0
        if piece in _WIDE:
            return _WIDE[piece]
        if piece.startswith("\\"):
            return float(len(piece) - 1) if piece[1:] in _WORDS else 1.2
        return 2.0 if piece in "+-=<>" else 0.6 if piece in ".,|()" else 1.0
