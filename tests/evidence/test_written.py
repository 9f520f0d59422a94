"""Densities written as integrals, evaluated from what is written: right ones agree, wrong ones are caught."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
import scipy.stats as st
from scipy.integrate import quad
from test_drawn_families import KNOWN, curvilinear, hoyt
from test_judging import Faulty

from outspread.evidence.adaptive import Panels, integrate
from outspread.evidence.densities import FORMULAS, density_function, limiting
from outspread.evidence.drawing import Sample
from outspread.evidence.judging import body_points, judge_integral, judge_output
from outspread.evidence.marginal_density import NotWritten, marginal_density
from outspread.evidence.written import written_density
from outspread.formula.parser import parse, parse_event
from outspread.formula.tree import Node
from outspread.laws.build import build_law
from outspread.laws.law import Array, Law
from outspread.reading.build import read_mapping
from outspread.reading.model import Distribution, Model
from outspread.routes.derived import DerivedOutput, SymbolicBranch, SymbolicIntegral

#: density where scipy has none of the family, by the formula of the source that KNOWN names
BY_FORMULA: dict[str, Callable[[Array], Array]] = {
    "curvilinear_trapezoidal": curvilinear,
    "hoyt": hoyt,
    "kumaraswamy": lambda x: 2 * 3 * (x / 2) * (1 - (x / 2) ** 2) ** 2 / 2,  # slope of 1 - (1 - (x/2)^2)^3
    "logit_normal": lambda x: st.norm.pdf(np.log(x / (1 - x)), 0.3, 0.8) / (x * (1 - x)),
}


@pytest.mark.parametrize("family", list(FORMULAS))
def test_formulas_are_those_of_scipy(family: str) -> None:
    """Each family's density, at quantiles from 1e-6 up, where scipy has the family; else a formula."""
    parameters, law = KNOWN[family]
    lower, upper = FORMULAS[family][1](parameters)
    if family in BY_FORMULA:
        span = (max(lower, -50.0), min(upper, 8.0))
        x, right = np.linspace(*span, 41)[1:-1], BY_FORMULA[family]
    else:
        x, right = law.ppf([1e-6, 1e-3, 0.1, 0.31, 0.5, 0.77, 0.9, 0.999]), law.pdf
        assert law.cdf(lower) == pytest.approx(0, abs=1e-15)
        assert law.cdf(upper) == pytest.approx(1, abs=1e-15)
    np.testing.assert_allclose(density_function(family, parameters)(x), right(x), rtol=3e-13)


@pytest.mark.parametrize(
    ("family", "parameters", "frozen"),
    [
        ("noncentral_chi_square", {"degrees_of_freedom": 3.0, "noncentrality": 0.0}, st.chi2(3)),
        ("generalised_extreme_value", {"location": 1.0, "scale": 2.0, "shape": 0.0}, st.gumbel_r(1, 2)),
        ("generalised_pareto", {"location": 1.0, "scale": 2.0, "shape": 0.0}, st.expon(1, 2)),
    ],
)
def test_limiting_families(family: str, parameters: dict[str, float], frozen: Any) -> None:
    """Where a formula divides by a parameter that is 0, the law is another family (scipy)."""
    x = np.array([1.5, 2.0, 7.0])
    np.testing.assert_allclose(density_function(*limiting(family, parameters))(x), frozen.pdf(x), rtol=1e-13)


@pytest.mark.parametrize(
    ("distribution", "right"),
    [
        (Distribution("normal", {"mean": 60.0, "sd": 0.003}, lower=59.99, upper=60.005),
         st.truncnorm(-10 / 3, 5 / 3, 60, 0.003).pdf),
        (Distribution("gamma", {"shape": 0.4, "scale": 2.0}, lower=0.1),
         lambda x: st.gamma.pdf(x, 0.4, scale=2) / st.gamma.sf(0.1, 0.4, scale=2)),
        (Distribution("table", {"x": (59.99, 60.0, 60.03), "pdf": (0.0, 50.0, 0.0)}),
         st.triang(0.25, 59.99, 0.04).pdf),
        (Distribution("table", {"x": (59.0, 60.0, 61.0), "cdf": (0.0, 0.25, 1.0)}),
         lambda x: np.where(x < 60, 0.25, 0.75)),
        (Distribution("histogram", {"edges": (59.0, 60.0, 62.0), "counts": (3.0, 1.0)}),
         lambda x: np.where(x < 60, 0.75, 0.125)),
        (Distribution("observations", {"mean": 60.0, "sd": 0.01, "count": 5.0}),
         st.t(4, 60, 0.01 / np.sqrt(5)).pdf),
        (Distribution("density", {"density": parse("3 * (x - 59.5)^2 * 8"), "lower": 59.5, "upper": 60.0}),
         lambda x: np.where(x < 60, 24 * (x - 59.5) ** 2, 0)),
        (Distribution("mixture", {"weights": (0.3, 0.7)}, (
            Distribution("normal", {"mean": 60.0, "sd": 0.01}),
            Distribution("uniform", {"lower": 59.99, "upper": 60.01}))),
         lambda x: 0.3 * st.norm.pdf(x, 60, 0.01) + 0.7 * st.uniform.pdf(x, 59.99, 0.02)),
    ],
)  # fmt: skip
def test_densities_of_inputs(distribution: Distribution, right: Callable[[Array], Array]) -> None:
    """Cut, from data, by formula, mixed: against scipy's laws and elementary formulas."""
    x = np.array([59.992, 59.999, 60.0005, 60.004])
    np.testing.assert_allclose(marginal_density(distribution)(x), right(x), rtol=1e-11)


@pytest.mark.parametrize(
    "distribution",
    [
        Distribution("poisson", {"mean": 3.0}),
        Distribution("sample", {"values": (1.0, 2.0)}),
        Distribution("normal", {"mean": parse("2 * other"), "sd": 1.0}),
        Distribution("mixture", {"weights": (0.5, 0.5)}, (
            Distribution("poisson", {"mean": 3.0}), Distribution("normal", {"mean": 0.0, "sd": 1.0}))),
    ],
)  # fmt: skip
def test_what_has_no_density_says_so(distribution: Distribution) -> None:
    """Atoms, samples and parameters that are other inputs."""
    with pytest.raises(NotWritten, match=r"density|depend"):
        marginal_density(distribution)


def test_quadrature_keeps_its_word() -> None:
    """Smooth, singular, infinite and jumping integrands with elementary integrals, all at once."""
    cases: list[tuple[Callable[[Array], Array], float, float, float]] = [
        (lambda x: np.exp(-x * x), 0.0, np.inf, np.sqrt(np.pi) / 2),
        (lambda x: 1 / (1 + x * x), -np.inf, 0.0, np.pi / 2),
        (lambda x: 1 / np.sqrt(x), 0.0, 1.0, 2.0),
        (lambda x: 1 / np.sqrt(3 - x), 2.0, 3.0, 2.0),
        (lambda x: x**-0.9, 0.0, 1.0, 10.0),
        (lambda x: -np.log(x), 0.0, 1.0, 1.0),
        (lambda x: np.exp(-1e6 * x) * 1e6, 0.0, np.inf, 1.0),
        (lambda x: np.where(x > 0.123, 1.0, 0.0), 0.0, 1.0, 0.877),
    ]

    def function(row: npt.NDArray[np.int64], x: Array) -> Array:
        values = np.empty(x.size)
        for place, case in enumerate(cases):
            values[row == place] = case[0](x[row == place])
        return values

    def doubt(row: npt.NDArray[np.int64], x: Array) -> Array:
        right = function(row, x)
        change = np.abs(function(row, x * (1 + 1e-15)) - right)
        return np.where(np.isfinite(change), change, np.abs(right))

    start, stop, true = (np.array([case[i] for case in cases], float) for i in (1, 2, 3))
    rows = np.arange(len(cases))
    found = integrate(function, doubt, Panels(rows, start, stop, np.ones(rows.size)), rows.size)
    assert np.all(np.abs(found.value - true) <= found.error)
    assert np.all(found.error <= 1e-11 * true)


def model(first: dict[str, Any], second: dict[str, Any], formula: str, **more: Any) -> Model:
    inputs = {
        name: {"unit": "1", "basis": "made up", "distribution": given}
        for name, given in (("a", first), ("b", second))
    }
    outputs = {"y": {"formula": formula, "unit": "1"}}
    return read_mapping(
        {"outspread": 1, "title": "t", "inputs": inputs, "transformation": {"outputs": outputs}, **more}
    )


def branch(value: str, slope: str, *conditions: Node) -> SymbolicBranch:
    return SymbolicBranch(parse(value), parse(slope), conditions)


NORMAL = {"normal": {"mean": 0, "sd": 1}}
GAUSSIAN = [{"inputs": ["a", "b"], "copula": {"gaussian": {"pearson": 0.6}}}]
#: the two halves of the circle a^2 + b^2 = v^2
CIRCLE = (branch("sqrt((v - a)*(v + a))", "v / sqrt((v - a)*(v + a))"),
          branch("-sqrt((v - a)*(v + a))", "-v / sqrt((v - a)*(v + a))"))  # fmt: skip
#: sums, quotients, products and lengths whose law is known
CLOSED: list[tuple[Model, SymbolicIntegral, Any]] = [
    (model({"normal": {"mean": 1, "sd": 3}}, {"normal": {"mean": 2, "sd": 4}}, "a + b"),
     SymbolicIntegral("b", "a", "v", (branch("v - a", "1"),)), st.norm(3, 5)),
    (model(NORMAL, NORMAL, "a / b"),
     SymbolicIntegral("b", "a", "v", (branch("a / v", "-a / v^2"),)), st.cauchy()),
    (model(NORMAL, NORMAL, "a + b", dependence=GAUSSIAN),
     SymbolicIntegral("b", "a", "v", (branch("v - a", "1"),)), st.norm(0, np.sqrt(3.2))),
    (model(NORMAL, NORMAL, "hypot(a, b)"), SymbolicIntegral("b", "a", "v", CIRCLE), st.rayleigh()),
    (model({"exponential": {"rate": 1}}, {"exponential": {"rate": 1}}, "a / (a + b)"),
     SymbolicIntegral("b", "a", "v", (branch("a / v - a", "-a / v^2"),)), st.uniform()),
    (model({"lognormal": {"log_mean": 0, "log_sd": 1}}, {"lognormal": {"log_mean": 0, "log_sd": 1}}, "a * b",
           dependence=[{"inputs": ["a", "b"], "copula": {"gaussian": {"normal_scores": -0.5}}}]),
     SymbolicIntegral("b", "a", "v", (branch("v / a", "1 / a"),)), st.lognorm(1.0)),
    (model({"uniform": {"lower": 0, "upper": 1}}, {"uniform": {"lower": 0, "upper": 1}}, "a + b"),
     SymbolicIntegral("b", "a", "v", (branch("v - a", "1"),)), st.triang(0.5, 0, 2)),
]  # fmt: skip


@pytest.mark.parametrize(("stated", "written", "frozen"), CLOSED)
def test_integrals_give_known_densities(stated: Model, written: SymbolicIntegral, frozen: Any) -> None:
    """Where the law is known in closed form (scipy), the value is within the error, and that is small."""
    y = frozen.ppf(np.linspace(0.001, 0.999, 60))
    found = written_density(written, stated, y)
    right = frozen.pdf(y)
    assert np.all(np.abs(found.value - right) <= found.error + 1e-14 * right)
    assert np.all(found.error <= 1e-8 * right)


def test_a_pole_of_the_inverse_is_found() -> None:
    """a + b^3 over a: the derivative of the cube root is infinite at a = v. The truth by scipy, over b."""
    stated = model(NORMAL, NORMAL, "a + b^3")
    cube_root = branch("sign(v - a) * abs(v - a)^(1/3)", "abs(v - a)^(-2/3) / 3")
    y = np.array([-3.0, -0.4, 0.0, 0.7, 5.0])
    found = written_density(SymbolicIntegral("b", "a", "v", (cube_root,)), stated, y)
    right = [
        quad(lambda b, v=v: st.norm.pdf(b) * st.norm.pdf(v - b**3), -9, 9, epsabs=1e-14, limit=500)[0]
        for v in y.tolist()
    ]
    assert np.all(np.abs(found.value - right) <= found.error)
    assert np.all(found.error <= 1e-4 * found.value)


def test_a_narrow_solution_beside_a_pole_is_found() -> None:
    """a^b at v near 1, b between 1 and 2: a lies between v^(1/2) and v only. The truth by scipy, over b."""
    stated = model(
        {"lognormal": {"log_mean": 0, "log_sd": 0.5}}, {"uniform": {"lower": 1, "upper": 2}}, "a^b"
    )
    exponent = branch("log(v) / log(a)", "1 / (v * log(a))", parse_event("v > 0"))
    y = np.array([1 - 1e-4, 1 + 1e-6, 1.002, 3.0])
    found = written_density(SymbolicIntegral("b", "a", "v", (exponent,)), stated, y)
    right = [
        quad(lambda b, v=v: st.lognorm.pdf(v ** (1 / b), 0.5) * v ** (1 / b - 1) / b, 1, 2, epsabs=1e-14)[0]
        for v in y.tolist()
    ]
    np.testing.assert_allclose(found.value, right, rtol=1e-9)
    assert np.all(np.abs(found.value - right) <= found.error + 1e-14)


def law_of(family: str, **parameters: object) -> Law:
    return build_law(Distribution(family, parameters))


STATED, WRITTEN, _ = CLOSED[0]
SUM = law_of("normal", mean=3, sd=5)


def test_a_right_density_agrees() -> None:
    """The sum of two normals at 200 quantiles from 0.001 to 0.999, to ten digits."""
    found = judge_integral("y", SUM, WRITTEN, STATED)
    assert found.agrees
    assert found.points == 200
    assert found.largest_difference < 1e-12
    assert found.allowed == 1e-10
    assert st.norm.cdf(body_points(SUM), 3, 5)[[0, -1]] == pytest.approx([0.001, 0.999], rel=1e-12)


@pytest.mark.parametrize("off", [1e-3, -1e-3, 1e-9])
def test_a_density_that_is_off_is_caught(off: float) -> None:
    """A fault of 0.1 %, and of one in 10^9, put into the density on purpose."""
    found = judge_integral("y", Faulty(SUM, pdf=off), WRITTEN, STATED)
    assert not found.agrees
    assert found.largest_difference == pytest.approx(abs(off), rel=2e-3)


@pytest.mark.parametrize(
    "wrong",
    [
        replace(WRITTEN, branches=(branch("v - a", "1.001"),)),  # a slip in the derivative
        replace(WRITTEN, branches=(branch("v - 1.001 * a", "1"),)),  # a slip in the inverse
        replace(WRITTEN, branches=(branch("v - a", "1"), branch("v + 20 - a", "1"))),  # a branch too many
    ],
)
def test_a_slip_in_what_is_written_is_caught(wrong: SymbolicIntegral) -> None:
    """The formulas of the report are what is evaluated, so that a wrong one does not pass."""
    assert not judge_integral("y", SUM, wrong, STATED).agrees


def test_a_branch_that_is_left_out_is_caught() -> None:
    """Half of the circle gives half of the density."""
    half = replace(CLOSED[3][1], branches=CIRCLE[:1])
    found = judge_integral("y", law_of("rayleigh", scale=1), half, CLOSED[3][0])
    assert found.largest_difference == pytest.approx(0.5, rel=1e-9)
    assert not found.agrees


def test_what_is_not_written_is_said_beside_the_check_that_was_made() -> None:
    """No row is made up for a comparison that did not take place."""
    silent = SymbolicIntegral("b", "a", "v", (), "the formula has no inverse in b that can be written")
    sample = Sample({"y": np.random.Generator(np.random.PCG64(1)).normal(3, 5, 100_000)}, "draws", {})
    rows = judge_output(DerivedOutput("y", "region_integral", SUM, symbolic=silent), sample, STATED)
    assert [row.against for row in rows] == ["draws", "the integral of the density"]
    assert rows[-1].note.endswith("the formula has no inverse in b that can be written")
    rows = judge_output(DerivedOutput("y", "region_integral", SUM, symbolic=WRITTEN), sample, STATED)
    assert rows[-1].against == "the density as written, an integral over a (relative difference)"
    assert all(row.agrees for row in rows)


@pytest.mark.parametrize(
    ("inputs", "copula"),
    [
        (NORMAL, {"clayton": {"kendall": 0.5}}),
        ({"uniform": {"lower": 0, "upper": 1}}, {"gaussian": {"spearman": 0.5}}),
    ],
)
def test_dependence_without_a_formula_says_so(inputs: dict[str, Any], copula: dict[str, Any]) -> None:
    """Copulas whose joint density is not elementary in the inputs."""
    stated = model(inputs, inputs, "a + b", dependence=[{"inputs": ["a", "b"], "copula": copula}])
    with pytest.raises(NotWritten, match="copula"):
        written_density(WRITTEN, stated, np.array([0.5]))
