"""Laws of lengths of normal vectors that are not centred or not round: Rice, Hoyt, noncentral chi-square."""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.families.base import Family, Parameters, ParameterSet, not_negative, positive
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.integral import IntegralLaw
from outspread.laws.families.shapes import INF, Moments
from outspread.laws.functions.bessel import log_scaled_bessel
from outspread.laws.law import Array


class Rice(IntegralLaw):
    """The length of a vector of two normal components of this standard deviation, its mean at `offset`."""

    ends = (0.0, INF)

    def __init__(self, offset: float, scale: float):
        self.scale = scale
        self.ratio = offset / scale
        self.centre = float(np.sqrt(self.ratio**2 + 1))
        self.relative_error = rounding(2 * LOG_SMALLEST + 40 * self.ratio) + 2e-14

    def standard_pdf(self, z: Array) -> Array:
        from scipy import special

        return np.asarray(z * np.exp(-0.5 * (z - self.ratio) ** 2) * special.i0e(z * self.ratio))


class Hoyt(IntegralLaw):
    """The length of a vector of two centred normal components with sd ratio `shape`; E X² = spread."""

    ends = (0.0, INF)
    relative_error = rounding(3 * LOG_SMALLEST) + 2e-14

    def __init__(self, shape: float, spread: float):
        self.scale = float(np.sqrt(spread))
        self.shape = shape
        self.centre, self.spread = 0.7, 0.5

    def standard_pdf(self, z: Array) -> Array:
        from scipy import special

        q = self.shape
        square = z * z
        bessel = special.i0e((1 - q) * (1 + q) * (1 + q * q) / (4 * q * q) * square)
        return np.asarray((1 + q * q) / q * z * np.exp(-0.5 * (1 + q * q) * square) * bessel)


class NoncentralChiSquare(IntegralLaw):
    """The sum of squares of normal variables of unit variance whose squared means add up to noncentrality."""

    ends = (0.0, INF)

    def __init__(self, degrees_of_freedom: float, noncentrality: float):
        self.nu, self.noncentrality = degrees_of_freedom, noncentrality
        self.centre = degrees_of_freedom + noncentrality
        self.spread = float(np.sqrt(2 * (degrees_of_freedom + 2 * noncentrality)))
        magnitude = degrees_of_freedom + np.sqrt(noncentrality)
        self.relative_error = rounding(3 * LOG_SMALLEST + 40 * magnitude) + 1e-13

    def standard_pdf(self, z: Array) -> Array:
        from scipy import special

        order = 0.5 * self.nu - 1
        root = np.sqrt(z * self.noncentrality)
        log_bessel = log_scaled_bessel(order, root)
        exponent = -0.5 * (np.sqrt(z) - np.sqrt(self.noncentrality)) ** 2
        return np.asarray(0.5 * np.exp(exponent + log_bessel + special.xlogy(order, 0.5 * z)))

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.nu < 2, False)

    def standard_moments(self) -> Moments:
        nu, c = self.nu, self.noncentrality
        variance = 2 * (nu + 2 * c)
        skewness = 8 * (nu + 3 * c) / variance**1.5
        return (nu + c, variance, float(skewness), 3 + 48 * (nu + 4 * c) / variance**2)


def _hoyt_from_sds(parameters: Parameters) -> Parameters:
    positive(parameters, "first_sd", "second_sd")
    small, large = sorted((parameters["first_sd"], parameters["second_sd"]))
    return {"shape": small / large, "spread": small**2 + large**2}


def _check_rice(parameters: Parameters) -> None:
    positive(parameters, "scale")
    not_negative(parameters, "offset")


def _check_hoyt(parameters: Parameters) -> None:
    positive(parameters, "shape", "spread")
    if parameters["shape"] > 1:
        raise LawError(f"shape is {parameters['shape']:g}, and at most 1 would be right", "shape")


def _check_noncentral(parameters: Parameters) -> None:
    positive(parameters, "degrees_of_freedom")
    not_negative(parameters, "noncentrality")


FAMILIES = (
    Family(
        key="rice",
        title="Rice distribution",
        kind="continuous",
        canonical_names=("offset", "scale"),
        parameter_sets=(ParameterSet(("offset", "scale")),),
        builder=Rice,
        check=_check_rice,
        symbols={"offset": r"\nu", "scale": r"\sigma"},
        density_latex=(
            r"\frac{x}{\sigma^2}\,e^{-\frac{x^2+\nu^2}{2\sigma^2}}\,I_0\left(\frac{x\nu}{\sigma^2}\right)"
        ),
        usage="radial offsets about a shifted centre, fading with a direct path",
        reference="Rice (1945), Bell System Technical Journal 24, eq. 3.10-11",
    ),
    Family(
        key="hoyt",
        title="Hoyt distribution",
        kind="continuous",
        canonical_names=("shape", "spread"),
        parameter_sets=(
            ParameterSet(("shape", "spread")),
            ParameterSet(("first_sd", "second_sd"), convert=_hoyt_from_sds),
        ),
        builder=Hoyt,
        check=_check_hoyt,
        symbols={"shape": "q", "spread": r"\Omega"},
        density_latex=(
            r"\frac{(1+q^2)\,x}{q\,\Omega}\,e^{-\frac{(1+q^2)^2x^2}{4q^2\Omega}}"
            r"\,I_0\left(\frac{(1-q^4)\,x^2}{4q^2\Omega}\right)"
        ),
        usage="radial offsets with unequal centred components",
        reference="Hoyt (1947), Bell System Technical Journal 26, 318-359",
    ),
    Family(
        key="noncentral_chi_square",
        title="Noncentral chi-square distribution",
        kind="continuous",
        canonical_names=("degrees_of_freedom", "noncentrality"),
        parameter_sets=(ParameterSet(("degrees_of_freedom", "noncentrality")),),
        builder=NoncentralChiSquare,
        check=_check_noncentral,
        symbols={"degrees_of_freedom": r"\nu", "noncentrality": r"\lambda"},
        density_latex=(
            r"\frac{1}{2}\,e^{-\frac{x+\lambda}{2}}\left(\frac{x}{\lambda}\right)^{\frac{\nu}{4}-\frac{1}{2}}"
            r"I_{\nu/2-1}\left(\sqrt{\lambda x}\right)"
        ),
        usage="sums of squares of shifted normal variables, powers of a signal in noise",
        reference="Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 29",
    ),
)
