"""Exponential, Weibull, Rayleigh and Gompertz laws: laws of lives, with a closed hazard."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.hazard import LOG_SMALLEST, HazardLaw, power_difference, rounding
from outspread.laws.families.shapes import INF, Moments
from outspread.laws.functions.moments import gompertz_moments, weibull_moments
from outspread.laws.law import Array


class Weibull(HazardLaw):
    """location + scale * E^(1/shape), E standard exponential."""

    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float, location: float = 0.0):
        self.shape, self.scale, self.location = shape, scale, location
        self.relative_error = rounding((1 + shape) * LOG_SMALLEST)

    def cumulative(self, z: Array) -> Array:
        return np.asarray(z**self.shape)

    def rate(self, z: Array) -> Array:
        return np.asarray(self.shape * z ** (self.shape - 1))

    def inverse(self, hazard: Array) -> Array:
        return np.asarray(hazard ** (1 / self.shape))

    def increment(self, low: Array, high: Array) -> Array:
        return power_difference(low, high, self.shape)

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.shape < 1, False)

    def standard_moments(self) -> Moments:
        return weibull_moments(self.shape)


class Exponential(Weibull):
    """E / rate."""

    def __init__(self, rate: float):
        super().__init__(1.0, 1 / rate)
        self._rate = rate

    def _standardise(self, x: npt.ArrayLike) -> Array:
        with np.errstate(over="ignore"):
            return np.asarray(np.asarray(x, float) * self._rate)

    def increment(self, low: Array, high: Array) -> Array:
        return high - low

    def standard_moments(self) -> Moments:
        return (1.0, 1.0, 2.0, 9.0)


class Rayleigh(HazardLaw):
    """The length of a vector of two normal components with mean 0 and this standard deviation."""

    ends = (0.0, INF)
    relative_error = rounding(3 * LOG_SMALLEST)

    def __init__(self, scale: float):
        self.scale = scale

    def cumulative(self, z: Array) -> Array:
        return 0.5 * z * z

    def rate(self, z: Array) -> Array:
        return z

    def inverse(self, hazard: Array) -> Array:
        return np.sqrt(2 * hazard)

    def increment(self, low: Array, high: Array) -> Array:
        return 0.5 * (high - low) * (high + low)

    def standard_moments(self) -> Moments:
        variance = 2 - np.pi / 2
        skewness = 2 * np.sqrt(np.pi) * (np.pi - 3) / (4 - np.pi) ** 1.5
        kurtosis = 3 - (6 * np.pi**2 - 24 * np.pi + 16) / (4 - np.pi) ** 2
        return (float(np.sqrt(np.pi / 2)), float(variance), float(skewness), float(kurtosis))


class Gompertz(HazardLaw):
    """scale * log(1 + E / shape): a hazard that grows exponentially."""

    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float):
        self.shape, self.scale = shape, scale
        log_ratio = float(np.log1p(LOG_SMALLEST / shape))
        self.relative_error = rounding(LOG_SMALLEST + log_ratio * (LOG_SMALLEST + shape))

    def cumulative(self, z: Array) -> Array:
        return np.asarray(self.shape * np.expm1(z))

    def rate(self, z: Array) -> Array:
        return np.asarray(self.shape * np.exp(z))

    def inverse(self, hazard: Array) -> Array:
        return np.log1p(hazard / self.shape)

    def increment(self, low: Array, high: Array) -> Array:
        return np.asarray(self.shape * np.exp(low) * np.expm1(high - low))

    def standard_moments(self) -> Moments:
        return gompertz_moments(self.shape)


def _weibull_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    e1, e2 = -np.log1p(-p1), -np.log1p(-p2)
    shape = np.log(e2 / e1) / np.log(x2 / x1)
    return {"shape": float(shape), "scale": float(x1 / e1 ** (1 / shape)), "location": 0.0}


def _rate_from_mean(parameters: Parameters) -> Parameters:
    positive(parameters, "mean")
    return {"rate": 1 / parameters["mean"]}


def _rate_from_scale(parameters: Parameters) -> Parameters:
    positive(parameters, "scale")
    return {"rate": 1 / parameters["scale"]}


def _scale_from_mean(parameters: Parameters) -> Parameters:
    positive(parameters, "mean")
    return {"scale": float(parameters["mean"] / np.sqrt(np.pi / 2))}


FAMILIES = (
    Family(
        key="exponential",
        title="Exponential distribution",
        kind="continuous",
        canonical_names=("rate",),
        parameter_sets=(
            ParameterSet(("rate",)),
            ParameterSet(("mean",), convert=_rate_from_mean),
            ParameterSet(("scale",), convert=_rate_from_scale),
        ),
        builder=Exponential,
        check=lambda parameters: positive(parameters, "rate"),
        symbols={"rate": r"\lambda"},
        density_latex=r"\lambda\,e^{-\lambda x}",
        usage="waiting times between events at a constant rate, lives without wear",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 19",
    ),
    Family(
        key="weibull",
        title="Weibull distribution",
        kind="continuous",
        canonical_names=("shape", "scale", "location"),
        parameter_sets=(
            ParameterSet(("shape", "scale", "location"), {"location": 0.0}),
            by_quantiles(_weibull_from_quantiles, logarithmic=True),
        ),
        builder=Weibull,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": "k", "scale": r"\lambda", "location": r"\theta"},
        density_latex=(
            r"\frac{k}{\lambda}\left(\frac{x-\theta}{\lambda}\right)^{k-1}"
            r"e^{-\left(\frac{x-\theta}{\lambda}\right)^{k}}"
        ),
        usage="strength of brittle materials, lives with wear, wind speeds",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 21",
    ),
    Family(
        key="rayleigh",
        title="Rayleigh distribution",
        kind="continuous",
        canonical_names=("scale",),
        parameter_sets=(ParameterSet(("scale",)), ParameterSet(("mean",), convert=_scale_from_mean)),
        builder=Rayleigh,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"scale": r"\sigma"},
        density_latex=r"\frac{x}{\sigma^2}\,e^{-\frac{x^2}{2\sigma^2}}",
        usage="radial offsets with equal centred components, wave heights, fading without a direct path",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 18",
    ),
    Family(
        key="gompertz",
        title="Gompertz distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(ParameterSet(("shape", "scale")),),
        builder=Gompertz,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": r"\eta", "scale": "b"},
        density_latex=r"\frac{\eta}{b}\,e^{x/b}\,e^{-\eta\left(e^{x/b}-1\right)}",
        usage="lives under ageing that grows exponentially",
        reference="Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 22",
    ),
)
