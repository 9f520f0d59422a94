"""Splits formula text into tokens, and holds the words of the language with their common misspellings.

What may follow what is for `parser`.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Collection
from typing import NamedTuple

from outspread.errors import FormulaError

#: Functions by the name that is typed in a formula.
FUNCTIONS: tuple[str, ...] = (
    "sqrt", "exp", "log", "log10", "abs", "sign", "min", "max", "hypot", "sin", "cos", "tan", "asin",
    "acos", "atan", "atan2", "sinh", "cosh", "tanh", "erf", "gamma", "floor", "ceil", "decibel",
    "from_decibel", "if",
)  # fmt: skip
WORDS = frozenset({"and", "or", "not"})
#: Names that an input, constant, step or output may not have.
RESERVED = frozenset(FUNCTIONS) | WORDS | {"pi"}

OTHER_SPELLINGS = {
    "ln": "log(x)", "log_10": "log10(x)", "lg": "log10(x)", "log2": "log(x)/log(2)", "log1p": "log(1 + x)",
    "expm1": "exp(x) - 1", "pow": "a^b", "power": "a^b", "arcsin": "asin(x)", "arccos": "acos(x)",
    "arctan": "atan(x)", "arctan2": "atan2(y, x)", "arctg": "atan(x)", "tg": "tan(x)", "sqr": "x^2",
    "square": "x^2", "cbrt": "x^(1/3)", "db": "decibel(x)", "dB": "decibel(x)", "undb": "from_decibel(x)",
    "sgn": "sign(x)", "fabs": "abs(x)", "maximum": "max(a, b)", "minimum": "min(a, b)",
    "where": "if(condition, a, b)", "iif": "if(condition, a, b)", "ceiling": "ceil(x)", "int": "floor(x)",
    "sum": "a + b", "erfc": "1 - erf(x)", "norm": "hypot(a, b)", "mod": "x - a*floor(x/a)",
    "round": "floor(x + 0.5)", "cot": "1/tan(x)", "sec": "1/cos(x)", "csc": "1/sin(x)",
}  # fmt: skip

_TOKEN = re.compile(
    r"""(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)
      | (?P<name>[A-Za-z_][A-Za-z_0-9]*)
      | (?P<symbol>\*\*|<=|>=|==|!=|[-+*/^()<>,])
    """,
    re.VERBOSE,
)

_FOREIGN = {
    "=": "compare with ==", "&": "write and", "|": "write or, or abs(x) for an absolute value",
    "!": "write not", "[": "write (", "]": "write )", "{": "write (", "}": "write )",
    "\u2212": "write -", "\u2013": "write -", "\u00d7": "write *", "\u00b7": "write *", "\u22c5": "write *",
    "\u00f7": "write /", "\u2264": "write <=", "\u2265": "write >=", "\u2260": "write !=",
    "\u00b2": "write ^2", "\u00b3": "write ^3", "\u221a": "write sqrt(x)", "\u03c0": "write pi",
    "%": "write /100", ";": "separate arguments with a comma", "'": "use letters, digits and _ in names",
    '"': "use letters, digits and _ in names", "\u00b0": "write pi/180, or give the input the unit deg",
}  # fmt: skip


class Token(NamedTuple):
    kind: str  # number | name | symbol | end
    text: str
    start: int
    end: int


def tokens(text: str) -> list[Token]:
    found: list[Token] = []
    position = 0
    while position < len(text):
        if text[position].isspace():
            position += 1
            continue
        match = _TOKEN.match(text, position)
        if match is None:
            character = text[position]
            advice = _FOREIGN.get(character, "use letters, digits, _ and the signs + - * / ^ ( ) < > =")
            raise FormulaError(
                f"{character!r} has no meaning in a formula; {advice}", text, position, position + 1
            )
        kind = str(match.lastgroup)
        found.append(Token(kind, match.group(), position, match.end()))
        position = match.end()
    found.append(Token("end", "", len(text), len(text)))
    return found


def near_miss(word: str, known: Collection[str]) -> str | None:
    """The known word closest to `word`, if one is close; a difference in case only counts as closest."""
    listed = sorted(known)
    for candidate in listed:
        if candidate.lower() == word.lower():
            return candidate
    close = difflib.get_close_matches(word, listed, n=1, cutoff=0.6)
    return close[0] if close else None


def shape(name: str) -> str:
    return {"if": "condition, a, b", "atan2": "y, x", "min": "a, b", "max": "a, b", "hypot": "a, b"}.get(
        name, "x"
    )
