"""The range of a formula against dense sampling, and tail exponents against known ones."""

from __future__ import annotations

import numpy as np
import pytest

from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse
from outspread.formula.tree import names
from outspread.laws.build import build_law
from outspread.laws.law import Law
from outspread.numerics.slices.extent import extent
from outspread.numerics.tail_index import tail_index
from outspread.reading.model import Distribution

INF = float("inf")


def law(family: str, **parameters: float) -> Law:
    return build_law(Distribution(family, parameters))


def uniform(lower: float, upper: float) -> Law:
    return law("uniform", lower=lower, upper=upper)


BOXES = [
    "a*b", "a/b", "a^2 - b", "sin(3*a)*b", "hypot(a, b)", "max(a, b) - a", "(a - b)^2", "exp(-a^2)*b",
    "a^3 - 2*a", "if(a > 0, b, -b)", "a/(1 + a^2)", "abs(a) - b^2",
]  # fmt: skip


@pytest.mark.parametrize("text", BOXES)
def test_the_range_holds_every_value_and_is_nearly_attained(text: str) -> None:
    """A grid of 801 x 801 points: none outside, and none further from the end than the error stated."""
    expression = parse(text)
    laws = {"a": uniform(-1.3, 2.0), "b": uniform(0.5, 3.0)}
    used = tuple(name for name in laws if name in names(expression))
    found = extent(expression, laws, used)
    axes = {"a": np.linspace(-1.3, 2, 801), "b": np.linspace(0.5, 3, 801)}
    mesh = np.meshgrid(*(axes[name] for name in used))
    value = compile_numpy(expression, used)(*mesh)
    assert found.lower <= value.min()
    assert found.upper >= value.max()
    # between grid points the formulas above change by less than 3e-2
    assert value.min() - found.lower <= found.lower_error + 3e-2
    assert found.upper - value.max() <= found.upper_error + 3e-2


def test_infinite_ends_are_infinite() -> None:
    normal = law("normal", mean=0.0, sd=1.0)
    found = extent(parse("x^2 + 1"), {"x": normal}, ("x",))
    assert (found.lower, found.upper) == (pytest.approx(1.0, abs=1e-12), INF)
    found = extent(parse("1/x"), {"x": normal}, ("x",))
    assert (found.lower, found.upper) == (-INF, INF)


NORMAL, CAUCHY = law("normal", mean=0.0, sd=1.0), law("cauchy", location=0.0, scale=1.0)
STUDENT = law("student_t", degrees_of_freedom=4)
EXPONENTIAL, GAMMA = law("exponential", rate=2.5), law("gamma", shape=3.0, scale=1.0)

#: formula, laws, and the exponent with which P(|Y| > t) falls off (Embrechts et al. 1997, table 1.3.2 on)
EXPONENTS: list[tuple[str, dict[str, Law], float]] = [
    ("x", {"x": NORMAL}, INF),
    ("x^2", {"x": NORMAL}, INF),
    ("1/x", {"x": NORMAL}, 1.0),
    ("1/x^2", {"x": NORMAL}, 0.5),
    ("a/b", {"a": NORMAL, "b": NORMAL}, 1.0),
    ("a/b", {"a": NORMAL, "b": GAMMA}, 3.0),
    ("a/sqrt(b)", {"a": NORMAL, "b": GAMMA}, 6.0),
    ("a + b", {"a": NORMAL, "b": CAUCHY}, 1.0),
    ("a*b", {"a": NORMAL, "b": STUDENT}, 4.0),
    ("x^2", {"x": STUDENT}, 2.0),
    ("exp(x)", {"x": NORMAL}, INF),
    ("exp(x)", {"x": EXPONENTIAL}, 2.5),
    ("exp(x)", {"x": CAUCHY}, 0.0),
    ("log(x)", {"x": EXPONENTIAL}, INF),
    ("tan(x)", {"x": NORMAL}, 1.0),
    ("sin(x)", {"x": CAUCHY}, INF),
    ("1/x", {"x": law("uniform", lower=1.0, upper=2.0)}, INF),
    ("if(a > 0, a, b)", {"a": NORMAL, "b": STUDENT}, 4.0),
]


@pytest.mark.parametrize(("text", "laws", "exponent"), EXPONENTS, ids=lambda value: str(value)[:20])
def test_tail_exponents(text: str, laws: dict[str, Law], exponent: float) -> None:
    found = tail_index(parse(text), laws)
    assert found.far == pytest.approx(exponent, abs=1e-5)
    assert exponent == INF or found.reason
