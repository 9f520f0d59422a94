"""Normal and lognormal laws."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.shapes import INF, Moments, ScaledLaw
from outspread.laws.functions.normal import (
    ROOT_TWO_PI,
    exp_minus_half_square,
    normal_between,
    normal_ccdf,
    normal_cdf,
    normal_icdf,
    normal_pdf,
)
from outspread.laws.law import Array


class Normal(ScaledLaw):
    relative_error = 1e-12

    def __init__(self, mean: float, sd: float):
        self.location, self.scale = mean, sd

    def standard_pdf(self, z: Array) -> Array:
        return normal_pdf(z)

    def standard_cdf(self, z: Array) -> Array:
        return normal_cdf(z)

    def standard_ccdf(self, z: Array) -> Array:
        return normal_ccdf(z)

    def standard_icdf(self, p: Array) -> Array:
        return normal_icdf(p)

    def standard_iccdf(self, q: Array) -> Array:
        return -normal_icdf(q)

    def standard_moments(self) -> Moments:
        return (0.0, 1.0, 0.0, 3.0)

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low, high = np.broadcast_arrays(np.asarray(lower, float), np.asarray(upper, float))
        with np.errstate(invalid="ignore"):
            # the ends' own difference keeps the digits that standardising would round away
            width = (high - low) / self.scale
        return normal_between(self._standardise(low), self._standardise(high), width)

    def surely_meets(self, lower: float, upper: float) -> bool:
        return _by_chebyshev((lower - self.location) / self.scale, (upper - self.location) / self.scale)


class Lognormal(ScaledLaw):
    """exp(log_mean + log_sd * Z)."""

    relative_error = 1e-12
    ends = (0.0, INF)

    def __init__(self, log_mean: float, log_sd: float):
        self.log_mean, self.log_sd = log_mean, log_sd

    def _normal(self, x: Array) -> Array:
        return np.asarray((np.log(x) - self.log_mean) / self.log_sd)

    def standard_pdf(self, z: Array) -> Array:
        density = exp_minus_half_square(self._normal(z)) / (ROOT_TWO_PI * self.log_sd * z)
        return np.where(z > 0, density, 0.0)

    def standard_cdf(self, z: Array) -> Array:
        return normal_cdf(self._normal(z))

    def standard_ccdf(self, z: Array) -> Array:
        return normal_ccdf(self._normal(z))

    def standard_icdf(self, p: Array) -> Array:
        return np.exp(self.log_mean + self.log_sd * normal_icdf(p))

    def standard_iccdf(self, q: Array) -> Array:
        return np.exp(self.log_mean - self.log_sd * normal_icdf(q))

    def standard_moments(self) -> Moments:
        with np.errstate(over="ignore"):
            excess = np.expm1(self.log_sd**2)
            w = np.exp(self.log_sd**2)
            mean = np.exp(self.log_mean + 0.5 * self.log_sd**2)
            return (
                float(mean),
                float(mean**2 * excess),
                float((w + 2) * np.sqrt(excess)),
                float(w**4 + 2 * w**3 + 3 * w**2 - 3),
            )

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        with np.errstate(divide="ignore"):
            low = self._normal(np.maximum(np.asarray(lower, float), 0.0))
            high = self._normal(np.maximum(np.asarray(upper, float), 0.0))
        return normal_between(*np.broadcast_arrays(low, high))

    def surely_meets(self, lower: float, upper: float) -> bool:
        if not upper > 0:
            return False
        low, high = (np.log(x) if x > 0 else -INF for x in (lower, upper))
        return _by_chebyshev((low - self.log_mean) / self.log_sd, (high - self.log_mean) / self.log_sd)


def _by_chebyshev(low: float, high: float) -> bool:
    """P(low < Z < high) > 0.1 because P(|Z| < d) > 1 - 1/d² for a standardised variable."""
    return bool(min(-low, high) > 1.1)


def _normal_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    z1, z2 = normal_icdf(np.array([p1, p2]))
    sd = (x2 - x1) / (z2 - z1)
    return {"mean": float(x1 - sd * z1), "sd": float(sd)}


def _lognormal_from_mean(parameters: Parameters) -> Parameters:
    positive(parameters, "mean", "sd")
    square = np.log1p((parameters["sd"] / parameters["mean"]) ** 2)
    return {"log_mean": float(np.log(parameters["mean"]) - square / 2), "log_sd": float(np.sqrt(square))}


def _lognormal_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    normal = _normal_from_quantiles(p1, float(np.log(x1)), p2, float(np.log(x2)))
    return {"log_mean": normal["mean"], "log_sd": normal["sd"]}


FAMILIES = (
    Family(
        key="normal",
        title="Normal distribution",
        kind="continuous",
        canonical_names=("mean", "sd"),
        parameter_sets=(ParameterSet(("mean", "sd")), by_quantiles(_normal_from_quantiles)),
        builder=Normal,
        check=lambda parameters: positive(parameters, "sd"),
        symbols={"mean": r"\mu", "sd": r"\sigma"},
        density_latex=r"\frac{1}{\sigma\sqrt{2\pi}}\,e^{-\frac{(x-\mu)^2}{2\sigma^2}}",
        usage="measurement errors, sums of many small effects",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 13",
    ),
    Family(
        key="lognormal",
        title="Lognormal distribution",
        kind="continuous",
        canonical_names=("log_mean", "log_sd"),
        parameter_sets=(
            ParameterSet(("log_mean", "log_sd")),
            ParameterSet(("mean", "sd"), convert=_lognormal_from_mean),
            by_quantiles(_lognormal_from_quantiles, logarithmic=True),
        ),
        builder=Lognormal,
        check=lambda parameters: positive(parameters, "log_sd"),
        symbols={"log_mean": r"\mu", "log_sd": r"\sigma"},
        density_latex=r"\frac{1}{x\,\sigma\sqrt{2\pi}}\,e^{-\frac{(\ln x-\mu)^2}{2\sigma^2}}",
        usage="positive quantities made of many factors: lives, strengths, particle sizes",
        reference="Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1, ch. 14",
    ),
)
