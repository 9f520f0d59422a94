"""Discrete laws: Bernoulli, binomial, Poisson and categorical."""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.families.base import Family, Parameters, ParameterSet, positive, proportion, whole
from outspread.laws.families.lattice import LatticeLaw, PointLaw
from outspread.laws.families.shapes import NAN, Moments
from outspread.laws.functions.counting import binomial_mass, poisson_mass
from outspread.laws.functions.incomplete_beta import beta_lower
from outspread.laws.functions.incomplete_gamma import gamma_lower, gamma_upper
from outspread.laws.law import Array


class Poisson(LatticeLaw):
    relative_error = 1e-11

    def __init__(self, mean: float):
        self.mean_count = mean

    def mass(self, k: Array) -> Array:
        return poisson_mass(k, self.mean_count)

    def up_to(self, k: Array) -> Array:
        return gamma_upper(k + 1, np.full_like(k, self.mean_count))

    def beyond(self, k: Array) -> Array:
        return gamma_lower(k + 1, np.full_like(k, self.mean_count))

    def moments(self) -> Moments:
        m = self.mean_count
        return (m, m, float(1 / np.sqrt(m)), 3 + 1 / m)


class Binomial(LatticeLaw):
    relative_error = 1e-11

    def __init__(self, trials: float, probability: float):
        self.trials, self.probability = trials, probability
        self.last = trials

    def mass(self, k: Array) -> Array:
        return binomial_mass(k, self.trials, self.probability, 1 - self.probability)

    def up_to(self, k: Array) -> Array:
        p = np.full_like(k, self.probability)
        return np.asarray(beta_lower(self.trials - k, k + 1, 1 - p, p))

    def beyond(self, k: Array) -> Array:
        p = np.full_like(k, self.probability)
        return np.asarray(beta_lower(k + 1, self.trials - k, p, 1 - p))

    def moments(self) -> Moments:
        n, p = self.trials, self.probability
        variance = n * p * (1 - p)
        if variance == 0:
            return (n * p, 0.0, NAN, NAN)
        return (n * p, variance, float((1 - 2 * p) / np.sqrt(variance)), 3 + (1 - 6 * p * (1 - p)) / variance)


def bernoulli(probability: float) -> PointLaw:
    """1 with this probability, else 0."""
    return PointLaw([0.0, 1.0], [1 - probability, probability])


def categorical(values: tuple[float, ...], probabilities: tuple[float, ...]) -> PointLaw:
    return PointLaw(values, probabilities)


def _categorical(parameters: Parameters) -> Parameters:
    """Sort by value and put equal values together."""
    values, probabilities = parameters["values"], parameters["probabilities"]
    for name in ("values", "probabilities"):
        if not isinstance(parameters[name], tuple) or not parameters[name]:
            raise LawError(f"{name} must be a list of numbers", name)
    if len(values) != len(probabilities):
        raise LawError(
            f"{len(values)} values and {len(probabilities)} probabilities are given,"
            " and as many of the one as of the other would be right",
            "probabilities",
        )
    least = min(probabilities)
    if least < 0:
        raise LawError(f"a probability is {least:g}, and 0 or more would be right", "probabilities")
    total = float(np.sum(probabilities))
    if abs(total - 1) > 1e-9:
        raise LawError(f"the probabilities add up to {total:.12g}, and 1 would be right", "probabilities")
    merged: dict[float, float] = {}
    for value, probability in sorted(zip(values, probabilities, strict=True)):
        merged[value] = merged.get(value, 0.0) + probability / total
    return {"values": tuple(merged), "probabilities": tuple(merged.values())}


def _check_binomial(parameters: Parameters) -> None:
    whole(parameters, "trials", least=1)
    proportion(parameters, "probability")


FAMILIES = (
    Family(
        key="bernoulli",
        title="Bernoulli distribution",
        kind="discrete",
        canonical_names=("probability",),
        parameter_sets=(ParameterSet(("probability",)),),
        builder=bernoulli,
        check=lambda parameters: proportion(parameters, "probability"),
        symbols={"probability": "p"},
        density_latex=r"p^{x}(1-p)^{1-x}",
        usage="something that happens or does not: 1 or 0",
        reference="Johnson, Kemp and Kotz (2005), Univariate Discrete Distributions, ch. 3",
    ),
    Family(
        key="binomial",
        title="Binomial distribution",
        kind="discrete",
        canonical_names=("trials", "probability"),
        parameter_sets=(ParameterSet(("trials", "probability")),),
        builder=Binomial,
        check=_check_binomial,
        symbols={"trials": "n", "probability": "p"},
        density_latex=r"\binom{n}{x}p^{x}(1-p)^{n-x}",
        usage="successes in a fixed number of independent trials",
        reference="Johnson, Kemp and Kotz (2005), Univariate Discrete Distributions, ch. 3",
    ),
    Family(
        key="poisson",
        title="Poisson distribution",
        kind="discrete",
        canonical_names=("mean",),
        parameter_sets=(ParameterSet(("mean",)),),
        builder=Poisson,
        check=lambda parameters: positive(parameters, "mean"),
        symbols={"mean": r"\lambda"},
        density_latex=r"\frac{\lambda^{x}}{x!}\,e^{-\lambda}",
        usage="counts of rare independent events",
        reference="Johnson, Kemp and Kotz (2005), Univariate Discrete Distributions, ch. 4",
    ),
    Family(
        key="categorical",
        title="Categorical distribution",
        kind="discrete",
        canonical_names=("values", "probabilities"),
        parameter_sets=(ParameterSet(("values", "probabilities"), convert=_categorical),),
        builder=categorical,
        symbols={"values": "v_i", "probabilities": "p_i"},
        density_latex=r"p_i \text{ where } x=v_i",
        usage="a list of possible values with their probabilities",
        reference="Johnson, Kemp and Kotz (2005), Univariate Discrete Distributions, ch. 1",
    ),
)
