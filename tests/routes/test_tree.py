"""Laws derived by parts against closed forms and scipy's own quadrature: digits, and errors that hold."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from scipy import integrate, stats

from outspread.errors import DerivationError
from outspread.formula.parser import parse
from outspread.laws.build import build_law
from outspread.laws.derived import DerivedLaw
from outspread.laws.law import Array, Law
from outspread.planning.plan import PlanStep
from outspread.planning.tree import TreePlanner
from outspread.reading.model import Distribution
from outspread.routes import numeric
from outspread.routes.closed_form.scored import recognise_with_scores
from outspread.routes.tree import TreeDeriver, TreeLaw


def law(family: str, **parameters: float) -> Law:
    return build_law(Distribution(family, parameters))


def derived(text: str, laws: Mapping[str, Law]) -> TreeLaw:
    # kept from closed forms, so that all of it is done by integration
    step = TreePlanner(laws, None, lambda node, given, scores: None).plan("y", parse(text))
    assert step is not None
    return TreeDeriver(laws, None, recognise_with_scores).derive(step)


UNIFORM = law("uniform", lower=0, upper=1)
NORMAL = law("normal", mean=0, sd=1)
EXPONENTIAL = law("exponential", rate=1)


def check(found: Law, kind: str, y: Array, true: Array, digits: float) -> None:
    """Within the stated error, and that within the digits promised, relative to the value."""
    assert isinstance(found, DerivedLaw)
    estimate = found.estimate(kind, y)
    assert np.all(np.abs(estimate.value - true) <= estimate.error + 4e-15 * true)
    assert np.all(estimate.error <= digits * true)


def test_product_plus_uniform() -> None:
    """P(ab + c <= y) for y <= 1 by elementary integration: (3/4) y^2 - (1/2) y^2 log y."""
    found = derived("a*b + c", dict.fromkeys("abc", UNIFORM)).law
    y = np.array([1e-6, 1e-3, 0.1, 0.5, 0.9, 1.0])
    check(found, "cdf", y, 0.75 * y**2 - 0.5 * y**2 * np.log(y), 1e-10)
    check(found, "pdf", y, y - y * np.log(y), 1e-10)


def test_extremes_of_sums_and_products() -> None:
    """cdfs multiply: scipy.stats for the sum of exponentials (gamma) and the product of lognormals."""
    lognormal = law("lognormal", log_mean=0, log_sd=0.5)
    laws = {"a": EXPONENTIAL, "b": EXPONENTIAL, "c": lognormal, "d": lognormal}
    found = derived("max(a + b, c*d)", laws).law
    y = np.array([0.05, 0.3, 1.0, 2.5, 6.0])
    one, two = stats.gamma(2), stats.lognorm(np.sqrt(0.5))
    check(found, "cdf", y, one.cdf(y) * two.cdf(y), 1e-10)
    above = one.sf(y) + two.sf(y) - one.sf(y) * two.sf(y)
    check(found, "ccdf", y, above, 1e-10)


def test_distance_of_two_points_in_a_square() -> None:
    """Mean (2 + sqrt 2 + 5 log(1 + sqrt 2))/15 and mean square 1/3 (Ghosh 1951, Bulletin of the Calcutta
    Mathematical Society 43, 17–24; from memory)."""
    found = derived("sqrt((a - b)^2 + (c - d)^2)", dict.fromkeys("abcd", UNIFORM)).law
    mean = (2 + np.sqrt(2) + 5 * np.log1p(np.sqrt(2))) / 15
    assert found.mean() == pytest.approx(mean, rel=1e-9)
    assert found.variance() + found.mean() ** 2 == pytest.approx(1 / 3, rel=1e-9)


@pytest.mark.slow
def test_equal_parts_are_derived_once(monkeypatch: pytest.MonkeyPatch) -> None:
    derive, formulas = numeric.derive, []

    def counted(*arguments: Any, **options: Any) -> Any:
        formulas.append(arguments[0])
        return derive(*arguments, **options)

    monkeypatch.setattr(numeric, "derive", counted)
    derived("a*b + c*d", dict.fromkeys("abcd", UNIFORM))
    assert len(formulas) == 2  # one of the two products, and their sum


def test_heavy_tails_go_through() -> None:
    """The tail of a product of independent quantities, one of them a power of exponent 1.5 (Breiman 1965,
    Theory of Probability and its Applications 10, 323–331): y^1.5 P(abc > y) tends to E[(ab)^1.5]."""
    pareto = law("pareto", shape=1.5, scale=1)
    found = derived("a*b*c", {"a": UNIFORM, "b": UNIFORM, "c": pareto}).law
    y = np.array([1e4, 1e6])
    assert np.asarray(found.ccdf(y)) * y**1.5 == pytest.approx(np.full(2, 1 / 2.5**2), rel=1e-8)
    assert np.isfinite(found.mean())
    assert np.isinf(found.variance())


def test_atoms_pass_through_the_parts() -> None:
    """max(a - 1/2, 0) has an atom of 1/2 at 0; with b and c added, P(y <= 1/2) by hand: the atom and the
    uniform part of the clipped input, each convolved with the sum of two uniforms (t^2/2)."""
    found = derived("max(a - 0.5, 0) + b + c", dict.fromkeys("abc", UNIFORM)).law
    y = np.array([0.25, 0.5])
    check(found, "cdf", y, 0.5 * y**2 / 2 + y**3 / 6, 1e-10)


@pytest.mark.slow
def test_discrete_and_continuous_parts() -> None:
    """A Poisson count of one thing plus an exponential and a uniform, against scipy's quadrature."""
    poisson = law("poisson", mean=2)
    found = derived("n*a + b + c", {"n": poisson, "a": UNIFORM, "b": EXPONENTIAL, "c": UNIFORM}).law

    def inner(t: float) -> float:  # P(n a <= t)
        k, count = np.arange(1, 60), stats.poisson(2)
        return float(count.pmf(0) + count.pmf(k) @ np.minimum(t / k, 1.0)) if t >= 0 else 0.0

    def sum_density(t: float) -> float:  # of b + c
        return float(np.exp(-max(t - 1, 0.0)) - np.exp(-t)) if t > 0 else 0.0

    for y in (0.4, 1.7, 4.2):
        breaks = sorted({y - k for k in range(8) if 0 < y - k < y} | ({1.0} if y > 1 else set()))
        true = integrate.quad(
            lambda t, y=y: inner(y - t) * sum_density(t), 0, y, points=breaks or None, epsabs=1e-13, limit=400
        )[0]
        assert float(found.cdf(y)) == pytest.approx(true, abs=2e-11)


def test_given_the_value_of_an_input_that_recurs() -> None:
    """z x + z^2 given z is normal: P(<= y) by scipy's quadrature over z."""
    formula = parse("z*x + z^2")
    given = PlanStep("y", "", "change_of_variables", "", ("x",), "x", expression=formula)
    step = PlanStep("y", "", "conditioning", "", ("z", "x"), "", ("z",), (), (), (given,), formula)
    laws = {"z": law("normal", mean=2, sd=0.2), "x": NORMAL}
    found = TreeDeriver(laws, None, recognise_with_scores).derive(step).law
    y = np.array([-3.0, 0.5, 4.0, 9.0])

    def below(value: float) -> float:
        def at(z: float) -> float:
            return float(stats.norm(2, 0.2).pdf(z) * stats.norm.cdf((value - z**2) / z))

        return integrate.quad(at, 0.1, 5, epsabs=1e-14, epsrel=1e-12, points=[2.0])[0]

    check(found, "cdf", y, np.array([below(value) for value in y]), 1e-8)


@pytest.mark.slow
@pytest.mark.parametrize("count", [3, 10, 30])
def test_sums_of_many_uniforms(count: int) -> None:
    """The sum of uniforms (Irwin 1927, Hall 1927) of a common width, against the alternating sum in exact
    rational arithmetic."""
    from fractions import Fraction
    from math import comb, factorial

    names = [f"u{i}" for i in range(count)]
    laws = dict.fromkeys(names, UNIFORM)
    found = derived(" + ".join(names), laws).law
    for share in (Fraction(1, 20), Fraction(1, 4), Fraction(1, 2)):
        y = share * count
        terms = ((-1) ** k * comb(count, k) * (y - k) ** count for k in range(int(y) + 1))
        true = float(sum(terms, Fraction(0)) / factorial(count))
        if true > 1e-12:
            check(found, "cdf", np.array([float(y)]), np.array([true]), 1e-9)


def test_what_has_no_value_is_refused() -> None:
    with pytest.raises(DerivationError, match="no value with probability"):
        derived("sqrt(a - b)*c + d", dict.fromkeys("abcd", UNIFORM))
