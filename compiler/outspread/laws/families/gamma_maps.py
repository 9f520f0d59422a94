"""Laws of roots, reciprocals and ratios of gamma variables: chi, Maxwell, Nakagami, inverse gamma, F."""

from __future__ import annotations

import numpy as np

from outspread.errors import LawError
from outspread.laws.families.base import Family, Parameters, ParameterSet, positive
from outspread.laws.families.gamma import gamma_error
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.shapes import INF, NAN, Moments, ScaledLaw
from outspread.laws.functions.incomplete_beta import beta_density, beta_lower, beta_lower_inverse
from outspread.laws.functions.incomplete_gamma import (
    gamma_density,
    gamma_lower,
    gamma_lower_inverse,
    gamma_upper,
    gamma_upper_inverse,
)
from outspread.laws.functions.moments import root_gamma_moments
from outspread.laws.law import Array


class RootGamma(ScaledLaw):
    """scale * sqrt(G), G gamma of this shape and scale 1."""

    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float):
        self.shape, self.scale = shape, scale
        self.relative_error = gamma_error(shape) + rounding(4 * LOG_SMALLEST)

    def standard_pdf(self, z: Array) -> Array:
        if self.shape == 0.5:
            return np.asarray(2 / np.sqrt(np.pi) * np.exp(-z * z))
        return np.asarray(2 * z * np.where(z > 0, gamma_density(self.shape, z * z), 0.0))

    def standard_cdf(self, z: Array) -> Array:
        return gamma_lower(self.shape, z * z)

    def standard_ccdf(self, z: Array) -> Array:
        return gamma_upper(self.shape, z * z)

    def standard_icdf(self, p: Array) -> Array:
        return np.sqrt(gamma_lower_inverse(self.shape, p))

    def standard_iccdf(self, q: Array) -> Array:
        return np.sqrt(gamma_upper_inverse(self.shape, q))

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.shape < 0.5, False)

    def standard_moments(self) -> Moments:
        return root_gamma_moments(self.shape)


def chi(degrees_of_freedom: float) -> RootGamma:
    return RootGamma(0.5 * degrees_of_freedom, float(np.sqrt(2.0)))


def maxwell(scale: float) -> RootGamma:
    return RootGamma(1.5, scale * float(np.sqrt(2.0)))


def nakagami(shape: float, spread: float) -> RootGamma:
    return RootGamma(shape, float(np.sqrt(spread / shape)))


class InverseGamma(ScaledLaw):
    """scale / G, G gamma of this shape and scale 1."""

    ends = (0.0, INF)

    def __init__(self, shape: float, scale: float):
        self.shape, self.scale = shape, scale
        self.moment_order = shape
        self.relative_error = gamma_error(shape) + rounding(2 * LOG_SMALLEST)

    def standard_pdf(self, z: Array) -> Array:
        density = gamma_density(self.shape, 1 / z) / (z * z)
        far = np.exp(-(self.shape + 1) * np.log(z) - 1 / z - _log_gamma(self.shape))
        return np.where(z > 0, np.nan_to_num(np.where(z > 1e100, far, density)), 0.0)

    def standard_cdf(self, z: Array) -> Array:
        return gamma_upper(self.shape, 1 / z)

    def standard_ccdf(self, z: Array) -> Array:
        return gamma_lower(self.shape, 1 / z)

    def standard_icdf(self, p: Array) -> Array:
        return 1 / gamma_upper_inverse(self.shape, p)

    def standard_iccdf(self, q: Array) -> Array:
        return 1 / gamma_lower_inverse(self.shape, q)

    def standard_moments(self) -> Moments:
        a = self.shape
        if a <= 1:
            return (INF, NAN, NAN, NAN)
        mean = 1 / (a - 1)
        if a <= 2:
            return (mean, INF, NAN, NAN)
        skewness = 4 * float(np.sqrt(a - 2)) / (a - 3) if a > 3 else INF
        kurtosis = 3 + 6 * (5 * a - 11) / ((a - 3) * (a - 4)) if a > 4 else INF
        return (mean, mean**2 / (a - 2), skewness, kurtosis)


def _log_gamma(shape: float) -> float:
    from scipy import special

    return float(special.gammaln(shape))


class FisherF(ScaledLaw):
    """Ratio of two chi-square variables, each divided by its degrees of freedom."""

    ends = (0.0, INF)

    def __init__(self, numerator_degrees_of_freedom: float, denominator_degrees_of_freedom: float):
        self.d1, self.d2 = numerator_degrees_of_freedom, denominator_degrees_of_freedom
        self.moment_order = 0.5 * self.d2
        self.relative_error = rounding(3 * LOG_SMALLEST + self.d1 + self.d2) + 1e-12

    def _fractions(self, z: Array) -> tuple[Array, Array]:
        ratio = self.d1 / self.d2 * z
        return ratio / (1 + ratio), 1 / (1 + ratio)

    def standard_pdf(self, z: Array) -> Array:
        u, v = self._fractions(z)
        a, b = 0.5 * self.d1, 0.5 * self.d2
        if self.d1 == 2:
            return np.asarray(v ** (b + 1))
        inside = beta_density(a, b, u, v) * v * v * self.d1 / self.d2
        return np.where(z > 0, inside, INF if self.d1 < 2 else 0.0)

    def standard_cdf(self, z: Array) -> Array:
        u, v = self._fractions(z)
        return beta_lower(0.5 * self.d1, 0.5 * self.d2, u, v)

    def standard_ccdf(self, z: Array) -> Array:
        u, v = self._fractions(z)
        return beta_lower(0.5 * self.d2, 0.5 * self.d1, v, u)

    def standard_icdf(self, p: Array) -> Array:
        a, b = 0.5 * self.d1, 0.5 * self.d2
        u, v = beta_lower_inverse(a, b, p), beta_lower_inverse(b, a, 1 - p)
        start = self.d2 / self.d1 * np.where((p < 0.5) & (u < 0.999), u / (1 - u), (1 - v) / v)
        return self._polish(start, p, upper=False)

    def standard_iccdf(self, q: Array) -> Array:
        a, b = 0.5 * self.d1, 0.5 * self.d2
        v, u = beta_lower_inverse(b, a, q), beta_lower_inverse(a, b, 1 - q)
        start = self.d2 / self.d1 * np.where((q < 0.5) & (v < 0.999), (1 - v) / v, u / (1 - u))
        # a fraction that underflows stands for a quantile beyond all doubles
        start = np.where((q < 0.5) & (v < 1e-305), INF, start)
        return self._polish(start, q, upper=True)

    def _polish(self, z: Array, tail: Array, *, upper: bool) -> Array:
        """Newton steps on the logarithm: the beta quantile is short of digits where its fraction nears 1."""
        for _ in range(3):
            value = self.standard_ccdf(z) if upper else self.standard_cdf(z)
            step = np.log(value / tail) * value / self.standard_pdf(z) * (-1 if upper else 1)
            use = (tail <= 0.5) & np.isfinite(step) & (np.abs(step) < 0.1 * z)
            z = np.where(use, z - step, z)
        return z

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.d1 < 2, False)

    def standard_moments(self) -> Moments:
        m, n = self.d1, self.d2
        if n <= 2:
            return (INF, NAN, NAN, NAN)
        mean = n / (n - 2)
        if n <= 4:
            return (mean, INF, NAN, NAN)
        variance = 2 * n**2 * (m + n - 2) / (m * (n - 2) ** 2 * (n - 4))
        skewness = kurtosis = INF
        if n > 6:
            root = float(np.sqrt(8 * (n - 4) / (m * (m + n - 2))))
            skewness = (2 * m + n - 2) * root / (n - 6)
        if n > 8:
            top = m * (5 * n - 22) * (m + n - 2) + (n - 4) * (n - 2) ** 2
            kurtosis = 3 + 12 * top / (m * (n - 6) * (n - 8) * (m + n - 2))
        return (mean, variance, skewness, kurtosis)


def _check_nakagami(parameters: Parameters) -> None:
    positive(parameters, "shape", "spread")
    if parameters["shape"] < 0.5:
        raise LawError(f"shape is {parameters['shape']:g}, and 0.5 or more would be right", "shape")


def _maxwell_from_mean(parameters: Parameters) -> Parameters:
    positive(parameters, "mean")
    return {"scale": parameters["mean"] * float(np.sqrt(np.pi / 8))}


_VOLUME_1 = "Johnson, Kotz and Balakrishnan (1994), Continuous Univariate Distributions 1"
_VOLUME_2 = "Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2"
_F_NAMES = ("numerator_degrees_of_freedom", "denominator_degrees_of_freedom")

FAMILIES = (
    Family(
        key="chi",
        title="Chi distribution",
        kind="continuous",
        canonical_names=("degrees_of_freedom",),
        parameter_sets=(ParameterSet(("degrees_of_freedom",)),),
        builder=chi,
        check=lambda parameters: positive(parameters, "degrees_of_freedom"),
        symbols={"degrees_of_freedom": r"\nu"},
        density_latex=r"\frac{x^{\nu-1}\,e^{-x^2/2}}{2^{\nu/2-1}\,\Gamma(\nu/2)}",
        usage="length of a vector of standard normal components",
        reference=f"{_VOLUME_1}, ch. 18",
    ),
    Family(
        key="maxwell",
        title="Maxwell distribution",
        kind="continuous",
        canonical_names=("scale",),
        parameter_sets=(ParameterSet(("scale",)), ParameterSet(("mean",), convert=_maxwell_from_mean)),
        builder=maxwell,
        check=lambda parameters: positive(parameters, "scale"),
        symbols={"scale": "a"},
        density_latex=r"\sqrt{\frac{2}{\pi}}\,\frac{x^2}{a^3}\,e^{-\frac{x^2}{2a^2}}",
        usage="length of a vector of three equal centred normal components, molecular speeds",
        reference=f"{_VOLUME_1}, ch. 18",
    ),
    Family(
        key="nakagami",
        title="Nakagami distribution",
        kind="continuous",
        canonical_names=("shape", "spread"),
        parameter_sets=(ParameterSet(("shape", "spread")),),
        builder=nakagami,
        check=_check_nakagami,
        symbols={"shape": "m", "spread": r"\Omega"},
        density_latex=r"\frac{2m^{m}}{\Gamma(m)\,\Omega^{m}}\,x^{2m-1}\,e^{-\frac{m}{\Omega}x^2}",
        usage="amplitudes of fading signals; spread is the mean square",
        reference="Nakagami (1960), in Statistical Methods in Radio Wave Propagation, 3-36",
    ),
    Family(
        key="inverse_gamma",
        title="Inverse gamma distribution",
        kind="continuous",
        canonical_names=("shape", "scale"),
        parameter_sets=(ParameterSet(("shape", "scale")),),
        builder=InverseGamma,
        check=lambda parameters: positive(parameters, "shape", "scale"),
        symbols={"shape": r"\alpha", "scale": r"\beta"},
        density_latex=r"\frac{\beta^{\alpha}}{\Gamma(\alpha)}\,x^{-\alpha-1}\,e^{-\beta/x}",
        usage="reciprocals of gamma variables, unknown variances",
        reference=f"{_VOLUME_1}, ch. 17",
    ),
    Family(
        key="f",
        title="F distribution",
        kind="continuous",
        canonical_names=_F_NAMES,
        parameter_sets=(ParameterSet(_F_NAMES),),
        builder=FisherF,
        check=lambda parameters: positive(parameters, *_F_NAMES),
        symbols=dict(zip(_F_NAMES, ("m", "n"), strict=True)),
        density_latex=(
            r"\frac{1}{B\left(\frac{m}{2},\frac{n}{2}\right)}\left(\frac{m}{n}\right)^{m/2}"
            r"x^{m/2-1}\left(1+\frac{m}{n}x\right)^{-(m+n)/2}"
        ),
        usage="ratios of sample variances",
        reference=f"{_VOLUME_2}, ch. 27",
    ),
)
