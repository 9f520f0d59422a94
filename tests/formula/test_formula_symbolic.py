"""Carrying formulas to sympy and back leaves their value as it was."""

from __future__ import annotations

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st
from precise import Undefined, precise

from outspread.formula.interval import Interval, enclose
from outspread.formula.parser import parse
from outspread.formula.symbolic import from_sympy, to_sympy
from outspread.formula.text import to_text
from outspread.formula.tree import Node

THERE_AND_BACK = [
    "x^2 + y", "x - y", "-x - y", "2*x*y/3", "x/y", "1/x", "x^-2", "x^(1/3)", "1/sqrt(x)", "x*y/(x + y)",
    "exp(-x^2/2)/sqrt(2*pi)",
    "1e-5*x/3 + pi", "1.0000001^1e6*x", "2^900*x", "log(x) + log10(y)", "decibel(x) + from_decibel(y)",
    "max(x, y, 0)",
    "min(x, y)", "hypot(x, y)/x", "abs(x - y)", "sign(x - y)", "floor(3*x) + ceil(y)", "sin(x)*cos(y)/tan(x)",
    "asin(x/9) + acos(y/9) + atan(x)", "atan2(y, x)", "sinh(x) - cosh(y)*tanh(x)", "erf(x)*gamma(y)",
    "if(x < y, x, y^2)",
    "if(x < 1 and y > 0.2 or not x == y, x, y)", "x^y",
]  # fmt: skip


@pytest.mark.parametrize("text", THERE_AND_BACK)
def test_values_survive_the_way_there_and_back(text: str) -> None:
    node = parse(text)
    expression = to_sympy(node)
    back = from_sympy(expression)
    assert back is not None
    for x, y in ((0.7, 0.3), (2.25, 3.5)):
        wanted = precise(node, {"x": x, "y": y})
        assert float(precise(back, {"x": x, "y": y})) == pytest.approx(float(wanted), rel=1e-13)
        numbers = {
            sympy.Symbol("x", real=True): sympy.Float(x, 30),
            sympy.Symbol("y", real=True): sympy.Float(y, 30),
        }
        assert float(expression.subs(numbers)) == pytest.approx(float(wanted), rel=1e-13)


def test_numbers_travel_exactly() -> None:
    assert to_sympy(parse("11.5e-6*x")) == sympy.Rational(23, 2_000_000) * sympy.Symbol("x", real=True)
    assert to_sympy(parse("2*pi")) == 2 * sympy.pi
    assert to_text(from_sympy(sympy.Rational(1, 3)) or parse("0")) == "1/3"
    assert to_text(from_sympy(sympy.Rational(1, 2)) or parse("0")) == "0.5"


def test_given_symbols_are_used() -> None:
    x = sympy.Symbol("x", positive=True)
    assert to_sympy(parse("sqrt(x^2)"), {"x": x}) == x
    assert to_sympy(parse("sqrt(x^2)")) == sympy.Abs(sympy.Symbol("x", real=True))


@pytest.mark.parametrize(
    "text", ["besselj(0, x)", "Integral(exp(-x**2), (x, 0, 1))", "oo", "zoo", "nan", "I*x", "LambertW(x)"]
)
def test_what_has_no_counterpart_gives_none(text: str) -> None:
    assert from_sympy(sympy.sympify(text)) is None


@pytest.mark.parametrize(
    ("expression", "wanted"),
    [("sec(x)", "1/cos(x)"), ("cot(x)", "1/tan(x)"), ("erfc(x)", "1 - erf(x)"),
     ("factorial(x)", "gamma(x + 1)"), ("E", "exp(1)"),
     ("-x/2", "-(x/2)"), ("polygamma(0, x)", "polygamma(0, x)")],
)  # fmt: skip
def test_relatives_of_known_functions_are_written_by_them(expression: str, wanted: str) -> None:
    back = from_sympy(sympy.sympify(expression))
    assert back is not None
    assert to_text(back) == wanted


names = st.sampled_from(["x", "y"])
smooth = st.recursive(
    st.one_of(names, st.sampled_from(["1", "2", "0.5", "pi"])),
    lambda inner: st.one_of(
        st.builds("({} {} {})".format, inner, st.sampled_from("+-*/"), inner),
        st.builds("{}({})".format, st.sampled_from(["sqrt", "exp", "log", "sin", "abs", "atan"]), inner),
        st.builds("({})^{}".format, inner, st.sampled_from(["2", "3", "0.5"])),
    ),
    max_leaves=6,
)


@given(smooth)
@settings(max_examples=60, deadline=None, derandomize=True)
def test_random_formulas_keep_their_value(text: str) -> None:
    from outspread.errors import FormulaError

    try:
        node: Node = parse(text)
        wanted = precise(node, {"x": 1.7, "y": 2.6})
    except (FormulaError, Undefined):
        return
    back = from_sympy(to_sympy(node))
    if back is None:
        return  # sympy found a constant part without a finite real value
    box = {"x": Interval.of(1.7), "y": Interval.of(2.6)}
    before, after = enclose(node, box), enclose(back, box)
    assert after.lower <= wanted <= after.upper or (
        before.lower <= after.upper and after.lower <= before.upper
    )
