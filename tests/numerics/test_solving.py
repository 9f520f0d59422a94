"""Solved sets against the formula evaluated point by point, and their rates against finite differences.

The reference is numpy's own value of the formula at points that were not used to find the set.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse
from outspread.formula.tree import Name, Node
from outspread.numerics.sets import Sets
from outspread.numerics.slices import cases
from outspread.numerics.slices.isolate import Branches, Isolator
from outspread.numerics.slices.pullback import TooManyBranches
from outspread.numerics.slices.scan import agrees, scan
from outspread.numerics.slices.solve import PARAMETER, Frame, Solver

Array = npt.NDArray[np.float64]
GRID = np.linspace(-6.0, 6.0, 25)
POINTS = np.random.default_rng(20260401).uniform(-6, 6, 400)
#: every operation of one operand, with {} for what it is applied to
STEPS = [
    "-({})", "abs({})", "sqrt({})", "exp({})", "log({})", "log10({})", "decibel({})", "from_decibel({})",
    "sign({})", "floor({})", "ceil({})", "sin({})", "cos({})", "tan({})", "asin({})", "acos({})", "atan({})",
    "sinh({})", "cosh({})", "tanh({})", "erf({})", "({})^2", "({})^3", "({})^4", "({})^(-1)", "({})^(-2)",
    "({})^0.5", "({})^1.7", "2^({})", "0.3^({})", "({}) + c", "c - ({})", "({}) * c", "({}) / c", "c / ({})",
    "max({}, c)", "min({}, c)", "hypot({}, c)", "atan2({}, c)", "atan2(c, {})",
]  # fmt: skip
#: several occurrences: rational forms, exponentials of a quadratic, and what only subdivision can solve
REPEATED = [
    "x^2 - c*x + 1", "(x + c)/(x - 1)", "x/(1 + x^2)", "x - c/x", "exp(x)^2 - 3*exp(x)", "x + sin(2*x)",
    "x*exp(-x^2)", "x^3 - c*x", "abs(x) + x/2", "if(x > c, x^2, 3 - x)", "max(x, -2*x) + min(x, c)",
    "1/(x^2 - 1) + x", "x*tan(x/5)", "x^2/(x^2 + c^2)", "x/hypot(x, c)", "x*(c - 1)/sqrt(x^2 + c^2)",
]  # fmt: skip


def solved(formula: Node, y: float, c: float, below: bool = True) -> Sets:
    event = cases.comparison("less_equal" if below else "greater_equal", formula, Name(PARAMETER))
    return Solver(event, Frame("x", GRID))({"c": np.array([c]), PARAMETER: np.array([y])}, 1)


def compare(formula: Node, y: float, c: float) -> None:
    """Membership of the points in {g <= y}, wherever rounding cannot decide it."""
    value_of = compile_numpy(formula, ("x", "c"))
    with np.errstate(all="ignore"):
        value = np.broadcast_to(value_of(POINTS, np.full(POINTS.size, c)), POINTS.shape)
        beside = [np.broadcast_to(value_of(POINTS + s, np.full(POINTS.size, c)), POINTS.shape)
                  for s in (1e-7, -1e-7)]  # fmt: skip
        below = [v <= y for v in (value, *beside)]
        sure = np.isfinite(value) & (value != y) & (below[0] == below[1]) & (below[0] == below[2])
    found = solved(formula, y, c)
    member = ((found.lower <= POINTS) & (found.upper >= POINTS)).any(axis=0)
    undefined = np.isnan(value) & np.isnan(beside[0]) & np.isnan(beside[1])
    np.testing.assert_array_equal(member[sure], (value <= y)[sure])
    assert not member[undefined].any()


@settings(max_examples=150, deadline=None, derandomize=True)
@given(st.lists(st.sampled_from(STEPS), min_size=1, max_size=4), st.sampled_from([-2.5, -0.6, 0.4, 1.5]),
       st.sampled_from([-1.3, -0.2, 0.35, 0.9, 2.2, 7.0]))  # fmt: skip
def test_formulas_with_one_occurrence(steps: list[str], c: float, y: float) -> None:
    """A chain of operations is inverted operation by operation; its set holds the points it should."""
    text = "x"
    for step in steps:
        text = step.format(text)
    try:
        compare(parse(text), y, c)
    except TooManyBranches:  # refused openly: the argument of a sine runs through too many periods
        assert any(periodic in text for periodic in ("sin(", "cos(", "tan("))


@pytest.mark.parametrize("step", STEPS)
def test_every_operation(step: str) -> None:
    """Each operation by itself, at values inside, at and outside its range."""
    for c in (-2.5, 0.4, 1.5):
        for y in (-9.0, -1.3, -0.2, 0.35, 0.9, 2.2, 40.0):
            compare(parse(step.format("x")), y, c)


@pytest.mark.parametrize("text", REPEATED)
def test_formulas_with_several_occurrences(text: str) -> None:
    for c in (-2.5, 0.4, 1.5):
        for y in (-3.3, -1.3, -0.2, 0.35, 0.9, 2.2, 40.0):
            compare(parse(text), y, c)


@pytest.mark.parametrize("text", [*(step.format("x") for step in STEPS), *REPEATED])
def test_rates_are_the_derivatives_of_the_ends(text: str) -> None:
    """Central differences with step 1e-6, whose error is about 1e-12 of the third derivative."""
    step = 1e-6
    for c in (0.4, 1.5):
        for y in (-1.3, 0.35, 2.2):
            middle, low, high = (solved(parse(text), y + s, c) for s in (0.0, -step, step))
            if middle.lower.shape != low.lower.shape or middle.lower.shape != high.lower.shape:
                continue
            full = (middle.lower < middle.upper) & (low.lower < low.upper) & (high.lower < high.upper)
            for name in ("lower", "upper"):
                ends, rate = [getattr(s, name) for s in (low, high)], getattr(middle, f"{name}_rate")
                keep = full & np.isfinite(ends[0]) & np.isfinite(ends[1]) & np.isfinite(getattr(middle, name))
                slope = (ends[1][keep] - ends[0][keep]) / (2 * step)
                np.testing.assert_allclose(rate[keep], slope, rtol=2e-5, atol=1e-7)


def test_three_ways_to_find_roots_agree() -> None:
    """x + 2 sin(3x) = y: by subdivision, by scanning a grid, and branch by branch."""
    formula, bound = parse("x + 2*sin(3*x)"), Name(PARAMETER)
    y = np.linspace(-5, 5, 60) + 0.0123
    environment = {PARAMETER: y}
    grid = np.linspace(-6, 6, 60)
    isolator = Isolator(formula, bound, "less_equal", "x", grid, PARAMETER)
    roots, owners, _ = isolator.boundaries(environment, y.size)
    found = scan(isolator, environment, y.size)
    assert agrees(found, roots, owners, np.arange(y.size))
    np.testing.assert_allclose(roots + 2 * np.sin(3 * roots), y[owners], atol=1e-13)
    branches = Branches(formula, bound, "less_equal", "x", grid, PARAMETER).solve(environment, y.size)
    for way in (branches, isolator.solve(environment, y.size)):
        for point in POINTS[:100]:
            member = ((way.lower <= point) & (point <= way.upper)).any(axis=0)
            np.testing.assert_array_equal(member, point + 2 * np.sin(3 * point) <= y)


def test_a_triple_root_is_not_missed() -> None:
    """(x - 1)^3 <= 0 holds up to its triple root, which an enclosure can only bracket."""
    found = solved(parse("(x - 1)^3 + 0*sin(x)"), 0.0, 1.0)
    assert float(np.max(found.upper)) == pytest.approx(1.0, abs=1e-5)
