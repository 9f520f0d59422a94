"""Formulas are drawn completely, inside the column, and never wrongly."""

from __future__ import annotations

import re

import pytest

from outspread.laws.registry import FAMILIES
from outspread.reporting import typeset
from outspread.reporting.latex import LatexError, read
from outspread.reporting.mathml import mathml, plain
from outspread.reporting.typeset import COLUMN, HANGING, display, inline, sentence

WIDE = [
    "f_Y(y)=" + "+".join(rf"\frac{{x_{{{i}}}^2}}{{2\sigma_{{{i}}}^2}}" for i in range(24)),
    r"f(y)=\frac{\sqrt{" + "+".join(f"x_{{{i}}}^2" for i in range(40)) + r"}}{a+b}\left(1+\exp\left(-"
    + "-".join(rf"\frac{{x_{{{i}}}}}{{2}}" for i in range(30)) + r"\right)\right)^{2}",
    "a" * 200,
    r"x=\max\left(" + ", ".join(f"a_{{{i}}}" for i in range(90)) + r"\right)",
    r"\frac{1}{" + "+".join(f"b_{{{i}}}" for i in range(90)) + "}",
    r"e^{" + "+".join(f"a_{{{i}}}" for i in range(80)) + "}",
    r"f=\begin{cases}" + "+".join("abc" * 30) + r" & x<0\\ 0 & \text{otherwise}\end{cases}",
]  # fmt: skip


def widths(markup):
    """Width of each line's picture in em, and its indent."""
    lines = re.findall(r'<div class="line( more)?"><img[^>]*?style="width:([\d.]+)em', markup)
    return [(float(width), HANGING if more else 0.0) for more, width in lines]


@pytest.mark.parametrize("latex", WIDE, ids=range(len(WIDE)))
def test_no_formula_is_wider_than_the_column(latex):
    found = widths(display(latex, "1"))
    assert found or "<code" in display(latex, "1")
    assert all(width + indent <= COLUMN + 1e-3 for width, indent in found)


@pytest.mark.parametrize("latex", WIDE[:5], ids=range(5))
def test_a_broken_formula_is_not_shrunk_beyond_reading(latex):
    """Sums, products, brackets, fractions and roots are broken rather than scaled below three quarters."""
    heights = re.findall(r"height:([\d.]+)em", display(latex))
    assert min(map(float, heights)) > 0.75 * typeset.draw(read("a")[0]).height


def test_what_can_be_neither_broken_nor_shrunk_is_written_as_text():
    """An exponent of eighty terms: a picture of it inside the column could not be read."""
    assert "<img" not in display(WIDE[5])
    assert "a₇₉" in display(WIDE[5])


def test_breaking_keeps_every_symbol():
    """The lines of a broken sum hold the same letters in the same order as the sum."""
    latex = WIDE[0]
    words = re.findall(r'alt="([^"]*)"', display(latex))
    assert len(words) > 1
    assert "".join(words).replace(" ", "") == plain(read(latex)[0]).replace(" ", "")


def test_an_opened_fraction_keeps_its_factors_apart():
    """A fraction too wide for a line becomes a reciprocal times its numerator: no ambiguous slash."""
    words = re.findall(r'alt="([^"]*)"', display(WIDE[1]))
    assert "/(a + b)" in words[0]
    assert words[0].startswith("f(y) = 1/(a + b)(")


@pytest.mark.parametrize(
    "latex",
    [r"\foo{x}", r"\begin{tikz}x\end{tikz}", r"\input{/etc/passwd}", "x_", r"\left(x", "{x", "x^2^", "\\"],
)
def test_what_is_not_known_is_shown_as_text(latex):
    """A macro drawn literally, or an environment dropped, would be a false formula."""
    with pytest.raises(LatexError):
        read(latex)
    assert "<img" not in inline(latex)
    assert "<code" in inline(latex)


def test_depth_and_size_are_capped():
    for text in (
        "{" * 5000 + "x" + "}" * 5000,
        r"\begin{cases}" * 3 + "x" + r"\end{cases}" * 3,
        "x" * 30_000,
    ):
        with pytest.raises(LatexError):
            read(text)


def test_signs_and_operations_are_told_apart():
    """A leading minus has no space of an operation (The TeXbook, chapter 18)."""
    assert "mspace" not in mathml(read("-x")[0])
    assert mathml(read("a-x")[0]).count("mspace") == 2


def test_fractions_in_exponents_are_slashed_with_their_brackets():
    assert plain(read(r"e^{-\frac{(x-\mu)^2}{2\sigma^2}}")[0]) == "e^(−(x − μ)²/(2σ²))"
    assert "mfrac" not in mathml(read(r"e^{-\frac{(x-\mu)^2}{2\sigma^2}}")[0])
    assert "mfrac" not in mathml(read(r"2^{\frac{a+b}{c}}")[0])
    assert "mfrac" not in mathml(read(r"e^{-\left(\frac{x-\theta}{\lambda}\right)^{k}}")[0])


def test_line_breaks_stack():
    assert widths(display(r"a=b\\ c=d"))[1][1] == 0.0  # an equation of its own is not indented
    assert len(widths(display(r"\begin{aligned}a&=b\\&=c\end{aligned}"))) == 2


def test_sentences_escape_their_words():
    assert "<b>" not in sentence("<b>$x$ `y`")
    assert "<code>y</code>" in sentence("<b>$x$ `y`")


@pytest.mark.parametrize("key", FAMILIES)
def test_the_density_of_every_family_can_be_typeset(key):
    """Each family's density, as the registry writes it, is in the LaTeX that the report draws."""
    family = FAMILIES[key]
    assert read(family.density_latex)
    for symbol in family.symbols.values():
        assert read(symbol)


def test_the_same_formula_gives_the_same_picture():
    row = read(r"\int_0^1 \frac{x}{2}\,\mathrm{d}x")[0]
    first = typeset.draw(row).svg
    typeset.draw.cache_clear()
    assert typeset.draw(row).svg == first
