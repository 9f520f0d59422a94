"""Every family's draws follow the family's law, judged against scipy's distributions or a closed formula.

The Kolmogorov-Smirnov statistic is judged at the 99.99 % point of its limiting law (Kolmogorov 1933:
1.0e-4 = 2 exp(-2 z^2) gives z = 2.225) for fixed generators, so that a run never differs from the next.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pytest
import scipy.stats as st
from scipy.integrate import cumulative_trapezoid
from scipy.special import i0e

from outspread.evidence.families import DRAWS
from outspread.evidence.inverses import INVERSES
from outspread.laws.registry import FAMILIES

COUNT = 100_000
Cdf = Callable[[np.ndarray], np.ndarray]


class By:
    """A law known by a formula for its distribution function."""

    def __init__(self, cdf: Cdf):
        self.cdf = cdf


def by_density(x: np.ndarray, density: Cdf, lower: float, upper: float) -> np.ndarray:
    grid = np.linspace(lower, upper, 200_001)
    return np.interp(x, grid, cumulative_trapezoid(density(grid), grid, initial=0.0))


def curvilinear(x: np.ndarray, a: float = 1.0, b: float = 4.0, d: float = 0.5) -> np.ndarray:
    half, away = (b - a) / 2, np.abs(x - (a + b) / 2)
    return np.log((half + d) / np.clip(away, half - d, half + d)) / (4 * d)


def hoyt(x: np.ndarray, q: float = 0.4, spread: float = 2.0) -> np.ndarray:
    bessel = (1 - q**4) * x**2 / (4 * q**2 * spread)
    exponent = bessel - (1 + q**2) ** 2 * x**2 / (4 * q**2 * spread)
    return (1 + q**2) * x / (q * spread) * np.exp(exponent) * i0e(bessel)


#: family -> (canonical parameters, distribution function by scipy or by its textbook formula)
KNOWN: dict[str, tuple[Mapping[str, Any], Any]] = {
    "normal": ({"mean": 2.0, "sd": 0.5}, st.norm(2.0, 0.5)),
    "lognormal": ({"log_mean": 0.3, "log_sd": 0.8}, st.lognorm(0.8, scale=np.exp(0.3))),
    "half_normal": ({"scale": 1.7}, st.halfnorm(scale=1.7)),
    "uniform": ({"lower": -1.0, "upper": 3.0}, st.uniform(-1.0, 4.0)),
    "triangular": ({"lower": 1.0, "mode": 2.0, "upper": 5.0}, st.triang(0.25, 1.0, 4.0)),
    "trapezoidal": (
        {"lower": 0.0, "top_lower": 1.0, "top_upper": 2.0, "upper": 4.0},
        st.trapezoid(0.25, 0.5, 0.0, 4.0),
    ),
    "arcsine": ({"lower": -2.0, "upper": 2.0}, st.arcsine(-2.0, 4.0)),
    "beta": ({"alpha": 2.5, "beta": 0.7, "lower": 1.0, "upper": 3.0}, st.beta(2.5, 0.7, 1.0, 2.0)),
    "exponential": ({"rate": 0.4}, st.expon(scale=2.5)),
    "gamma": ({"shape": 0.6, "scale": 2.0}, st.gamma(0.6, scale=2.0)),
    "inverse_gamma": ({"shape": 3.1, "scale": 2.0}, st.invgamma(3.1, scale=2.0)),
    "weibull": ({"shape": 1.7, "scale": 3.0, "location": -1.0}, st.weibull_min(1.7, -1.0, 3.0)),
    "rayleigh": ({"scale": 1.3}, st.rayleigh(scale=1.3)),
    "rice": ({"offset": 1.5, "scale": 0.8}, st.rice(1.5 / 0.8, scale=0.8)),
    "nakagami": ({"shape": 1.8, "spread": 2.5}, st.nakagami(1.8, scale=np.sqrt(2.5))),
    "maxwell": ({"scale": 0.7}, st.maxwell(scale=0.7)),
    "chi": ({"degrees_of_freedom": 4.0}, st.chi(4.0)),
    "chi_square": ({"degrees_of_freedom": 1.0}, st.chi2(1.0)),
    "noncentral_chi_square": ({"degrees_of_freedom": 3.0, "noncentrality": 2.2}, st.ncx2(3.0, 2.2)),
    "student_t": ({"degrees_of_freedom": 3.0, "location": 1.0, "scale": 2.0}, st.t(3.0, 1.0, 2.0)),
    "f": ({"numerator_degrees_of_freedom": 4.0, "denominator_degrees_of_freedom": 7.0}, st.f(4.0, 7.0)),
    "cauchy": ({"location": 1.0, "scale": 2.0}, st.cauchy(1.0, 2.0)),
    "laplace": ({"location": 1.0, "scale": 2.0}, st.laplace(1.0, 2.0)),
    "logistic": ({"location": 1.0, "scale": 2.0}, st.logistic(1.0, 2.0)),
    "log_logistic": ({"shape": 2.5, "scale": 2.0}, st.fisk(2.5, scale=2.0)),
    "gumbel_max": ({"location": 1.0, "scale": 2.0}, st.gumbel_r(1.0, 2.0)),
    "gumbel_min": ({"location": 1.0, "scale": 2.0}, st.gumbel_l(1.0, 2.0)),
    "frechet": ({"shape": 2.5, "scale": 2.0, "location": 0.0}, st.invweibull(2.5, 0.0, 2.0)),
    # scipy's shape has the opposite sign
    "generalised_extreme_value": (
        {"shape": 0.2, "location": 1.0, "scale": 2.0},
        st.genextreme(-0.2, 1.0, 2.0),
    ),
    "pareto": ({"shape": 2.5, "scale": 2.0}, st.pareto(2.5, scale=2.0)),
    "generalised_pareto": ({"shape": -0.2, "location": 1.0, "scale": 2.0}, st.genpareto(-0.2, 1.0, 2.0)),
    "inverse_gaussian": ({"mean": 2.0, "shape": 3.0}, st.invgauss(2.0 / 3.0, scale=3.0)),
    "von_mises": ({"location": 0.0, "concentration": 2.0}, st.vonmises(2.0)),
    "power_function": ({"shape": 0.4, "lower": 1.0, "upper": 3.0}, st.powerlaw(0.4, 1.0, 2.0)),
    "log_uniform": ({"lower": 0.01, "upper": 100.0}, st.loguniform(0.01, 100.0)),
    "half_cauchy": ({"scale": 2.0}, st.halfcauchy(scale=2.0)),
    "gompertz": ({"shape": 0.7, "scale": 2.0}, st.gompertz(0.7, scale=2.0)),
    "folded_normal": ({"location": 1.2, "scale": 2.0}, st.foldnorm(0.6, scale=2.0)),
    "levy": ({"location": 1.0, "scale": 2.0}, st.levy(1.0, 2.0)),
    "birnbaum_saunders": ({"shape": 0.9, "scale": 2.0}, st.fatiguelife(0.9, scale=2.0)),
    "skew_normal": ({"location": 1.0, "scale": 2.0, "shape": -3.0}, st.skewnorm(-3.0, 1.0, 2.0)),
    "lomax": ({"shape": 2.5, "scale": 2.0}, st.lomax(2.5, scale=2.0)),
    "burr": ({"inner_shape": 2.0, "outer_shape": 0.8, "scale": 3.0}, st.burr12(2.0, 0.8, scale=3.0)),
    # the logit of the value is normal
    "logit_normal": (
        {"location": 0.3, "scale": 0.8},
        By(lambda x: st.norm.cdf(np.log(x / (1 - x)), 0.3, 0.8)),
    ),
    "kumaraswamy": (
        {"alpha": 2.0, "beta": 3.0, "lower": 0.0, "upper": 2.0},
        By(lambda x: 1 - (1 - (x / 2) ** 2) ** 3),
    ),
    # JCGM 101:2008, 6.4.3.4, equation (5): the density, integrated by the trapezoidal rule
    "curvilinear_trapezoidal": (
        {"lower": 1.0, "upper": 4.0, "limit_half_width": 0.5},
        By(lambda x: by_density(x, curvilinear, 0.5, 4.5)),
    ),
    # Hoyt (1947): the density with the Bessel function, integrated by the trapezoidal rule
    "hoyt": ({"shape": 0.4, "spread": 2.0}, By(lambda x: by_density(x, hoyt, 0.0, 12.0))),
    "negative_binomial": ({"successes": 2.5, "probability": 0.4}, st.nbinom(2.5, 0.4)),
    "bernoulli": ({"probability": 0.3}, st.bernoulli(0.3)),
    "binomial": ({"trials": 12.0, "probability": 0.3}, st.binom(12, 0.3)),
    "poisson": ({"mean": 3.3}, st.poisson(3.3)),
    "geometric": ({"probability": 0.3}, st.geom(0.3)),
    "hypergeometric": ({"population": 40.0, "successes": 12.0, "draws": 10.0}, st.hypergeom(40, 12, 10)),
    "discrete_uniform": ({"lower": -2.0, "upper": 5.0}, st.randint(-2, 6)),
    "categorical": (
        {"values": (1.0, 4.0, 2.0), "probabilities": (0.2, 0.5, 0.3)},
        st.rv_discrete(values=((1, 4, 2), (0.2, 0.5, 0.3))),
    ),
}


def largest_distance(draws: np.ndarray, cdf: Cdf) -> float:
    """sup |F_n - F| at the draws, both sides, for laws with or without atoms."""
    values, counts = np.unique(draws, return_counts=True)
    after = np.cumsum(counts) / draws.size
    at = cdf(values)
    gaps = np.abs(after - at)
    if values.size == draws.size:  # continuous: the left limit too
        gaps = np.maximum(gaps, np.abs(after - counts / draws.size - at))
    return float(np.max(gaps))


@pytest.mark.parametrize("key", list(DRAWS))
def test_draws_follow_the_law(key: str) -> None:
    """100,000 draws stay within the Kolmogorov band around the published law."""
    parameters, law = KNOWN[key]
    draws = np.asarray(DRAWS[key](np.random.Generator(np.random.PCG64(7)), COUNT, parameters))
    assert draws.shape == (COUNT,)
    assert largest_distance(draws, law.cdf) < 2.225 / np.sqrt(COUNT)


@pytest.mark.parametrize("key", [key for key in INVERSES if key in KNOWN])
def test_quantiles_follow_the_law(key: str) -> None:
    """The quantile functions agree with scipy's, in the upper tail with its inverse survival function."""
    parameters, law = KNOWN[key]
    lower = np.array([1e-9, 1e-4, 0.03, 0.3, 0.5, 0.8, 0.97])
    assert INVERSES[key](lower, 1 - lower, parameters) == pytest.approx(law.ppf(lower), rel=1e-7)
    upper = np.array([1e-12, 1e-6, 0.2])
    assert INVERSES[key](1 - upper, upper, parameters) == pytest.approx(law.isf(upper), rel=1e-7)


def test_every_family_of_the_registry_can_be_drawn() -> None:
    """No family lacks its independent construction, and each construction takes the canonical parameters."""
    assert set(FAMILIES) <= set(DRAWS)
    for key, family in FAMILIES.items():
        assert set(KNOWN[key][0]) == set(family.canonical_names), key
