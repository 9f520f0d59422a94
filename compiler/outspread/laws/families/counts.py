"""Further discrete laws: geometric, negative binomial, hypergeometric and discrete uniform."""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.families.base import (
    Family,
    Parameters,
    ParameterSet,
    ascending,
    positive,
    proportion,
    whole,
)
from outspread.laws.families.hazard import rounding
from outspread.laws.families.lattice import MOST_ATOMS, LatticeLaw, PointLaw
from outspread.laws.families.shapes import INF, NAN, Moments
from outspread.laws.functions.counting import beta_kernel, binomial_mass
from outspread.laws.functions.incomplete_beta import beta_lower
from outspread.laws.law import Array


class Geometric(LatticeLaw):
    """Trials up to and including the first success."""

    first = 1.0
    relative_error = rounding(700)

    def __init__(self, probability: float):
        self.probability = probability
        self.last = 1.0 if probability == 1 else INF

    def mass(self, k: Array) -> Array:
        if self.probability == 1:
            return np.ones_like(k)
        return np.asarray(self.probability * np.exp((k - 1) * np.log1p(-self.probability)))

    def up_to(self, k: Array) -> Array:
        return np.asarray(-np.expm1(k * np.log1p(-self.probability)))

    def beyond(self, k: Array) -> Array:
        return np.asarray(np.exp(k * np.log1p(-self.probability)))

    def moments(self) -> Moments:
        p = self.probability
        if p == 1:
            return (1.0, 0.0, NAN, NAN)
        return (1 / p, (1 - p) / p**2, float((2 - p) / np.sqrt(1 - p)), 9 + p**2 / (1 - p))


class NegativeBinomial(LatticeLaw):
    """Failures before the given number of successes (which need not be whole)."""

    def __init__(self, successes: float, probability: float):
        self.successes, self.probability = successes, probability
        self.last = 0.0 if probability == 1 else INF
        self.relative_error = rounding(2000 + 30 * float(np.sqrt(successes))) + 1e-12

    def mass(self, k: Array) -> Array:
        r, p = self.successes, self.probability
        if p == 1:
            return np.ones_like(k)
        later = np.maximum(k, 1.0)
        value = beta_kernel(r, later, np.full_like(k, p), np.full_like(k, 1 - p)) / later
        none = np.exp(r * (np.log(p) if p < 0.5 else np.log1p(-(1 - p))))
        return np.asarray(np.where(k == 0, none, value))

    def up_to(self, k: Array) -> Array:
        p = np.full_like(k, self.probability)
        return beta_lower(self.successes, k + 1, p, 1 - p)

    def beyond(self, k: Array) -> Array:
        p = np.full_like(k, self.probability)
        return beta_lower(k + 1, self.successes, 1 - p, p)

    def moments(self) -> Moments:
        r, p = self.successes, self.probability
        q = 1 - p
        if q == 0:
            return (0.0, 0.0, NAN, NAN)
        return (r * q / p, r * q / p**2, float((2 - p) / np.sqrt(r * q)), 3 + 6 / r + p**2 / (q * r))


class DiscreteUniform(LatticeLaw):
    """Every whole number from lower to upper equally likely."""

    relative_error = 1e-15

    def __init__(self, lower: float, upper: float):
        self.first, self.last = lower, upper
        self.count = upper - lower + 1

    def mass(self, k: Array) -> Array:
        return np.full_like(k, 1 / self.count)

    def up_to(self, k: Array) -> Array:
        return np.asarray((k - self.first + 1) / self.count)

    def beyond(self, k: Array) -> Array:
        return np.asarray((self.last - k) / self.count)

    def moments(self) -> Moments:
        n = self.count
        if n == 1:
            return (self.first, 0.0, NAN, NAN)
        variance = (n - 1) * (n + 1) / 12
        return (0.5 * (self.first + self.last), variance, 0.0, 3 - 1.2 * (n**2 + 1) / (n**2 - 1))


def hypergeometric(population: float, successes: float, draws: float) -> PointLaw:
    """Successes among draws without replacement; masses as a product of three binomial ones (Loader 2000)."""
    first, last = max(0.0, draws + successes - population), min(draws, successes)
    if last - first > MOST_ATOMS:
        raise LawError(f"draws and successes allow more than {MOST_ATOMS:,} values, and fewer would be right")
    k = np.arange(first, last + 1)
    p, q = draws / population, (population - draws) / population
    failures = population - successes
    with np.errstate(all="ignore"):
        masses = binomial_mass(k, successes, p, q) * binomial_mass(draws - k, failures, p, q)
        masses = masses / binomial_mass(np.array([draws]), population, p, q)
    law = PointLaw(k, np.maximum(masses, 5e-324))
    law.relative_error = 1e-12
    return law


def _check_negative_binomial(parameters: Parameters) -> None:
    positive(parameters, "successes")
    proportion(parameters, "probability", lower_open=True)


def _check_discrete_uniform(parameters: Parameters) -> None:
    for name in ("lower", "upper"):
        if parameters[name] != np.floor(parameters[name]):
            raise LawError(f"{name} is {parameters[name]:g}, and a whole number would be right", name)
    ascending(parameters, "lower", "upper", strictly=False)


def _check_hypergeometric(parameters: Parameters) -> None:
    whole(parameters, "population", least=1)
    whole(parameters, "successes", "draws")
    for name in ("successes", "draws"):
        if parameters[name] > parameters["population"]:
            raise LawError(
                f"{name} is {parameters[name]:g}, and at most the population of"
                f" {parameters['population']:g} would be right",
                name,
            )


_BOOK = "Johnson, Kemp and Kotz (2005), Univariate Discrete Distributions"

FAMILIES = (
    Family(
        key="geometric",
        title="Geometric distribution",
        kind="discrete",
        canonical_names=("probability",),
        parameter_sets=(ParameterSet(("probability",)),),
        builder=Geometric,
        check=lambda parameters: proportion(parameters, "probability", lower_open=True),
        symbols={"probability": "p"},
        density_latex=r"p\,(1-p)^{x-1}",
        usage="trials up to and including the first success: 1, 2, 3, …",
        reference=f"{_BOOK}, ch. 5",
    ),
    Family(
        key="negative_binomial",
        title="Negative binomial distribution",
        kind="discrete",
        canonical_names=("successes", "probability"),
        parameter_sets=(ParameterSet(("successes", "probability")),),
        builder=NegativeBinomial,
        check=_check_negative_binomial,
        symbols={"successes": "r", "probability": "p"},
        density_latex=r"\frac{\Gamma(x+r)}{x!\,\Gamma(r)}\,p^{r}(1-p)^{x}",
        usage="failures before a number of successes; counts more scattered than Poisson",
        reference=f"{_BOOK}, ch. 5",
    ),
    Family(
        key="hypergeometric",
        title="Hypergeometric distribution",
        kind="discrete",
        canonical_names=("population", "successes", "draws"),
        parameter_sets=(ParameterSet(("population", "successes", "draws")),),
        builder=hypergeometric,
        check=_check_hypergeometric,
        symbols={"population": "N", "successes": "K", "draws": "n"},
        density_latex=r"\frac{\binom{K}{x}\binom{N-K}{n-x}}{\binom{N}{n}}",
        usage="marked parts in a sample drawn without replacement",
        reference=f"{_BOOK}, ch. 6",
    ),
    Family(
        key="discrete_uniform",
        title="Discrete uniform distribution",
        kind="discrete",
        canonical_names=("lower", "upper"),
        parameter_sets=(ParameterSet(("lower", "upper")),),
        builder=DiscreteUniform,
        check=_check_discrete_uniform,
        symbols={"lower": "a", "upper": "b"},
        density_latex=r"\frac{1}{b-a+1}",
        usage="whole numbers from lower to upper, all equally likely",
        reference=f"{_BOOK}, ch. 6",
    ),
)
