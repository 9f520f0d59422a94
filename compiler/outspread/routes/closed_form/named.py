"""What a recognised formula hands on: the law, its name and source, and its published density.

The density in LaTeX is in the variable y with the parameters' values beside it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from math import log10

import numpy as np

from outspread.laws.extremes import IndependentExtreme
from outspread.laws.law import Array, Law
from outspread.laws.transformed import AffineLaw
from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.building import build
from outspread.routes.closed_form.densities import density_of
from outspread.routes.closed_form.forms import Form
from outspread.routes.derived import Statement


@dataclass(frozen=True)
class ClosedForm:
    """The law of a formula in closed form.

    `derivation` says how the parameters follow; `density` is the published formula `density_latex` coded
    apart from the law, to be compared with `law.pdf` (for a discrete law it is the probability mass).
    """

    law: Law
    name: str
    source: str
    derivation: tuple[Statement, ...]
    density_latex: str
    density: Callable[[Array], Array]


# Sources are cited from memory, by chapter where equation numbers are not certain.
_VOLUME_1 = "Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 1 (1994)"
_VOLUME_2 = "Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 2 (1995)"
_DISCRETE = "Johnson, Kemp and Kotz, Univariate Discrete Distributions (2005)"
_SOURCES: dict[str, str] = {
    "normal": f"{_VOLUME_1}, ch. 13",
    "exp_normal": f"{_VOLUME_1}, ch. 14",
    "gamma": f"{_VOLUME_1}, ch. 17; Stacy, Annals of Mathematical Statistics 33 (1962) 1187–1192 for powers",
    "log_gamma": f"{_VOLUME_2}, ch. 22",
    "exp_gamma": "Springer, The Algebra of Random Variables (1979), ch. 4",
    "uniform": f"{_VOLUME_2}, ch. 26 (powers: {_VOLUME_1}, ch. 20)",
    "exp_uniform": f"{_VOLUME_2}, ch. 26",
    "f": f"{_VOLUME_2}, ch. 27",
    "log_f": "Fisher, Proceedings of the International Congress of Mathematicians, Toronto (1924) 805–813",
    "beta": f"{_VOLUME_2}, ch. 25",
    "noncentral": f"{_VOLUME_2}, ch. 29",
    "hoyt": "Hoyt, Proceedings of the IRE 35 (1947) 1115–1119",
    "student": f"{_VOLUME_2}, ch. 28",
    "cauchy": f"{_VOLUME_1}, ch. 16",
    "laplace": f"{_VOLUME_2}, ch. 24",
    "logistic": f"{_VOLUME_2}, ch. 23",
    "exp_laplace": f"{_VOLUME_2}, ch. 24",
    "inverse_gaussian": f"{_VOLUME_1}, ch. 15",
    "uniforms": f"{_VOLUME_2}, ch. 26; de Boor, Journal of Approximation Theory 6 (1972) 50–62",
    "normal_product": "Craig, Annals of Mathematical Statistics 7 (1936) 1–15",
    "poisson": f"{_DISCRETE}, ch. 4",
    "binomial": f"{_DISCRETE}, ch. 3",
    "negative_binomial": f"{_DISCRETE}, ch. 5",
    "geometric": f"{_DISCRETE}, ch. 5",
    "opaque": "David and Nagaraja, Order Statistics (2003), section 2.1",
}
_RICE = "Rice, Bell System Technical Journal 24 (1945) 46–156, eq. 3.10-11"

#: density of V in v with the shapes as named
_DENSITIES: dict[str, tuple[str, tuple[str, ...]]] = {
    "normal": (r"\frac{1}{\sqrt{2\pi}}\,e^{-v^2/2}", ()),
    "exp_normal": (r"\frac{1}{v\sqrt{2\pi}}\,e^{-(\ln v)^2/2}", ()),
    "gamma": (r"\frac{v^{a-1}e^{-v}}{\Gamma(a)}", ("a",)),
    "log_gamma": (r"\frac{e^{a v - e^{v}}}{\Gamma(a)}", ("a",)),
    "exp_gamma": (r"\frac{(\ln v)^{a-1}}{\Gamma(a)\,v^2}\quad (v>1)", ("a",)),
    "uniform": (r"1 \quad (0<v<1)", ()),
    "exp_uniform": (r"\frac{1}{v}\quad (1<v<e)", ()),
    "f": (r"\frac{v^{a-1}(1+v)^{-a-b}}{B(a,b)}", ("a", "b")),
    "log_f": (r"\frac{e^{a v}(1+e^{v})^{-a-b}}{B(a,b)}", ("a", "b")),
    "beta": (r"\frac{v^{a-1}(1-v)^{b-1}}{B(a,b)}\quad (0<v<1)", ("a", "b")),
    "noncentral": (
        r"\tfrac12 e^{-(v+\delta)/2}\left(\frac{v}{\delta}\right)^{k/4-1/2}"
        r" I_{k/2-1}\bigl(\sqrt{\delta v}\bigr)",
        ("k", r"\delta"),
    ),
    "hoyt": (
        r"\frac{1}{2\sqrt{r}}\,e^{-\frac{(1+r)v}{4r}}\,I_0\left(\frac{(1-r)v}{4r}\right)",
        ("r",),
    ),
    "student": (
        r"\frac{\Gamma\left(\frac{\nu+1}{2}\right)}{\sqrt{\nu\pi}\,\Gamma\left(\frac{\nu}{2}\right)}"
        r"\left(1+\frac{v^2}{\nu}\right)^{-\frac{\nu+1}{2}}",
        (r"\nu",),
    ),
    "cauchy": (r"\frac{1}{\pi(1+v^2)}", ()),
    "laplace": (r"\tfrac12 e^{-|v|}", ()),
    "logistic": (r"\frac{e^{-v}}{(1+e^{-v})^2}", ()),
    "exp_laplace": (r"\frac{1}{2v}\,e^{-|\ln v|}", ()),
    "inverse_gaussian": (
        r"\sqrt{\frac{\lambda}{2\pi v^3}}\;e^{-\frac{\lambda(v-1)^2}{2v}}",
        (r"\lambda",),
    ),
    "normal_product": (
        r"\frac{1}{\pi\sqrt{1-\rho^2}}\,e^{\frac{\rho v}{1-\rho^2}}\,K_0\left(\frac{|v|}{1-\rho^2}\right)",
        (r"\rho",),
    ),
    "poisson": (r"\frac{m^v e^{-m}}{v!}", ("m",)),
    "binomial": (r"\binom{n}{v}p^v(1-p)^{n-v}", ("n", "p")),
    "negative_binomial": (r"\frac{\Gamma(v+r)}{v!\,\Gamma(r)}p^r(1-p)^v", ("r", "p")),
    "geometric": (r"p\,(1-p)^v", ("p",)),
}

#: what V is, in words
_VARIABLES: dict[str, str] = {
    "normal": "a standard normal variable",
    "exp_normal": "the exponential of a standard normal variable",
    "gamma": "a gamma variable with shape $a$ and scale 1",
    "log_gamma": "the logarithm of a gamma variable with shape $a$ and scale 1",
    "exp_gamma": "the exponential of a gamma variable with shape $a$ and scale 1",
    "uniform": "uniform on (0, 1)",
    "exp_uniform": "the exponential of a variable that is uniform on (0, 1)",
    "f": "the quotient of gamma variables with shapes $a$ and $b$ and one scale",
    "log_f": "the logarithm of the quotient of gamma variables with shapes $a$ and $b$ and one scale",
    "beta": "a beta variable with shapes $a$ and $b$ on (0, 1)",
    "noncentral": r"noncentral chi-square with $k$ degrees of freedom and noncentrality $\delta$",
    "hoyt": "the sum $Z_1^2 + r Z_2^2$ of squares of two independent standard normal variables",
    "student": r"a Student t variable with $\nu$ degrees of freedom",
    "cauchy": "a standard Cauchy variable",
    "laplace": "a standard Laplace variable",
    "logistic": "a standard logistic variable",
    "exp_laplace": "the exponential of a standard Laplace variable",
    "inverse_gaussian": r"an inverse Gaussian variable with mean 1 and shape $\lambda$",
    "uniforms": "the sum $w_1 U_1 + w_2 U_2 + \\dots$ of independent uniform variables on (0, 1)",
    "normal_product": r"the product of two standard normal variables with correlation $\rho$",
    "poisson": "a Poisson count with mean $m$",
    "binomial": "a binomial count of $n$ trials with probability $p$",
    "negative_binomial": "the number of failures before success $r$, each success with probability $p$",
    "geometric": "the number of failures before the first success, which has probability $p$",
}


def closed_form(form: Form, trail: tuple[Statement, ...], inputs: tuple[str, ...]) -> ClosedForm | None:
    """The named result; None for a law without a name of its own (a map of one input of another family)."""
    if form.kind == "opaque":
        return _extreme(form, trail)
    form = form.tidied()
    law, name = build(form)
    source = _RICE if name == "Rice distribution" else _SOURCES[form.kind]
    text = f"The result: {name}, with $V$ {_VARIABLES[form.kind]}."
    parameters = Statement(text, _parametrised(form), "density")
    return ClosedForm(law, name, source, (*trail, parameters), _latex(form), density_of(form))


def law_of(form: Form) -> Law:
    return build(form.tidied())[0]


def _extreme(form: Form, trail: tuple[Statement, ...]) -> ClosedForm | None:
    law = form.law
    if not isinstance(law, IndependentExtreme):
        return None
    result: Law = law
    if form.scale != 1 or form.shift != 0:
        result = AffineLaw(law, float(form.scale), float(form.shift))
    word = "maximum" if law.largest else "minimum"
    power = r"F_j(y)" if law.largest else r"\bigl(1 - F_j(y)\bigr)"
    latex = rf"f_Y(y) = \sum_i f_i(y) \prod_{{j \ne i}} {power}"
    scale, shift = float(form.scale), float(form.shift)

    def density(y: Array) -> Array:
        x = (np.asarray(y, float) - shift) / scale
        if law.continuous_mass == 0:
            before = np.nextafter(x, -np.inf)
            return np.asarray(law.cdf(x) - law.cdf(before))
        sides = [part.cdf(x) if law.largest else part.ccdf(x) for part in law.laws]
        total = np.zeros_like(x)
        for i, part in enumerate(law.laws):
            others = np.ones_like(x)
            for j, side in enumerate(sides):
                others = others * side if j != i else others
            total = total + part.pdf(x) * others
        return np.asarray(total / abs(scale))

    name = f"Distribution of the {word} of independent variables"
    return ClosedForm(result, name, _SOURCES["opaque"], trail, latex, density)


def _parametrised(form: Form) -> str:
    """Y in terms of V and its shapes."""
    inner = "V" if form.power == 1 else rf"V^{{{_number(form.power)}}}"
    factor = "" if form.scale == 1 else _number(form.scale) + r"\,"
    start = "" if form.shift == 0 else _number(form.shift) + " + "
    return f"Y = {start}{factor}{inner}" + _shapes(form)


def _shapes(form: Form) -> str:
    if form.kind == "uniforms":
        widths = r",\,".join(_number(width) for width in form.shape)
        return rf", \quad w = ({widths})"
    symbols = _DENSITIES[form.kind][1]
    pairs = [f"{symbol} = {_number(value)}" for symbol, value in zip(symbols, form.shape, strict=True)]
    return "".join(rf",\ {pair}" for pair in pairs)


def _latex(form: Form) -> str:
    """f_Y(y) through the density of V; the usual formula itself where Y is V up to location and scale."""
    special = _usual(form)
    if special is not None:
        return special
    if form.kind == "uniforms":
        base = (
            r"\frac{1}{(n-1)!\prod_i w_i}"
            r"\sum_{S}(-1)^{|S|}\Bigl(v-\sum_{i\in S}w_i\Bigr)_+^{n-1}"
        )
    else:
        base = _DENSITIES[form.kind][0]
    moved = "y" if form.shift == 0 else rf"y {'-' if form.shift > 0 else '+'} {_number(abs(form.shift))}"
    inverse = moved if form.scale == 1 else rf"\frac{{{moved}}}{{{_number(form.scale)}}}"
    if form.power != 1:
        grouped = inverse if inverse == "y" else rf"\left({inverse}\right)"
        inverse = rf"{grouped}^{{{_number(1 / form.power)}}}"
    discrete = form.kind in ("poisson", "binomial", "negative_binomial", "geometric")
    if discrete:
        return rf"P(Y=y) = {base}, \quad v = {inverse}{_shapes(form)}"
    slope = "" if form.power == 1 and abs(form.scale) == 1 else r"\left|\frac{dv}{dy}\right| "
    return rf"f_Y(y) = {slope}{base}, \quad v = {inverse}{_shapes(form)}"


def _usual(form: Form) -> str | None:
    """The textbook formula of the best known cases, with the values of its parameters."""
    s, m = form.scale, form.shift
    root_two = ex.square_root(Fraction(2))
    if form.kind == "normal":
        formula = r"\frac{1}{\sigma\sqrt{2\pi}}\,e^{-\frac{(y-\mu)^2}{2\sigma^2}}"
        return _with(formula, {r"\mu": m, r"\sigma": abs(s)})
    if m != 0 or s < 0:
        return None
    if form.kind == "exp_normal":
        formula = r"\frac{1}{y\,\sigma\sqrt{2\pi}}\,e^{-\frac{(\ln y-\mu)^2}{2\sigma^2}}"
        return _with(formula, {r"\mu": ex.logarithm(s), r"\sigma": abs(form.power)})
    if form.kind == "gamma" and form.power == 1:
        if form.shape == (ex.ONE,):
            return _with(r"\frac{1}{\theta}\,e^{-y/\theta}", {r"\theta": s})
        formula = r"\frac{y^{k-1}e^{-y/\theta}}{\Gamma(k)\,\theta^{k}}"
        return _with(formula, {"k": form.shape[0], r"\theta": s})
    if form.kind == "gamma" and form.shape == (ex.ONE,) and form.power == ex.HALF:
        return _with(r"\frac{y}{\sigma^2}\,e^{-\frac{y^2}{2\sigma^2}}", {r"\sigma": s / root_two})
    if form.kind == "noncentral" and form.power == ex.HALF and form.shape[0] == 2:
        formula = (
            r"\frac{y}{\sigma^2}\,e^{-\frac{y^2+\nu^2}{2\sigma^2}}"
            r"\,I_0\left(\frac{y\,\nu}{\sigma^2}\right)"
        )
        return _with(formula, {r"\nu": s * ex.square_root(ex.trimmed(form.shape[1])), r"\sigma": s})
    if form.kind == "hoyt" and form.power == ex.HALF:
        formula = (
            r"\frac{y}{\sigma_1\sigma_2}\,e^{-\frac{y^2}{4}\left(\frac{1}{\sigma_1^2}+\frac{1}{\sigma_2^2}\right)}\,"
            r"I_0\left(\frac{y^2}{4}\left(\frac{1}{\sigma_2^2}-\frac{1}{\sigma_1^2}\right)\right)"
        )
        small = s * ex.square_root(ex.trimmed(form.shape[0]))
        return _with(formula, {r"\sigma_1": s, r"\sigma_2": small})
    return None


def _with(formula: str, values: dict[str, Fraction]) -> str:
    listed = r",\ ".join(f"{symbol} = {_number(value)}" for symbol, value in values.items())
    return rf"f_Y(y) = {formula}, \quad {listed}"


def _number(value: Fraction) -> str:
    """A number in LaTeX: a short fraction as it is, else eight digits."""
    if value.denominator <= 12 and abs(value.numerator) < 1000:
        if value.denominator == 1:
            return str(value.numerator)
        if value.denominator not in (2, 4, 5, 8, 10):
            sign = "-" if value < 0 else ""
            return rf"{sign}\tfrac{{{abs(value.numerator)}}}{{{value.denominator}}}"
    number = float(value)
    if number == 0:
        return "0"
    exponent = int(np.floor(log10(abs(number))))
    if -4 <= exponent < 7:
        return f"{number:.8g}"
    return rf"{number / 10.0**exponent:.8g}\times 10^{{{exponent}}}"
