"""Gamma and chi-square laws."""

from __future__ import annotations

import numpy as np

from outspread.laws.families.base import Family, Parameters, ParameterSet, positive
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.shapes import INF, Moments, ScaledLaw
from outspread.laws.functions.incomplete_gamma import (
    gamma_density,
    gamma_lower,
    gamma_lower_inverse,
    gamma_upper,
    gamma_upper_inverse,
)
from outspread.laws.law import Array


def gamma_error(shape: float) -> float:
    """Bound on the relative error of the incomplete gamma functions and density of this shape."""
    return rounding(3 * LOG_SMALLEST + 30 * float(np.sqrt(shape))) + 1e-12


class Gamma(ScaledLaw):
    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float):
        self.shape, self.scale = shape, scale
        self.relative_error = gamma_error(shape)

    def standard_pdf(self, z: Array) -> Array:
        return gamma_density(self.shape, z)

    def standard_cdf(self, z: Array) -> Array:
        return gamma_lower(self.shape, z)

    def standard_ccdf(self, z: Array) -> Array:
        return gamma_upper(self.shape, z)

    def standard_icdf(self, p: Array) -> Array:
        return gamma_lower_inverse(self.shape, p)

    def standard_iccdf(self, q: Array) -> Array:
        return gamma_upper_inverse(self.shape, q)

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.shape < 1, False)

    def standard_moments(self) -> Moments:
        a = self.shape
        return (a, a, float(2 / np.sqrt(a)), 3 + 6 / a)


class ChiSquare(Gamma):
    def __init__(self, degrees_of_freedom: float):
        super().__init__(degrees_of_freedom / 2, 2.0)


def _from_rate(parameters: Parameters) -> Parameters:
    positive(parameters, "rate")
    return {"shape": parameters["shape"], "scale": 1 / parameters["rate"]}


def _from_mean(parameters: Parameters) -> Parameters:
    positive(parameters, "mean", "sd")
    mean, sd = parameters["mean"], parameters["sd"]
    return {"shape": (mean / sd) ** 2, "scale": sd * (sd / mean)}


FAMILIES = (
    Family(
        key="gamma",
        title="Gamma distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(
            ParameterSet(("shape", "scale")),
            ParameterSet(("shape", "rate"), convert=_from_rate),
            ParameterSet(("mean", "sd"), convert=_from_mean),
        ),
        builder=Gamma,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": "k", "scale": r"\theta"},
        density_latex=r"\frac{x^{k-1}\,e^{-x/\theta}}{\Gamma(k)\,\theta^{k}}",
        usage="waiting time for several events, rainfall, loads",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 17",
    ),
    Family(
        key="chi_square",
        title="Chi-square distribution",
        kind="continuous",
        canonical_names=("degrees_of_freedom",),
        parameter_sets=(ParameterSet(("degrees_of_freedom",)),),
        builder=ChiSquare,
        check=lambda parameters: positive(parameters, "degrees_of_freedom"),
        symbols={"degrees_of_freedom": r"\nu"},
        density_latex=r"\frac{x^{\nu/2-1}\,e^{-x/2}}{2^{\nu/2}\,\Gamma(\nu/2)}",
        usage="sums of squares of standard normal variables, sample variances",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 18",
    ),
)
