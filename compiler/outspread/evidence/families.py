"""How each family of distributions is drawn by construction, without its distribution function.

The evidence must share no code with the laws, so every draw is built from numpy's own generators or
from an elementary construction (named beside it; L. Devroye, Non-Uniform Random Variate Generation,
1986, unless another source is given). Parameters are the canonical ones of the family; each may be an
array with one value a draw, for inputs that are conditional on others. Truncation, mixtures and data
are `evidence.marginals`'s business.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from outspread.laws.law import Array

Generator = np.random.Generator
Draw = Callable[[Generator, int, Mapping[str, Any]], Array]


def _uniform_open(generator: Generator, count: int) -> Array:
    """Uniform on (0, 1]: no logarithm of it is infinite."""
    return 1.0 - generator.random(count)


def _uniform(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    return np.asarray(p["lower"] + (p["upper"] - p["lower"]) * g.random(n))


def _triangular(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """The fold of a right triangle: the minimum of two uniforms falls off linearly."""
    lower, mode, upper = p["lower"], p["mode"], p["upper"]
    fall = np.minimum(g.random(n), g.random(n))
    left = g.random(n) * (upper - lower) < (mode - lower)
    return np.asarray(np.where(left, mode - (mode - lower) * fall, mode + (upper - mode) * fall))


def _trapezoidal(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """Composition of a rising triangle, a rectangle and a falling triangle, by their areas."""
    a, b, c, d = (p[key] for key in ("lower", "top_lower", "top_upper", "upper"))
    rise, flat, fall = 0.5 * (b - a), c - b, 0.5 * (d - c)
    choice = g.random(n) * (rise + flat + fall)
    slope = np.maximum(g.random(n), g.random(n))
    top = b + flat * g.random(n)
    return np.asarray(
        np.where(choice < rise, a + (b - a) * slope, np.where(choice < rise + flat, top, d - (d - c) * slope))
    )


def _curvilinear(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """A rectangle whose limits are uncertain by themselves (JCGM 101:2008, 6.4.3.4)."""
    lower, upper, d = p["lower"], p["upper"], p["limit_half_width"]
    start = lower - d + 2.0 * d * g.random(n)
    stop = (lower + upper) - start
    return np.asarray(start + (stop - start) * g.random(n))


def _arcsine(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    centre, half = 0.5 * (p["lower"] + p["upper"]), 0.5 * (p["upper"] - p["lower"])
    return np.asarray(centre + half * np.sin(2.0 * np.pi * g.random(n)))


def _inverse_gamma(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    return np.asarray(p["scale"] / g.standard_gamma(p["shape"], n))


def _generalised_extreme_value(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """location + scale ((E)^(-shape) - 1) / shape with E standard exponential; shape 0 is Gumbel's law."""
    logarithm = np.log(g.standard_exponential(n))
    shape = np.broadcast_to(np.asarray(p["shape"], float), (n,))
    safe = np.where(shape == 0.0, 1.0, shape)
    standard = np.where(shape == 0.0, -logarithm, np.expm1(-safe * logarithm) / safe)
    return np.asarray(p["location"] + p["scale"] * standard)


def _generalised_pareto(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    exponential = g.standard_exponential(n)
    shape = np.broadcast_to(np.asarray(p["shape"], float), (n,))
    safe = np.where(shape == 0.0, 1.0, shape)
    standard = np.where(shape == 0.0, exponential, np.expm1(safe * exponential) / safe)
    return np.asarray(p.get("location", 0.0) + p["scale"] * standard)


def _hoyt(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """Root of the sum of squares of two centred normals with standard deviations in the ratio `shape`."""
    q, spread = np.asarray(p["shape"], float), np.asarray(p["spread"], float)
    major = np.sqrt(spread / (1.0 + q * q))
    return np.asarray(np.hypot(major * g.standard_normal(n), q * major * g.standard_normal(n)))


def _gompertz(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """The cumulative hazard shape (exp(x/scale) - 1) at the value is standard exponential."""
    return np.asarray(p["scale"] * np.log1p(g.standard_exponential(n) / p["shape"]))


def _birnbaum_saunders(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """(sqrt(x/scale) - sqrt(scale/x)) / shape is standard normal (Birnbaum and Saunders 1969)."""
    half = 0.5 * p["shape"] * g.standard_normal(n)
    # the sum for one sign is the reciprocal of that for the other: no difference of near numbers
    root = np.abs(half) + np.sqrt(half * half + 1.0)
    return np.asarray(p["scale"] * np.where(half < 0.0, 1.0 / root, root) ** 2)


def _skew_normal(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """delta |U| + sqrt(1 - delta^2) V with independent normals (Henze 1986)."""
    shape = np.asarray(p["shape"], float)
    norm = np.sqrt(1.0 + shape * shape)
    standard = (shape * np.abs(g.standard_normal(n)) + g.standard_normal(n)) / norm
    return np.asarray(p["location"] + p["scale"] * standard)


def _kumaraswamy(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """1 - u^alpha is the power 1/beta of a uniform (Jones 2009)."""
    power = -np.expm1(-g.standard_exponential(n) / p["beta"])
    return np.asarray(p["lower"] + (p["upper"] - p["lower"]) * power ** (1.0 / p["alpha"]))


def _burr(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    """(1 + (x/scale)^c)^(-k) is uniform (Burr 1942, type XII)."""
    odds = np.expm1(g.standard_exponential(n) / p["outer_shape"])
    return np.asarray(p["scale"] * odds ** (1.0 / p["inner_shape"]))


def _logit_normal(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    return np.asarray(1.0 / (1.0 + np.exp(-(p["location"] + p["scale"] * g.standard_normal(n)))))


def _log_uniform(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    return np.asarray(p["lower"] * np.exp(np.log(p["upper"] / p["lower"]) * g.random(n)))


def _power_function(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    fraction = np.exp(-g.standard_exponential(n) / p["shape"])
    return np.asarray(p["lower"] + (p["upper"] - p["lower"]) * fraction)


def _categorical(g: Generator, n: int, p: Mapping[str, Any]) -> Array:
    values, weights = np.asarray(p["values"], float), np.asarray(p["probabilities"], float)
    return np.asarray(g.choice(values, size=n, p=weights / weights.sum()))


DRAWS: dict[str, Draw] = {
    "normal": lambda g, n, p: p["mean"] + p["sd"] * g.standard_normal(n),
    "lognormal": lambda g, n, p: np.exp(p["log_mean"] + p["log_sd"] * g.standard_normal(n)),
    "half_normal": lambda g, n, p: p["scale"] * np.abs(g.standard_normal(n)),
    "uniform": _uniform,
    "triangular": _triangular,
    "trapezoidal": _trapezoidal,
    "curvilinear_trapezoidal": _curvilinear,
    "arcsine": _arcsine,
    "beta": lambda g, n, p: p["lower"] + (p["upper"] - p["lower"]) * g.beta(p["alpha"], p["beta"], n),
    "exponential": lambda g, n, p: g.standard_exponential(n) / p["rate"],
    "gamma": lambda g, n, p: p["scale"] * g.standard_gamma(p["shape"], n),
    "inverse_gamma": _inverse_gamma,
    "weibull": lambda g, n, p: p["location"] + p["scale"] * g.standard_exponential(n) ** (1.0 / p["shape"]),
    "rayleigh": lambda g, n, p: p["scale"] * np.hypot(g.standard_normal(n), g.standard_normal(n)),
    "rice": lambda g, n, p: np.hypot(
        p["offset"] + p["scale"] * g.standard_normal(n), p["scale"] * g.standard_normal(n)
    ),
    "hoyt": _hoyt,
    "nakagami": lambda g, n, p: np.sqrt(p["spread"] / p["shape"] * g.standard_gamma(p["shape"], n)),
    "maxwell": lambda g, n, p: p["scale"] * np.sqrt(sum(g.standard_normal(n) ** 2 for _ in range(3))),
    "chi": lambda g, n, p: p.get("scale", 1.0) * np.sqrt(g.chisquare(p["degrees_of_freedom"], n)),
    "chi_square": lambda g, n, p: g.chisquare(p["degrees_of_freedom"], n),
    "noncentral_chi_square": lambda g, n, p: g.noncentral_chisquare(
        p["degrees_of_freedom"], p["noncentrality"], n
    ),
    "student_t": lambda g, n, p: p["location"] + p["scale"] * g.standard_t(p["degrees_of_freedom"], n),
    "f": lambda g, n, p: g.f(p["numerator_degrees_of_freedom"], p["denominator_degrees_of_freedom"], n),
    "cauchy": lambda g, n, p: p["location"] + p["scale"] * g.standard_cauchy(n),
    "laplace": lambda g, n, p: (
        p["location"] + p["scale"] * (g.standard_exponential(n) - g.standard_exponential(n))
    ),
    "logistic": lambda g, n, p: (
        p["location"] + p["scale"] * np.log(g.standard_exponential(n) / g.standard_exponential(n))
    ),
    "log_logistic": lambda g, n, p: (
        p["scale"] * (g.standard_exponential(n) / g.standard_exponential(n)) ** (1.0 / p["shape"])
    ),
    "gumbel_max": lambda g, n, p: p["location"] - p["scale"] * np.log(g.standard_exponential(n)),
    "gumbel_min": lambda g, n, p: p["location"] + p["scale"] * np.log(g.standard_exponential(n)),
    "frechet": lambda g, n, p: (
        p.get("location", 0.0) + p["scale"] * g.standard_exponential(n) ** (-1.0 / p["shape"])
    ),
    "generalised_extreme_value": _generalised_extreme_value,
    "pareto": lambda g, n, p: p["scale"] * np.exp(g.standard_exponential(n) / p["shape"]),
    "generalised_pareto": _generalised_pareto,
    "inverse_gaussian": lambda g, n, p: g.wald(p["mean"], p["shape"], n),
    "von_mises": lambda g, n, p: g.vonmises(0.0, p["concentration"], n) + p["location"],
    "power_function": _power_function,
    "kumaraswamy": _kumaraswamy,
    "log_uniform": _log_uniform,
    "half_cauchy": lambda g, n, p: p["scale"] * np.abs(g.standard_cauchy(n)),
    "gompertz": _gompertz,
    "folded_normal": lambda g, n, p: np.abs(p["location"] + p["scale"] * g.standard_normal(n)),
    "levy": lambda g, n, p: p["location"] + p["scale"] / g.standard_normal(n) ** 2,
    "logit_normal": _logit_normal,
    "birnbaum_saunders": _birnbaum_saunders,
    "skew_normal": _skew_normal,
    "lomax": lambda g, n, p: p["scale"] * np.expm1(g.standard_exponential(n) / p["shape"]),
    "burr": _burr,
    "bernoulli": lambda g, n, p: (g.random(n) < p["probability"]).astype(float),
    "binomial": lambda g, n, p: g.binomial(np.asarray(p["trials"], int), p["probability"], n).astype(float),
    "poisson": lambda g, n, p: g.poisson(p["mean"], n).astype(float),
    "geometric": lambda g, n, p: g.geometric(p["probability"], n).astype(float),
    "negative_binomial": lambda g, n, p: g.poisson(
        g.standard_gamma(p["successes"], n) * (1.0 - p["probability"]) / p["probability"]
    ).astype(float),
    "hypergeometric": lambda g, n, p: g.hypergeometric(
        int(p["successes"]), int(p["population"]) - int(p["successes"]), int(p["draws"]), n
    ).astype(float),
    "discrete_uniform": lambda g, n, p: g.integers(
        np.asarray(p["lower"], int), np.asarray(p["upper"], int), n, endpoint=True
    ).astype(float),
    "categorical": _categorical,
}
