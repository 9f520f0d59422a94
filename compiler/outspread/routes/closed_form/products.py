"""Products of powers of independent forms that are again of a known kind.

Positive forms are multiplied by adding their logarithms (`sums`); forms with both signs have rules of
their own: a normal over the root of a gamma is Student, over a centred normal Cauchy. A gamma over a sum
that contains it is beta.
"""

from __future__ import annotations

from fractions import Fraction

from outspread.routes.closed_form import exact as ex
from outspread.routes.closed_form import sums
from outspread.routes.closed_form.forms import Form, exponential, logarithm
from outspread.routes.derived import Statement

Result = tuple[Form, Statement]


def product(forms: list[Form]) -> Result | None:
    """The form of the product of independent forms (at least two), each already raised to its power."""
    sign = ex.ONE
    positive = []
    for form in forms:
        if form.scale < 0 and form.shift == 0 and form.kind not in ("normal", "cauchy", "student", "laplace"):
            sign, form = -sign, form.affine(-ex.ONE, ex.ZERO)
        positive.append(form)
    result = _by_logarithms(positive) or _student(positive) or _normal_product(positive)
    result = result or _rayleigh_times_cosine(positive)
    return (result[0].affine(sign, ex.ZERO), result[1]) if result else None


def _by_logarithms(forms: list[Form]) -> Result | None:
    logs = [logarithm(form) for form in forms]
    known = [form for form in logs if form is not None]
    if len(known) < len(forms):
        return None
    added = sums.total(known)
    back = exponential(added[0]) if added else None
    if added is None or back is None:
        return None
    if back.kind == "f":
        text = "A quotient of independent gamma variables is a scaled F variable, or a power of one."
        return back, Statement(text, r"G_a / G_b \sim \frac{a}{b}\,F(2a, 2b)", "closed_form")
    text = "The logarithms of the factors are added, and the sum is of a known kind: " + added[1].text
    return back, Statement(text, added[1].latex, "closed_form")


def _student(forms: list[Form]) -> Result | None:
    """Z / sqrt(G_a): Student with 2a degrees of freedom, scaled by 1/sqrt(a)."""
    if len(forms) != 2:
        return None
    normal, gamma = forms if forms[0].kind == "normal" else forms[::-1]
    if normal.kind != "normal" or normal.shift != 0:
        return None
    if gamma.kind != "gamma" or gamma.power != -ex.HALF or gamma.shift != 0:
        return None
    freedom = 2 * gamma.shape[0]
    scale = abs(normal.scale) * gamma.scale / ex.square_root(gamma.shape[0])
    text = "A centred normal variable over the root of an independent gamma variable is a scaled Student t."
    latex = r"Z \Big/ \sqrt{G_{\nu/2}} \;=\; \sqrt{2/\nu}\; t_\nu"
    if freedom == 1:
        return Form("cauchy", scale=scale), Statement(text, latex, "closed_form")
    return Form("student", (freedom,), scale), Statement(text, latex, "closed_form")


def _normal_product(forms: list[Form]) -> Result | None:
    """The product of two independent centred normal variables (Craig 1936)."""
    if len(forms) != 2 or any(f.kind != "normal" or f.shift != 0 for f in forms):
        return None
    scale = abs(forms[0].scale * forms[1].scale)
    text = "The product of two independent centred normal variables has a Bessel function as its density."
    form = Form("normal_product", (ex.ZERO,), scale)
    return form, Statement(text, r"\sigma_1 \sigma_2\, Z_1 Z_2", "closed_form")


def _rayleigh_times_cosine(forms: list[Form]) -> Result | None:
    """A Rayleigh radius times the cosine of a uniform angle (an arcsine variable) is normal."""
    if len(forms) != 2:
        return None
    radius, cosine = forms if forms[1].kind == "beta" else forms[::-1]
    if cosine.kind != "beta" or cosine.shape != (ex.HALF, ex.HALF) or cosine.power != 1:
        return None
    if not ex.same(cosine.shift, -cosine.scale / 2) or radius.shift != 0:
        return None
    if (radius.kind, radius.shape, radius.power) != ("gamma", (ex.ONE,), ex.HALF):
        return None
    sd = abs(radius.scale * cosine.scale / 2) / ex.square_root(Fraction(2))
    text = "A Rayleigh radius times the cosine of an independent uniform angle is normal."
    latex = r"R\cos\varphi \sim \mathrm{N}(0, \sigma^2)"
    return Form("normal", scale=sd), Statement(text, latex, "closed_form")


def beta_ratio(part: Form, rest: Form, share: Fraction) -> Result | None:
    """N/(share N + M) for independent gamma variables N and M with one scale of share N and M."""
    scaled = part.affine(share, ex.ZERO)
    forms = (scaled, rest)
    if any(f.kind != "gamma" or f.power != 1 or f.shift != 0 for f in forms):
        return None
    if not ex.same(scaled.scale, rest.scale) or scaled.scale <= 0 or share <= 0:
        return None
    text = "A gamma variable over its sum with an independent one of the same scale is a beta variable."
    latex = r"G_a/(G_a + G_b) \sim \mathrm{Beta}(a, b)"
    return Form("beta", (part.shape[0], rest.shape[0]), 1 / share), Statement(text, latex, "closed_form")
