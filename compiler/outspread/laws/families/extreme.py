"""Extreme-value laws: Gumbel for maxima and minima, Fréchet, generalised extreme value."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.hazard import LOG_SMALLEST, HazardLaw, power_difference, rounding
from outspread.laws.families.shapes import INF, Moments, inside
from outspread.laws.functions.compensated import one_plus_ratio
from outspread.laws.functions.moments import GUMBEL_MOMENTS, extreme_moments
from outspread.laws.law import Array

#: z e^z at the hazard of the smallest probability, and the same again for z itself
_GUMBEL_ERROR = rounding(LOG_SMALLEST * (1 + float(np.log(LOG_SMALLEST))))


class GumbelMin(HazardLaw):
    """location + scale * log E."""

    relative_error = _GUMBEL_ERROR

    def __init__(self, location: float, scale: float):
        self.location, self.scale = location, scale

    def cumulative(self, z: Array) -> Array:
        return np.exp(z)

    def rate(self, z: Array) -> Array:
        return np.exp(z)

    def inverse(self, hazard: Array) -> Array:
        return np.log(hazard)

    def increment(self, low: Array, high: Array) -> Array:
        return np.asarray(-np.exp(high) * np.expm1(low - high))

    def standard_moments(self) -> Moments:
        mean, variance, skewness, kurtosis = GUMBEL_MOMENTS
        return (-mean, variance, -skewness, kurtosis)


class GumbelMax(GumbelMin):
    """location - scale * log E."""

    mirrored = True

    def cumulative(self, z: Array) -> Array:
        return np.exp(-z)

    def rate(self, z: Array) -> Array:
        return np.exp(-z)

    def inverse(self, hazard: Array) -> Array:
        return -np.log(hazard)

    def increment(self, low: Array, high: Array) -> Array:
        return np.asarray(-np.exp(-low) * np.expm1(low - high))

    def standard_moments(self) -> Moments:
        return GUMBEL_MOMENTS


class Frechet(HazardLaw):
    """location + scale * E^(-1/shape)."""

    mirrored = True
    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float, location: float = 0.0):
        self.shape, self.scale, self.location = shape, scale, location
        self.moment_order = shape
        self.relative_error = rounding((1 + shape) * LOG_SMALLEST)

    def cumulative(self, z: Array) -> Array:
        return np.asarray(z**-self.shape)

    def rate(self, z: Array) -> Array:
        return np.asarray(self.shape * z ** (-self.shape - 1))

    def standard_pdf(self, z: Array) -> Array:
        # at the lower end the rate overflows before the exponential wins
        return np.where(z > 0, np.nan_to_num(super().standard_pdf(z)), 0.0)

    def inverse(self, hazard: Array) -> Array:
        return np.asarray(hazard ** (-1 / self.shape))

    def increment(self, low: Array, high: Array) -> Array:
        return power_difference(low, high, -self.shape)

    def standard_moments(self) -> Moments:
        mean, variance, skewness, kurtosis = extreme_moments(1 / self.shape)
        return (1 + mean / self.shape, variance / self.shape**2, skewness, kurtosis)


class GeneralisedExtremeValue(HazardLaw):
    """location + scale * (E^(-shape) - 1) / shape; shape 0 is Gumbel for maxima, below 0 bounded above."""

    mirrored = True

    def __init__(self, location: float, scale: float, shape: float):
        self.location, self.scale, self.shape = location, scale, shape
        self.moment_order = 1 / shape if shape > 0 else INF
        end = -1 / shape if shape != 0 else INF
        self.ends = (end, INF) if shape > 0 else (-INF, end) if shape < 0 else (-INF, INF)
        # z dH/dz at the hazard H of the smallest probability; in the other tail z d(log H)/dz <= 1/|shape|
        reach = abs(float(np.expm1(shape * np.log(LOG_SMALLEST)) / shape)) if shape else 0.0
        self.relative_error = max(_GUMBEL_ERROR, rounding(LOG_SMALLEST * (1 + reach)))

    def pdf(self, x: npt.ArrayLike) -> Array:
        return np.asarray(self._apply(self._pdf_at, x, 0.0, 0.0))

    def cdf(self, x: npt.ArrayLike) -> Array:
        return self._apply(lambda x: np.exp(-self._hazard_at(x)), x, 0.0, 1.0)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return self._apply(lambda x: -np.expm1(-self._hazard_at(x)), x, 1.0, 0.0)

    def _apply(self, function: object, x: npt.ArrayLike, below: float, above: float) -> Array:
        assert callable(function)
        return inside(function, np.asarray(x, float), *self.support(), below, above)

    def _log_base(self, x: Array) -> Array:
        """log(1 + shape * z) / shape."""
        z = (x - self.location) / self.scale
        if self.shape == 0:
            return z
        near_end = np.log(np.maximum(one_plus_ratio(self.shape, x, self.location, self.scale), 0.0))
        return np.asarray(np.where(self.shape * z < -0.5, near_end, np.log1p(self.shape * z)) / self.shape)

    def _hazard_at(self, x: Array) -> Array:
        return np.exp(-self._log_base(x))

    def _pdf_at(self, x: Array) -> Array:
        base = self._log_base(x)
        return np.asarray(np.exp(-(1 + self.shape) * base - np.exp(-base)) / self.scale)

    def cumulative(self, z: Array) -> Array:
        return self._hazard_at(self.location + self.scale * z)

    def rate(self, z: Array) -> Array:
        return np.asarray(np.exp(-(1 + self.shape) * self._log_base(self.location + self.scale * z)))

    def inverse(self, hazard: Array) -> Array:
        logarithm = -np.log(hazard)
        return np.asarray(np.expm1(self.shape * logarithm) / self.shape) if self.shape else logarithm

    def increment(self, low: Array, high: Array) -> Array:
        a, b = self.location + self.scale * low, self.location + self.scale * high
        base = one_plus_ratio(self.shape, a, self.location, self.scale)
        ratio = self.shape * (high - low) / base
        change = np.log1p(ratio) / self.shape if self.shape else high - low
        return np.abs(self._hazard_at(a) * np.expm1(-np.where(high > low, change, self._log_base(b))))

    def singular_ends(self) -> tuple[bool, bool]:
        return (False, self.shape < -1)

    def standard_moments(self) -> Moments:
        return extreme_moments(self.shape)


def _gumbel_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    z1, z2 = -np.log(-np.log(p1)), -np.log(-np.log(p2))
    scale = (x2 - x1) / (z2 - z1)
    return {"location": float(x1 - scale * z1), "scale": float(scale)}


def _gumbel_min_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    z1, z2 = np.log(-np.log1p(-p1)), np.log(-np.log1p(-p2))
    scale = (x2 - x1) / (z2 - z1)
    return {"location": float(x1 - scale * z1), "scale": float(scale)}


def _frechet_from_quantiles(p1: float, x1: float, p2: float, x2: float) -> Parameters:
    e1, e2 = -np.log(p1), -np.log(p2)
    shape = np.log(e1 / e2) / np.log(x2 / x1)
    return {"shape": float(shape), "scale": float(x1 * e1 ** (1 / shape)), "location": 0.0}


def _gumbel_from_moments(sign: float) -> ParameterSet:
    def convert(parameters: Parameters) -> Parameters:
        positive(parameters, "sd")
        scale = parameters["sd"] * float(np.sqrt(6) / np.pi)
        return {"location": parameters["mean"] - sign * scale * GUMBEL_MOMENTS[0], "scale": scale}

    return ParameterSet(("mean", "sd"), convert=convert)


_Z = r"\frac{x-\mu}{\beta}"
_REFERENCE = "Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 22"

FAMILIES = (
    Family(
        key="gumbel_max",
        title="Gumbel distribution for maxima",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(
            ParameterSet(("location", "scale")),
            _gumbel_from_moments(1.0),
            by_quantiles(_gumbel_from_quantiles),
        ),
        builder=GumbelMax,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": r"\beta"},
        density_latex=rf"\frac{{1}}{{\beta}}\,e^{{-z-e^{{-z}}}},\quad z={_Z}",
        usage="largest of many: yearly maxima of wind, waves and loads",
        reference=_REFERENCE,
    ),
    Family(
        key="gumbel_min",
        title="Gumbel distribution for minima",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(
            ParameterSet(("location", "scale")),
            _gumbel_from_moments(-1.0),
            by_quantiles(_gumbel_min_from_quantiles),
        ),
        builder=GumbelMin,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": r"\beta"},
        density_latex=rf"\frac{{1}}{{\beta}}\,e^{{z-e^{{z}}}},\quad z={_Z}",
        usage="smallest of many: strengths, lowest levels",
        reference=_REFERENCE,
    ),
    Family(
        key="frechet",
        title="Fréchet distribution",
        kind="continuous",
        canonical_names=("shape", "scale", "location"),
        parameter_sets=(
            ParameterSet(("shape", "scale", "location"), {"location": 0.0}),
            by_quantiles(_frechet_from_quantiles, logarithmic=True),
        ),
        builder=Frechet,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": r"\alpha", "scale": "s", "location": "m"},
        density_latex=(
            r"\frac{\alpha}{s}\left(\frac{x-m}{s}\right)^{-1-\alpha}"
            r"e^{-\left(\frac{x-m}{s}\right)^{-\alpha}}"
        ),
        usage="largest of many with heavy tails: floods, extreme loads",
        reference=_REFERENCE,
    ),
    Family(
        key="generalised_extreme_value",
        title="Generalised extreme value distribution",
        kind="continuous",
        canonical_names=("location", "scale", "shape"),
        parameter_sets=(ParameterSet(("location", "scale", "shape")),),
        builder=GeneralisedExtremeValue,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": r"\sigma", "shape": r"\xi"},
        density_latex=(
            r"\frac{1}{\sigma}\,t^{\xi+1}e^{-t}"
            r",\quad t=\left(1+\xi\,\frac{x-\mu}{\sigma}\right)^{-1/\xi}"
        ),
        usage="largest of many, the tail weight fitted: shape above 0 is heavy, below 0 bounded",
        reference="Coles (2001), An Introduction to Statistical Modeling of Extreme Values, ch. 3",
    ),
)
