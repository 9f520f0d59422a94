"""Published densities of the kinds of `forms`, coded from the formulas and not from the laws.

They are what a report prints and what is compared with the law point by point; they need not hold far
in the tails. For a discrete kind the density is the probability mass.
"""

from __future__ import annotations

from collections.abc import Callable
from math import log, pi, sqrt

import numpy as np

from outspread.laws.law import Array
from outspread.routes.closed_form.forms import DISCRETE, POSITIVE, Form

Density = Callable[[Array], Array]


def density_of(form: Form) -> Density:
    """The density of shift + scale V^power (for a discrete form the mass)."""
    shape = tuple(float(value) for value in form.shape)
    scale, shift, power = float(form.scale), float(form.shift), float(form.power)

    def discrete(y: Array) -> Array:
        count = (np.asarray(y, float) - shift) / scale
        whole = np.rint(count)
        on_grid = (np.abs(count - whole) <= 1e-9 * np.maximum(1.0, np.abs(count))) & (whole >= 0)
        return np.asarray(np.where(on_grid, np.exp(_MASSES[form.kind](np.maximum(whole, 0.0), *shape)), 0.0))

    def symmetric(y: Array) -> Array:
        z = (np.asarray(y, float) - shift) / scale
        with np.errstate(all="ignore"):
            return np.asarray(_WHOLE_LINE[form.kind](z, *shape) / abs(scale))

    def positive(y: Array) -> Array:
        z = (np.asarray(y, float) - shift) / scale
        with np.errstate(all="ignore"):
            log_z = np.log(z)
            log_v = log_z / power
            value = np.exp(_POSITIVE[form.kind](log_v, *shape) + log_v - log_z) / abs(power * scale)
        return np.asarray(np.where((z > 0) & ~np.isnan(value), value, 0.0))

    if form.kind in DISCRETE:
        return discrete
    return positive if form.kind in POSITIVE else symmetric


def _gamma_function(a: float) -> float:
    from scipy.special import gammaln

    return float(gammaln(a))


def _log_beta(a: float, b: float) -> float:
    from scipy.special import betaln

    return float(betaln(a, b))


# Logarithms of densities of V at exp(log_v).


def _exp_normal(log_v: Array) -> Array:
    return np.asarray(-0.5 * log_v**2 - log_v - 0.5 * log(2 * pi))


def _gamma(log_v: Array, a: float) -> Array:
    return np.asarray((a - 1) * log_v - np.exp(log_v) - _gamma_function(a))


def _exp_gamma(log_v: Array, a: float) -> Array:
    value = (a - 1) * np.log(np.maximum(log_v, 0.0)) - 2 * log_v - _gamma_function(a)
    return np.asarray(np.where(log_v > 0, value, -np.inf))


def _uniform(log_v: Array) -> Array:
    return np.asarray(np.where(log_v <= 0, 0.0, -np.inf))


def _exp_uniform(log_v: Array) -> Array:
    return np.asarray(np.where((log_v >= 0) & (log_v <= 1), -log_v, -np.inf))


def _beta_prime(log_v: Array, a: float, b: float) -> Array:
    return np.asarray((a - 1) * log_v - (a + b) * np.logaddexp(0.0, log_v) - _log_beta(a, b))


def _beta(log_v: Array, a: float, b: float) -> Array:
    rest = (b - 1) * np.log(-np.expm1(log_v)) if b != 1 else 0.0
    return np.asarray(np.where(log_v < 0, (a - 1) * log_v + rest - _log_beta(a, b), -np.inf))


def _noncentral(log_v: Array, k: float, noncentrality: float) -> Array:
    from scipy.special import ive

    v = np.exp(log_v)
    root = np.sqrt(noncentrality * v)
    bessel = np.log(ive(k / 2 - 1, root)) + root
    power = (k / 4 - 0.5) * (log_v - log(noncentrality))
    return np.asarray(-log(2) - (v + noncentrality) / 2 + power + bessel)


def _squared_hoyt(log_v: Array, ratio: float) -> Array:
    from scipy.special import i0e

    v = np.exp(log_v)
    argument = v * (1 - ratio) / (4 * ratio)
    return np.asarray(np.log(i0e(argument)) + argument - v * (1 + ratio) / (4 * ratio) - log(2 * sqrt(ratio)))


def _exp_laplace(log_v: Array) -> Array:
    return np.asarray(-np.abs(log_v) - log(2) - log_v)


def _inverse_gaussian(log_v: Array, shape: float) -> Array:
    v = np.exp(log_v)
    return np.asarray(0.5 * (log(shape / (2 * pi)) - 3 * log_v) - shape * (v - 1) ** 2 / (2 * v))


_POSITIVE: dict[str, Callable[..., Array]] = {
    "exp_normal": _exp_normal,
    "gamma": _gamma,
    "exp_gamma": _exp_gamma,
    "uniform": _uniform,
    "exp_uniform": _exp_uniform,
    "f": _beta_prime,
    "beta": _beta,
    "noncentral": _noncentral,
    "hoyt": _squared_hoyt,
    "exp_laplace": _exp_laplace,
    "inverse_gaussian": _inverse_gaussian,
}


# Densities of V on the whole line.


def _student(z: Array, freedom: float) -> Array:
    constant = _gamma_function((freedom + 1) / 2) - _gamma_function(freedom / 2) - 0.5 * log(freedom * pi)
    return np.asarray(np.exp(constant - (freedom + 1) / 2 * np.log1p(z**2 / freedom)))


def _log_beta_prime(z: Array, a: float, b: float) -> Array:
    return np.asarray(np.exp(a * z - (a + b) * np.logaddexp(0.0, z) - _log_beta(a, b)))


def _bessel_product(z: Array, correlation: float) -> Array:
    from scipy.special import kv

    rest = 1 - correlation**2
    return np.asarray(np.exp(correlation * z / rest) * kv(0, np.abs(z) / rest) / (pi * sqrt(rest)))


def _spline(z: Array, *widths: float) -> Array:
    """Divided differences of truncated powers (Curry and Schoenberg 1966), from whichever end is nearer."""
    z = np.minimum(z, sum(widths) - z)
    knots = np.array([0.0])
    signs = np.array([1.0])
    for width in widths:
        knots = np.concatenate([knots, knots + width])
        signs = np.concatenate([signs, -signs])
    points, place = np.unique(np.round(knots, 12), return_inverse=True)
    weights = np.zeros(points.size)
    np.add.at(weights, place, signs)
    degree = len(widths) - 1
    constant = float(np.prod(np.asarray(widths))) * float(np.prod(np.arange(1.0, degree + 1)))
    total = np.zeros_like(z)
    for point, weight in zip(points, weights, strict=True):
        total += weight * np.where(z > point, np.abs(z - point) ** degree, 0.0)
    return np.asarray(np.where(z > 0, total / constant, 0.0))


_WHOLE_LINE: dict[str, Callable[..., Array]] = {
    "normal": lambda z: np.exp(-0.5 * z**2) / sqrt(2 * pi),
    "cauchy": lambda z: 1 / (pi * (1 + z**2)),
    "laplace": lambda z: 0.5 * np.exp(-np.abs(z)),
    "logistic": lambda z: 0.25 / np.cosh(z / 2) ** 2,
    "log_gamma": lambda z, a: np.exp(a * z - np.exp(z) - _gamma_function(a)),
    "log_f": _log_beta_prime,
    "student": _student,
    "normal_product": _bessel_product,
    "uniforms": _spline,
}


# Logarithms of probability masses at whole numbers k >= 0.


def _poisson(k: Array, mean: float) -> Array:
    from scipy.special import gammaln

    return np.asarray(k * log(mean) - mean - gammaln(k + 1))


def _binomial(k: Array, trials: float, probability: float) -> Array:
    from scipy.special import gammaln, xlog1py, xlogy

    inside = np.minimum(k, trials)
    ways = gammaln(trials + 1) - gammaln(inside + 1) - gammaln(trials - inside + 1)
    value = ways + xlogy(inside, probability) + xlog1py(trials - inside, -probability)
    return np.asarray(np.where(k <= trials, value, -np.inf))


def _negative_binomial(k: Array, successes: float, probability: float) -> Array:
    from scipy.special import gammaln, xlog1py

    ways = gammaln(k + successes) - gammaln(k + 1) - gammaln(successes)
    return np.asarray(ways + successes * log(probability) + xlog1py(k, -probability))


_MASSES: dict[str, Callable[..., Array]] = {
    "poisson": _poisson,
    "binomial": _binomial,
    "negative_binomial": _negative_binomial,
    "geometric": lambda k, probability: _negative_binomial(k, 1.0, probability),
}
