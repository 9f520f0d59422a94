"""Exponential and Weibull laws: powers of a standard exponential variable."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.shapes import INF, Moments, ScaledLaw
from outspread.laws.law import Array


def exponential_between(low: Array, high: Array) -> Array:
    """P(low < E <= high) for a standard exponential E, for 0 <= low <= high, without cancellation."""
    with np.errstate(invalid="ignore"):
        return np.asarray(np.where(high > low, -np.exp(-low) * np.expm1(-(high - low)), 0.0))


class Weibull(ScaledLaw):
    """location + scale * E^(1/shape), E standard exponential."""

    relative_error = 1e-12
    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float, location: float = 0.0):
        self.shape, self.scale, self.location = shape, scale, location

    def standard_pdf(self, z: Array) -> Array:
        return np.asarray(self.shape * z ** (self.shape - 1) * np.exp(-(z**self.shape)))

    def standard_cdf(self, z: Array) -> Array:
        return -np.expm1(-(z**self.shape))

    def standard_ccdf(self, z: Array) -> Array:
        return np.exp(-(z**self.shape))

    def standard_icdf(self, p: Array) -> Array:
        return np.asarray((-np.log1p(-p)) ** (1 / self.shape))

    def standard_iccdf(self, q: Array) -> Array:
        return np.asarray((-np.log(q)) ** (1 / self.shape))

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low, high = np.broadcast_arrays(self._standardise(lower), self._standardise(upper))
        return exponential_between(np.maximum(low, 0.0) ** self.shape, np.maximum(high, 0.0) ** self.shape)

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.shape < 1, False)

    def standard_moments(self) -> Moments:
        from scipy import special

        raw = [float(special.gamma(1 + k / self.shape)) for k in range(5)]
        return central_moments(raw[1], raw[2], raw[3], raw[4])


def central_moments(m1: float, m2: float, m3: float, m4: float) -> Moments:
    """Mean, variance, skewness and kurtosis from raw moments."""
    variance = m2 - m1**2
    third = m3 - 3 * m1 * m2 + 2 * m1**3
    fourth = m4 - 4 * m1 * m3 + 6 * m1**2 * m2 - 3 * m1**4
    return (m1, variance, third / variance**1.5, fourth / variance**2)


class Exponential(Weibull):
    """E / rate."""

    def __init__(self, rate: float):
        super().__init__(1.0, 1 / rate)
        self.rate = rate

    def _standardise(self, x: npt.ArrayLike) -> Array:
        with np.errstate(over="ignore"):
            return np.asarray(np.asarray(x, float) * self.rate)

    def standard_moments(self) -> Moments:
        return (1.0, 1.0, 2.0, 9.0)


def _weibull_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    e1, e2 = -np.log1p(-p1), -np.log1p(-p2)
    shape = np.log(e2 / e1) / np.log(x2 / x1)
    return {"shape": float(shape), "scale": float(x1 / e1 ** (1 / shape)), "location": 0.0}


def _rate_from_mean(parameters: Parameters) -> Parameters:
    positive(parameters, "mean")
    return {"rate": 1 / parameters["mean"]}


FAMILIES = (
    Family(
        key="exponential",
        title="Exponential distribution",
        kind="continuous",
        canonical_names=("rate",),
        parameter_sets=(ParameterSet(("rate",)), ParameterSet(("mean",), convert=_rate_from_mean)),
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
)
