"""Quantile functions for the draws that need one: copulas, and truncation far out in a tail.

Written from the elementary inverses and scipy's special functions alone, apart from the laws. Each
takes the lower probability and the upper one (so that neither tail is lost) and canonical parameters.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from outspread.laws.law import Array

P = Mapping[str, Any]
Inverse = Callable[[Array, Array, P], Array]


def normal_scores(lower: Array, upper: Array) -> Array:
    """Standard normal quantile from whichever of the two probabilities is smaller."""
    from scipy.special import ndtri

    return np.asarray(np.where(lower <= upper, ndtri(np.minimum(lower, 0.5)), -ndtri(np.minimum(upper, 0.5))))


def _gamma(shape: Any, lower: Array, upper: Array) -> Array:
    from scipy.special import gammainccinv, gammaincinv

    return np.asarray(np.where(lower <= upper, gammaincinv(shape, lower), gammainccinv(shape, upper)))


def _beta(a: Any, b: Any, lower: Array, upper: Array) -> Array:
    from scipy.special import betaincinv

    return np.asarray(np.where(lower <= upper, betaincinv(a, b, lower), 1.0 - betaincinv(b, a, upper)))


def _student(v: Array, u: Array, p: P) -> Array:
    from scipy.special import stdtrit

    tail = stdtrit(p["degrees_of_freedom"], np.minimum(v, u))
    return np.asarray(p["location"] + p["scale"] * np.where(v <= u, tail, -tail))


def _triangular(v: Array, u: Array, p: P) -> Array:
    a, m, b = p["lower"], p["mode"], p["upper"]
    left = a + np.sqrt(v * (b - a) * (m - a))
    return np.asarray(np.where(v * (b - a) < m - a, left, b - np.sqrt(u * (b - a) * (b - m))))


def _trapezoidal(v: Array, u: Array, p: P) -> Array:
    a, b, c, d = (p[key] for key in ("lower", "top_lower", "top_upper", "upper"))
    area = 0.5 * (d + c - a - b)
    middle = 0.5 * (a + b) + area * v
    left, right = a + np.sqrt(2 * area * v * (b - a)), d - np.sqrt(2 * area * u * (d - c))
    return np.asarray(
        np.where(area * v < 0.5 * (b - a), left, np.where(area * u < 0.5 * (d - c), right, middle))
    )


def _laplace(v: Array, u: Array, p: P) -> Array:
    return np.asarray(p["location"] + p["scale"] * np.where(v <= u, np.log(2 * v), -np.log(2 * u)))


def _cauchy(v: Array, u: Array, p: P) -> Array:
    tail = -1.0 / np.tan(np.pi * np.minimum(v, u))
    return np.asarray(p["location"] + p["scale"] * np.where(v <= u, tail, -tail))


def _extreme(v: Array, u: Array, p: P) -> Array:
    shape = p["shape"]
    logarithm = np.log(_exceedance(u, v))
    standard = -logarithm if shape == 0 else np.expm1(-shape * logarithm) / shape
    return np.asarray(p["location"] + p["scale"] * standard)


def _exceedance(upper: Array, lower: Array) -> Array:
    """-log of the upper probability's complement, from whichever probability is smaller."""
    with np.errstate(divide="ignore"):
        return np.asarray(np.where(upper <= lower, -np.log1p(-upper), -np.log(lower)))


def _power_exponential(v: Array, u: Array) -> Array:
    """The standard exponential quantile: -log of the upper probability."""
    return _exceedance(v, u)


INVERSES: dict[str, Inverse] = {
    "normal": lambda v, u, p: p["mean"] + p["sd"] * normal_scores(v, u),
    "lognormal": lambda v, u, p: np.exp(p["log_mean"] + p["log_sd"] * normal_scores(v, u)),
    "half_normal": lambda v, u, p: p["scale"] * normal_scores(0.5 + 0.5 * v, 0.5 * u),
    "uniform": lambda v, u, p: np.where(
        v <= u, p["lower"] + (p["upper"] - p["lower"]) * v, p["upper"] - (p["upper"] - p["lower"]) * u
    ),
    "triangular": _triangular,
    "trapezoidal": _trapezoidal,
    "arcsine": lambda v, u, p: (
        0.5 * (p["lower"] + p["upper"]) - 0.5 * (p["upper"] - p["lower"]) * np.cos(np.pi * v)
    ),
    "beta": lambda v, u, p: p["lower"] + (p["upper"] - p["lower"]) * _beta(p["alpha"], p["beta"], v, u),
    "exponential": lambda v, u, p: _power_exponential(v, u) / p["rate"],
    "gamma": lambda v, u, p: p["scale"] * _gamma(p["shape"], v, u),
    "inverse_gamma": lambda v, u, p: p["scale"] / _gamma(p["shape"], u, v),
    "weibull": lambda v, u, p: p["location"] + p["scale"] * _power_exponential(v, u) ** (1 / p["shape"]),
    "rayleigh": lambda v, u, p: p["scale"] * np.sqrt(2 * _power_exponential(v, u)),
    "nakagami": lambda v, u, p: np.sqrt(p["spread"] / p["shape"] * _gamma(p["shape"], v, u)),
    "maxwell": lambda v, u, p: p["scale"] * np.sqrt(2 * _gamma(1.5, v, u)),
    "chi": lambda v, u, p: p.get("scale", 1.0) * np.sqrt(2 * _gamma(p["degrees_of_freedom"] / 2, v, u)),
    "chi_square": lambda v, u, p: 2 * _gamma(p["degrees_of_freedom"] / 2, v, u),
    "student_t": _student,
    "cauchy": _cauchy,
    "laplace": _laplace,
    "logistic": lambda v, u, p: p["location"] + p["scale"] * (np.log(v) - np.log(u)),
    "log_logistic": lambda v, u, p: p["scale"] * (v / u) ** (1 / p["shape"]),
    "gumbel_max": lambda v, u, p: p["location"] - p["scale"] * np.log(_exceedance(u, v)),
    "gumbel_min": lambda v, u, p: p["location"] + p["scale"] * np.log(_power_exponential(v, u)),
    "frechet": lambda v, u, p: p.get("location", 0.0) + p["scale"] * _exceedance(u, v) ** (-1 / p["shape"]),
    "generalised_extreme_value": _extreme,
    "pareto": lambda v, u, p: p["scale"] * u ** (-1 / p["shape"]),
}
