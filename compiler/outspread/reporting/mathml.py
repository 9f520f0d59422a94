"""Turns the tree of a formula into MathML with TeX's spacing, and into one line of plain text.

The MathML is for ziamath: every space is explicit (The TeXbook, chapter 18) and every delimiter has a
stated size, because ziamath's own guesses differ and its stretching doubles the work at each level.
"""

from __future__ import annotations

from functools import singledispatch
from xml.sax.saxutils import escape

from outspread.reporting.parts import Fence, Fraction, Mark, Part, Root, Row, Scripts, Space, Symbol, Table

_THIN, _MEDIUM, _THICK = 3 / 18, 4 / 18, 5 / 18
#: behind these, a + or - is a sign, not an operation
_BEFORE_SIGN = frozenset({"open", "relation", "binary", "punctuation", "large", "function", "text"})
_TIGHT = 'lspace="0em" rspace="0em"'


def atom_class(part: Part) -> str:
    """TeX's class of a part, which decides the space beside it; "" for spaces."""
    if isinstance(part, Symbol):
        return "ordinary" if part.kind in ("letter", "number") else part.kind
    if isinstance(part, Scripts):
        return atom_class(part.base)
    if isinstance(part, (Fence, Table)):  # ziamath pads a fraction by itself
        return "inner"
    return "" if isinstance(part, Space) else "ordinary"


def _gap(before: str, after: str, script: bool) -> float:
    """Space between two atoms, in em (The TeXbook, page 170)."""
    if not before or not after or before == "open" or after == "close":
        return 0.0
    if before == "function" or after == "function" or before == "large" or after == "large":
        if after in ("open", "punctuation") or (before == "function" and after == "inner"):
            return 0.0
        if "relation" not in (before, after) and "binary" not in (before, after):
            return _THIN
    if script:
        return 0.0
    if "relation" in (before, after):
        return 0.0 if before == after or after == "punctuation" else _THICK
    if "binary" in (before, after):
        return _MEDIUM
    if before == "punctuation":
        return _THIN
    if "inner" in (before, after):
        return 0.0 if after in ("punctuation", "open") else _THIN
    return 0.0


def height(part: Part) -> float:
    """Estimated height in em, for the size of the delimiters around it."""
    if isinstance(part, Row):
        return max((height(inner) for inner in part.parts), default=0.9)
    if isinstance(part, Fraction):
        inner = height(part.above) + height(part.below)
        return inner + 0.25 if inner < 2.2 else 0.8 * inner + 0.25  # a fraction within is set smaller
    if isinstance(part, Root):
        return height(part.body) + 0.15
    if isinstance(part, Scripts):
        base = height(part.base)
        scripts = sum(0.6 * height(slashed(row)) for row in (part.below, part.above) if row is not None)
        if isinstance(part.base, Symbol) and part.base.kind in ("large", "function"):
            return base + scripts if part.base.limits or part.base.kind == "large" else base
        return base + max(0.0, scripts - 0.65) * 0.6
    if isinstance(part, (Fence, Mark)):
        return height(part.body)
    if isinstance(part, Table):
        return sum(max((height(cell) for cell in cells), default=0.9) + 0.3 for cells in part.rows)
    if isinstance(part, Symbol) and part.kind == "large":
        return 1.9
    return max(0.9, part.size) if isinstance(part, Symbol) else 0.9


def count(part: Part) -> int:
    """Symbols side by side, scripts counted as half: a row is hardly narrower than 0.3 em for each."""
    if isinstance(part, Row):
        return sum(count(inner) for inner in part.parts)
    if isinstance(part, Fraction):
        return max(count(part.above), count(part.below))
    if isinstance(part, Scripts):
        return count(part.base) + max(count(row) if row else 0 for row in (part.below, part.above)) // 2
    if isinstance(part, (Fence, Root, Mark)):
        return count(part.body)
    if isinstance(part, Table):
        return max((sum(count(cell) for cell in cells) for cells in part.rows), default=0)
    return 1


def delimiter_size(part: Part) -> float:
    """Height in em of delimiters around the part; 0 where the plain character will do."""
    tall = height(part)
    return 0.0 if tall < 1.25 else max(1.2, 0.92 * tall)


def flat(parts: tuple[Part, ...]) -> list[Part]:
    """The parts with fences replaced by sized delimiters and groups in their place."""
    found: list[Part] = []
    for part in parts:
        if isinstance(part, Fence):
            size = delimiter_size(part.body)
            if part.left:
                found.append(Symbol(part.left, "open", size=size))
            found.extend(flat(part.body.parts))
            if part.right:
                found.append(Symbol(part.right, "close", size=size))
        elif isinstance(part, Table) and (part.left or part.right):
            size = delimiter_size(part)
            found += [Symbol(part.left, "open", size=size)] if part.left else []
            found.append(Table("", part.rows, "", part.align))
            found += [Symbol(part.right, "close", size=size)] if part.right else []
        else:
            found.append(part)
    return found


def slashed(row: Row) -> Row:
    """A script with its fractions on one line: stacked, they would be too small to read."""
    parts: list[Part] = []
    for part in row.parts:
        if isinstance(part, Fraction) and part.line:
            above, below = slashed(part.above), slashed(part.below)
            parts += [Fence("(", above, ")")] if _is_sum(above) else above.parts
            parts.append(Symbol("/", "ordinary"))
            parts += [Fence("(", below, ")")] if len(below.parts) > 1 else below.parts
        elif isinstance(part, Fence):
            parts.append(Fence(part.left, slashed(part.body), part.right))
        elif isinstance(part, Scripts):
            base = slashed(Row((part.base,))).parts
            parts.append(Scripts(base[0] if len(base) == 1 else Row(base), part.below, part.above))
        else:
            parts.append(part)
    return Row(tuple(parts))


def _is_sum(row: Row) -> bool:
    """Whether an operation or relation stands in the row outside all brackets (a leading sign apart)."""
    depth = 0
    for index, part in enumerate(row.parts):
        kind = atom_class(part)
        depth += (kind == "open") - (kind == "close")
        if index and depth == 0 and kind in ("binary", "relation"):
            return True
    return False


def mathml(row: Row) -> str:
    """A `math` element for one line of a formula."""
    return f'<math display="block">{"".join(_inside(row, False))}</math>'


def _row(row: Row, script: bool) -> str:
    """The row's parts in one mrow, or the only one without: each mrow doubles the time that ziamath takes."""
    pieces = _inside(row, script)
    return pieces[0] if len(pieces) == 1 else f"<mrow>{''.join(pieces)}</mrow>"


def _inside(row: Row, script: bool) -> list[str]:
    """The row's parts and the spaces between them."""
    pieces: list[str] = []
    before = "open"
    for part in flat(row.parts):
        kind = atom_class(part)
        if kind == "binary" and before in _BEFORE_SIGN:
            kind = "ordinary"
        gap = _gap(before, kind, script)
        if gap:
            pieces.append(f'<mspace width="{gap:.3f}em"/>')
        pieces.append(_draw(part, script))
        if kind:
            before = kind
    return pieces


@singledispatch
def _draw(part: Part, script: bool) -> str:
    raise TypeError(f"no drawing for {type(part).__name__}")


@_draw.register
def _(part: Symbol, script: bool) -> str:
    text = escape(part.text)
    variant = f' mathvariant="{part.variant}"' if part.variant else ""
    if part.kind == "number":
        return f"<mn>{text}</mn>"
    if part.kind == "letter" and not (part.variant == "normal" and len(part.text) > 1):
        return f"<mi{variant}>{text}</mi>"
    if part.kind in ("text", "function", "letter"):
        return f"<mtext>{text}</mtext>"
    if part.kind == "ordinary" and not part.size and part.text not in "|‖/":
        return f'<mi mathvariant="normal">{text}</mi>'
    size = f' minsize="{part.size:.2f}em" maxsize="{part.size:.2f}em"' if part.size else ""
    return f'<mo stretchy="false" {_TIGHT}{size}>{text}</mo>'


@_draw.register
def _(part: Space, script: bool) -> str:
    return f'<mspace width="{part.width:.3f}em"/>'


@_draw.register
def _(part: Row, script: bool) -> str:
    return _row(part, script)


@_draw.register
def _(part: Fence, script: bool) -> str:
    return _row(Row((part,)), script)


@_draw.register
def _(part: Fraction, script: bool) -> str:
    line = "" if part.line else ' linethickness="0"'
    return f"<mfrac{line}>{_row(part.above, script)}{_row(part.below, script)}</mfrac>"


@_draw.register
def _(part: Root, script: bool) -> str:
    body = _row(part.body, script)
    return f"<mroot>{body}{_row(part.index, True)}</mroot>" if part.index else f"<msqrt>{body}</msqrt>"


@_draw.register
def _(part: Scripts, script: bool) -> str:
    above_and_below = isinstance(part.base, Symbol) and part.base.limits
    if isinstance(part.base, Mark) and not part.base.mark:
        above_and_below = True
    kind = ("munder", "mover", "munderover") if above_and_below else ("msub", "msup", "msubsup")
    base = _draw(part.base, script)
    below = _row(slashed(part.below), True) if part.below is not None else ""
    above = _row(slashed(part.above), True) if part.above is not None else ""
    tag = kind[2] if below and above else kind[0] if below else kind[1]
    return f"<{tag}>{base}{below}{above}</{tag}>"


@_draw.register
def _(part: Mark, script: bool) -> str:
    body = _row(part.body, script)
    if not part.mark:
        return body
    if part.mark == "_":
        return f'<munder accentunder="true">{body}<mo stretchy="true" {_TIGHT}>_</mo></munder>'
    stretchy = "true" if part.mark == "‾" else "false"
    return f'<mover accent="true">{body}<mo stretchy="{stretchy}" {_TIGHT}>{escape(part.mark)}</mo></mover>'


@_draw.register
def _(part: Table, script: bool) -> str:
    rows = "".join(
        "<mtr>" + "".join(f"<mtd>{''.join(_inside(cell, script))}</mtd>" for cell in cells) + "</mtr>"
        for cells in part.rows
    )
    return f'<mtable columnalign="{part.align}" columnspacing="1em" rowspacing="0.35em">{rows}</mtable>'


_SUPERSCRIPT = str.maketrans("0123456789+−-()n", "⁰¹²³⁴⁵⁶⁷⁸⁹⁺⁻⁻⁽⁾ⁿ")
_SUBSCRIPT = str.maketrans("0123456789+−-()", "₀₁₂₃₄₅₆₇₈₉₊₋₋₍₎")


def plain(row: Row) -> str:
    """The row as one line of text: the alternative text of its picture, and its stand-in without pictures."""
    words: list[str] = []
    before = "open"
    for part in row.parts:
        kind = atom_class(part)
        sign = kind == "binary" and before in _BEFORE_SIGN
        text = _words(part)
        if kind == "relation" or (kind == "binary" and not sign and text != "·"):
            text = f" {text} "
        elif kind == "punctuation":
            text = f"{text} "
        elif (kind == "function" and before in ("ordinary", "close", "inner")) or (
            before in ("function", "large") and kind not in ("open", "inner")
        ):
            text = f" {text}"
        words.append(text)
        before = kind if kind and not sign else before if not kind else "ordinary"
    return " ".join("".join(words).split())


def _words(part: Part) -> str:
    """One part as text."""
    if isinstance(part, Symbol):
        return f" {part.text} " if part.kind == "text" else part.text
    if isinstance(part, Space):
        return " " if part.width > 0.2 else ""
    if isinstance(part, Row):
        return plain(part)
    if isinstance(part, Fraction):
        if not part.line:
            return f"{plain(part.above)} over {plain(part.below)}"
        above = plain(part.above)
        return f"{f'({above})' if _is_sum(part.above) else above}/{_grouped(part.below)}"
    if isinstance(part, Root):
        radical = "√" if part.index is None else f"{plain(part.index).translate(_SUPERSCRIPT)}√"
        return f"{radical}{_grouped(part.body)}"
    if isinstance(part, Scripts):
        scripts = _script(part.below, "_", _SUBSCRIPT) + _script(part.above, "^", _SUPERSCRIPT)
        return _words(part.base) + scripts
    if isinstance(part, Fence):
        return f"{part.left}{plain(part.body)}{part.right}"
    if isinstance(part, Mark):
        return f"{plain(part.body)}{part.mark}"
    if isinstance(part, Table):
        rows = "; ".join(", ".join(plain(cell).strip(", ") for cell in cells) for cells in part.rows)
        return f"{part.left or '['}{rows}{part.right or ']'}"
    raise TypeError(f"no words for {type(part).__name__}")


def _grouped(row: Row) -> str:
    text = plain(row)
    return text if len(row.parts) == 1 and not isinstance(row.parts[0], (Fraction, Table)) else f"({text})"


def _script(row: Row | None, sign: str, small: dict[int, int]) -> str:
    if row is None:
        return ""
    text = plain(row)
    if text and all(ord(character) in small or character == "′" for character in text):
        return text.translate(small)
    return f"{sign}{text}" if len(text) == 1 else f"{sign}({text})"
