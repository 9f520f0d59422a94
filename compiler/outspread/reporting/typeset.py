"""Sets formulas as pictures inside HTML: inline, on lines of their own, and within sentences.

Drawn by ziamath in the STIX Two Math face; sizes are in em, so that a formula grows with the text. What
cannot be typeset is shown as text: a report never loses a formula and never shows a wrong one.
"""

from __future__ import annotations

import base64
import re
import warnings
from dataclasses import dataclass
from functools import lru_cache
from xml.etree.ElementTree import Element

from markupsafe import Markup, escape

from outspread.reporting.breaking import lines
from outspread.reporting.latex import LatexError, read
from outspread.reporting.mathml import count, mathml, plain
from outspread.reporting.parts import Row

#: width that a displayed formula may take, in em of the text around it: the narrowest column (A4 print),
#: less its indent and its number
COLUMN = 43.0
HANGING = 2.0
SMALLEST_SCALE = 0.75
#: what cannot be broken may be set smaller still, down to this
LEAST_SCALE = 0.6
#: STIX letters are small for their size: this brings them level with the sans-serif text around them
_MAGNIFY = 1.14
_DRAWN_AT = 20.0


@dataclass(frozen=True)
class Drawing:
    """A picture of one line: SVG text; width, height and depth below the baseline in em."""

    svg: str
    width: float
    height: float
    depth: float


@lru_cache(maxsize=8192)
def draw(row: Row) -> Drawing:
    """One line of a formula as SVG."""
    with warnings.catch_warnings():  # ziamath finds its font by a call that the library marks as old
        warnings.simplefilter("ignore", DeprecationWarning)
        from ziamath.config import config
        from ziamath.zmath import Math
    config.svg2 = False
    config.precision = 2
    picture = Math(mathml(row), size=_DRAWN_AT, margin=0.6)
    svg = _merged(picture.svgxml())
    width, height = (float(re.findall(rf' {side}="([\d.]+)"', svg)[0]) for side in ("width", "height"))
    em = _DRAWN_AT / _MAGNIFY
    return Drawing(svg, width / em, height / em, (0.6 - picture.getyofst()) / em)


def _merged(drawing: Element) -> str:
    """SVG text of a drawing with its glyphs in one path: a page of formulas then takes half as long."""
    outlines: list[str] = []
    rest: list[str] = []
    for element in drawing.iter():
        if element.tag == "path":
            outlines.append(element.attrib["d"].strip())
        elif element.tag == "rect":
            x, y, width, height = (element.attrib[key] for key in ("x", "y", "width", "height"))
            rest.append(f'<rect x="{x}" y="{y}" width="{width}" height="{height}"/>')
    size = " ".join(f'{key}="{drawing.attrib[key]}"' for key in ("width", "height", "viewBox"))
    glyphs = f'<path d="{" ".join(outlines)}"/>' if outlines else ""
    return f'<svg xmlns="http://www.w3.org/2000/svg" {size}>{glyphs}{"".join(rest)}</svg>'


def _image(row: Row, scale: float = 1.0) -> Markup:
    drawing = draw(row)
    url = "data:image/svg+xml;base64," + base64.b64encode(drawing.svg.encode()).decode("ascii")
    style = (
        f"width:{drawing.width * scale:.3f}em;height:{drawing.height * scale:.3f}em;"
        f"vertical-align:{-drawing.depth * scale:.3f}em"
    )
    return Markup('<img class="math" alt="{}" style="{}" src="{}">').format(plain(row), style, url)


def inline(latex: str) -> Markup:
    """The formula as part of a line of text; as plain text where it cannot be typeset."""
    try:
        rows = read(latex)
    except LatexError:
        return Markup('<code class="math">{}</code>').format(latex)
    return Markup(" ").join(_image(row) for row in rows)


def display(latex: str, number: str = "") -> Markup:
    """The formula on lines of its own, with its number; never wider than COLUMN."""
    try:
        stacked = [line for row in read(latex) for line in _fitted(row)]
        body = Markup("").join(
            Markup('<div class="line{}">{}</div>').format(" more" if hangs else "", _line(row, scale))
            for row, scale, hangs in stacked
        )
    except LatexError:
        body = Markup('<code class="math">{}</code>').format(latex)
    label = Markup('<span class="number">({})</span>').format(number) if number else Markup("")
    anchor = Markup(' id="eq-{}"').format(number) if number else Markup("")
    return Markup('<div class="formula"{}><div class="lines">{}</div>{}</div>').format(anchor, body, label)


def _line(row: Row, scale: float) -> Markup:
    """One line as a picture; as text, which wraps, where the picture would be too small to read."""
    if scale < LEAST_SCALE:
        return Markup('<code class="math">{}</code>').format(plain(row))
    return _image(row, scale)


def _fitted(row: Row) -> list[tuple[Row, float, bool]]:
    """Lines with the scale at which they fit, and whether they continue the line before: a little smaller
    first, then broken."""
    width = _width(row)
    if width <= COLUMN / SMALLEST_SCALE:
        return [(row, min(1.0, COLUMN / width) if width else 1.0, False)]
    broken = lines(row, COLUMN, HANGING, _width)
    fitted = []
    for index, line in enumerate(broken):
        room = COLUMN - (HANGING if index else 0.0)
        fitted.append((line, min(1.0, room / max(draw(line).width, 1e-9)), index > 0))
    return fitted


def _width(row: Row) -> float:
    """Width in em; of a row that is far wider than the column only a lower bound, without drawing it."""
    least = 0.3 * count(row)
    return least if least > 3 * COLUMN else draw(row).width


_MATHEMATICS = re.compile(r"(?<!\\)\$([^$]+)\$")


def sentence(text: str) -> Markup:
    """Plain text with `$...$` formulas typeset in place and `names` set as code."""
    pieces: list[Markup] = []
    end = 0
    for match in _MATHEMATICS.finditer(text):
        pieces.append(coded(text[end : match.start()]))
        pieces.append(inline(match[1]))
        end = match.end()
    pieces.append(coded(text[end:]))
    return Markup("").join(pieces)


_CODE = re.compile(r"`([^`]+)`")


def coded(text: str) -> Markup:
    """Plain text with `names` set as code."""
    pieces = _CODE.split(text)
    return Markup("").join(
        Markup("<code>{}</code>").format(piece) if index % 2 else escape(piece)
        for index, piece in enumerate(pieces)
    )
