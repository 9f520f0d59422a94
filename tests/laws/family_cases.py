"""Every family at several settings beside the same law of scipy.stats, an independent implementation."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import stats

from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES


@dataclass(frozen=True)
class Case:
    family: str
    parameters: dict[str, Any]
    reference: Any  # frozen distribution of scipy.stats

    def law(self) -> Law:
        family = FAMILIES[self.family]
        return family.build(family.canonical(self.parameters))

    def __str__(self) -> str:
        values = "-".join(f"{value}" for value in self.parameters.values())
        return f"{self.family}-{values}".replace(" ", "")


def _gev(location: float, scale: float, shape: float) -> Case:
    reference = stats.genextreme(-shape, location, scale)  # scipy's shape has the other sign
    return Case(
        "generalised_extreme_value", {"location": location, "scale": scale, "shape": shape}, reference
    )


def _noncentral(df: float, nc: float) -> Case:
    return Case("noncentral_chi_square", {"degrees_of_freedom": df, "noncentrality": nc}, stats.ncx2(df, nc))


def _beta(a: float, b: float, lower: float = 0.0, upper: float = 1.0) -> Case:
    parameters = {"alpha": a, "beta": b, "lower": lower, "upper": upper}
    return Case("beta", parameters, stats.beta(a, b, lower, upper - lower))


def _f(m: float, n: float) -> Case:
    parameters = {"numerator_degrees_of_freedom": m, "denominator_degrees_of_freedom": n}
    return Case("f", parameters, stats.f(m, n))


CONTINUOUS = [
    Case("normal", {"mean": 0, "sd": 1}, stats.norm()),
    Case("normal", {"mean": 42.02, "sd": 0.004}, stats.norm(42.02, 0.004)),
    Case("lognormal", {"log_mean": 0.3, "log_sd": 0.5}, stats.lognorm(0.5, scale=np.exp(0.3))),
    Case("lognormal", {"log_mean": -2, "log_sd": 1.7}, stats.lognorm(1.7, scale=np.exp(-2))),
    Case("uniform", {"lower": 0, "upper": 30}, stats.uniform(0, 30)),
    Case("uniform", {"lower": -1.5, "upper": 2}, stats.uniform(-1.5, 3.5)),
    Case("triangular", {"lower": 0, "mode": 1, "upper": 4}, stats.triang(0.25, 0, 4)),
    Case("triangular", {"lower": 0, "mode": 0, "upper": 2}, stats.triang(0, 0, 2)),
    Case("triangular", {"lower": 0, "mode": 2, "upper": 2}, stats.triang(1, 0, 2)),
    Case(
        "trapezoidal",
        {"lower": 0, "top_lower": 1, "top_upper": 2.5, "upper": 4},
        stats.trapezoid(0.25, 0.625, 0, 4),
    ),
    Case("arcsine", {"lower": 0, "upper": 3}, stats.arcsine(0, 3)),
    _beta(2, 0.5, 0, 3),
    _beta(0.3, 0.4),
    _beta(40, 60),
    _beta(300, 2),
    _beta(1, 1),
    Case("power_function", {"shape": 2.5, "lower": 0, "upper": 1}, stats.powerlaw(2.5)),
    Case("power_function", {"shape": 0.4, "lower": 0, "upper": 2}, stats.powerlaw(0.4, 0, 2)),
    Case("log_uniform", {"lower": 0.01, "upper": 100}, stats.loguniform(0.01, 100)),
    Case("cauchy", {"location": 1, "scale": 2}, stats.cauchy(1, 2)),
    Case("half_cauchy", {"scale": 2}, stats.halfcauchy(scale=2)),
    Case("student_t", {"degrees_of_freedom": 1, "location": 0, "scale": 1}, stats.t(1)),
    Case("student_t", {"degrees_of_freedom": 4.5, "location": 1, "scale": 2}, stats.t(4.5, 1, 2)),
    Case("student_t", {"degrees_of_freedom": 60, "location": 0, "scale": 1}, stats.t(60)),
    Case("laplace", {"location": 1, "scale": 2}, stats.laplace(1, 2)),
    Case("logistic", {"location": 1, "scale": 2}, stats.logistic(1, 2)),
    Case("exponential", {"rate": 0.25}, stats.expon(scale=4)),
    Case("weibull", {"shape": 1.5, "scale": 2}, stats.weibull_min(1.5, scale=2)),
    Case("weibull", {"shape": 0.6, "scale": 2}, stats.weibull_min(0.6, scale=2)),
    Case("weibull", {"shape": 8, "scale": 2, "location": 0.5}, stats.weibull_min(8, 0.5, 2)),
    Case("rayleigh", {"scale": 3}, stats.rayleigh(scale=3)),
    Case("gompertz", {"shape": 0.1, "scale": 2}, stats.gompertz(0.1, scale=2)),
    Case("gompertz", {"shape": 5, "scale": 1}, stats.gompertz(5)),
    Case("gamma", {"shape": 0.5, "scale": 2}, stats.gamma(0.5, scale=2)),
    Case("gamma", {"shape": 3.2, "scale": 0.1}, stats.gamma(3.2, scale=0.1)),
    Case("gamma", {"shape": 250, "scale": 1}, stats.gamma(250)),
    Case("chi_square", {"degrees_of_freedom": 1}, stats.chi2(1)),
    Case("chi_square", {"degrees_of_freedom": 7}, stats.chi2(7)),
    Case("chi", {"degrees_of_freedom": 1}, stats.chi(1)),
    Case("chi", {"degrees_of_freedom": 3.5}, stats.chi(3.5)),
    Case("maxwell", {"scale": 2}, stats.maxwell(scale=2)),
    Case("nakagami", {"shape": 0.5, "spread": 1}, stats.nakagami(0.5)),
    Case("nakagami", {"shape": 3, "spread": 4}, stats.nakagami(3, scale=2)),
    Case("inverse_gamma", {"shape": 2.5, "scale": 3}, stats.invgamma(2.5, scale=3)),
    Case("inverse_gamma", {"shape": 6, "scale": 1}, stats.invgamma(6)),
    _f(3, 12),
    _f(1, 5),
    _f(20, 30),
    _f(2, 9),
    Case("rice", {"offset": 0, "scale": 1}, stats.rice(0)),
    Case("rice", {"offset": 3, "scale": 2}, stats.rice(1.5, scale=2)),
    Case("rice", {"offset": 30, "scale": 1}, stats.rice(30)),
    _noncentral(1, 2),
    _noncentral(4, 10),
    _noncentral(30, 200),
    Case("half_normal", {"scale": 2}, stats.halfnorm(scale=2)),
    Case("folded_normal", {"location": 1.5, "scale": 2}, stats.foldnorm(0.75, scale=2)),
    Case("folded_normal", {"location": -6, "scale": 1}, stats.foldnorm(6)),
    Case("levy", {"location": 0, "scale": 2}, stats.levy(scale=2)),
    Case("birnbaum_saunders", {"shape": 0.5, "scale": 3}, stats.fatiguelife(0.5, scale=3)),
    Case("birnbaum_saunders", {"shape": 2, "scale": 1}, stats.fatiguelife(2)),
    Case("inverse_gaussian", {"mean": 2, "shape": 3}, stats.invgauss(2 / 3, scale=3)),
    Case("inverse_gaussian", {"mean": 1, "shape": 0.2}, stats.invgauss(5, scale=0.2)),
    Case("skew_normal", {"location": 1, "scale": 2, "shape": 3}, stats.skewnorm(3, 1, 2)),
    Case("skew_normal", {"location": 0, "scale": 1, "shape": -0.5}, stats.skewnorm(-0.5)),
    Case("gumbel_max", {"location": 1, "scale": 2}, stats.gumbel_r(1, 2)),
    Case("gumbel_min", {"location": 1, "scale": 2}, stats.gumbel_l(1, 2)),
    Case("frechet", {"shape": 2.5, "scale": 2}, stats.invweibull(2.5, scale=2)),
    Case("frechet", {"shape": 6, "scale": 1}, stats.invweibull(6)),
    _gev(1, 2, 0.2),
    _gev(0, 1, -0.3),
    _gev(0, 1, 0.0),
    Case("pareto", {"shape": 2.5, "scale": 3}, stats.pareto(2.5, scale=3)),
    Case("pareto", {"shape": 9, "scale": 1}, stats.pareto(9)),
    Case("lomax", {"shape": 5.5, "scale": 2}, stats.lomax(5.5, scale=2)),
    Case(
        "generalised_pareto", {"location": 1, "scale": 2, "shape": 0.2}, stats.genpareto(0.2, 1, 2)
    ),
    Case("generalised_pareto", {"location": 0, "scale": 1, "shape": -0.4}, stats.genpareto(-0.4)),
    Case("generalised_pareto", {"location": 0, "scale": 1, "shape": 0}, stats.genpareto(0)),
    Case("burr", {"inner_shape": 2, "outer_shape": 3, "scale": 2}, stats.burr12(2, 3, scale=2)),
    Case("burr", {"inner_shape": 0.7, "outer_shape": 9, "scale": 1}, stats.burr12(0.7, 9)),
    Case("log_logistic", {"shape": 5.5, "scale": 2}, stats.fisk(5.5, scale=2)),
    Case("von_mises", {"location": 0, "concentration": 2}, stats.vonmises(2)),
    Case("von_mises", {"location": 0, "concentration": 0}, stats.uniform(-np.pi, 2 * np.pi)),
]  # fmt: skip

DISCRETE = [
    Case("bernoulli", {"probability": 0.3}, stats.bernoulli(0.3)),
    Case("binomial", {"trials": 20, "probability": 0.3}, stats.binom(20, 0.3)),
    Case("binomial", {"trials": 1000, "probability": 0.02}, stats.binom(1000, 0.02)),
    Case("binomial", {"trials": 1, "probability": 0.9}, stats.binom(1, 0.9)),
    Case("poisson", {"mean": 0.2}, stats.poisson(0.2)),
    Case("poisson", {"mean": 35}, stats.poisson(35)),
    Case("geometric", {"probability": 0.2}, stats.geom(0.2)),
    Case("negative_binomial", {"successes": 2.5, "probability": 0.3}, stats.nbinom(2.5, 0.3)),
    Case(
        "hypergeometric",
        {"population": 60, "successes": 12, "draws": 20},
        stats.hypergeom(60, 12, 20),
    ),
    Case("discrete_uniform", {"lower": -2, "upper": 5}, stats.randint(-2, 6)),
]
