"""The densities of the families as formulas (sympy), to evaluate what a derivation writes as an integral.

Textbook formulas of the canonical parameters (Johnson, Kotz and Balakrishnan, Continuous Univariate
Distributions 1, 1994, and 2, 1995, unless named beside one), apart from the code of the laws. Integrating
them, and cutting and mixing them, is left to `marginal_density`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import cache
from typing import Any

import numpy as np

from outspread.laws.law import Array

P = Mapping[str, Any]
#: builds the logarithm of a density from sympy, the symbol of the value and those of the parameters
Formula = Callable[[Any, Any, P], Any]
Ends = Callable[[P], tuple[float, float]]

INFINITE = float("inf")


def _standard(x: Any, p: P) -> Any:
    return (x - p["location"]) / p["scale"]


def _share(x: Any, p: P) -> Any:
    return (x - p["lower"]) / (p["upper"] - p["lower"])


def _normal(s: Any, z: Any) -> Any:
    return -(z**2) / 2 - s.log(2 * s.pi) / 2


def _log_beta(s: Any, a: Any, b: Any) -> Any:
    return s.loggamma(a) + s.loggamma(b) - s.loggamma(a + b)


def _log_scaled_bessel(s: Any, order: Any, argument: Any) -> Any:
    """log(I_order(argument) exp(-argument)), by the name that `_compiled` gives to scipy's function."""
    return s.log(s.Function("scaled_bessel")(order, argument))


def _triangular(s: Any, x: Any, p: P) -> Any:
    a, m, b = p["lower"], p["mode"], p["upper"]
    return s.log(2 / (b - a) * s.Piecewise(((x - a) / (m - a), x < m), ((b - x) / (b - m), x > m), (1, True)))


def _trapezoidal(s: Any, x: Any, p: P) -> Any:
    a, b, c, d = (p[key] for key in ("lower", "top_lower", "top_upper", "upper"))
    side = s.Piecewise(((x - a) / (b - a), x < b), ((d - x) / (d - c), x > c), (1, True))
    return s.log(2 / (d + c - a - b) * side)


def _curvilinear(s: Any, x: Any, p: P) -> Any:
    """JCGM 101:2008, 6.4.3.4, equation (5)."""
    a, b, d = p["lower"], p["upper"], p["limit_half_width"]
    half, away = (b - a) / 2, s.Abs(x - (a + b) / 2)
    return s.log(s.log((half + d) / s.Max(away, half - d)) / (4 * d))


def _beta(s: Any, x: Any, p: P) -> Any:
    a, b, width = p["alpha"], p["beta"], p["upper"] - p["lower"]
    sides = (a - 1) * s.log(_share(x, p)) + (b - 1) * s.log((p["upper"] - x) / width)
    return sides - _log_beta(s, a, b) - s.log(width)


def _power_function(s: Any, x: Any, p: P) -> Any:
    k = p["shape"]
    return s.log(k) + (k - 1) * s.log(_share(x, p)) - s.log(p["upper"] - p["lower"])


def _kumaraswamy(s: Any, x: Any, p: P) -> Any:
    a, b, u = p["alpha"], p["beta"], _share(x, p)
    return s.log(a * b) + (a - 1) * s.log(u) + (b - 1) * s.log(1 - u**a) - s.log(p["upper"] - p["lower"])


def _student(s: Any, x: Any, p: P) -> Any:
    v = p["degrees_of_freedom"]
    constant = s.loggamma((v + 1) / 2) - s.loggamma(v / 2) - s.log(v * s.pi) / 2 - s.log(p["scale"])
    return constant - (v + 1) / 2 * s.log(1 + _standard(x, p) ** 2 / v)


def _logistic(s: Any, x: Any, p: P) -> Any:
    away = s.Abs(_standard(x, p))
    return -away - 2 * s.log(1 + s.exp(-away)) - s.log(p["scale"])


def _weibull(s: Any, x: Any, p: P) -> Any:
    k, z = p["shape"], _standard(x, p)
    return s.log(k / p["scale"]) + (k - 1) * s.log(z) - z**k


def _gamma(s: Any, x: Any, shape: Any, scale: Any) -> Any:
    return (shape - 1) * s.log(x / scale) - x / scale - s.loggamma(shape) - s.log(scale)


def _chi(s: Any, x: Any, p: P) -> Any:
    return _gamma(s, x**2, p["degrees_of_freedom"] / 2, s.Integer(2)) + s.log(2 * x)


def _nakagami(s: Any, x: Any, p: P) -> Any:
    return _gamma(s, x**2, p["shape"], p["spread"] / p["shape"]) + s.log(2 * x)


def _inverse_gamma(s: Any, x: Any, p: P) -> Any:
    a, b = p["shape"], p["scale"]
    return a * s.log(b / x) - b / x - s.loggamma(a) - s.log(x)


def _f(s: Any, x: Any, p: P) -> Any:
    m, n = p["numerator_degrees_of_freedom"] / 2, p["denominator_degrees_of_freedom"] / 2
    ratio = m * x / n
    return m * s.log(ratio) - (m + n) * s.log(1 + ratio) - s.log(x) - _log_beta(s, m, n)


def _rice(s: Any, x: Any, p: P) -> Any:
    offset, square = p["offset"], p["scale"] ** 2
    bessel = _log_scaled_bessel(s, 0, x * offset / square)
    return s.log(x / square) - (x - offset) ** 2 / (2 * square) + bessel


def _hoyt(s: Any, x: Any, p: P) -> Any:
    """Hoyt (1947), with the exponent of the scaled Bessel function taken in."""
    q, spread = p["shape"], p["spread"]
    bessel = _log_scaled_bessel(s, 0, (1 - q**4) * x**2 / (4 * q**2 * spread))
    return s.log((1 + q**2) * x / (q * spread)) - (1 + q**2) * x**2 / (2 * spread) + bessel


def _noncentral(s: Any, x: Any, p: P) -> Any:
    k, offset = p["degrees_of_freedom"], p["noncentrality"]
    bessel = _log_scaled_bessel(s, k / 2 - 1, s.sqrt(offset * x))
    power = (k / 4 - s.Rational(1, 2)) * s.log(x / offset)
    return power - (s.sqrt(x) - s.sqrt(offset)) ** 2 / 2 - s.log(2) + bessel


def _folded(s: Any, x: Any, p: P) -> Any:
    near, other = ((x + sign * p["location"]) / p["scale"] for sign in (-1, 1))
    both = s.exp(_normal(s, near)) + s.exp(_normal(s, other))
    return s.log(both / p["scale"])


def _levy(s: Any, x: Any, p: P) -> Any:
    z = _standard(x, p)
    return -1 / (2 * z) - s.log(2 * s.pi) / 2 - s.Rational(3, 2) * s.log(z) - s.log(p["scale"])


def _logit_normal(s: Any, x: Any, p: P) -> Any:
    return _normal(s, (s.log(x / (1 - x)) - p["location"]) / p["scale"]) - s.log(x * (1 - x) * p["scale"])


def _birnbaum_saunders(s: Any, x: Any, p: P) -> Any:
    """Birnbaum and Saunders (1969)."""
    root = s.sqrt(x / p["scale"])
    return _normal(s, (root - 1 / root) / p["shape"]) + s.log((root + 1 / root) / (2 * p["shape"] * x))


def _inverse_gaussian(s: Any, x: Any, p: P) -> Any:
    mean, shape = p["mean"], p["shape"]
    return s.log(shape / (2 * s.pi * x**3)) / 2 - shape * (x - mean) ** 2 / (2 * mean**2 * x)


def _skew_normal(s: Any, x: Any, p: P) -> Any:
    """Azzalini (1985)."""
    z = _standard(x, p)
    return _normal(s, z) + s.log(s.erfc(-p["shape"] * z / s.sqrt(2))) - s.log(p["scale"])


def _gumbel(s: Any, z: Any, scale: Any) -> Any:
    return -z - s.exp(-z) - s.log(scale)


def _frechet(s: Any, x: Any, p: P) -> Any:
    a, z = p["shape"], _standard(x, p)
    return s.log(a / p["scale"]) - (a + 1) * s.log(z) - z ** (-a)


def _generalised_extreme_value(s: Any, x: Any, p: P) -> Any:
    t = s.log(1 + p["shape"] * _standard(x, p)) / p["shape"]
    return -(1 + p["shape"]) * t - s.exp(-t) - s.log(p["scale"])


def _generalised_pareto(s: Any, x: Any, p: P) -> Any:
    return -(1 + 1 / p["shape"]) * s.log(1 + p["shape"] * _standard(x, p)) - s.log(p["scale"])


def _burr(s: Any, z: Any, inner: Any, outer: Any, scale: Any) -> Any:
    return s.log(inner * outer / scale) + (inner - 1) * s.log(z) - (outer + 1) * s.log(1 + z**inner)


def _von_mises(s: Any, x: Any, p: P) -> Any:
    k = p["concentration"]
    return k * (s.cos(x - p["location"]) - 1) - s.log(2 * s.pi) - _log_scaled_bessel(s, 0, k)


def _line(p: P) -> tuple[float, float]:
    return -INFINITE, INFINITE


def _positive(p: P) -> tuple[float, float]:
    return 0.0, INFINITE


def _between(p: P) -> tuple[float, float]:
    return p["lower"], p["upper"]


def _from_location(p: P) -> tuple[float, float]:
    return p.get("location", 0.0), INFINITE


def _shape_end(p: P) -> float:
    """Where 1 + shape (x - location)/scale is 0."""
    return float(p["location"] - p["scale"] / p["shape"])


FORMULAS: dict[str, tuple[Formula, Ends]] = {
    "normal": (lambda s, x, p: _normal(s, (x - p["mean"]) / p["sd"]) - s.log(p["sd"]), _line),
    "lognormal": (
        lambda s, x, p: _normal(s, (s.log(x) - p["log_mean"]) / p["log_sd"]) - s.log(p["log_sd"] * x),
        _positive,
    ),
    "half_normal": (lambda s, x, p: _normal(s, x / p["scale"]) + s.log(2 / p["scale"]), _positive),
    "folded_normal": (_folded, _positive),
    "uniform": (lambda s, x, p: -s.log(p["upper"] - p["lower"]), _between),
    "triangular": (_triangular, _between),
    "trapezoidal": (_trapezoidal, _between),
    "curvilinear_trapezoidal": (
        _curvilinear,
        lambda p: (p["lower"] - p["limit_half_width"], p["upper"] + p["limit_half_width"]),
    ),
    "arcsine": (
        lambda s, x, p: -s.log(s.pi) - s.log(x - p["lower"]) / 2 - s.log(p["upper"] - x) / 2,
        _between,
    ),
    "beta": (_beta, _between),
    "power_function": (_power_function, _between),
    "kumaraswamy": (_kumaraswamy, _between),
    "log_uniform": (lambda s, x, p: -s.log(x * s.log(p["upper"] / p["lower"])), _between),
    "cauchy": (lambda s, x, p: -s.log(s.pi * p["scale"] * (1 + _standard(x, p) ** 2)), _line),
    "half_cauchy": (lambda s, x, p: s.log(2 / (s.pi * p["scale"] * (1 + (x / p["scale"]) ** 2))), _positive),
    "student_t": (_student, _line),
    "laplace": (lambda s, x, p: -s.Abs(_standard(x, p)) - s.log(2 * p["scale"]), _line),
    "logistic": (_logistic, _line),
    "log_logistic": (
        lambda s, x, p: _burr(s, x / p["scale"], p["shape"], s.Integer(1), p["scale"]),
        _positive,
    ),
    "exponential": (lambda s, x, p: s.log(p["rate"]) - p["rate"] * x, _positive),
    "weibull": (_weibull, _from_location),
    "rayleigh": (lambda s, x, p: s.log(x / p["scale"] ** 2) - (x / p["scale"]) ** 2 / 2, _positive),
    "gompertz": (
        lambda s, x, p: s.log(p["shape"] / p["scale"]) + x / p["scale"]
        - p["shape"] * (s.exp(x / p["scale"]) - 1),
        _positive,
    ),
    "gamma": (lambda s, x, p: _gamma(s, x, p["shape"], p["scale"]), _positive),
    "chi_square": (lambda s, x, p: _gamma(s, x, p["degrees_of_freedom"] / 2, s.Integer(2)), _positive),
    "chi": (_chi, _positive),
    "maxwell": (
        lambda s, x, p: s.log(2 * x**2 / p["scale"] ** 3) + _normal(s, x / p["scale"]),
        _positive,
    ),
    "nakagami": (_nakagami, _positive),
    "inverse_gamma": (_inverse_gamma, _positive),
    "f": (_f, _positive),
    "rice": (_rice, _positive),
    "hoyt": (_hoyt, _positive),
    "noncentral_chi_square": (_noncentral, _positive),
    "levy": (_levy, _from_location),
    "logit_normal": (_logit_normal, lambda p: (0.0, 1.0)),
    "birnbaum_saunders": (_birnbaum_saunders, _positive),
    "inverse_gaussian": (_inverse_gaussian, _positive),
    "skew_normal": (_skew_normal, _line),
    "gumbel_max": (lambda s, x, p: _gumbel(s, _standard(x, p), p["scale"]), _line),
    "gumbel_min": (lambda s, x, p: _gumbel(s, -_standard(x, p), p["scale"]), _line),
    "frechet": (_frechet, _from_location),
    "generalised_extreme_value": (
        _generalised_extreme_value,
        lambda p: (_shape_end(p), INFINITE) if p["shape"] > 0 else (-INFINITE, _shape_end(p)),
    ),
    "pareto": (
        lambda s, x, p: s.log(p["shape"] / x) - p["shape"] * s.log(x / p["scale"]),
        lambda p: (p["scale"], INFINITE),
    ),
    "lomax": (
        lambda s, x, p: s.log(p["shape"] / p["scale"]) - (p["shape"] + 1) * s.log(1 + x / p["scale"]),
        _positive,
    ),
    "generalised_pareto": (
        _generalised_pareto,
        lambda p: (p["location"], INFINITE if p["shape"] > 0 else _shape_end(p)),
    ),
    "burr": (
        lambda s, x, p: _burr(s, x / p["scale"], p["inner_shape"], p["outer_shape"], p["scale"]),
        _positive,
    ),
    "von_mises": (_von_mises, lambda p: (p["location"] - np.pi, p["location"] + np.pi)),
}  # fmt: skip

#: interior points at which a density has a corner
CORNERS: dict[str, Callable[[P], tuple[float, ...]]] = {
    "triangular": lambda p: (p["mode"],),
    "trapezoidal": lambda p: (p["top_lower"], p["top_upper"]),
    "curvilinear_trapezoidal": lambda p: (
        p["lower"] + p["limit_half_width"], p["upper"] - p["limit_half_width"],
    ),
    "laplace": lambda p: (p["location"],),
}  # fmt: skip


def limiting(family: str, parameters: P) -> tuple[str, P]:
    """The family whose formula holds at these parameters: some formulas divide by a shape that may be 0."""
    if family == "noncentral_chi_square" and parameters["noncentrality"] == 0.0:
        return "chi_square", {"degrees_of_freedom": parameters["degrees_of_freedom"]}
    if family == "generalised_extreme_value" and parameters["shape"] == 0.0:
        return "gumbel_max", {key: parameters[key] for key in ("location", "scale")}
    if family == "generalised_pareto" and parameters["shape"] == 0.0:
        return "weibull", {**{key: parameters[key] for key in ("location", "scale")}, "shape": 1.0}
    return family, parameters


def density_function(family: str, parameters: P) -> Callable[[Array], Array]:
    """The density of a family of FORMULAS inside its ends, as a function of an array; outside it is no
    density. Points where the formula has no value give nan or an infinity."""
    function = _compiled(family, tuple(sorted(parameters)))
    values = [float(parameters[key]) for key in sorted(parameters)]

    def density(x: Array) -> Array:
        with np.errstate(all="ignore"):
            return np.asarray(np.exp(function(x, *values)) + np.zeros(np.shape(x)), float)

    return density


@cache
def _compiled(family: str, names: tuple[str, ...]) -> Callable[..., Any]:
    """The logarithm of the family's density as a function of the value and the parameters in this order."""
    import sympy
    from scipy.special import ive

    x = sympy.Symbol("x", real=True)
    symbols = {name: sympy.Symbol(name, real=True) for name in names}
    formula = FORMULAS[family][0](sympy, x, symbols)
    compiled: Callable[..., Any] = sympy.lambdify(
        [x, *symbols.values()], formula, [{"scaled_bessel": ive}, "scipy", "numpy"]
    )
    return compiled
