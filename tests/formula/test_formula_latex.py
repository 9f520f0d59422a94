"""Typesetting: what is written, that ziamath draws it, and that long formulas break into lines that fit."""

from __future__ import annotations

import re

import pytest
from hypothesis import given, settings
from random_formulas import formulas

from outspread.formula.latex import estimated_width, symbol_for, to_latex
from outspread.formula.latex_lines import breakable
from outspread.formula.parser import parse, parse_event
from outspread.formula.tree import Apply, Name, Node, Number

WRITTEN = {
    "a - b*c": r"a - b\,c",
    "a - (b - c)": r"a - \left(b - c\right)",
    "a/b": r"\frac{a}{b}",
    "-a/b": r"-\frac{a}{b}",
    "a/b/c": r"\frac{a}{b\,c}",
    "(a + b)/(c - d)": r"\frac{a + b}{c - d}",
    "(a + b)*c": r"\left(a + b\right)\,c",
    "x^2": r"x^{2}",
    "x_1^2": r"x_{1}^{2}",
    "(-x)^2": r"\left(-x\right)^{2}",
    "-x^2": r"-x^{2}",
    "x^(1/2)": r"x^{1/2}",
    "2^-x": r"2^{-x}",
    "sqrt(x + 1)": r"\sqrt{x + 1}",
    "hypot(x, y)": r"\sqrt{x^{2} + y^{2}}",
    "abs(x - y)": r"\left|x - y\right|",
    "max(x, y)": r"\max\!\left(x, y\right)",
    "exp(-x)": r"\mathrm{e}^{-x}",
    "log(x)": r"\ln\!\left(x\right)",
    "log10(x)": r"\log_{10}\!\left(x\right)",
    "decibel(x)": r"10\,\log_{10}\!\left(x\right)",
    "from_decibel(x)": r"10^{x/10}",
    "floor(x)": r"\left\lfloor x\right\rfloor",
    "1.15e-5*x": r"1.15\times 10^{-5}\,x",
    "1e-3": r"10^{-3}",
    "0.50*x": r"0.50\,x",
    "2*pi*r": r"2\,\pi\,r",
    "2*3": r"2 \cdot 3",
    "bore*shaft": r"\mathrm{bore} \cdot \mathrm{shaft}",
    "sin(x)^2": r"\left(\sin\!\left(x\right)\right)^{2}",
    "if(x < 0, -x, x)": r"\begin{cases}-x & \text{if}\;x < 0 \\ x & \text{otherwise}\end{cases}",
    "if(x < 0, 1, if(x < 1, 2, 3))": (
        r"\begin{cases}1 & \text{if}\;x < 0 \\ 2 & \text{if}\;x < 1 \\ 3 & \text{otherwise}\end{cases}"
    ),
}
EVENTS = {
    "a <= b and c > d": r"a \le b\;\text{and}\;c > d",
    "0 < a < 1": r"0 < a < 1",
    "not (a < b or c != d)": r"\text{not}\;\left(a < b\;\text{or}\;c \ne d\right)",
}


@pytest.mark.parametrize("text", [*WRITTEN, *EVENTS])
def test_a_formula_is_written_with_few_parentheses(text: str) -> None:
    if text in WRITTEN:
        assert to_latex(parse(text), {}) == WRITTEN[text]
    else:
        assert to_latex(parse_event(text), {}) == EVENTS[text]


@pytest.mark.parametrize(
    ("name", "wanted"),
    [("x", "x"), ("bore", r"\mathrm{bore}"), ("bore_d", r"\mathrm{bore}_{d}"), ("sigma", r"\sigma"),
     ("x1", "x_{1}"),
     ("sigma_noise", r"\sigma_{\mathrm{noise}}"), ("T_in_2", r"T_{\mathrm{in},2}"), ("Omega3", r"\Omega_{3}"),
     ("epsilon", r"\varepsilon"), ("_a", "a")],
)  # fmt: skip
def test_symbols_are_made_from_names(name: str, wanted: str) -> None:
    assert symbol_for(name) == wanted


def test_given_symbols_are_used_and_set_apart_from_powers() -> None:
    symbols = {"bore": "D", "gain": "G^*", "expansion": r"\alpha"}
    assert to_latex(parse("bore^2"), symbols) == "D^{2}"
    assert to_latex(parse("gain^2"), symbols) == r"\left(G^*\right)^{2}"
    constant = Apply("multiply", (Number(11.5e-6, "expansion"), Name("bore")))
    assert to_latex(constant, symbols) == r"\alpha\,D"
    assert to_latex(Number(-1.5e-7), {}) == r"-1.5\times 10^{-7}"


def test_deep_fractions_and_nested_cases_stay_quick_to_draw() -> None:
    """Nesting costs the typesetter exponential time: at most two levels of fractions, no cases in cases."""
    deep = to_latex(parse("1/(1 + 1/(1 + 1/(1 + 1/(1 + x))))"), {})
    assert deep.count(r"\frac") == 2
    nested = to_latex(parse("1 + if(x < 0, if(x < -1, 1, 2), if(x < 1, 3, 4))"), {})
    assert nested.count("cases") == 2


# ziamath itself imports its fonts by a deprecated call
@pytest.mark.filterwarnings("ignore:.*Use files.. instead:DeprecationWarning")
@pytest.mark.parametrize("text", [t for t in WRITTEN if t not in ("2*3", "1e-3", "x^2", "a/b")])
def test_ziamath_draws_it_without_leaving_commands_as_text(text: str) -> None:
    """Unknown commands are drawn letter by letter: far wider than estimated."""
    import ziamath

    latex = to_latex(parse(text), {})
    svg = ziamath.Latex(latex, size=24).svg()
    match = re.search(r'width="([\d.]+)', svg)
    assert match is not None
    assert float(match.group(1)) / 12.0 < 1.6 * estimated_width(latex) + 2.0


LONG = " + ".join(f"coefficient_{i}*x_{i}^2*sin(y_{i})" for i in range(12))


@pytest.mark.parametrize(
    "text",
    [LONG, f"({LONG})^2*z/(1 + x)", f"sqrt({LONG})/(a + {LONG.replace('+', '-')})",
     LONG.replace(" + ", "*"), f"-({LONG})",
     f"max({LONG}, exp({LONG}), 3)", f"if(x < {LONG}, {LONG}, 2)", f"hypot({LONG}, abs({LONG}))",
     f"2^({LONG})"],
)  # fmt: skip
def test_long_formulas_break_into_lines_that_fit(text: str) -> None:
    lines = breakable(parse(text), {}, 60.0)
    assert len(lines) > 1
    for line in lines:
        assert estimated_width(line) <= 62.0
        assert line.count("{") == line.count("}")
        assert line.count(r"\left") == line.count(r"\right")


def test_short_formulas_stay_on_one_line() -> None:
    assert breakable(parse("a + b"), {}, 60.0) == ["a + b"]


def test_every_term_of_a_broken_sum_is_kept_in_order() -> None:
    lines = breakable(parse("+".join(f"v{i}" for i in range(200))), {}, 40.0)
    assert re.findall(r"v_\{(\d+)\}", " ".join(lines)) == [str(i) for i in range(200)]
    assert all(line.startswith("+ ") for line in lines[1:])


@given(formulas)
@settings(max_examples=80, deadline=None, derandomize=True)
def test_any_formula_gives_balanced_lines(node: Node) -> None:
    for line in (to_latex(node, {}), *breakable(node, {}, 20.0)):
        assert line
        assert line.count("{") == line.count("}")
        assert line.count(r"\left") == line.count(r"\right")
