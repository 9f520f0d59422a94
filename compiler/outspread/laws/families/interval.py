"""Laws on an interval: uniform, arcsine and beta."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, ascending, by_quantiles, positive
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.shapes import IntervalLaw, Moments
from outspread.laws.functions.incomplete_beta import beta_density, beta_lower, beta_lower_inverse
from outspread.laws.law import Array


class Uniform(IntervalLaw):
    relative_error = 1e-15

    def unit_pdf(self, u: Array, v: Array) -> Array:
        return np.ones_like(u)

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return u

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return v

    def unit_icdf(self, p: Array) -> Array:
        return p

    def unit_iccdf(self, q: Array) -> Array:
        return q

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low = np.clip(np.asarray(lower, float), self.lower, self.upper)
        high = np.clip(np.asarray(upper, float), self.lower, self.upper)
        return np.asarray(np.maximum(high - low, 0.0) / self.width)

    def unit_moments(self) -> Moments:
        return (0.5, 1 / 12, 0.0, 1.8)


class Arcsine(IntervalLaw):
    """(1 - cos(pi U)) / 2 on the interval's fraction, U uniform."""

    relative_error = 1e-14

    def unit_pdf(self, u: Array, v: Array) -> Array:
        return np.asarray(1 / (np.pi * np.sqrt(u * v)))

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return np.asarray(np.arctan2(np.sqrt(u), np.sqrt(v)) * (2 / np.pi))

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return self.unit_cdf(v, u)

    def unit_icdf(self, p: Array) -> Array:
        return np.asarray(np.sin(0.5 * np.pi * p) ** 2)

    def unit_iccdf(self, q: Array) -> Array:
        return self.unit_icdf(q)

    def singular_ends(self) -> tuple[bool, bool]:
        return (True, True)

    def unit_moments(self) -> Moments:
        return (0.5, 1 / 8, 0.0, 1.5)


class Beta(IntervalLaw):
    def __init__(self, alpha: float, beta: float, lower: float, upper: float):
        super().__init__(lower, upper)
        self.alpha, self.beta = alpha, beta
        self.relative_error = rounding(3 * LOG_SMALLEST + 30 * float(np.sqrt(alpha + beta))) + 1e-12

    def unit_pdf(self, u: Array, v: Array) -> Array:
        return beta_density(self.alpha, self.beta, u, v)

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return beta_lower(self.alpha, self.beta, u, v)

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return beta_lower(self.beta, self.alpha, v, u)

    def unit_icdf(self, p: Array) -> Array:
        return beta_lower_inverse(self.alpha, self.beta, p)

    def unit_iccdf(self, q: Array) -> Array:
        return beta_lower_inverse(self.beta, self.alpha, q)

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.alpha < 1, self.beta < 1)

    def unit_moments(self) -> Moments:
        a, b = self.alpha, self.beta
        s = a + b
        kurtosis = 3 * (s + 1) * (2 * s**2 + a * b * (s - 6)) / (a * b * (s + 2) * (s + 3))
        skewness = 2 * (b - a) * np.sqrt(s + 1) / ((s + 2) * np.sqrt(a * b))
        return (a / s, a * b / (s**2 * (s + 1)), float(skewness), kurtosis)


def _from_centre(parameters: Parameters) -> Parameters:
    positive(parameters, "half_width")
    centre, half_width = parameters["centre"], parameters["half_width"]
    return {"lower": centre - half_width, "upper": centre + half_width}


def _uniform_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    width = (x2 - x1) / (p2 - p1)
    lower = x1 - p1 * width
    return {"lower": lower, "upper": lower + width}


ENDS = ParameterSet(("lower", "upper"))
CENTRE = ParameterSet(("centre", "half_width"), convert=_from_centre)


def _check_beta(parameters: Parameters) -> None:
    positive(parameters, "alpha", "beta")
    ascending(parameters, "lower", "upper")


FAMILIES = (
    Family(
        key="uniform",
        title="Uniform distribution",
        kind="continuous",
        canonical_names=("lower", "upper"),
        parameter_sets=(ENDS, CENTRE, by_quantiles(_uniform_from_quantiles)),
        builder=Uniform,
        check=lambda parameters: ascending(parameters, "lower", "upper"),
        symbols={"lower": "a", "upper": "b"},
        density_latex=r"\frac{1}{b-a}",
        usage="limits known and nothing else: resolution, datasheet tolerances",
        reference="JCGM 101:2008, 6.4.2",
    ),
    Family(
        key="arcsine",
        title="Arcsine distribution",
        kind="continuous",
        canonical_names=("lower", "upper"),
        parameter_sets=(ENDS, CENTRE),
        builder=Arcsine,
        check=lambda parameters: ascending(parameters, "lower", "upper"),
        symbols={"lower": "a", "upper": "b"},
        density_latex=r"\frac{1}{\pi\sqrt{(x-a)(b-x)}}",
        usage="a quantity that cycles sinusoidally between limits, at an unknown phase",
        reference="JCGM 101:2008, 6.4.6",
    ),
    Family(
        key="beta",
        title="Beta distribution",
        kind="continuous",
        canonical_names=("alpha", "beta", "lower", "upper"),
        parameter_sets=(ParameterSet(("alpha", "beta", "lower", "upper"), {"lower": 0.0, "upper": 1.0}),),
        builder=Beta,
        check=_check_beta,
        symbols={"alpha": r"\alpha", "beta": r"\beta", "lower": "a", "upper": "b"},
        density_latex=(r"\frac{(x-a)^{\alpha-1}(b-x)^{\beta-1}}{B(\alpha,\beta)\,(b-a)^{\alpha+\beta-1}}"),
        usage="proportions, and bounded quantities of many shapes",
        reference="Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 25",
    ),
)
