"""Formulas whose law is published, each in several spellings, with the law from scipy.stats beside it.

`published` has cdf, sf and pdf; the identity that makes it the answer is named in the comment (all are
textbook identities of Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions, from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import cache
from math import log, sqrt
from typing import Any

import numpy as np
from scipy import stats

from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse
from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES
from outspread.routes.closed_form import NormalDependence


@cache
def _build(key: str, items: tuple[tuple[str, Any], ...]) -> Law:
    return FAMILIES[key].build(FAMILIES[key].canonical(dict(items)))


def law(key: str, **parameters: Any) -> Law:
    return _build(key, tuple(parameters.items()))


def normal(mean: float, sd: float) -> Law:
    return law("normal", mean=mean, sd=sd)


def uniform(lower: float, upper: float) -> Law:
    return law("uniform", lower=lower, upper=upper)


def exponential(rate: float) -> Law:
    return law("exponential", rate=rate)


def gamma(shape: float, scale: float) -> Law:
    return law("gamma", shape=shape, scale=scale)


def chi_square(freedom: float) -> Law:
    return law("chi_square", degrees_of_freedom=freedom)


def lognormal(log_mean: float, log_sd: float) -> Law:
    return law("lognormal", log_mean=log_mean, log_sd=log_sd)


def located(key: str, location: float, scale: float) -> Law:
    return law(key, location=location, scale=scale)


@dataclass(frozen=True)
class Case:
    identifier: str
    spellings: tuple[str, ...]
    laws: Mapping[str, Law]
    published: Any
    name: str
    dependence: NormalDependence | None = None
    tolerance: float = 1e-11  # relative, where scipy's own function is worse than ours it is said why
    least: float = 1e-60  # smallest probability compared


def pair(left: str, right: str, correlation: float) -> NormalDependence:
    return NormalDependence((left, right), ((1.0, correlation), (correlation, 1.0)))


@dataclass(frozen=True)
class Mirrored:
    """The law of the negative of a variable."""

    base: Any

    def cdf(self, y: Any) -> Any:
        return self.base.sf(-np.asarray(y))

    def sf(self, y: Any) -> Any:
        return self.base.cdf(-np.asarray(y))


@dataclass(frozen=True)
class Mapped:
    """The law of an increasing map of a variable, given by the inverse of the map."""

    base: Any
    inverse: Callable[[Any], Any] = field(repr=False)

    def cdf(self, y: Any) -> Any:
        return self.base.cdf(self.inverse(np.asarray(y)))

    def sf(self, y: Any) -> Any:
        return self.base.sf(self.inverse(np.asarray(y)))


@dataclass(frozen=True)
class LargerOfTwo:
    """The larger of two independent variables with one law: cdf F^2, complement S (1 + F)."""

    base: Any

    def cdf(self, y: Any) -> Any:
        return self.base.cdf(y) ** 2

    def sf(self, y: Any) -> Any:
        return self.base.sf(y) * (1 + self.base.cdf(y))


_N = {"x": normal(0, 1), "y": normal(0, 1), "z": normal(2, 1), "w": normal(-1, 0.5)}
_E = {"a": exponential(1), "b": exponential(1), "c": exponential(2)}
_U = {"u": uniform(0, 1), "v": uniform(0, 1)}
_M = {"m": lognormal(0, 0.5), "n": lognormal(0.2, 0.8)}
_X2 = {"a": chi_square(5), "b": chi_square(3)}
_PAIR = pair("x", "y", 0.6)

CASES: tuple[Case, ...] = (
    Case(
        "affine of normals",
        ("2*x - z + 3", "3 + x*2 + -1*z", "(4*x - 2*z + 6)/2", "x + 3 - z + x", "-(z - 2*x) + 3"),
        _N,
        stats.norm(1, sqrt(5)),
        "Normal distribution",
    ),
    Case(
        "repeated normal",
        ("x - x/2 + w", "0.5*x + w", "w + x*(1 - 0.5)", "w + 50*x/100"),
        _N,
        stats.norm(-1, sqrt(0.5)),
        "Normal distribution",
    ),
    Case(
        "correlated normals",
        ("x + 2*y", "2*(y + x/2)", "log(exp(x)*exp(y)^2)"),
        _N,
        stats.norm(0, sqrt(1 + 4 + 2.4)),
        "Normal distribution",
        _PAIR,
    ),
    Case(
        "product of lognormals",
        ("m^2*sqrt(n)*3", "3*m*m*n^0.5", "exp(2*log(m) + log(n)/2)*3", "3/(m^-2/sqrt(n))"),
        _M,
        stats.lognorm(sqrt(1 + 0.16), scale=3 * np.exp(0.1)),
        "Lognormal distribution",
    ),
    Case(
        "quotient of correlated lognormals",
        ("m/n", "m*n^-1", "exp(log(m) - log(n))", "1/(n/m)"),
        _M,
        stats.lognorm(sqrt(0.25 + 0.64 - 2 * 0.6 * 0.4), scale=np.exp(-0.2)),
        "Lognormal distribution",
        pair("m", "n", 0.6),
    ),
    Case(
        "decibels of lognormals",
        ("decibel(m*n)", "10*log10(m) + 10*log10(n)", "decibel(m) + decibel(n)"),
        _M,
        stats.norm(2 / log(10), 10 / log(10) * sqrt(0.89)),
        "Normal distribution",
    ),
    Case(
        "exponential of normals",
        ("exp(2*x + z)", "exp(x)^2*exp(z)", "exp(z)*exp(x)*exp(x)"),
        _N,
        stats.lognorm(sqrt(5), scale=np.exp(2)),
        "Lognormal distribution",
    ),
    Case(
        "from decibels",
        ("10^(x/20)", "from_decibel(x/2)", "sqrt(from_decibel(x))", "exp(x*log(10)/20)"),
        _N,
        stats.lognorm(log(10) / 20),
        "Lognormal distribution",
    ),
    Case(
        "quotient of normals",
        ("x/y", "1/(y/x)", "x*y^-1", "2*x/(y + y)"),
        _N,
        stats.cauchy(),
        "Cauchy distribution",
    ),
    Case(
        "quotient of correlated normals",
        ("x/y", "1/(y/x)"),
        _N,
        stats.cauchy(0.6, 0.8),
        "Cauchy distribution",
        _PAIR,
    ),
    Case(
        "radius of two",
        ("hypot(x, y)", "sqrt(x^2 + y^2)", "(x*x + y*y)^0.5", "sqrt((x + y)^2 - 2*x*y)"),
        _N,
        stats.rayleigh(),
        "Rayleigh distribution",
    ),
    Case(
        "radius of three",
        ("sqrt(x^2 + y^2 + (2*w + 2)^2)", "hypot(x, y, 2*w + 2)", "hypot(x, hypot(y, 2*w + 2))"),
        _N,
        stats.maxwell(),
        "Maxwell distribution",
    ),
    Case(
        "squared radius",
        ("x^2 + y^2", "((x + y)^2 + (x - y)^2)/2", "(0.6*x + 0.8*y)^2 + (0.8*x - 0.6*y)^2"),
        _N,
        stats.expon(scale=2),
        "Exponential distribution",
    ),
    Case(
        "square of one normal",
        ("x^2", "x*x", "abs(x)^2", "(-x)^2"),
        _N,
        stats.chi2(1),
        "Chi-square distribution",
    ),
    Case(
        "fourth power of a normal",
        ("x^4", "(x^2)^2", "x*x^3"),
        _N,
        stats.gengamma(0.5, 0.5, scale=4),
        "Generalised gamma distribution, scaled",
    ),
    Case(
        "absolute normal",
        ("abs(x)", "sqrt(x^2)", "hypot(x)", "abs(-x)"),
        _N,
        stats.halfnorm(),
        "Half-normal distribution",
    ),
    Case(
        "squares and chi-squares",
        ("a + b + x^2", "x*x + b + a"),
        {**_X2, **_N},
        stats.chi2(9),
        "Chi-square distribution",
    ),
    Case(
        "sum of exponentials", ("a + b + 2*c", "2*(a/2 + c + b/2)"), _E, stats.gamma(3), "Gamma distribution"
    ),
    Case(
        "sum of gammas",
        ("g + h", "(2*g + 2*h)/2"),
        {"g": gamma(1.5, 0.4), "h": gamma(0.7, 0.4)},
        stats.gamma(2.2, scale=0.4),
        "Gamma distribution",
    ),
    Case(
        "difference of exponentials",
        ("a - b", "2*c - b", "-b + a"),
        _E,
        stats.laplace(),
        "Laplace distribution",
    ),
    Case(
        "ratio of exponentials",
        ("a/b", "1/(b/a)", "exp(log(a) - log(b))"),
        _E,
        Mapped(stats.logistic(), np.log),
        "Log-logistic distribution",
    ),
    Case(
        "log ratio of exponentials",
        ("log(a/b)", "log(a) - log(b)", "-log(b/a)"),
        _E,
        stats.logistic(),
        "Logistic distribution",
    ),
    Case(
        "F ratio",
        ("(a/5)/(b/3)", "a/5/(b/3)", "3*a/(5*b)", "0.6*a*b^-1", "1/((b/3)/(a/5))"),
        _X2,
        stats.f(5, 3),
        "F distribution",
    ),
    Case(
        "F from normals",
        ("(x^2 + y^2)/2/(b/3)", "1.5*hypot(x, y)^2/b"),
        {**_X2, **_N},
        stats.f(2, 3),
        "F distribution",
    ),
    Case(
        "beta share",
        ("a/(a + b)", "1/(1 + b/a)", "1 - b/(a + b)", "a/b/(1 + a/b)", "2*a/(2*a + 2*b)"),
        _X2,
        stats.beta(2.5, 1.5),
        "Beta distribution",
    ),
    Case(
        "share of a square",
        ("x^2/(x^2 + y^2)", "1/(1 + y^2/x^2)"),
        _N,
        stats.arcsine(),
        "Arcsine distribution",
    ),
    Case(
        "Student",
        ("x/sqrt(a/5)", "x*sqrt(5)*a^-0.5", "sqrt(5)*x/sqrt(a)", "x/(a/5)^0.5"),
        {**_X2, **_N},
        stats.t(5),
        "Student t distribution",
    ),
    Case(
        "square of Student",
        ("t^2", "t*t", "abs(t)^2"),
        {"t": law("student_t", degrees_of_freedom=4)},
        stats.f(1, 4),
        "F distribution",
    ),
    Case(
        "minimum of exponentials",
        ("min(a, b, c)", "min(a, min(c, b))", "-max(-a, -b, -c)"),
        _E,
        stats.expon(scale=0.25),
        "Exponential distribution",
    ),
    Case(
        "minimum of Weibulls",
        ("min(p, q)",),
        {"p": law("weibull", shape=3, scale=3), "q": law("weibull", shape=3, scale=1.5)},
        stats.weibull_min(3, scale=(3.0**-3 + 1.5**-3) ** (-1 / 3)),
        "Weibull distribution",
    ),
    Case("maximum of uniforms", ("max(u, v)", "1 - min(1 - u, 1 - v)"), _U, stats.beta(2, 1), ""),
    Case(
        "minimum of uniforms",
        ("min(u, v)", "1 - max(1 - u, 1 - v)"),
        _U,
        stats.beta(1, 2),
        "Beta distribution",
    ),
    Case(
        "maximum of Gumbels",
        ("max(g, h)",),
        {"g": located("gumbel_max", 1, 2), "h": located("gumbel_max", 0, 2)},
        stats.gumbel_r(2 * log(np.exp(0.5) + 1), 2),
        "Gumbel distribution for maxima",
    ),
    Case(
        "difference of Gumbels",
        ("g - h", "-h + g"),
        {"g": located("gumbel_max", 1, 2), "h": located("gumbel_max", 0, 2)},
        stats.logistic(1, 2),
        "Logistic distribution",
    ),
    Case(
        "maximum of Fréchets",
        ("max(g, h)",),
        {"g": law("frechet", shape=2, scale=1), "h": law("frechet", shape=2, scale=3)},
        stats.invweibull(2, scale=sqrt(10)),
        "Fréchet distribution",
    ),
    Case(
        "maximum of normals",
        ("max(x, y)", "-min(-x, -y)"),
        _N,
        LargerOfTwo(stats.norm()),
        "Distribution of the maximum of independent variables",
    ),
    Case(
        "sum of Cauchys",
        ("2*c - 3*d", "c + c - 3*d"),
        {"c": located("cauchy", 0, 1), "d": located("cauchy", 1, 2)},
        stats.cauchy(-3, 8),
        "Cauchy distribution",
    ),
    Case(
        "reciprocal Cauchy",
        ("1/c", "c^-1"),
        {"c": located("cauchy", 0, 4)},
        stats.cauchy(0, 0.25),
        "Cauchy distribution",
    ),
    Case(
        "logarithm of a uniform",
        ("-log(u)", "log(1/u)", "-log(1 - v)", "-2*log(sqrt(u))"),
        _U,
        stats.expon(),
        "Exponential distribution",
    ),
    Case(
        "product of uniforms",
        ("u*v", "exp(log(u) + log(v))", "sqrt(u^2*v^2)"),
        _U,
        Mapped(Mirrored(stats.gamma(2)), np.log),
        "Distribution of the exponential of a gamma variable",
    ),
    Case("reciprocal uniform", ("1/u", "exp(-log(u))"), _U, stats.pareto(1), "Pareto distribution"),
    Case(
        "exponential of an exponential", ("exp(c)", "exp(c/2)^2"), _E, stats.pareto(2), "Pareto distribution"
    ),
    Case(
        "product of Paretos",
        ("log(p*q)", "log(p) + log(q)"),
        {"p": law("pareto", shape=2, scale=1), "q": law("pareto", shape=2, scale=1)},
        stats.gamma(2, scale=0.5),
        "Gamma distribution",
    ),
    Case(
        "logarithm of a Weibull",
        ("log(p)",),
        {"p": law("weibull", shape=2, scale=3)},
        stats.gumbel_l(log(3), 0.5),
        "Gumbel distribution for minima",
    ),
    Case(
        "logarithm of a Fréchet",
        ("log(p)",),
        {"p": law("frechet", shape=2, scale=3)},
        stats.gumbel_r(log(3), 0.5),
        "Gumbel distribution for maxima",
    ),
    Case(
        "power of a Weibull",
        ("p^3", "p*p*p"),
        {"p": law("weibull", shape=2, scale=3)},
        stats.weibull_min(2 / 3, scale=27),
        "Weibull distribution",
    ),
    Case(
        "square of a Rayleigh",
        ("r^2",),
        {"r": law("rayleigh", scale=2)},
        stats.expon(scale=8),
        "Exponential distribution",
    ),
    Case(
        "reciprocal gamma",
        ("1/g", "g^-1"),
        {"g": gamma(2.5, 0.4)},
        stats.invgamma(2.5, scale=2.5),
        "Inverse gamma distribution",
    ),
    Case(
        "reciprocal F",
        ("1/f",),
        {"f": law("f", numerator_degrees_of_freedom=3, denominator_degrees_of_freedom=4)},
        stats.f(4, 3),
        "F distribution",
    ),
    Case(
        "sum of inverse Gaussians",
        ("i + j",),
        {"i": law("inverse_gaussian", mean=1, shape=2), "j": law("inverse_gaussian", mean=2, shape=8)},
        stats.invgauss(3 / 18, scale=18),
        "Inverse Gaussian distribution",
        tolerance=1e-9,
        least=1e-12,
    ),
    Case(
        "sum of Lévys",
        ("i + j", "1/x^2 + j"),
        {"i": law("levy", location=0, scale=1), "j": law("levy", location=0, scale=4), "x": normal(0, 1)},
        stats.levy(0, 9),
        "Lévy distribution",
    ),
    Case(
        "two uniforms",
        ("u + v", "v - -u", "(2*u + 2*v)/2"),
        _U,
        stats.triang(0.5, 0, 2),
        "Triangular distribution",
    ),
    Case(
        "unequal uniforms",
        ("u + 2*v", "u + v + v"),
        _U,
        stats.trapezoid(1 / 3, 2 / 3, 0, 3),
        "Trapezoidal distribution",
    ),
    Case(
        "five uniforms",
        ("s + t + u + v + w",),
        {k: uniform(0, 1) for k in "stuvw"},
        stats.irwinhall(5),
        "Irwin–Hall distribution",
        least=1e-10,
    ),
    Case(
        "Box and Muller",
        ("sqrt(-2*log(u))*cos(2*pi*v)", "sqrt(-log(u^2))*sin(2*pi*v)"),
        _U,
        stats.norm(),
        "Normal distribution",
    ),
    Case(
        "sine of a phase",
        ("sin(p)", "cos(p)"),
        {"p": uniform(0, 2 * np.pi)},
        stats.arcsine(-1, 2),
        "Arcsine distribution",
    ),
    Case(
        "tangent of a phase",
        ("tan(p)", "1/tan(p)"),
        {"p": uniform(0, np.pi)},
        stats.cauchy(),
        "Cauchy distribution",
    ),
    Case(
        "log ratio of chi-squares",
        ("log(a/b)/2", "(log(a) - log(b))/2"),
        _X2,
        Mapped(stats.f(5, 3), lambda z: np.exp(2 * z) * 3 / 5),
        "Fisher z distribution, scaled and shifted",
    ),
    Case(
        "noncentral square",
        ("z^2", "z*z", "(z - 2)^2 + 4*z - 4"),
        _N,
        stats.ncx2(1, 4),
        "Noncentral chi-square distribution",
        least=1e-12,
    ),
    Case(
        "completed square",
        ("x^2 + 2*x + 3", "(x + 1)^2 + 2", "x*(x + 2) + 3"),
        _N,
        stats.ncx2(1, 1, loc=2),
        "Noncentral chi-square distribution, shifted",
        least=1e-8,
    ),
    Case(
        "sum of noncentral squares",
        ("x^2 + z^2 + (2*w)^2", "k + x^2 + (2*w)^2"),
        {**_N, "k": law("noncentral_chi_square", degrees_of_freedom=1, noncentrality=4)},
        stats.ncx2(3, 8),
        "Noncentral chi-square distribution",
        least=1e-12,
    ),
)

#: Counts, with their published law (scipy.stats, whole numbers).
COUNTS: tuple[Case, ...] = (
    Case(
        "Poissons",
        ("p + q", "q + p"),
        {"p": law("poisson", mean=3), "q": law("poisson", mean=1.5)},
        stats.poisson(4.5),
        "Poisson distribution",
    ),
    Case(
        "binomials",
        ("p + q",),
        {"p": law("binomial", trials=5, probability=0.3), "q": law("bernoulli", probability=0.3)},
        stats.binom(6, 0.3),
        "Binomial distribution",
    ),
    Case(
        "negative binomials",
        ("p + q",),
        {
            "p": law("negative_binomial", successes=2, probability=0.3),
            "q": law("negative_binomial", successes=3, probability=0.3),
        },
        stats.nbinom(5, 0.3),
        "Negative binomial distribution",
    ),
    Case(
        "minimum of geometrics",
        ("min(p, q)",),
        {"p": law("geometric", probability=0.2), "q": law("geometric", probability=0.5)},
        stats.geom(0.6),
        "Geometric distribution",
    ),
)


def draw(case: Case, spelling: str, count: int) -> np.ndarray[Any, np.dtype[np.float64]]:
    """Plain sampling of a spelling: normal scores with the case's correlation, then each law's quantiles."""
    generator = np.random.default_rng(20260401)
    names = sorted(case.laws)
    correlation = np.eye(len(names))
    if case.dependence is not None:
        for i, left in enumerate(names):
            for j, right in enumerate(names):
                correlation[i, j] = case.dependence.between(left, right)
    scores = np.linalg.cholesky(correlation) @ generator.standard_normal((len(names), count))
    values = [
        np.asarray(case.laws[name].icdf(stats.norm.cdf(row))) for name, row in zip(names, scores, strict=True)
    ]
    return np.asarray(compile_numpy(parse(spelling), names)(*values))
