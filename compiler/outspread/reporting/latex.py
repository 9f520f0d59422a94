"""Reads the LaTeX that a report contains into a small tree, and refuses what it does not know.

The tree is drawn by `mathml` and `typeset` and broken into lines by `breaking`; nothing here draws.
Unknown macros and environments raise LatexError: drawn literally they would be a false formula.
"""

from __future__ import annotations

import re
from functools import lru_cache

from outspread.reporting import symbols
from outspread.reporting.parts import Fence, Fraction, Mark, Part, Root, Row, Scripts, Space, Symbol, Table

#: caps that keep drawing time and size bounded, whatever the text
MOST_CHARACTERS = 20_000
DEEPEST = 40
DEEPEST_TABLE = 2
LARGEST_TABLE = 100


class LatexError(ValueError):
    """The text is not LaTeX that a report can typeset; the caller shows it as plain text instead."""


_TOKEN = re.compile(r"\\[A-Za-z]+\*?|\\.|\d+(?:\.\d+)?|\s+|.", re.DOTALL)
_BINARY = {"+": "+", "-": "−", "*": "∗", "−": "−", "·": "·", "×": "×", "±": "±"}
_RELATION = {character: character for character in "=<>≤≥≠≈→∈∼:"}
_PUNCTUATION = frozenset(",;")


@lru_cache(maxsize=4096)
def read(text: str) -> tuple[Row, ...]:
    """The formula's lines (one, unless it holds `\\\\`). Raises LatexError."""
    if len(text) > MOST_CHARACTERS:
        raise LatexError(f"a formula of more than {MOST_CHARACTERS} characters")
    reader = _Reader(_unwrapped(text.strip()))
    lines = [reader.row(frozenset({"\\\\"}), columns=False)]
    while reader.here == "\\\\":
        reader.take()
        reader.skip_row_gap()
        lines.append(reader.row(frozenset({"\\\\"}), columns=False))
    if reader.here:
        raise LatexError(f"unexpected {reader.here!r}")
    return tuple(line for line in lines if line.parts)


def _unwrapped(text: str) -> str:
    """The inside of a stacking environment when that is the whole formula."""
    match = re.fullmatch(r"\\begin\{([A-Za-z*]+)\}(.*)\\end\{\1\}", text, re.DOTALL)
    if match and match[1] in symbols.STACKS and f"\\begin{{{match[1]}}}" not in match[2]:
        return match[2].strip()
    return text


class _Reader:
    """Recursive descent over the tokens of one formula."""

    def __init__(self, text: str):
        self.tokens = _TOKEN.findall(text)
        self.position = 0
        self.depth = 0
        self.tables = 0

    @property
    def here(self) -> str:
        return self.tokens[self.position] if self.position < len(self.tokens) else ""

    def take(self) -> str:
        token = self.here
        if not token:
            raise LatexError("the formula ends too early")
        self.position += 1
        return token

    def skip_space(self) -> None:
        while self.here.isspace():
            self.position += 1

    def skip_row_gap(self) -> None:
        """Passes over the optional `[4pt]` behind a line break."""
        ahead = "".join(self.tokens[self.position : self.position + 6])
        match = re.match(r"\[-?[\d.]+(?:pt|em|ex|mm)\]", ahead)
        length = 0
        while match and length < match.end():
            length += len(self.take())

    def row(self, stops: frozenset[str], columns: bool = True) -> Row:
        """Parts up to one of the stops, which is not taken; `columns`: `&` is a stop too."""
        self.depth += 1
        if self.depth > DEEPEST:
            raise LatexError(f"nested more than {DEEPEST} deep")
        parts: list[Part] = []
        while True:
            self.skip_space()
            token = self.here
            if not token or token in stops or (columns and token == "&"):
                break
            if token == "&":
                self.take()
                continue
            if token in ("}", "\\right", "\\end", "\\\\"):
                raise LatexError(f"unexpected {token!r}")
            part = self.scripted(parts)
            if part is not None:
                parts.append(part)
        self.depth -= 1
        return Row(tuple(parts))

    def scripted(self, before: list[Part]) -> Part | None:
        """The next part with its sub- and superscripts and primes."""
        base: Part | None
        base = Row(()) if self.here in ("^", "_", "'") else self.part()
        below: Row | None = None
        above: Row | None = None
        while True:
            self.skip_space()
            if self.here == "'":
                primes = ""
                while self.here == "'":
                    primes += "′"
                    self.take()
                above = Row((Symbol(primes, "ordinary"), *(above.parts if above else ())))
            elif self.here in ("_", "^"):
                sign = self.take()
                script = self.argument()
                if sign == "_":
                    more = (*below.parts, Symbol(",", "punctuation")) if below is not None else ()
                    below = Row((*more, *script.parts))  # x_n_k, an index to an indexed symbol: x with n, k
                else:
                    above = Row((*(above.parts if above else ()), *script.parts))
            elif self.here in ("\\limits", "\\nolimits"):
                self.take()
            else:
                break
        if base is None:
            return None
        return base if below is None and above is None else Scripts(base, below, above)

    def argument(self) -> Row:
        """A braced group or the next single part."""
        self.skip_space()
        if self.here == "{":
            self.take()
            inside = self.row(frozenset({"}"}), columns=False)
            if self.take() != "}":
                raise LatexError("a brace is not closed")
            return inside
        if self.here[:1].isdigit():  # in x^12 only the 1 belongs to the exponent, as in TeX
            token = self.take()
            if len(token) > 1:
                self.position -= 1
                self.tokens[self.position] = token[1:]
            return Row((Symbol(token[0], "number"),))
        part = self.part()
        return Row((part,) if part is not None else ())

    def part(self) -> Part | None:
        token = self.take()
        if token == "{":
            self.position -= 1
            group = self.argument()
            single = group.parts[0] if len(group.parts) == 1 else group
            return group if isinstance(single, Symbol) else single  # {-} stays a group: an ordinary minus
        if token.startswith("\\"):
            return self.macro(token)
        if token[0].isdigit():
            return Symbol(token, "number")
        for table, kind in ((_BINARY, "binary"), (_RELATION, "relation")):
            if token in table:
                return Symbol(table[token], kind)
        if token in _PUNCTUATION:
            return Symbol(token, "punctuation")
        if token in "([":
            return Symbol(token, "open")
        if token in ")]!":
            return Symbol(token, "close")
        if token in "|/.?°%′∞∅":
            return Symbol(token, "ordinary")
        if token == "~":
            return Space(0.25)
        if token.isalpha():
            return Symbol(token, "letter")
        raise LatexError(f"the character {token!r} cannot be typeset")

    def macro(self, token: str) -> Part | None:
        name = token[1:]
        if name in symbols.IGNORED:
            return None
        if name in symbols.SPACES:
            return Space(symbols.SPACES[name])
        for table, kind in (
            (symbols.LETTERS, "letter"),
            (symbols.ORDINARY, "ordinary"),
            (symbols.BINARY, "binary"),
            (symbols.RELATIONS, "relation"),
        ):
            if name in table:
                return Symbol(table[name], kind)
        if name in symbols.LARGE:
            character, limits = symbols.LARGE[name]
            return Symbol(character, "large", limits=limits)
        if name in symbols.FUNCTIONS:
            return Symbol(name, "function", limits=symbols.FUNCTIONS[name])
        if token in symbols.DELIMITERS:
            return _delimiter(symbols.DELIMITERS[token], token)
        return self.structure(name)

    def structure(self, name: str) -> Part | None:
        """Macros that take arguments."""
        if name in ("frac", "dfrac", "tfrac"):
            return Fraction(self.argument(), self.argument())
        if name in ("binom", "dbinom", "tbinom"):
            return Fence("(", Row((Fraction(self.argument(), self.argument(), line=False),)), ")")
        if name == "sqrt":
            index = self.bracketed()
            return Root(self.argument(), index)
        if name == "left":
            return self.fence()
        if name in symbols.SIZES:
            self.skip_space()
            token = self.take()
            if token not in symbols.DELIMITERS:
                raise LatexError(f"{token!r} is not a delimiter")
            return _delimiter(symbols.DELIMITERS[token], token, symbols.SIZES[name])
        if name in symbols.VARIANTS:
            return _in_variant(self.argument(), symbols.VARIANTS[name])
        if name in symbols.TEXTS or name == "operatorname*":
            words = self.words()
            upright = name.startswith("operatorname")
            return Symbol(words, "function" if upright else "text", limits=name.endswith("*"))
        if name in symbols.ACCENTS:
            return Mark(symbols.ACCENTS[name], self.argument())
        if name in symbols.LINES:
            return Mark("‾" if name != "underline" else "_", self.argument(), symbols.LINES[name] == "under")
        if name in ("underset", "overset", "stackrel"):
            script, base = self.argument(), self.argument()
            below, above = (script, None) if name == "underset" else (None, script)
            return Scripts(_limited(base), below, above)
        if name == "substack":
            return self.argument()
        if name == "begin":
            return self.environment()
        raise LatexError(f"the macro \\{name} is not known")

    def bracketed(self) -> Row | None:
        self.skip_space()
        if self.here != "[":
            return None
        self.take()
        inside = self.row(frozenset({"]"}), columns=False)
        self.take()
        return inside

    def words(self) -> str:
        """The plain text of a \\text{...} argument; nested braces are not read."""
        self.skip_space()
        if self.take() != "{":
            raise LatexError("text must stand in braces")
        found: list[str] = []
        while self.here and self.here != "}":
            token = self.take()
            if token == "{":
                raise LatexError("braces inside text")
            if token.startswith("\\"):
                plain = symbols.ORDINARY.get(token[1:]) or (" " if token[1:] in symbols.SPACES else "")
                if not plain:
                    raise LatexError(f"the macro {token} cannot stand in text")
                token = plain
            found.append(" " if token.isspace() else token)
        self.take()
        return "".join(found)

    def fence(self) -> Part:
        self.skip_space()
        left = self.take()
        body = self.row(frozenset({"\\right"}), columns=False)
        self.take()
        self.skip_space()
        right = self.take()
        if left not in symbols.DELIMITERS or right not in symbols.DELIMITERS:
            raise LatexError(f"{left!r} or {right!r} is not a delimiter")
        close = symbols.DELIMITERS[right]
        return Fence(symbols.DELIMITERS[left], body, "⟩" if right == ">" else close)

    def environment(self) -> Part:
        name = self.words()
        if name == "array":
            self.argument()
        elif name in symbols.STACKS:
            name = "aligned"
        elif name not in symbols.ENVIRONMENTS:
            raise LatexError(f"the environment {name} is not known")
        self.tables += 1
        if self.tables > DEEPEST_TABLE:
            raise LatexError("tables inside tables")
        rows = self.table_rows()
        self.tables -= 1
        closing = self.words()
        if closing != name and not (name == "aligned" and closing in symbols.STACKS):
            raise LatexError(f"\\begin{{{name}}} is closed by \\end{{{closing}}}")
        left, right, align = symbols.ENVIRONMENTS.get(name, ("", "", "left"))
        return Table(left, rows, right, align)

    def table_rows(self) -> tuple[tuple[Row, ...], ...]:
        stops = frozenset({"\\\\", "\\end"})
        rows: list[tuple[Row, ...]] = []
        cells: list[Row] = []
        while True:
            cells.append(self.row(stops))
            token = self.take()
            if token == "&":
                continue
            rows.append(tuple(cells))
            cells = []
            if token == "\\end":
                break
            self.skip_row_gap()
        if not any(cell.parts for cell in rows[-1]):
            rows.pop()
        if sum(len(cells) for cells in rows) > LARGEST_TABLE:
            raise LatexError(f"a table of more than {LARGEST_TABLE} cells")
        return tuple(rows)


def _delimiter(character: str, token: str, size: float = 0.0) -> Symbol:
    if character in symbols.OPENING or token.startswith("\\l"):
        return Symbol(character, "open", size=size)
    if character in symbols.CLOSING or token.startswith("\\r"):
        return Symbol(character, "close", size=size)
    return Symbol(character, "ordinary", size=size)


def _in_variant(row: Row, variant: str) -> Part:
    """The row with its letters in another face; upright words stay one word."""
    letters = [p.text for p in row.parts if isinstance(p, Symbol) and (p.kind == "letter" or p.text == "_")]
    if variant == "normal" and letters and len(letters) == len(row.parts):
        return Symbol("".join(letters), "letter", variant)
    parts = tuple(
        Symbol(part.text, part.kind, variant) if isinstance(part, Symbol) and part.kind == "letter" else part
        for part in row.parts
    )
    return parts[0] if len(parts) == 1 else Row(parts)


def _limited(base: Row) -> Part:
    """The base of \\underset or \\overset, marked so that its script goes below or above it."""
    if len(base.parts) == 1 and isinstance(base.parts[0], Symbol):
        only = base.parts[0]
        return Symbol(only.text, only.kind, only.variant, only.size, limits=True)
    return Mark("", base)
