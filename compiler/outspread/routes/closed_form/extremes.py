"""Maxima and minima of independent forms: of one family where that stays inside it, else of any laws."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form.forms import Form
from outspread.routes.derived import Statement

Result = tuple[Form, Statement]


def extreme(forms: list[Form], *, largest: bool) -> Result | None:
    """The form of the maximum or minimum of independent forms where it belongs to their family."""
    if all(form.scale < 0 for form in forms):
        mirrored = extreme([form.affine(-ex.ONE, ex.ZERO) for form in forms], largest=not largest)
        return (mirrored[0].affine(-ex.ONE, ex.ZERO), mirrored[1]) if mirrored else None
    for rule in (_powers_of_exponential, _gumbels, _paretos, _uniforms, _geometrics):
        result = rule(forms, largest)
        if result is not None:
            return result
    return None


def _same_shift(forms: list[Form]) -> bool:
    return all(form.shift == forms[0].shift for form in forms)


def _powers_of_exponential(forms: list[Form], largest: bool) -> Result | None:
    """min s_i E_i^q for q > 0 (Weibull, exponential), max for q < 0 (Fréchet): Σ s_i^(-1/q) adds."""
    if any(form.kind != "gamma" or form.shape != (ex.ONE,) or form.scale <= 0 for form in forms):
        return None
    power = forms[0].power
    if not ex.all_same([form.power for form in forms]) or not _same_shift(forms) or (power > 0) == largest:
        return None
    total = sum((ex.power(form.scale, -1 / power) for form in forms), ex.ZERO)
    text = (
        "The largest of independent Fréchet variables with one shape is Fréchet with that shape."
        if largest
        else "The smallest of independent Weibull (exponential) variables with one shape has that shape too."
    )
    latex = r"s^{-1/q} = \sum_i s_i^{-1/q}, \qquad X_i = s_i E_i^{\,q}"
    return replace(forms[0], scale=ex.power(total, -power)), Statement(text, latex, "closed_form")


def _gumbels(forms: list[Form], largest: bool) -> Result | None:
    """min of m_i + s ln E_i (all mirrored for maxima): exp(-m/s) = Σ exp(-m_i/s)."""
    if largest or any(form.kind != "log_gamma" or form.shape != (ex.ONE,) for form in forms):
        return None
    scale = forms[0].scale
    if scale <= 0 or not ex.all_same([form.scale for form in forms]):
        return None
    first = forms[0].shift
    total = sum((ex.exponential((first - form.shift) / scale) for form in forms), ex.ZERO)
    text = "The extreme of independent Gumbel variables with one scale is Gumbel with that scale."
    latex = r"e^{\mp m/s} = \sum_i e^{\mp m_i/s}"
    shift = first - scale * ex.logarithm(total)
    return replace(forms[0], shift=shift), Statement(text, latex, "closed_form")


def _paretos(forms: list[Form], largest: bool) -> Result | None:
    """min s U_i^(-1/a_i) with one s: the exponents a_i add; max s U_i^(1/a_i) likewise."""
    if any(form.kind != "uniform" or form.shift != 0 or form.scale <= 0 for form in forms):
        return None
    if not ex.all_same([form.scale for form in forms]):
        return None
    signs = {form.power > 0 for form in forms}
    if signs != {largest}:
        return None
    power = 1 / sum((1 / form.power for form in forms), ex.ZERO)
    text = (
        "The largest of independent power function variables with one upper end is one too; the shapes add."
        if largest
        else "The smallest of independent Pareto variables with one minimum is one too; the shapes add."
    )
    return replace(forms[0], power=power), Statement(text, r"a = \sum_i a_i", "closed_form")


def _uniforms(forms: list[Form], largest: bool) -> Result | None:
    """Extremes of n uniforms on one interval: beta(n, 1) and beta(1, n)."""
    if any(form.kind != "uniform" or form.power != 1 or form.scale <= 0 for form in forms):
        return None
    if not ex.all_same([form.scale for form in forms]) or not _same_shift(forms):
        return None
    count = Fraction(len(forms))
    shape = (count, ex.ONE) if largest else (ex.ONE, count)
    which = "largest" if largest else "smallest"
    text = f"The {which} of {count} independent uniform variables on one interval is a beta variable."
    latex = r"X_{(n)} \sim \mathrm{Beta}(n, 1), \qquad X_{(1)} \sim \mathrm{Beta}(1, n)"
    form = Form("beta", shape, forms[0].scale, forms[0].shift)
    return form, Statement(text, latex, "closed_form")


def _geometrics(forms: list[Form], largest: bool) -> Result | None:
    if largest or any(form.kind != "geometric" or form.scale <= 0 for form in forms):
        return None
    if not ex.all_same([form.scale for form in forms]) or not _same_shift(forms):
        return None
    survival = ex.ONE
    for form in forms:
        survival *= 1 - form.shape[0]
    text = "The smallest of independent geometric variables is geometric."
    latex = r"1 - p = \prod_i (1 - p_i)"
    return replace(forms[0], shape=(ex.trimmed(1 - survival),)), Statement(text, latex, "closed_form")
