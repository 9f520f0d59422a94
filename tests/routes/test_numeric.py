"""The numeric routes against scipy.stats, mpmath and closed forms: digits, and errors that hold.

Closed forms without a source named are the textbook change of variables written out in mpmath at 30 digits.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from outspread.errors import DerivationError
from outspread.formula.parser import parse
from outspread.laws.build import build_law
from outspread.laws.law import Law
from outspread.numerics.slices.problem import Scores
from outspread.reading.model import Distribution
from outspread.routes.numeric import derive

mp.mp.dps = 30  # for the constants of the cases below


@pytest.fixture(autouse=True)
def _thirty_digits() -> Iterator[None]:
    """Other test files set another working precision for the process."""
    with mp.workdps(30):
        yield


Function = Callable[[Any], Any]


def law(family: str, **parameters: float) -> Law:
    return build_law(Distribution(family, parameters))


def normal(mean: float = 0.0, sd: float = 1.0) -> Law:
    return law("normal", mean=mean, sd=sd)


def uniform(lower: float = 0.0, upper: float = 1.0) -> Law:
    return law("uniform", lower=lower, upper=upper)


def exponential(rate: float = 1.0) -> Law:
    return law("exponential", rate=rate)


def gamma(shape: float) -> Law:
    return law("gamma", shape=shape, scale=1.0)


@dataclass(frozen=True)
class Case:
    """A formula, its inputs, and any of cdf, ccdf, pdf at points, each in its own tail."""

    formula: str
    laws: Mapping[str, Law]
    points: Sequence[float]
    cdf: Function | None = None
    ccdf: Function | None = None
    pdf: Function | None = None
    rho: float = 0.0
    moments: tuple[float, ...] = field(default=())  # mean, standard deviation, skewness, kurtosis
    digits: float = 1e-10


def from_scipy(
    formula: str, laws: Mapping[str, Law], points: Sequence[float], frozen: Any, **more: Any
) -> Case:
    """scipy.stats has the result's law: cdf, sf, pdf to about 1e-14, and its moments."""
    mean, variance, skewness, excess = (float(m) for m in frozen.stats("mvsk"))
    moments = (mean, variance**0.5, skewness, excess + 3) if np.isfinite(variance) else ()
    return Case(
        formula, laws, points, lambda y: frozen.cdf(float(y)), lambda y: frozen.sf(float(y)),
        lambda y: frozen.pdf(float(y)), moments=moments, **more,
    )  # fmt: skip


def normal_result(formula: str, laws: Mapping[str, Law], mean: Any, sd: Any, rho: float = 0.0) -> Case:
    points = [float(mean + k * sd) for k in (-7, -1, 0.3, 4, 7)]
    return Case(
        formula, laws, points, lambda y: mp.ncdf((y - mean) / sd), lambda y: mp.ncdf((mean - y) / sd),
        lambda y: mp.npdf((y - mean) / sd) / sd, rho, (float(mean), float(sd), 0.0, 3.0),
    )  # fmt: skip


def wrapped(f: Function, y: Any, count: int) -> Any:
    """Sum over the roots of sin x = y, in pairs."""
    a = mp.asin(y)
    return mp.fsum(f(a + 2 * k * mp.pi, mp.pi - a + 2 * k * mp.pi) for k in range(-count, count + 1))


def sine_cdf(y: Any) -> Any:
    return wrapped(lambda up, down: mp.ncdf((up - 0.5) / 20) - mp.ncdf((down - 2 * mp.pi - 0.5) / 20), y, 30)


def sine_pdf(y: Any) -> Any:
    both = wrapped(lambda up, down: mp.npdf((up - 0.5) / 20) + mp.npdf((down - 0.5) / 20), y, 30)
    return both / 20 / mp.sqrt(1 - y * y)


ONE: dict[str, Case] = {
    "square": from_scipy("x^2", {"x": normal()}, [1e-12, 1e-4, 0.3, 1, 5, 50], stats.chi2(1)),
    "sine over many periods": Case(
        "sin(x)", {"x": normal(0.5, 20)}, [-0.999, -0.5, 0.3, 0.99999], sine_cdf, None, sine_pdf
    ),
    "reciprocal across its pole": Case(
        "1/x", {"x": normal(1)}, [-1e6, -0.1, -0.01, 0.01, 1, 1e8],
        lambda y: mp.ncdf(-1) - mp.ncdf(1 / y - 1) if y < 0 else mp.ncdf(-1) + mp.ncdf(1 - 1 / y),
        lambda y: mp.ncdf(1 / y - 1) + mp.ncdf(1) if y < 0 else mp.ncdf(1 / y - 1) - mp.ncdf(-1),
        lambda y: mp.npdf(1 / y - 1) / y**2,
    ),
    "tangent": from_scipy(
        "tan(x)", {"x": uniform(-np.pi / 2, np.pi / 2)}, [-300.0, -5.0, 0.5, 1.0, 300.0], stats.cauchy()
    ),
    "absolute value": Case(
        "abs(x)", {"x": normal(0.5, 2)}, [1e-9, 0.1, 1, 5, 14],
        lambda y: mp.quad(lambda x: mp.npdf(x, 0.5, 2), [-y, y]),
        lambda y: mp.ncdf((0.5 - y) / 2) + mp.ncdf((-0.5 - y) / 2),
        lambda y: mp.npdf(y, 0.5, 2) + mp.npdf(-y, 0.5, 2),
    ),
    "exponential": from_scipy("exp(x)", {"x": normal()}, [1e-3, 0.1, 1, 20, 1e3], stats.lognorm(1)),
    "logarithm": from_scipy("-log(x)", {"x": uniform()}, [0.01, 0.1, 1, 9, 27], stats.expon()),
    "piecewise": Case(
        "if(x > 1, x^2, 3 - x)", {"x": normal()}, [1.5, 2.5, 4, 30],
        lambda y: (mp.ncdf(mp.sqrt(y)) - mp.ncdf(1)) + (mp.ncdf(1) - mp.ncdf(3 - y) if y > 2 else 0),
    ),
}  # fmt: skip

MIXED = {"a": normal(1, 1), "b": normal(2, 2)}
PAIR = {"a": normal(), "b": normal()}
TWO: dict[str, Case] = {
    "sum": normal_result("a + b", MIXED, 3, mp.sqrt(5)),
    "difference": normal_result("a - b", MIXED, -1, mp.sqrt(5)),
    "correlated sum": normal_result("a + b", MIXED, 3, mp.sqrt(5 + 4 * mp.mpf(0.6)), 0.6),
    "scales twelve magnitudes apart": normal_result(
        "a + b", {"a": normal(), "b": normal(0, 1e-12)}, 0, mp.sqrt(1 + mp.mpf(10) ** -24)
    ),
    "quotient": from_scipy("a/b", PAIR, [-1e6, -3, 0.5, 2, 1e4], stats.cauchy()),
    "length": from_scipy("hypot(a, b)", {"a": normal(0, 2), "b": normal(0, 2)}, [1e-5, 0.1, 1, 4, 14],
                         stats.rayleigh(scale=2)),
    "angle": from_scipy("atan2(a, b)", PAIR, [-3.1, -1, 0.1, 2, 3.14], stats.uniform(-np.pi, 2 * np.pi)),
    "larger": Case("max(a, b)", PAIR, [-5, -1, 0, 1, 4, 7], lambda y: mp.ncdf(y) ** 2,
                   lambda y: (1 + mp.ncdf(y)) * mp.ncdf(-y), lambda y: 2 * mp.ncdf(y) * mp.npdf(y)),
    "smaller": from_scipy("min(a, b)", {"a": exponential(1), "b": exponential(2)}, [1e-9, 0.1, 1, 9],
                          stats.expon(scale=1 / 3)),
    "product of uniforms": Case("a*b", {"a": uniform(), "b": uniform()}, [1e-12, 1e-3, 0.2, 0.9],
                                lambda y: y - y * mp.log(y), lambda y: 1 - y + y * mp.log(y),
                                lambda y: -mp.log(y)),
    "uniform to a uniform power": Case(
        "a^b", {"a": uniform(), "b": uniform()}, [0.1, 0.5, 0.9],
        lambda y: mp.quad(lambda b: y ** (1 / b), [0, 0.01, 0.1, 1]), digits=1e-10,
    ),
    "difference of exponentials": from_scipy("a - b", {"a": exponential(), "b": exponential()},
                                             [-25, -5, -0.1, 0.2, 2, 25], stats.laplace()),
    "ratio of gammas": from_scipy("a/b", {"a": gamma(2), "b": gamma(5)}, [1e-5, 0.1, 1, 10, 100],
                                  stats.betaprime(2, 5)),
    "share of gammas": from_scipy("a/(a + b)", {"a": gamma(2), "b": gamma(3)}, [1e-4, 0.1, 0.5, 0.99],
                                  stats.beta(2, 3)),
    "far out in a power tail": Case(
        # P(T + C > y) ~ 1/(pi y): beyond y = 1e16 the next term is below 1e-16 of it
        "a + b", {"a": law("student_t", degrees_of_freedom=5), "b": law("cauchy", location=0, scale=1)},
        [1e17, 1e20, 1e32], None, lambda y: 1 / (mp.pi * y), lambda y: 1 / (mp.pi * y * y),
    ),
}  # fmt: skip

#: densities without a bound at the ends of both inputs: seconds each
SINGULAR: dict[str, Case] = {
    "product of normals": Case("a*b", PAIR, [1e-6, 0.1, 1, 10, 25],
                               pdf=lambda y: mp.besselk(0, abs(y)) / mp.pi, moments=(0, 1, 0, 9)),
    "two chi-squares": from_scipy(
        "a + b", {n: law("chi_square", degrees_of_freedom=1) for n in "ab"}, [1e-8, 0.1, 1, 4, 50],
        stats.chi2(2),
    ),
    "two arcsines": Case(
        "a + b", {n: law("arcsine", lower=-1, upper=1) for n in "ab"}, [0.01, 0.5, 1, 1.5, 1.99],
        pdf=lambda y: mp.ellipk(1 - y * y / 4) / mp.pi**2, moments=(0, 1, 0, 2.25),
    ),
    "share of half gammas": from_scipy("a/(a + b)", {"a": gamma(0.5), "b": gamma(0.5)}, [1e-9, 0.1, 0.5, 0.9],
                                       stats.beta(0.5, 0.5)),
}  # fmt: skip


def check(case: Case) -> None:
    scores = Scores(("a", "b"), np.array([[1, case.rho], [case.rho, 1]])) if case.rho else None
    found = derive(parse(case.formula), case.laws, scores).law
    for kind in ("cdf", "ccdf", "pdf"):
        reference = getattr(case, kind)
        if reference is None:
            continue
        exact = np.array([float(reference(mp.mpf(y))) for y in case.points])
        estimate = found.estimate(kind, np.asarray(case.points, float))
        true = np.abs(estimate.value - exact)
        # scipy's own values are good to a few 1e-14 of themselves
        assert np.all(true <= estimate.error + 5e-14 * np.abs(exact)), (kind, true, estimate.error)
        weighty = np.abs(exact) > 1e-12 if kind != "pdf" else exact == exact
        assert np.all(true[weighty] <= case.digits * np.abs(exact[weighty])), (kind, true / np.abs(exact))
    if case.cdf is not None:
        levels = np.array([float(case.cdf(mp.mpf(y))) for y in case.points])
        keep = (levels > 1e-12) & (levels < 0.5)
        quantile = found.estimate_quantile(levels[keep])
        off = np.abs(quantile.value - np.asarray(case.points, float)[keep])
        assert np.all(off <= quantile.error + 1e-13 * np.abs(quantile.value) + 1e-300)
    if case.moments:
        moments = found.moment_estimates()
        true = np.abs(moments.value - np.array(case.moments))
        assert np.all(true <= moments.error + 1e-14)
        assert np.all(true <= 1e-8 * np.maximum(np.abs(moments.value), 1))


@pytest.mark.parametrize("name", ONE)
def test_one_input(name: str) -> None:
    check(ONE[name])


@pytest.mark.parametrize("name", TWO)
def test_two_inputs(name: str) -> None:
    check(TWO[name])


@pytest.mark.slow
@pytest.mark.long
@pytest.mark.parametrize("name", SINGULAR)
def test_two_inputs_with_unbounded_densities(name: str) -> None:
    check(SINGULAR[name])


def test_a_clipped_input_keeps_its_atom() -> None:
    """max(X, 0): mass 1/2 at 0, mean 1/sqrt(2 pi), second moment 1/2."""
    found = derive(parse("max(x, 0)"), {"x": normal()}, None).law
    assert found.atoms().values.tolist() == [0.0]
    assert abs(found.atoms().masses[0] - 0.5) <= found.atoms().errors[0] < 1e-11
    assert found.mean() == pytest.approx(1 / np.sqrt(2 * np.pi), rel=1e-11)
    assert found.variance() == pytest.approx(0.5 - 1 / (2 * np.pi), rel=1e-11)
    assert found.icdf([0.3, 0.5]).tolist() == [0.0, 0.0]
    assert float(found.icdf(0.9)) == pytest.approx(stats.norm.ppf(0.9), rel=1e-11)


def test_a_floor_is_discrete() -> None:
    """floor of an exponential is geometric with q = exp(-rate)."""
    found = derive(parse("floor(x)"), {"x": exponential(2)}, None).law
    atoms = found.atoms()
    exact = stats.geom(1 - np.exp(-2), loc=-1).pmf(atoms.values)
    weighty = exact > 1e-200
    assert found.continuous_mass == 0
    np.testing.assert_allclose(atoms.masses[weighty], exact[weighty], rtol=1e-10)


def test_a_discrete_input_beside_a_continuous_one() -> None:
    """N + X with N Bernoulli(0.3) and X normal is a mixture of two normals."""
    found = derive(parse("n + x"), {"n": law("bernoulli", probability=0.3), "x": normal()}, None).law
    points = np.array([-6, -1, 0.5, 2, 6.0])
    exact = 0.7 * stats.norm.cdf(points) + 0.3 * stats.norm.cdf(points - 1)
    estimate = found.estimate("cdf", points)
    assert np.all(np.abs(estimate.value - exact) <= estimate.error + 2e-16)
    np.testing.assert_allclose(estimate.value, exact, rtol=1e-11)


def test_a_count_times_a_lognormal() -> None:
    """N X with N Poisson(3): an atom exp(-3) at 0, and given N = n a lognormal scaled by n."""
    laws = {"n": law("poisson", mean=3), "x": law("lognormal", log_mean=0, log_sd=0.5)}
    found = derive(parse("n*x"), laws, None).law
    assert found.atoms().masses[0] == pytest.approx(np.exp(-3), rel=1e-12)
    points, counts = np.array([0.2, 1.0, 5.0, 40.0]), np.arange(1, 120)
    weights = stats.poisson(3).pmf(counts)
    exact = stats.lognorm(0.5).sf(points[:, None] / counts) @ weights
    estimate = found.estimate("ccdf", points)
    assert np.all(np.abs(estimate.value - exact) <= estimate.error + 1e-13 * exact)
    np.testing.assert_allclose(estimate.value, exact, rtol=1e-10)


DIVERGING = [
    ("1/x", {"x": normal(1)}, 0), ("1/x", {"x": normal(10)}, 0), ("tan(x)", {"x": normal(0.2, 2)}, 0),
    ("tan(x)", {"x": uniform(-np.pi / 2, np.pi / 2)}, 0), ("exp(x)", {"x": exponential(2.5)}, 2),
    ("a/b", PAIR, 0),
]  # fmt: skip


@pytest.mark.parametrize(("formula", "laws", "count"), DIVERGING)
def test_a_moment_that_does_not_exist_is_not_given(formula: str, laws: Mapping[str, Law], count: int) -> None:
    """Power tails of exponent 1 (a pole in reach) have no mean; exp of a rate 2.5 has two moments."""
    found = derive(parse(formula), laws, None).law.moment_estimates().value
    assert int(np.isfinite(found).sum()) == count


@settings(max_examples=6, deadline=None, derandomize=True)
@given(
    st.sampled_from(["{}*{}", "{} - {}", "{}/(1 + {}^2)"]), st.permutations(["q", "alpha", "z9"]),
    st.booleans(),
)  # fmt: skip
def test_names_and_their_order_do_not_matter(text: str, fresh: list[str], turned: bool) -> None:
    laws = {"a": normal(1, 1), "b": uniform(1, 3)}
    names = dict(zip("ab", fresh, strict=False))
    order = ["b", "a"] if turned else ["a", "b"]
    one = derive(parse(text.format("a", "b")), laws, None).law
    two = derive(parse(text.format(names["a"], names["b"])), {names[n]: laws[n] for n in order}, None).law
    points = one.icdf([0.001, 0.3, 0.9])
    first, second = one.estimate("cdf", points), two.estimate("cdf", points)
    assert np.all(np.abs(first.value - second.value) <= first.error + second.error)


@pytest.mark.parametrize(
    ("formula", "wanted"),
    [("sqrt(x)", "no value with probability 0.5"), ("sin(1/x)", "periods"), ("floor(1000*x)", "constant")],
)
def test_what_cannot_be_derived_is_refused(formula: str, wanted: str) -> None:
    with pytest.raises(DerivationError, match=wanted):
        derive(parse(formula), {"x": normal()}, None)


def test_three_continuous_inputs_are_left_to_sampling() -> None:
    with pytest.raises(DerivationError, match="3 continuous inputs"):
        derive(parse("a + b + c"), {name: normal() for name in "abc"}, None)
