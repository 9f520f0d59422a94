"""Derivatives against differences at 80 digits and the mean value theorem; places that are not smooth."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from mpmath import mp
from precise import Undefined, precise, value_at
from random_formulas import formulas

from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.folding import depends
from outspread.formula.interval import Interval, enclose
from outspread.formula.parser import parse, parse_event
from outspread.formula.text import to_text
from outspread.formula.tree import Apply, Name, Node, names

ONE_OPERATOR = [
    "x + y - x*y", "x*y*x", "x/y", "y/x", "x^y", "y^x", "x^x", "x^3", "x^-1", "x^0.5", "-x", "sqrt(x)",
    "exp(2*x)",
    "log(x)", "log10(x)", "abs(y - x)", "sign(y - x)*x", "min(x, y, 3 - x)", "max(x^2, y, 2*x, z)",
    "hypot(x, y)",
    "hypot(x, 2*x, y)", "hypot(x - 4)", "sin(x)", "cos(x^2)", "tan(x)", "asin(x/9)", "acos(x/9)", "atan(x)",
    "atan2(x - 2, y)", "atan2(y, x - 2)", "sinh(x)", "cosh(x)", "tanh(x)", "erf(x)", "gamma(x)", "x*floor(x)",
    "x*ceil(y)", "decibel(x)", "from_decibel(x)", "if(x < y, x^2, z/x)", "if(x < y or z > x, x, z*x)",
    "(x + y)*(x - y)*exp(-x)/(1 + x^2)",
]  # fmt: skip


def numeric(node: Node, name: str, point: dict[str, float]) -> float:
    """Central difference with a step of 1e-20 at 80 digits: an error of about 1e-40."""
    with mp.workdps(80):
        step = mp.mpf(10) ** -20
        high, low = (value_at(node, {**point, name: point[name] + sign * step}) for sign in (1, -1))
        return float((high - low) / (2 * step))


@pytest.mark.parametrize("text", ONE_OPERATOR)
def test_each_operator_is_differentiated_as_differences_find_it(text: str) -> None:
    node = parse(text)
    for numbers in np.random.default_rng(5).uniform(0.2, 3.8, (12, 3)):
        point = dict(zip("xyz", (float(n) for n in numbers), strict=True))
        for name in names(node):
            found = float(precise(derivative(node, name), point))
            assert found == pytest.approx(numeric(node, name, point), rel=1e-11, abs=1e-11)


def test_gamma_is_differentiated_twice() -> None:
    node = parse("gamma(x)")
    second = derivative(derivative(node, "x"), "x")
    wanted = float(mp.diff(mp.gamma, 2.3, 2))
    assert float(precise(second, {"x": 2.3})) == pytest.approx(wanted, rel=1e-11)


@pytest.mark.parametrize(
    ("text", "wanted"),
    [("x + y", "1"), ("3*x - 1", "3"), ("y", "0"), ("x^2", "2*x"), ("x^3", "3*x^2"), ("x*y", "y"),
     ("1/x", "-1/x^2"),
     ("x/2", "1/2"), ("exp(x)", "exp(x)"), ("sin(x)", "cos(x)"), ("-x", "-1"), ("floor(x)", "0"),
     ("sign(x)", "0"),
     ("max(x, y)", "if(x >= y, 1, 0)"), ("abs(x)", "sign(x)"), ("if(x < 1, x, 2*x)", "if(x < 1, 1, 2)"),
     ("log(x)", "1/x"), ("x*y*z", "y*z"), ("sqrt(x)", "1/(2*sqrt(x))")],
)  # fmt: skip
def test_derivatives_come_out_simple(text: str, wanted: str) -> None:
    assert to_text(derivative(parse(text), "x")) in (
        wanted,
        wanted.replace("-1/x^2", "-(1/x^2)").replace("1/2", "0.5"),
    )


def test_a_condition_has_no_derivative() -> None:
    with pytest.raises(ValueError, match="no derivative"):
        derivative(parse_event("x < 1"), "x")


def test_the_derivative_of_a_large_maximum_stays_shallow() -> None:
    node = Apply("max", tuple(Name(f"x{i}") for i in range(1000)))
    point = {f"x{i}": float(i % 997) for i in range(1000)}
    assert precise(derivative(node, "x996"), point) == 1
    assert precise(derivative(node, "x3"), point) == 0


@given(formulas, st.integers(0, 10**6))
@settings(max_examples=150, deadline=None, derandomize=True)
def test_random_formulas_are_differentiated_as_differences_find_it(node: Node, seed: int) -> None:
    point = dict(zip("xyz", np.random.default_rng(seed).uniform(0.3, 3.7, 3).tolist(), strict=True))
    try:
        wanted = numeric(node, "x", point)
        found = float(precise(derivative(node, "x"), point))
    except Undefined:
        return
    # constants are folded in double precision; steep functions amplify that
    box = {name: Interval.of(value) for name, value in point.items()}
    enclosed = enclose(derivative(node, "x"), box)
    slack = 1e-8 * abs(wanted) + 1e-8
    assert found == pytest.approx(wanted, rel=1e-7, abs=1e-7) or (
        enclosed.lower - slack <= wanted <= enclosed.upper + slack
    )


@given(formulas, st.integers(0, 10**6))
@settings(max_examples=120, deadline=None, derandomize=True)
def test_between_the_named_places_the_mean_value_theorem_holds(node: Node, seed: int) -> None:
    """f(b) - f(a) = (b - a) f'(c), and the same for f': jumps, poles and kinks elsewhere would break it."""
    places = nonsmooth(node, "x")
    first = derivative(node, "x")
    second = derivative(first, "x")
    generator = np.random.default_rng(seed)
    for _ in range(4):
        y, z = generator.uniform(-3.0, 3.0, 2)
        a = float(generator.uniform(-3.0, 3.0))
        b = a + float(10.0 ** generator.uniform(-3.0, 0.3))
        box = {"x": Interval.of(a, b), "y": Interval.of(y), "z": Interval.of(z)}
        if any(enclose(place, box).contains(0.0) or enclose(place, box).empty for place in places):
            continue
        for function, slope in ((node, first), (first, second)):
            try:
                change = precise(function, {"x": b, "y": y, "z": z}) - precise(
                    function, {"x": a, "y": y, "z": z}
                )
            except Undefined:
                continue
            found = enclose(slope, box)
            if found.empty:
                continue
            width = mp.mpf(b) - mp.mpf(a)
            slack = 1e-9 * (1 + abs(change))  # constants are folded in double precision
            assert width * float(found.lower) - slack <= change <= width * float(found.upper) + slack


@pytest.mark.parametrize(
    ("text", "wanted"),
    [("abs(x - 1)", ["x - 1"]), ("max(x, y, 3)", ["x - y", "x - 3"]), ("min(x, 2*x)", ["x - 2*x"]),
     ("if(x < y, 1, 2)", ["x - y"]), ("if(x < y and z > 1, 1, 2)", ["x - y"]), ("y/(x - 2)", ["x - 2"]),
     ("sqrt(x + 1)", ["x + 1"]), ("log(x)", ["x"]), ("log10(2*x)", ["2*x"]), ("decibel(x)", ["x"]),
     ("x^0.5", ["x"]), ("x^-1", ["x"]), ("x^2", []), ("x^y", ["x"]), ("2^x", []), ("sign(x)", ["x"]),
     ("atan2(x, y)", ["x"]), ("atan2(y, x)", []), ("hypot(x, y)", ["hypot(x, y)"]),
     ("gamma(x)", ["sin(pi*x)"]),
     ("tan(2*x)", ["cos(2*x)"]), ("floor(x)", ["sin(pi*x)"]), ("ceil(x/2)", ["sin(pi*(x/2))"]),
     ("asin(x)", ["1 - x^2"]), ("acos(y)", []), ("exp(x)*sin(x)", []), ("abs(x) + abs(x)", ["x"])],
)  # fmt: skip
def test_places_that_are_not_smooth_are_named(text: str, wanted: list[str]) -> None:
    assert [to_text(part) for part in nonsmooth(parse(text), "x")] == wanted
    assert all(depends(part, "x") for part in nonsmooth(parse(text), "x"))
