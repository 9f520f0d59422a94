"""Writes an expression as formula text; `parser` reads it back (negative numbers as negated ones).

For messages, results and records; typesetting is in `latex`. A number that carries a constant's name is
written by that name.
"""

from __future__ import annotations

from outspread.formula.tree import COMPARISONS, Apply, Name, Node, Number

_SIGNS = {
    "less": "<", "less_equal": "<=", "greater": ">", "greater_equal": ">=", "equal": "==", "not_equal": "!=",
}  # fmt: skip

# Strengths, as in `parser`; an argument weaker than its place wants is put into parentheses.
_OR, _AND, _NOT, _COMPARE, _SUM, _PRODUCT, _UNARY, _POWER, _ATOM = range(1, 10)
_STRENGTH = {
    "or": _OR, "and": _AND, "not": _NOT, **dict.fromkeys(COMPARISONS, _COMPARE), "add": _SUM,
    "multiply": _PRODUCT, "divide": _PRODUCT, "negate": _UNARY, "power": _POWER,
}  # fmt: skip


def to_text(node: Node) -> str:
    """The formula as text with the fewest parentheses."""
    return _written(node)[0]


def number_text(number: Number) -> str:
    """The number as it was written, else its shortest decimal form."""
    if number.text:
        return number.text
    if number.value.is_integer() and abs(number.value) < 1e15:
        return str(int(number.value))
    return repr(number.value)


def _written(node: Node) -> tuple[str, int]:
    """Text and strength."""
    if isinstance(node, Number):
        written = number_text(node)
        return written, _UNARY if written.startswith("-") else _ATOM
    if isinstance(node, Name):
        return node.name, _ATOM
    assert isinstance(node, Apply)
    operator, arguments = node.operator, node.arguments
    if operator == "add":
        text = _sum(arguments)
    elif operator == "multiply":
        text = "*".join([_at(arguments[0], _PRODUCT), *(_at(part, _POWER) for part in arguments[1:])])
    elif operator == "divide":
        text = f"{_at(arguments[0], _PRODUCT)}/{_at(arguments[1], _POWER)}"
    elif operator == "negate":
        text = f"-{_at(arguments[0], _POWER)}"
    elif operator == "power":
        text = f"{_at(arguments[0], _ATOM)}^{_at(arguments[1], _UNARY)}"
    elif operator in _SIGNS:
        text = f"{_at(arguments[0], _SUM)} {_SIGNS[operator]} {_at(arguments[1], _SUM)}"
    elif operator in ("and", "or"):
        text = f" {operator} ".join(_at(part, _STRENGTH[operator] + 1) for part in arguments)
    elif operator == "not":
        text = f"not {_at(arguments[0], _NOT)}"
    else:
        text = f"{operator}({', '.join(to_text(part) for part in arguments)})"
    return text, _STRENGTH.get(operator, _ATOM)


def _at(node: Node, wanted: int) -> str:
    text, strength = _written(node)
    return text if strength >= wanted else f"({text})"


def _sum(terms: tuple[Node, ...]) -> str:
    pieces = [_at(terms[0], _PRODUCT)]
    for term in terms[1:]:
        if isinstance(term, Apply) and term.operator == "negate":
            pieces.append(f" - {_at(term.arguments[0], _PRODUCT)}")
        elif _leads_negative(term):
            pieces.append(f" - {_at(term, _PRODUCT)[1:]}")
        else:
            pieces.append(f" + {_at(term, _PRODUCT)}")
    return "".join(pieces)


def _leads_negative(term: Node) -> bool:
    """A negative number, or a product or quotient that begins with one: set as a difference."""
    while isinstance(term, Apply) and term.operator in ("multiply", "divide"):
        term = term.arguments[0]
    return isinstance(term, Number) and number_text(term).startswith("-")
