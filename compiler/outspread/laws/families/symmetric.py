"""Symmetric laws with exponential tails: Laplace and logistic."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from outspread.laws.families.base import Family, Parameters, ParameterSet, by_quantiles, positive
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.shapes import Moments, ScaledLaw
from outspread.laws.law import Array


class Laplace(ScaledLaw):
    relative_error = rounding(2 * LOG_SMALLEST)

    def __init__(self, location: float, scale: float):
        self.location, self.scale = location, scale

    def standard_pdf(self, z: Array) -> Array:
        return 0.5 * np.exp(-np.abs(z))

    def standard_cdf(self, z: Array) -> Array:
        return np.where(z < 0, 0.5 * np.exp(-np.abs(z)), 0.5 - 0.5 * np.expm1(-np.abs(z)))

    def standard_ccdf(self, z: Array) -> Array:
        return self.standard_cdf(-z)

    def standard_icdf(self, p: Array) -> Array:
        return np.where(p < 0.5, np.log(2 * p), -np.log(2 * (1 - p)))

    def standard_iccdf(self, q: Array) -> Array:
        return -self.standard_icdf(q)

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low, high = np.broadcast_arrays(self._standardise(lower), self._standardise(upper))
        with np.errstate(invalid="ignore"):
            inner = np.where(low >= 0, low, -high)  # distance of the nearer end, where both lie on one side
            one_side = -0.5 * np.exp(-inner) * np.expm1(-(high - low))
            both = -0.5 * (np.expm1(low) + np.expm1(-high))
        value = np.where((low < 0) & (high > 0), both, one_side)
        return np.asarray(np.where(high > low, np.nan_to_num(value), 0.0))

    def breaks(self) -> tuple[float, ...]:
        return (self.location,)

    def standard_moments(self) -> Moments:
        return (0.0, 2.0, 0.0, 6.0)


class Logistic(ScaledLaw):
    relative_error = rounding(2 * LOG_SMALLEST)

    def __init__(self, location: float, scale: float):
        self.location, self.scale = location, scale

    def standard_pdf(self, z: Array) -> Array:
        tail = np.exp(-np.abs(z))
        return np.asarray(tail / (1 + tail) ** 2)

    def standard_cdf(self, z: Array) -> Array:
        tail = np.exp(-np.abs(z))
        return np.asarray(np.where(z < 0, tail, 1.0) / (1 + tail))

    def standard_ccdf(self, z: Array) -> Array:
        return self.standard_cdf(-z)

    def standard_icdf(self, p: Array) -> Array:
        # log(p / (1 - p)), by the difference from 1/2 where the two are nearly equal
        near = np.log1p((2 * p - 1) / (1 - p))
        return np.where(np.abs(p - 0.5) < 0.2, near, np.log(p) - np.log1p(-p))

    def standard_iccdf(self, q: Array) -> Array:
        return -self.standard_icdf(q)

    def between(self, lower: npt.ArrayLike, upper: npt.ArrayLike) -> Array:
        low, high = np.broadcast_arrays(self._standardise(lower), self._standardise(upper))
        with np.errstate(invalid="ignore", over="ignore"):
            value = -np.expm1(low - high) * self.standard_cdf(high) * self.standard_ccdf(low)
        return np.asarray(np.where(high > low, np.nan_to_num(value), 0.0))

    def standard_moments(self) -> Moments:
        return (0.0, float(np.pi**2 / 3), 0.0, 4.2)


def _located(z1: float, x1: float, z2: float, x2: float) -> Parameters:
    scale = (x2 - x1) / (z2 - z1)
    return {"location": float(x1 - scale * z1), "scale": float(scale)}


def _by_quantiles(law: ScaledLaw) -> ParameterSet:
    def convert(p1: float, x1: float, p2: float, x2: float) -> Parameters:
        z1, z2 = law.icdf([p1, p2])
        return _located(z1, x1, z2, x2)

    return by_quantiles(convert)


def _from_moments(sd_of_standard: float) -> ParameterSet:
    def convert(parameters: Parameters) -> Parameters:
        positive(parameters, "sd")
        return {"location": parameters["mean"], "scale": parameters["sd"] / sd_of_standard}

    return ParameterSet(("mean", "sd"), convert=convert)


FAMILIES = (
    Family(
        key="laplace",
        title="Laplace distribution",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(
            ParameterSet(("location", "scale")),
            _from_moments(float(np.sqrt(2.0))),
            _by_quantiles(Laplace(0.0, 1.0)),
        ),
        builder=Laplace,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": "b"},
        density_latex=r"\frac{1}{2b}\,e^{-\frac{|x-\mu|}{b}}",
        usage="differences of exponential variables, errors with heavier tails than normal",
        reference="Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 24",
    ),
    Family(
        key="logistic",
        title="Logistic distribution",
        kind="continuous",
        canonical_names=("location", "scale"),
        parameter_sets=(
            ParameterSet(("location", "scale")),
            _from_moments(float(np.pi / np.sqrt(3.0))),
            _by_quantiles(Logistic(0.0, 1.0)),
        ),
        builder=Logistic,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"location": r"\mu", "scale": "s"},
        density_latex=r"\frac{e^{-\frac{x-\mu}{s}}}{s\left(1+e^{-\frac{x-\mu}{s}}\right)^2}",
        usage="growth and dose thresholds; close to normal with heavier tails",
        reference="Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 23",
    ),
)
