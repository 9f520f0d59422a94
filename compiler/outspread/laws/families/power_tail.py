"""Laws whose upper tail falls like a power: Pareto, Lomax, generalised Pareto, Burr, log-logistic."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.hazard import LOG_SMALLEST, HazardLaw, power_difference, rounding
from outspread.laws.families.shapes import INF, NAN, Moments, inside
from outspread.laws.functions.compensated import one_plus_ratio
from outspread.laws.functions.moments import burr_moments
from outspread.laws.law import Array


def generalised_pareto_moments(shape: float) -> Moments:
    """Of (exp(shape * E) - 1) / shape."""
    s = shape
    if s >= 1:
        return (INF, NAN, NAN, NAN)
    mean = 1 / (1 - s)
    if s >= 1 / 2:
        return (mean, INF, NAN, NAN)
    variance = mean**2 / (1 - 2 * s)
    skewness = 2 * (1 + s) * float(np.sqrt(1 - 2 * s)) / (1 - 3 * s) if s < 1 / 3 else INF
    kurtosis = 3 * (1 - 2 * s) * (2 * s * s + s + 3) / ((1 - 3 * s) * (1 - 4 * s)) if s < 1 / 4 else INF
    return (mean, variance, skewness, kurtosis)


class Lomax(HazardLaw):
    """scale * (exp(E / shape) - 1)."""

    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float):
        self.shape, self.scale = shape, scale
        self.moment_order = shape
        self.relative_error = rounding(LOG_SMALLEST + shape + 1)

    def cumulative(self, z: Array) -> Array:
        return np.asarray(self.shape * np.log1p(z))

    def rate(self, z: Array) -> Array:
        return np.asarray(self.shape / (1 + z))

    def inverse(self, hazard: Array) -> Array:
        return np.expm1(hazard / self.shape)

    def increment(self, low: Array, high: Array) -> Array:
        return np.asarray(self.shape * np.log1p((high - low) / (1 + low)))

    def standard_moments(self) -> Moments:
        mean, variance, skewness, kurtosis = generalised_pareto_moments(1 / self.shape)
        return (mean / self.shape, variance / self.shape**2, skewness, kurtosis)


class Pareto(Lomax):
    """scale * exp(E / shape): a Lomax law moved to begin at its scale."""

    def __init__(self, shape: float, scale: float):
        super().__init__(shape, scale)
        self.location = scale

    def mean(self) -> float:
        return self.scale * self.shape / (self.shape - 1) if self.shape > 1 else INF


class GeneralisedPareto(HazardLaw):
    """location + scale * (exp(shape * E) - 1) / shape; shape 0 is exponential, below 0 bounded above."""

    def __init__(self, location: float, scale: float, shape: float):
        self.location, self.scale, self.shape = location, scale, shape
        self.moment_order = 1 / shape if shape > 0 else INF
        self.ends = (0.0, -1 / shape if shape < 0 else INF)
        # near a bounded end x itself is the limit; the formula keeps what x says
        self.relative_error = rounding((1 + 1 / abs(shape) if shape else 1.0) + 3 * LOG_SMALLEST)

    def _apply(self, function: object, x: npt.ArrayLike, below: float, above: float) -> Array:
        assert callable(function)
        return inside(function, np.asarray(x, float), *self.support(), below, above)

    def pdf(self, x: npt.ArrayLike) -> Array:
        x = np.asarray(x, float)
        lower = float(np.nextafter(self.location, -INF))
        return inside(self._pdf_at, x, lower, self.support()[1], 0.0, 0.0)

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._apply(lambda x: -np.expm1(-self._hazard_at(x)), x, 0.0, 1.0)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._apply(lambda x: np.exp(-self._hazard_at(x)), x, 1.0, 0.0)

    def _pdf_at(self, x: Array) -> Array:
        return np.asarray(np.exp(-(1 + self.shape) * self._hazard_at(x)) / self.scale)

    def _hazard_at(self, x: Array) -> Array:
        z = (x - self.location) / self.scale
        if self.shape == 0:
            return z
        near_end = np.log(np.maximum(one_plus_ratio(self.shape, x, self.location, self.scale), 0.0))
        return np.asarray(np.where(self.shape * z < -0.5, near_end, np.log1p(self.shape * z)) / self.shape)

    def cumulative(self, z: Array) -> Array:
        return self._hazard_at(self.location + self.scale * z)

    def rate(self, z: Array) -> Array:
        return 1 / (1 + self.shape * z)

    def inverse(self, hazard: Array) -> Array:
        return np.asarray(np.expm1(self.shape * hazard) / self.shape) if self.shape else hazard

    def increment(self, low: Array, high: Array) -> Array:
        base = one_plus_ratio(self.shape, self.location + self.scale * low, self.location, self.scale)
        ratio = self.shape * (high - low) / base
        return np.asarray(np.log1p(ratio) / self.shape) if self.shape else high - low

    def singular_ends(self) -> tuple[bool, bool]:
        return (False, self.shape < -1)

    def standard_moments(self) -> Moments:
        return generalised_pareto_moments(self.shape)


class Burr(HazardLaw):
    """scale * (exp(E / outer_shape) - 1)^(1 / inner_shape): type XII."""

    ends = (0.0, INF)

    def __init__(self, inner_shape: float, outer_shape: float, scale: float):
        self.inner, self.outer, self.scale = inner_shape, outer_shape, scale
        self.moment_order = inner_shape * outer_shape
        self.relative_error = rounding(2 * LOG_SMALLEST + inner_shape * (1 + outer_shape))

    def cumulative(self, z: Array) -> Array:
        power = z**self.inner
        large = self.inner * np.log(z) + np.log1p(z**-self.inner)
        return np.asarray(self.outer * np.where(power > 1, large, np.log1p(power)))

    def rate(self, z: Array) -> Array:
        return np.asarray(
            self.outer * self.inner * np.where(
                z > 1, 1 / (z * (1 + z**-self.inner)), z ** (self.inner - 1) / (1 + z**self.inner)
            )
        )  # fmt: skip

    def inverse(self, hazard: Array) -> Array:
        exponent = hazard / self.outer
        large = np.exp((exponent + np.log(-np.expm1(-exponent))) / self.inner)
        return np.asarray(np.where(exponent > 1, large, np.expm1(exponent) ** (1 / self.inner)))

    def increment(self, low: Array, high: Array) -> Array:
        share = np.where(low > 1, 1 / (1 + low**-self.inner), low**self.inner / (1 + low**self.inner))
        # (high^c - low^c) / (1 + low^c) = share * ((high / low)^c - 1)
        growth = power_difference(np.minimum(low / high, 1.0), np.ones_like(low), -self.inner)
        return np.asarray(self.outer * np.log1p(share * growth))

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.inner < 1, False)

    def standard_moments(self) -> Moments:
        return burr_moments(self.inner, self.outer)


class LogLogistic(Burr):
    """scale * (P / (1 - P))^(1 / shape), P uniform."""

    def __init__(self, shape: float, scale: float):
        super().__init__(shape, 1.0, scale)


def _log_logistic_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    odds1, odds2 = np.log(p1) - np.log1p(-p1), np.log(p2) - np.log1p(-p2)
    shape = (odds2 - odds1) / np.log(x2 / x1)
    return {"shape": float(shape), "scale": float(x1 * np.exp(-odds1 / shape))}


_VOLUME_1 = "Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1"
_VOLUME_2 = "Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2"

FAMILIES = (
    Family(
        key="pareto",
        title="Pareto distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(
            ParameterSet(("shape", "scale")),
            ParameterSet(
                ("shape", "lower"),
                convert=lambda given: {"shape": given["shape"], "scale": given["lower"]},
            ),
        ),
        builder=Pareto,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": r"\alpha", "scale": "x_0"},
        density_latex=r"\frac{\alpha\,x_0^{\alpha}}{x^{\alpha+1}}",
        usage="sizes above a threshold with a power-law tail; begins at scale",
        reference=f"{_VOLUME_1}, ch. 20",
    ),
    Family(
        key="lomax",
        title="Lomax distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(ParameterSet(("shape", "scale")),),
        builder=Lomax,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": r"\alpha", "scale": r"\lambda"},
        density_latex=r"\frac{\alpha}{\lambda}\left(1+\frac{x}{\lambda}\right)^{-(\alpha+1)}",
        usage="positive quantities with a power-law tail; begins at 0",
        reference=f"{_VOLUME_1}, ch. 20",
    ),
    Family(
        key="generalised_pareto",
        title="Generalised Pareto distribution",
        kind="continuous",
        canonical_names=("location", "scale", "shape"),
        parameter_sets=(ParameterSet(("location", "scale", "shape"), {"location": 0.0}),),
        builder=GeneralisedPareto,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": r"\sigma", "shape": r"\xi"},
        density_latex=r"\frac{1}{\sigma}\left(1+\xi\,\frac{x-\mu}{\sigma}\right)^{-\frac{1}{\xi}-1}",
        usage="excesses over a high threshold, the tail weight fitted",
        reference="Coles (2001), An Introduction to Statistical Modeling of Extreme Values, ch. 4",
    ),
    Family(
        key="burr",
        title="Burr distribution of type XII",
        kind="continuous",
        canonical_names=("inner_shape", "outer_shape", "scale"),
        parameter_sets=(ParameterSet(("inner_shape", "outer_shape", "scale"), {"scale": 1.0}),),
        builder=Burr,
        check=lambda parameters: positive(parameters, "inner_shape", "outer_shape", "scale"),
        symbols={"inner_shape": "c", "outer_shape": "k", "scale": "s"},
        density_latex=(
            r"\frac{ck}{s}\left(\frac{x}{s}\right)^{c-1}\left(1+\left(\frac{x}{s}\right)^{c}\right)^{-k-1}"
        ),
        usage="lives and flows with two shapes; P(X > x) = (1 + (x/scale)^inner_shape)^(-outer_shape)",
        reference=f"{_VOLUME_1}, ch. 12",
    ),
    Family(
        key="log_logistic",
        title="Log-logistic distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(
            ParameterSet(("shape", "scale")),
            by_quantiles(_log_logistic_from_quantiles, logarithmic=True),
        ),
        builder=LogLogistic,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": "k", "scale": r"\alpha"},
        density_latex=(
            r"\frac{k}{\alpha}\left(\frac{x}{\alpha}\right)^{k-1}"
            r"\left(1+\left(\frac{x}{\alpha}\right)^{k}\right)^{-2}"
        ),
        usage="lives whose hazard rises and falls again, stream flows",
        reference=f"{_VOLUME_2}, ch. 23",
    ),
)
