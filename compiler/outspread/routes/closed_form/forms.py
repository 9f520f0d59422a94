"""Laws in exact parameters: Y = shift + scale * V^power for a standard variable V of a few kinds.

The kinds are closed under what formulas do to them: exp, log, powers and affine maps turn one into another
(`exp(exponential)` is a power of e^G). Which sums, products and extremes stay inside is said in `sums`,
`products` and `extremes`; how a form becomes a named law in `named`.

Kinds and their shapes (G_a: gamma with shape a and scale 1; Z: standard normal; all independent):
normal (): Z · exp_normal (): e^Z · gamma (a): G_a · log_gamma (a): ln G_a · exp_gamma (a): e^(G_a)
uniform (): U on (0, 1) · exp_uniform (): e^U · f (a, b): G_a/G_b · log_f (a, b): ln of it
beta (a, b): G_a/(G_a + G_b)
noncentral (k, d): noncentral chi-square · hoyt (r): Z1^2 + r Z2^2, 0 < r < 1 · student (n) · cauchy ()
laplace () · exp_laplace (): e^V of it · inverse_gaussian (l): mean 1, shape l · uniforms (w1, …): Σ w U
normal_product (r): Z1 Z2 with correlation r · poisson (m) · binomial (n, p) · negative_binomial (r, p)
geometric (p): failures before the first success · opaque (): a law without rules (`law`)
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

from outspread.laws.law import Law
from outspread.routes.closed_form import exact as ex

TWO = Fraction(2)
#: V > 0: powers of V are defined
POSITIVE = frozenset(
    {"exp_normal", "gamma", "exp_gamma", "uniform", "exp_uniform", "f", "beta", "noncentral", "hoyt",
     "exp_laplace", "inverse_gaussian"}
)  # fmt: skip
_SYMMETRIC = frozenset({"normal", "cauchy", "student", "laplace", "logistic"})
DISCRETE = frozenset({"poisson", "binomial", "negative_binomial", "geometric"})


@dataclass(frozen=True)
class Form:
    kind: str
    shape: tuple[Fraction, ...] = ()
    scale: Fraction = ex.ONE
    shift: Fraction = ex.ZERO
    power: Fraction = ex.ONE
    law: Law | None = None  # only of an opaque form

    def affine(self, factor: Fraction, constant: Fraction) -> Form:
        """The form of constant + factor*Y, with a positive scale where the kind can be mirrored."""
        scale, shift = ex.trimmed(factor * self.scale), ex.trimmed(factor * self.shift + constant)
        if scale < 0 and self.power == 1:
            if self.kind in _SYMMETRIC:
                return replace(self, scale=-scale, shift=shift)
            if self.kind == "uniform":
                return replace(self, scale=-scale, shift=shift + scale)
            if self.kind in ("beta", "log_f"):
                start = shift + scale if self.kind == "beta" else shift
                return replace(self, shape=self.shape[::-1], scale=-scale, shift=start)
            if self.kind == "normal_product":
                return replace(self, shape=(-self.shape[0],), scale=-scale, shift=shift)
            if self.kind == "uniforms":
                return replace(self, scale=-scale, shift=shift + scale * sum(self.shape, ex.ZERO))
        return replace(self, scale=scale, shift=shift)


    def tidied(self) -> Form:
        """The same form with roots that cancelled taken for the simple numbers they are."""
        shape = tuple(ex.tidied(value) for value in self.shape)
        scale, shift, power = ex.tidied(self.scale), ex.tidied(self.shift), ex.tidied(self.power)
        return replace(self, shape=shape, scale=scale, shift=shift, power=power)


def raised(form: Form, exponent: Fraction) -> Form | None:
    """The form of Y^exponent, where it has one."""
    if exponent == 1:
        return form
    if form.kind in POSITIVE:
        return _raised_positive(form, exponent)
    if exponent == -1 and form.kind == "cauchy":
        return _reciprocal_cauchy(form)
    if ex.is_even(exponent):
        square = _square(form)
        return raised(square, exponent / 2) if square else None
    return None


def _raised_positive(form: Form, exponent: Fraction) -> Form | None:
    if form.shift != 0:
        if form.kind == "uniform" and ex.is_even(exponent) and ex.same(form.shift, -form.scale / 2):
            return raised(Form("uniform", scale=abs(form.shift)), exponent)
        return None
    if form.scale < 0 and not ex.is_whole(exponent):
        return None
    scale = ex.power(form.scale, exponent)
    return replace(form, scale=scale, power=form.power * exponent)


def _reciprocal_cauchy(form: Form) -> Form:
    """1/(m + s C) is Cauchy with location m/(m^2 + s^2) and scale s/(m^2 + s^2)."""
    size = form.shift**2 + form.scale**2
    return replace(form, scale=form.scale / size, shift=form.shift / size)


def _square(form: Form) -> Form | None:
    """The form of Y^2 for the kinds with both signs."""
    if form.kind == "normal":
        return square_of_normal(form)
    if form.shift != 0:
        return None
    if form.kind == "cauchy":
        return Form("f", (ex.HALF, ex.HALF), form.scale**2)
    if form.kind == "student":
        freedom = form.shape[0]
        return Form("f", (ex.HALF, freedom / 2), freedom * form.scale**2)
    if form.kind == "laplace":
        return Form("gamma", (ex.ONE,), form.scale**2, power=TWO)
    return None


def square_of_normal(form: Form) -> Form:
    """Z^2 is chi-square with one degree of freedom, (m + Z)^2 noncentral."""
    if form.shift == 0:
        return Form("gamma", (ex.HALF,), 2 * form.scale**2)
    return Form("noncentral", (ex.ONE, (form.shift / form.scale) ** 2), form.scale**2)


def absolute(form: Form) -> Form | None:
    if form.kind in POSITIVE and form.shift == 0:
        return form if form.scale > 0 else form.affine(-ex.ONE, ex.ZERO)
    if form.kind == "uniform" and ex.same(form.shift, -form.scale / 2):
        return Form("uniform", scale=abs(form.shift))
    square = _square(form)
    return raised(square, ex.HALF) if square else None


def logarithm(form: Form) -> Form | None:
    """The form of ln Y for a positive form."""
    if form.kind not in _LOGARITHMS or form.shift != 0 or form.scale <= 0:
        return None
    kind, sign = _LOGARITHMS[form.kind]
    shape = form.shape
    if form.kind == "uniform":
        shape = (ex.ONE,)  # -ln U is exponential
    if kind == "log_f" and shape == (ex.ONE, ex.ONE):
        kind, shape = "logistic", ()
    return Form(kind, shape, sign * form.power, ex.logarithm(form.scale))


_LOGARITHMS: dict[str, tuple[str, int]] = {
    "exp_normal": ("normal", 1),
    "gamma": ("log_gamma", 1),
    "exp_gamma": ("gamma", 1),
    "uniform": ("gamma", -1),
    "exp_uniform": ("uniform", 1),
    "f": ("log_f", 1),
    "exp_laplace": ("laplace", 1),
}
_EXPONENTIALS: dict[str, str] = {
    "normal": "exp_normal",
    "log_gamma": "gamma",
    "gamma": "exp_gamma",
    "uniform": "exp_uniform",
    "log_f": "f",
    "laplace": "exp_laplace",
    "logistic": "f",
}


def exponential(form: Form) -> Form | None:
    """The form of e^Y."""
    if form.kind not in _EXPONENTIALS or form.power != 1:
        return None
    shape = (ex.ONE, ex.ONE) if form.kind == "logistic" else form.shape
    result = Form(_EXPONENTIALS[form.kind], shape, ex.exponential(form.shift), power=form.scale)
    if result.kind == "exp_gamma" and result.shape == (ex.ONE,):
        return Form("uniform", scale=result.scale, power=-result.power)  # e^(-E) is uniform on (0, 1)
    return result
