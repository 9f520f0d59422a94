"""From a form to a law: the registry's family where there is one, else a transformed or composed law.

The name that goes with it is the usual name of the distribution. Densities are `densities`' business.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import lgamma, log, sqrt

from outspread.laws.law import Law
from outspread.laws.normal_product import LARGEST_CORRELATION, NormalProduct
from outspread.laws.registry import FAMILIES
from outspread.laws.transformed import EXP_MAP, AffineLaw, LogLaw, PowerTail, Transformed, power_map
from outspread.laws.uniform_sum import UniformSum
from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.forms import Form

INF = float("inf")
Named = tuple[Law, str]
_THREE_HALVES = Fraction(3, 2)


class NotBuilt(ArithmeticError):
    """The form is beyond what the laws can hold: a parameter out of range."""


def family(key: str, **parameters: float) -> Law:
    """The registry's law with these canonical parameters."""
    return FAMILIES[key].build(FAMILIES[key].canonical(parameters))


def build(form: Form) -> Named:
    """The law of a form and its name; raises ArithmeticError where a parameter is out of range."""
    if form.kind == "opaque":
        return _opaque(form)
    return _BUILDERS[form.kind](form)


def _opaque(form: Form) -> Named:
    law = form.law
    if law is None:
        raise NotBuilt
    name = law.name or "Distribution"
    if form.scale == 1 and form.shift == 0:
        return law, name
    return AffineLaw(law, float(form.scale), float(form.shift)), f"{name}, scaled and shifted"


def moved(law: Law, name: str, scale: Fraction, shift: Fraction) -> Named:
    """shift + scale times a variable with this law and name."""
    if scale == 1 and shift == 0:
        return law, name
    words = [word for word, applies in (("scaled", scale != 1), ("shifted", shift != 0)) if applies]
    result = AffineLaw(law, float(scale), float(shift))
    result.name = f"{name}, {' and '.join(words)}"
    return result, result.name


def _rest(form: Form) -> tuple[float, Fraction]:
    """The size of the scale, which goes into the family, and its sign, which does not."""
    return float(abs(form.scale)), ex.ONE if form.scale > 0 else -ex.ONE


def _located(key: str, title: str) -> Callable[[Form], Named]:
    def builder(form: Form) -> Named:
        return family(key, location=float(form.shift), scale=float(abs(form.scale))), title

    return builder


def _normal(form: Form) -> Named:
    return family("normal", mean=float(form.shift), sd=float(abs(form.scale))), "Normal distribution"


def _lognormal(form: Form) -> Named:
    law = family("lognormal", log_mean=float(ex.logarithm(abs(form.scale))), log_sd=float(abs(form.power)))
    return moved(law, "Lognormal distribution", _rest(form)[1], form.shift)


def _gamma(form: Form) -> Named:
    sign = _rest(form)[1]
    law, name, rest = _gamma_power(form.shape[0], abs(form.scale), form.power)
    return moved(law, name, sign * rest, form.shift)


def _gamma_power(shape: Fraction, scale: Fraction, power: Fraction) -> tuple[Law, str, Fraction]:
    """Law, name and remaining factor of scale * G^power."""
    a, s, q = float(shape), float(scale), float(power)
    sigma = s / sqrt(2.0)
    if power == 1 and shape == 1:
        return family("exponential", rate=float(1 / scale)), "Exponential distribution", ex.ONE
    if power == 1 and scale == 2:
        return family("chi_square", degrees_of_freedom=float(2 * shape)), "Chi-square distribution", ex.ONE
    if power == 1:
        return family("gamma", shape=a, scale=s), "Gamma distribution", ex.ONE
    if power == ex.HALF and shape == 1:
        return family("rayleigh", scale=sigma), "Rayleigh distribution", ex.ONE
    if power == ex.HALF and shape == ex.HALF:
        return family("half_normal", scale=sigma), "Half-normal distribution", ex.ONE
    if power == ex.HALF and shape == _THREE_HALVES:
        return family("maxwell", scale=sigma), "Maxwell distribution", ex.ONE
    if shape == 1 and power > 0:
        return family("weibull", shape=float(1 / power), scale=s), "Weibull distribution", ex.ONE
    if shape == 1:
        return family("frechet", shape=float(-1 / power), scale=s), "Fréchet distribution", ex.ONE
    if power == -1 and shape == ex.HALF:
        return family("levy", location=0.0, scale=2 * s), "Lévy distribution", ex.ONE
    if power == -1:
        return family("inverse_gamma", shape=a, scale=s), "Inverse gamma distribution", ex.ONE
    if power == ex.HALF and ex.same(scale**2, Fraction(2)):
        return family("chi", degrees_of_freedom=2 * a), "Chi distribution", ex.ONE
    if power == ex.HALF and shape >= ex.HALF:
        law = family("nakagami", shape=a, spread=float(scale**2 * shape))
        return law, "Nakagami (scaled chi) distribution", ex.ONE
    order = INF if q > 0 else a / -q
    base = family("gamma", shape=a, scale=1.0)
    general = Transformed(base, power_map(q), (0.0, INF), singular=(a < q, False), moment_order=order)
    return general, "Generalised gamma distribution", scale


def _log_gamma(form: Form) -> Named:
    size, _ = _rest(form)
    if form.shape == (ex.ONE,):
        side, key = ("minima", "gumbel_min") if form.scale > 0 else ("maxima", "gumbel_max")
        return family(key, location=float(form.shift), scale=size), f"Gumbel distribution for {side}"
    a = float(form.shape[0])
    base = LogLaw(
        family("gamma", shape=a, scale=1.0), PowerTail(a, -lgamma(a + 1)), far=40 + log(1 + a)
    )
    law, _ = moved(base, "", form.scale, form.shift)
    return law, "Log-gamma distribution"


def _exp_gamma(form: Form) -> Named:
    """s e^(q G): for q < 0 on (0, s), the law of a product of powers of uniform variables."""
    a, q = float(form.shape[0]), float(form.power)
    exponent = AffineLaw(family("gamma", shape=a, scale=1.0), q)
    if q < 0:
        singular = (-1 / q < 1 or (form.power == -1 and a > 1), a < 1)
        law = Transformed(exponent, EXP_MAP, (0.0, 1.0), singular=singular)
    else:
        law = Transformed(exponent, EXP_MAP, (1.0, INF), singular=(a < 1, False), moment_order=1 / q)
    return moved(law, "Distribution of the exponential of a gamma variable", form.scale, form.shift)


def _uniform(form: Form) -> Named:
    size, sign = _rest(form)
    if form.power == 1:
        low, high = sorted((form.shift, form.shift + form.scale))
        return family("uniform", lower=float(low), upper=float(high)), "Uniform distribution"
    if form.power > 0 and form.scale < 0:
        ends = {"lower": float(form.shift + form.scale), "upper": float(form.shift)}
        return family("beta", alpha=1.0, beta=float(1 / form.power), **ends), "Beta distribution"
    if form.power > 0:
        ends = {"lower": float(form.shift), "upper": float(form.shift + form.scale)}
        return family("power_function", shape=float(1 / form.power), **ends), "Power function distribution"
    law = family("pareto", shape=float(-1 / form.power), scale=size)
    return moved(law, "Pareto distribution", sign, form.shift)


def _exp_uniform(form: Form) -> Named:
    sign = _rest(form)[1]
    ends = sorted((abs(form.scale), abs(form.scale) * ex.exponential(form.power)))
    law = family("log_uniform", lower=float(ends[0]), upper=float(ends[1]))
    return moved(law, "Log-uniform distribution", sign, form.shift)


def _ratio_law(a: Fraction, b: Fraction) -> Law:
    return family(
        "f", numerator_degrees_of_freedom=float(2 * a), denominator_degrees_of_freedom=float(2 * b)
    )


def _f(form: Form) -> Named:
    a, b = form.shape if form.power > 0 else form.shape[::-1]
    power = abs(form.power)
    size, sign = _rest(form)
    if a == b == 1:
        law = family("log_logistic", shape=float(1 / power), scale=size)
        return moved(law, "Log-logistic distribution", sign, form.shift)
    if a == b == power == ex.HALF:
        return moved(family("half_cauchy", scale=size), "Half-Cauchy distribution", sign, form.shift)
    if power == 1:
        factor = form.scale * a / b
        if ex.same(factor, ex.ONE):
            factor = ex.ONE
        name = "F distribution" if factor == 1 else "Beta prime (F) distribution"
        return moved(_ratio_law(a, b), name, factor, form.shift)
    q = float(power)
    base = AffineLaw(_ratio_law(a, b), float(a / b))
    unbounded = (float(a) < q, False)
    raised = Transformed(base, power_map(q), (0.0, INF), singular=unbounded, moment_order=float(b) / q)
    return moved(raised, "Power of a beta prime distribution", form.scale, form.shift)


def _log_f(form: Form) -> Named:
    a, b = (float(value) for value in form.shape)
    log_beta = lgamma(a) + lgamma(b) - lgamma(a + b)
    ratio = log(a / b)  # of the F variable to the quotient of the gamma variables
    lower = PowerTail(a, a * ratio - log(a) - log_beta)
    upper = PowerTail(b, -b * ratio - log(b) - log_beta)
    base = LogLaw(_ratio_law(*form.shape), lower, upper, far=40 + log(1 + a + b) + abs(ratio))
    shift = form.shift + form.scale * ex.logarithm(form.shape[0] / form.shape[1])
    return AffineLaw(base, float(form.scale), float(shift)), "Fisher z distribution, scaled and shifted"


def _beta(form: Form) -> Named:
    a, b = (float(value) for value in form.shape)
    q = float(form.power)
    if form.power == 1:
        low, high = sorted((form.shift, form.shift + form.scale))
        name = "Arcsine distribution" if a == b == 0.5 else "Beta distribution"
        if form.scale < 0:
            a, b = b, a
        return family("beta", alpha=a, beta=b, lower=float(low), upper=float(high)), name
    base = family("beta", alpha=a, beta=b, lower=0.0, upper=1.0)
    if q > 0:
        law = Transformed(base, power_map(q), (0.0, 1.0), singular=(a < q, b < 1))
    else:
        law = Transformed(base, power_map(q), (1.0, INF), singular=(b < 1, False), moment_order=-a / q)
    return moved(law, "Power of a beta distribution", form.scale, form.shift)


def _noncentral(form: Form) -> Named:
    freedom, noncentrality = (float(value) for value in form.shape)
    size, sign = _rest(form)
    if form.power == ex.HALF and freedom == 2:
        offset = float(abs(form.scale) * ex.square_root(ex.trimmed(form.shape[1])))
        return moved(family("rice", offset=offset, scale=size), "Rice distribution", sign, form.shift)
    if form.power == ex.HALF and freedom == 1:
        location = float(abs(form.scale) * ex.square_root(ex.trimmed(form.shape[1])))
        law = family("folded_normal", location=location, scale=size)
        return moved(law, "Folded normal distribution", sign, form.shift)
    base = family("noncentral_chi_square", degrees_of_freedom=freedom, noncentrality=noncentrality)
    if form.power == 1:
        return moved(base, "Noncentral chi-square distribution", form.scale, form.shift)
    q = float(form.power)
    order = INF if q > 0 else freedom / 2 / -q
    unbounded = (freedom / 2 < q, False)
    law = Transformed(base, power_map(q), (0.0, INF), singular=unbounded, moment_order=order)
    name = "Power of a noncentral chi-square distribution"
    if form.power == ex.HALF:
        name = "Noncentral chi distribution"
    return moved(law, name, form.scale, form.shift)


def _hoyt(form: Form) -> Named:
    """Z1^2 + r Z2^2 is the square of a Hoyt variable with shape sqrt(r) and spread 1 + r."""
    ratio = form.shape[0]
    shape = float(ex.square_root(ex.trimmed(ratio)))
    if form.power == ex.HALF:
        spread = float(form.scale**2 * (1 + ratio))
        law = family("hoyt", shape=shape, spread=spread)
        return moved(law, "Hoyt distribution", _rest(form)[1], form.shift)
    base = family("hoyt", shape=shape, spread=float(1 + ratio))
    q = float(2 * form.power)
    order = INF if q > 0 else 2 / -q
    law = Transformed(base, power_map(q), (0.0, INF), singular=(q > 2, False), moment_order=order)
    name = "Squared Hoyt distribution" if q == 2 else "Power of a Hoyt distribution"
    return moved(law, name, form.scale, form.shift)


def _student(form: Form) -> Named:
    freedom = float(form.shape[0])
    scale = float(abs(form.scale))
    law = family("student_t", degrees_of_freedom=freedom, location=float(form.shift), scale=scale)
    standard = form.scale == 1 and form.shift == 0
    return law, "Student t distribution" if standard else "Student t distribution, scaled and shifted"


def _exp_laplace(form: Form) -> Named:
    q = float(abs(form.power))
    base = family("laplace", location=0.0, scale=q)
    law = Transformed(base, EXP_MAP, (0.0, INF), singular=(q > 1, False), moment_order=1 / q)
    return moved(law, "Log-Laplace distribution", form.scale, form.shift)


def _inverse_gaussian(form: Form) -> Named:
    if form.power == 1:
        mean = float(abs(form.scale))
        law = family("inverse_gaussian", mean=mean, shape=float(abs(form.scale) * form.shape[0]))
        return moved(law, "Inverse Gaussian distribution", _rest(form)[1], form.shift)
    base = family("inverse_gaussian", mean=1.0, shape=float(form.shape[0]))
    law = Transformed(base, power_map(float(form.power)), (0.0, INF))
    return moved(law, "Power of an inverse Gaussian distribution", form.scale, form.shift)


def _uniforms(form: Form) -> Named:
    widths = tuple(ex.trimmed(width * abs(form.scale)) for width in form.shape)
    low = form.shift if form.scale > 0 else form.shift - sum(widths, ex.ZERO)
    if ex.all_same(list(widths)):
        widths = (widths[0],) * len(widths)
    try:
        law = UniformSum(widths)
    except ValueError as reason:
        raise NotBuilt(str(reason)) from reason
    if len(widths) > 2:
        name = "Irwin–Hall distribution" if law.equal else "Distribution of a sum of uniform variables"
        return moved(law, name, ex.ONE, low)
    short, long = sorted(widths)
    high = low + short + long
    if law.equal:
        law_of_two = family("triangular", lower=float(low), mode=float(low + short), upper=float(high))
        return law_of_two, "Triangular distribution"
    top = {"top_lower": float(low + short), "top_upper": float(low + long)}
    return family("trapezoidal", lower=float(low), upper=float(high), **top), "Trapezoidal distribution"


def _normal_product(form: Form) -> Named:
    correlation = float(form.shape[0])
    if abs(correlation) > LARGEST_CORRELATION:
        raise NotBuilt
    law = NormalProduct(correlation)
    return moved(law, "Product of two normal variables", form.scale, form.shift)


def _count(form: Form) -> Named:
    values = [float(value) for value in form.shape]
    if form.kind == "poisson":
        law, name = family("poisson", mean=values[0]), "Poisson distribution"
    elif form.kind == "binomial":
        law, name = family("binomial", trials=values[0], probability=values[1]), "Binomial distribution"
    elif form.kind == "geometric":
        law, name = family("geometric", probability=values[0]), "Geometric distribution"
    else:
        law = family("negative_binomial", successes=values[0], probability=values[1])
        name = "Negative binomial distribution"
    # the registry may count trials rather than failures
    start = ex.exact(law.support()[0])
    return moved(law, name, form.scale, form.shift - form.scale * start)


_BUILDERS: dict[str, Callable[[Form], Named]] = {
    "normal": _normal,
    "exp_normal": _lognormal,
    "gamma": _gamma,
    "log_gamma": _log_gamma,
    "exp_gamma": _exp_gamma,
    "uniform": _uniform,
    "exp_uniform": _exp_uniform,
    "f": _f,
    "log_f": _log_f,
    "beta": _beta,
    "noncentral": _noncentral,
    "hoyt": _hoyt,
    "student": _student,
    "cauchy": _located("cauchy", "Cauchy distribution"),
    "laplace": _located("laplace", "Laplace distribution"),
    "logistic": _located("logistic", "Logistic distribution"),
    "exp_laplace": _exp_laplace,
    "inverse_gaussian": _inverse_gaussian,
    "uniforms": _uniforms,
    "normal_product": _normal_product,
    "poisson": _count,
    "binomial": _count,
    "geometric": _count,
    "negative_binomial": _count,
}
