"""The form of an input's law, from its family and canonical parameters.

A law of another family (or without one: truncated, mixed, tabulated) becomes an opaque form, which only
takes part in affine maps and extremes.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

from outspread.laws.law import Law
from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.forms import TWO, Form

Parameters = Mapping[str, Fraction]
_SQUARE_ROOT_OF_TWO = ex.square_root(TWO)
_THREE_HALVES = Fraction(3, 2)


def _located(kind: str, sign: int = 1, shape: tuple[Fraction, ...] = ()) -> Callable[[Parameters], Form]:
    return lambda p: Form(kind, shape, sign * p["scale"], p["location"])


def _root_of_gamma(shape: Fraction) -> Callable[[Parameters], Form]:
    """The length of a vector of 2*shape centred normal components with standard deviation `scale`."""
    return lambda p: Form("gamma", (shape,), p["scale"] * _SQUARE_ROOT_OF_TWO, power=ex.HALF)


def _beta(p: Parameters) -> Form:
    width = p["upper"] - p["lower"]
    if p["alpha"] == 1 and p["beta"] == 1:
        return Form("uniform", (), width, p["lower"])
    if p["beta"] == 1 and p["lower"] == 0:
        return Form("uniform", (), width, power=1 / p["alpha"])
    return Form("beta", (p["alpha"], p["beta"]), width, p["lower"])


def _student(p: Parameters) -> Form:
    if p["degrees_of_freedom"] == 1:
        return Form("cauchy", (), p["scale"], p["location"])
    return Form("student", (p["degrees_of_freedom"],), p["scale"], p["location"])


def _f(p: Parameters) -> Form:
    top, bottom = p["numerator_degrees_of_freedom"] / 2, p["denominator_degrees_of_freedom"] / 2
    return Form("f", (top, bottom), bottom / top)


def _hoyt(p: Parameters) -> Form:
    ratio = p["shape"] ** 2
    if ratio == 0 or ratio == 1:
        return Form("gamma", (ex.HALF if ratio == 0 else ex.ONE,), ex.ZERO)
    return Form("hoyt", (ratio,), ex.square_root(p["spread"] / (1 + ratio)), power=ex.HALF)


def _rice(p: Parameters) -> Form:
    if p["offset"] == 0:
        return _root_of_gamma(ex.ONE)(p)
    return Form("noncentral", (TWO, (p["offset"] / p["scale"]) ** 2), p["scale"], power=ex.HALF)


def _noncentral(p: Parameters) -> Form:
    if p["noncentrality"] == 0:
        return Form("gamma", (p["degrees_of_freedom"] / 2,), TWO)
    return Form("noncentral", (p["degrees_of_freedom"], p["noncentrality"]))


def _folded(p: Parameters) -> Form:
    if p["location"] == 0:
        return _root_of_gamma(ex.HALF)(p)
    return Form("noncentral", (ex.ONE, (p["location"] / p["scale"]) ** 2), p["scale"], power=ex.HALF)


def _nakagami(p: Parameters) -> Form:
    return Form("gamma", (p["shape"],), ex.square_root(p["spread"] / p["shape"]), power=ex.HALF)


_READERS: dict[str, Callable[[Parameters], Form]] = {
    "normal": lambda p: Form("normal", (), p["sd"], p["mean"]),
    "half_normal": _root_of_gamma(ex.HALF),
    "rayleigh": _root_of_gamma(ex.ONE),
    "maxwell": _root_of_gamma(_THREE_HALVES),
    "chi": lambda p: _root_of_gamma(p["degrees_of_freedom"] / 2)({"scale": p.get("scale", ex.ONE)}),
    "nakagami": _nakagami,
    "gamma": lambda p: Form("gamma", (p["shape"],), p["scale"]),
    "erlang": lambda p: Form("gamma", (p["shape"],), p["scale"]),
    "chi_square": lambda p: Form("gamma", (p["degrees_of_freedom"] / 2,), TWO),
    "exponential": lambda p: Form("gamma", (ex.ONE,), 1 / p["rate"]),
    "inverse_gamma": lambda p: Form("gamma", (p["shape"],), p["scale"], power=-ex.ONE),
    "levy": lambda p: Form("gamma", (ex.HALF,), p["scale"] / 2, p["location"], -ex.ONE),
    "weibull": lambda p: Form("gamma", (ex.ONE,), p["scale"], p["location"], 1 / p["shape"]),
    "frechet": lambda p: Form("gamma", (ex.ONE,), p["scale"], p["location"], -1 / p["shape"]),
    "gumbel_max": _located("log_gamma", -1, (ex.ONE,)),
    "gumbel_min": _located("log_gamma", 1, (ex.ONE,)),
    "uniform": lambda p: Form("uniform", (), p["upper"] - p["lower"], p["lower"]),
    "arcsine": lambda p: Form("beta", (ex.HALF, ex.HALF), p["upper"] - p["lower"], p["lower"]),
    "beta": _beta,
    "power_function": lambda p: Form("uniform", (), p["upper"] - p["lower"], p["lower"], 1 / p["shape"]),
    "lomax": lambda p: Form("uniform", (), p["scale"], -p["scale"], -1 / p["shape"]),
    "half_cauchy": lambda p: Form("f", (ex.HALF, ex.HALF), p["scale"], power=ex.HALF),
    "folded_normal": _folded,
    "pareto": lambda p: Form("uniform", (), p["scale"], power=-1 / p["shape"]),
    "log_uniform": lambda p: Form("exp_uniform", (), p["lower"], power=ex.logarithm(p["upper"] / p["lower"])),
    "log_logistic": lambda p: Form("f", (ex.ONE, ex.ONE), p["scale"], power=1 / p["shape"]),
    "f": _f,
    "rice": _rice,
    "hoyt": _hoyt,
    "noncentral_chi_square": _noncentral,
    "student_t": _student,
    "cauchy": _located("cauchy"),
    "laplace": _located("laplace"),
    "logistic": _located("logistic"),
    "inverse_gaussian": lambda p: Form("inverse_gaussian", (p["shape"] / p["mean"],), p["mean"]),
    "poisson": lambda p: Form("poisson", (p["mean"],)),
    "binomial": lambda p: Form("binomial", (p["trials"], p["probability"])),
    "bernoulli": lambda p: Form("binomial", (ex.ONE, p["probability"])),
}


def form_of(law: Law) -> Form:
    """The form of a law; opaque where its family has no rules here."""
    if law.family in ("geometric", "negative_binomial"):
        return _waiting(law)
    reader = _READERS.get(law.family)
    numbers = _exact(law.parameters)
    if reader is None or numbers is None:
        return Form("opaque", law=law)
    form = reader(numbers)
    return Form("opaque", law=law) if form.scale == 0 else form


def _exact(parameters: Mapping[str, Any]) -> dict[str, Fraction] | None:
    result = {}
    for name, value in parameters.items():
        if not isinstance(value, (int, float)):
            return None
        result[name] = ex.exact(value)
    return result


def _waiting(law: Law) -> Form:
    """Failures before the success, moved to where the law's own counting starts (failures or trials)."""
    numbers = _exact(law.parameters) or {}
    shape = tuple(numbers[name] for name in ("successes", "probability") if name in numbers)
    if len(shape) != (1 if law.family == "geometric" else 2):
        return Form("opaque", law=law)
    return Form(law.family, shape, shift=ex.exact(law.support()[0]))
