"""Sums of independent forms that are again of a known kind.

Each rule takes forms that are already multiplied by their coefficients and returns the form of their sum
with a sentence, or None where its conditions are not met exactly. Sums of dependent terms are `gaussian`'s.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.forms import DISCRETE, Form
from outspread.routes.derived import Statement

Result = tuple[Form, Statement]
#: beyond this number of terms the sum of uniforms is left to convolution
_MOST_UNIFORMS = 20


def total(forms: list[Form]) -> Result | None:
    """The form of the sum of independent forms (at least two)."""
    shift = sum((form.shift for form in forms), ex.ZERO)
    centred = [replace(form, shift=ex.ZERO) for form in forms]
    for rule in _RULES:
        result = rule(centred)
        if result is not None:
            form, statement = result
            return replace(form, shift=form.shift + shift), statement
    return None


def _only(forms: list[Form], *kinds: str) -> bool:
    return all(form.kind in kinds and form.power == 1 for form in forms)


def _scales(forms: list[Form]) -> list[Fraction]:
    return [form.scale for form in forms]


def _normals(forms: list[Form]) -> Result | None:
    if not _only(forms, "normal"):
        return None
    sd = ex.square_root(ex.trimmed(sum((form.scale**2 for form in forms), ex.ZERO)))
    text = "A sum of independent normal variables is normal; means and variances add."
    latex = r"\mu = a_0 + \sum_i a_i \mu_i, \qquad \sigma^2 = \sum_i a_i^2 \sigma_i^2"
    return Form("normal", scale=sd), Statement(text, latex, "closed_form")


def _gammas(forms: list[Form]) -> Result | None:
    if not _only(forms, "gamma") or not ex.all_same(_scales(forms)):
        return None
    shape = sum((form.shape[0] for form in forms), ex.ZERO)
    text = "A sum of independent gamma variables with one scale is gamma with that scale; the shapes add."
    latex = r"\sum_i \Gamma(k_i, \theta) \sim \Gamma\Bigl(\sum_i k_i,\; \theta\Bigr)"
    return Form("gamma", (shape,), forms[0].scale), Statement(text, latex, "closed_form")


def _noncentrals(forms: list[Form]) -> Result | None:
    """Chi-squares with one scale, at least one of them noncentral (a central one is gamma, scale doubled)."""
    if not _only(forms, "gamma", "noncentral"):
        return None
    freedom, noncentrality = ex.ZERO, ex.ZERO
    scales = []
    for form in forms:
        central = form.kind == "gamma"
        freedom += 2 * form.shape[0] if central else form.shape[0]
        noncentrality += ex.ZERO if central else form.shape[1]
        scales.append(form.scale / 2 if central else form.scale)
    if not ex.all_same(scales):
        return None
    text = (
        "A sum of independent noncentral chi-square variables with one scale is noncentral chi-square; "
        "degrees of freedom and noncentralities add."
    )
    latex = r"\sum_i \chi'^2_{k_i}(\lambda_i) \sim \chi'^2_k(\lambda),\ k=\sum k_i,\ \lambda=\sum_i \lambda_i"
    return Form("noncentral", (freedom, noncentrality), scales[0]), Statement(text, latex, "closed_form")


def _hoyt(forms: list[Form]) -> Result | None:
    """a Z1^2 + b Z2^2 with a > b > 0: the square of a Hoyt variable."""
    if not _only(forms, "gamma") or len(forms) != 2 or any(form.shape != (ex.HALF,) for form in forms):
        return None
    small, large = sorted((form.scale / 2 for form in forms), key=abs)
    if ex.same(small, large):
        return None
    if small * large < 0:
        return _difference_of_squares(small, large)
    text = "A sum of squares of two centred independent normal variables is the square of a Hoyt variable."
    latex = r"\sigma_1^2 Z_1^2 + \sigma_2^2 Z_2^2, \qquad q = \sigma_2/\sigma_1"
    return Form("hoyt", (small / large,), large), Statement(text, latex, "closed_form")


def _difference_of_squares(small: Fraction, large: Fraction) -> Result:
    """a Z1^2 - b Z2^2 is a product of two normal variables with the correlation (a - b)/(a + b)."""
    scale = abs(small) + abs(large)
    text = "The difference of two squares of centred normal variables is a product of two normal variables."
    form = Form("normal_product", ((small + large) / scale,), scale)
    return form, Statement(text, r"a Z_1^2 - b Z_2^2", "closed_form")


def _exponential_difference(forms: list[Form]) -> Result | None:
    if not _only(forms, "gamma") or len(forms) != 2 or any(form.shape != (ex.ONE,) for form in forms):
        return None
    if not ex.same(forms[0].scale, -forms[1].scale):
        return None
    text = "The difference of two independent exponential variables with one mean is a Laplace variable."
    return Form("laplace", scale=abs(forms[0].scale)), Statement(text, r"E_1 - E_2", "closed_form")


def _log_gamma_difference(forms: list[Form]) -> Result | None:
    """s ln G_a - s ln G_b = s ln(G_a/G_b): logistic for a = b = 1 (difference of Gumbel variables)."""
    if not _only(forms, "log_gamma") or len(forms) != 2 or not ex.same(forms[0].scale, -forms[1].scale):
        return None
    first, second = forms
    if first.shape == second.shape == (ex.ONE,):
        text = "The difference of two independent Gumbel variables with one scale is logistic."
        form = Form("logistic", scale=abs(first.scale))
        return form, Statement(text, r"s\,(\ln E_1 - \ln E_2)", "closed_form")
    text = "The difference of the logarithms of two gamma variables is the logarithm of their ratio."
    form = Form("log_f", (first.shape[0], second.shape[0]), first.scale)
    return form, Statement(text, r"s\,\ln(G_a/G_b)", "closed_form")


def _cauchys(forms: list[Form]) -> Result | None:
    if not _only(forms, "cauchy"):
        return None
    scale = sum((abs(form.scale) for form in forms), ex.ZERO)
    text = "A linear combination of independent Cauchy variables is Cauchy; locations and scales add."
    latex = r"\sum_i a_i C_i \sim \mathrm{Cauchy}\Bigl(\sum_i a_i m_i,\ \sum_i |a_i| s_i\Bigr)"
    return Form("cauchy", scale=scale), Statement(text, latex, "closed_form")


def _levys(forms: list[Form]) -> Result | None:
    """c/Z^2 = (c/2)/G_(1/2): the roots of the scales add."""
    if any(form.kind != "gamma" or form.power != -1 or form.shape != (ex.HALF,) for form in forms):
        return None
    sign = 1 if forms[0].scale > 0 else -1
    if any(form.scale * sign <= 0 for form in forms):
        return None
    root = sum((ex.square_root(abs(form.scale)) for form in forms), ex.ZERO)
    text = "A sum of independent Lévy variables is a Lévy variable; the square roots of the scales add."
    form = Form("gamma", (ex.HALF,), sign * root**2, power=-ex.ONE)
    return form, Statement(text, r"\sqrt{c} = \sum_i \sqrt{c_i}", "closed_form")


def _inverse_gaussians(forms: list[Form]) -> Result | None:
    """IG(mu_i, lambda_i) with one lambda_i/mu_i^2 (Tweedie 1957); V has mean 1 and shape l = lambda/mu."""
    if not _only(forms, "inverse_gaussian"):
        return None
    ratios = [form.shape[0] / form.scale for form in forms]
    if not ex.all_same(ratios):
        return None
    mean = sum(_scales(forms), ex.ZERO)
    text = (
        "A sum of independent inverse Gaussian variables with one ratio of shape to squared mean is "
        "inverse Gaussian with that ratio; the means add."
    )
    latex = r"\mu = \sum_i \mu_i, \qquad \lambda/\mu^2 = \lambda_i/\mu_i^2"
    return Form("inverse_gaussian", (ratios[0] * mean,), mean), Statement(text, latex, "closed_form")


def _counts(forms: list[Form]) -> Result | None:
    """Poisson, binomial, negative binomial and geometric counts with one factor."""
    if not all(form.kind in DISCRETE for form in forms) or not ex.all_same(_scales(forms)):
        return None
    kinds = {form.kind for form in forms}
    scale = forms[0].scale
    if kinds == {"poisson"}:
        mean = sum((form.shape[0] for form in forms), ex.ZERO)
        text = "A sum of independent Poisson variables is Poisson; the means add."
        return Form("poisson", (mean,), scale), Statement(text, r"\mu = \sum_i \mu_i", "closed_form")
    if not ex.all_same([form.shape[-1] for form in forms]):
        return None
    probability = forms[0].shape[-1]
    if kinds == {"binomial"}:
        trials = sum((form.shape[0] for form in forms), ex.ZERO)
        text = "A sum of independent binomial variables with one probability is binomial; the trials add."
        form = Form("binomial", (trials, probability), scale)
        return form, Statement(text, r"n = \sum_i n_i", "closed_form")
    if kinds <= {"negative_binomial", "geometric"}:
        successes = sum((f.shape[0] if f.kind == "negative_binomial" else ex.ONE for f in forms), ex.ZERO)
        text = "A sum of independent negative binomial variables with one probability is negative binomial."
        form = Form("negative_binomial", (successes, probability), scale)
        return form, Statement(text, r"r = \sum_i r_i", "closed_form")
    return None


def _uniforms(forms: list[Form]) -> Result | None:
    """Σ w_i U_i; w U with w < 0 is w + |w| U."""
    if len(forms) > _MOST_UNIFORMS or not _only(forms, "uniform", "uniforms"):
        return None
    widths: list[Fraction] = []
    shift = ex.ZERO
    for form in forms:
        own = [form.scale] if form.kind == "uniform" else [form.scale * width for width in form.shape]
        shift += sum((width for width in own if width < 0), ex.ZERO)
        widths.extend(abs(width) for width in own)
    text = "The density of a sum of independent uniform variables is a B-spline."
    latex = r"S = \sum_i a_i + \sum_i w_i U_i, \qquad U_i \sim \mathrm{U}(0,1)"
    form = Form("uniforms", tuple(sorted(widths)), ex.ONE, shift)
    return form, Statement(text, latex, "closed_form")


_RULES: tuple[Callable[[list[Form]], Result | None], ...] = (
    _normals,
    _gammas,
    _noncentrals,
    _hoyt,
    _exponential_difference,
    _log_gamma_difference,
    _cauchys,
    _levys,
    _inverse_gaussians,
    _counts,
    _uniforms,
)
