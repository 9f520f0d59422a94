"""Evaluation on arrays and constant folding, against mpmath and by properties of numpy."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from precise import Undefined, precise
from random_formulas import formulas

from outspread.formula.evaluate import compile_numpy, fold
from outspread.formula.interval import Interval, enclose
from outspread.formula.linear import size
from outspread.formula.parser import parse, parse_event
from outspread.formula.text import to_text
from outspread.formula.tree import Apply, Name, Node

ONE_OPERATOR = [
    "x + y - z", "x*y*z", "x/y", "x^y", "x^2", "x^3", "x^4", "x^-1", "x^-2", "x^0.5", "-x", "sqrt(x)",
    "exp(x)",
    "log(x)", "log10(x)", "abs(y - x)", "sign(y - x)", "min(x, y, z)", "max(x, y, z)", "hypot(x, y, z)",
    "hypot(x)",
    "sin(x)", "cos(x)", "tan(x)", "asin(x/9)", "acos(x/9)", "atan(x)", "atan2(x - 2, y - 2)", "sinh(x)",
    "cosh(x)",
    "tanh(x)", "erf(x)", "gamma(x)", "floor(x)", "ceil(x)", "decibel(x)", "from_decibel(x)",
    "if(x < y, x, z)",
    "if(x < y or not z > x and z != y, x, z)",
]  # fmt: skip


@pytest.mark.parametrize("text", ONE_OPERATOR)
def test_each_operator_agrees_with_mpmath_to_double_precision(text: str) -> None:
    node = parse(text)
    points = np.random.default_rng(7).uniform(0.1, 8.0, (3, 40))
    found = compile_numpy(node, ("x", "y", "z"))(*points)
    for point, value in zip(points.T, found, strict=True):
        wanted = float(precise(node, dict(zip("xyz", point, strict=True))))
        # sums cancel: the rounding of the terms, at most 8 each, is what counts
        assert value == pytest.approx(wanted, rel=2e-14, abs=1e-14 if "-" in text else 0.0)


def test_arguments_broadcast_and_the_result_has_their_shape_even_where_it_needs_fewer() -> None:
    x, y = np.zeros((4, 1)), np.ones(3)
    assert compile_numpy(parse("x + y"), ("x", "y"))(x, y).shape == (4, 3)
    assert compile_numpy(parse("x"), ("x", "y"))(x, y).shape == (4, 3)
    assert compile_numpy(parse("2*pi"), ("x", "y"))(x, y).shape == (4, 3)
    assert compile_numpy(parse("2*pi"), ())().shape == ()


def test_the_result_is_never_the_argument_itself() -> None:
    x = np.arange(3.0)
    result = compile_numpy(parse("x"), ("x",))(x)
    result[0] = 99.0
    assert x[0] == 0.0


def test_conditions_give_boolean_arrays() -> None:
    found = compile_numpy(parse_event("0 < x < 2 and not x == 1"), ("x",))(np.arange(4.0))
    assert found.dtype == np.bool_
    assert found.tolist() == [False, False, False, False]
    assert compile_numpy(parse_event("x >= 2 or x == 0"), ("x",))(np.arange(4.0)).tolist() == [
        True,
        False,
        True,
        True,
    ]


def test_if_selects_without_letting_the_other_branch_through() -> None:
    found = compile_numpy(parse("if(x > 0, sqrt(x), 0)"), ("x",))(np.array([-1.0, 0.0, 4.0]))
    assert found.tolist() == [0.0, 0.0, 2.0]


def test_a_square_is_the_exact_product() -> None:
    x = np.random.default_rng(1).normal(size=1000)
    assert np.array_equal(compile_numpy(parse("x^2"), ("x",))(x), x * x)


def test_whole_powers_of_negative_bases_and_special_values_follow_ieee_754() -> None:
    """IEEE 754-2019, 9.2.1 (pow) and 6.3 (signed zeros)."""
    x = np.array([-2.0, -0.0, 0.0, np.inf, -np.inf])
    assert compile_numpy(parse("x^3"), ("x",))(x).tolist() == [-8.0, -0.0, 0.0, np.inf, -np.inf]
    assert compile_numpy(parse("x^2"), ("x",))(x).tolist() == [4.0, 0.0, 0.0, np.inf, np.inf]
    assert compile_numpy(parse("x^-1"), ("x",))(x).tolist() == [-0.5, -np.inf, np.inf, 0.0, -0.0]
    assert np.signbit(compile_numpy(parse("-x"), ("x",))(0.0))
    assert np.isnan(compile_numpy(parse("x^0.5"), ("x",))(-2.0))
    assert np.isnan(compile_numpy(parse("max(x, 1)"), ("x",))(np.nan))


def test_the_sign_of_a_zero_does_not_turn_an_angle() -> None:
    assert compile_numpy(parse("atan2(x, -x)"), ("x",))(0.0) == 0.0
    assert compile_numpy(parse("atan2(-x, -1)"), ("x",))(0.0) == np.pi


def test_wrong_arguments_are_refused() -> None:
    with pytest.raises(KeyError):
        compile_numpy(parse("x + q"), ("x",))
    with pytest.raises(TypeError, match="2 arguments are wanted"):
        compile_numpy(parse("x"), ("x", "y"))(1.0)


def test_thousands_of_terms_and_shared_parts_are_computed_once_each() -> None:
    shared: Node = Name("x")
    for _ in range(60):  # 2^60 nodes if shared parts were walked each time
        shared = Apply("add", (shared, shared))
    assert compile_numpy(shared, ("x",))(1.0) == 2.0**60
    assert size(shared) == 2**61 - 1
    many = parse("+".join(["x*2"] * 3000))
    assert compile_numpy(many, ("x",))(0.5) == 3000.0


FOLDED = {
    "x*1": "x", "1*x": "x", "x + 0": "x", "0 + x": "x", "x - 0": "x", "--x": "x", "x/1": "x", "x^1": "x",
    "x^0": "1",
    "2*x*3": "6*x", "-2*x": "-2*x", "-(2*x)": "-2*x", "(-x)*(-y)": "x*y", "x*0 + y": "y",
    "1 + x + 2": "3 + x",
    "x - 1 - 2": "x - 3", "2^3*x": "8*x", "if(1 < 2, x, y)": "x", "if(not 1 < 2 or 3 > 4, x, y)": "y",
    "max(x, 1, 3, x)": "max(x, 3)", "min(x, x)": "x", "hypot(x)": "abs(x)", "abs(-x)": "abs(x)", "0/x": "0",
    "x/(2 - 1)": "x", "sqrt(4)*x": "2*x", "if(x < 1, y, y)": "y", "x*y + z": "x*y + z", "-1*x": "-x",
}  # fmt: skip


@pytest.mark.parametrize("text", FOLDED)
def test_folding_removes_what_changes_nothing(text: str) -> None:
    assert to_text(fold(parse(text))) == FOLDED[text]


def test_folding_leaves_constants_without_a_value_alone() -> None:
    node = parse("1e308 + 1e308 + x")
    assert fold(node) == node


@given(formulas, st.tuples(*[st.floats(0.25, 4.0)] * 3))
@settings(max_examples=250, deadline=None, derandomize=True)
def test_folding_does_not_change_the_value(node: Node, point: tuple[float, float, float]) -> None:
    """Enclosures of the value before and after overlap: the roundings of both are inside them."""
    values = dict(zip("xyz", point, strict=True))
    box = {name: Interval.of(value) for name, value in values.items()}
    try:
        precise(node, values)
    except Undefined:
        return
    before, after = enclose(node, box), enclose(fold(node), box)
    assert before.lower <= after.upper
    assert after.lower <= before.upper


@given(formulas, st.tuples(*[st.floats(-4.0, 4.0)] * 3))
@settings(max_examples=250, deadline=None, derandomize=True)
def test_random_formulas_evaluate_as_in_mpmath(node: Node, point: tuple[float, float, float]) -> None:
    """The value of mpmath and that of numpy both lie in the enclosure of the roundings."""
    values = dict(zip("xyz", point, strict=True))
    try:
        wanted = precise(node, values)
    except Undefined:
        return
    enclosed = enclose(node, {name: Interval.of(value) for name, value in values.items()})
    assert enclosed.lower <= wanted <= enclosed.upper
    found = compile_numpy(node, ("x", "y", "z"))(*point)
    assert enclosed.lower <= found <= enclosed.upper
