"""Laws on an interval with a closed distribution function: power function, Kumaraswamy, log-uniform."""

from __future__ import annotations

import numpy as np

from outspread.laws.families.base import Family, Parameters, ParameterSet, ascending, positive
from outspread.laws.families.hazard import LOG_SMALLEST, rounding
from outspread.laws.families.shapes import IntervalLaw, Moments
from outspread.laws.functions.moments import from_raw
from outspread.laws.law import Array


def _logarithm(u: Array, v: Array) -> Array:
    """log u, from v = 1 - u where u is near 1."""
    return np.where(v < 0.5, np.log1p(-np.minimum(v, 0.5)), np.log(u))


class Kumaraswamy(IntervalLaw):
    """(1 - (1 - P)^(1/beta))^(1/alpha) on the interval's fraction, P uniform."""

    def __init__(self, alpha: float, beta: float, lower: float, upper: float):
        super().__init__(lower, upper)
        self.alpha, self.beta = alpha, beta
        self.relative_error = rounding(2 * LOG_SMALLEST + alpha + beta)

    def _log_rest(self, u: Array, v: Array) -> Array:
        """log(1 - u^alpha)."""
        log_power = self.alpha * _logarithm(u, v)
        return np.where(log_power > -0.7, np.log(-np.expm1(log_power)), np.log1p(-np.exp(log_power)))

    def unit_pdf(self, u: Array, v: Array) -> Array:
        first = u ** (self.alpha - 1) if self.alpha != 1 else np.ones_like(u)
        rest = self._log_rest(u, v)
        second = np.exp((self.beta - 1) * rest) if self.beta != 1 else np.ones_like(u)
        return np.asarray(self.alpha * self.beta * first * second)

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return -np.expm1(self.beta * self._log_rest(u, v))

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return np.exp(self.beta * self._log_rest(u, v))

    def unit_icdf(self, p: Array) -> Array:
        power = -np.expm1(np.log1p(-p) / self.beta)
        return np.asarray(power ** (1 / self.alpha))

    def unit_iccdf(self, q: Array) -> Array:
        # v = 1 - (1 - q^(1/beta))^(1/alpha)
        return -np.expm1(np.log1p(-(q ** (1 / self.beta))) / self.alpha)

    def singular_ends(self) -> tuple[bool, bool]:
        return (self.alpha < 1, self.beta < 1)

    def unit_moments(self) -> Moments:
        return from_raw(
            lambda mp, k: mp.mpf(self.beta) * mp.beta(1 + k / mp.mpf(self.alpha), mp.mpf(self.beta))
        )


class PowerFunction(Kumaraswamy):
    """P^(1/shape) on the interval's fraction, P uniform."""

    def __init__(self, shape: float, lower: float, upper: float):
        super().__init__(shape, 1.0, lower, upper)

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return np.exp(self.alpha * _logarithm(u, v))

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        return -np.expm1(self.alpha * _logarithm(u, v))

    def unit_icdf(self, p: Array) -> Array:
        return np.asarray(p ** (1 / self.alpha))

    def unit_iccdf(self, q: Array) -> Array:
        return -np.expm1(np.log1p(-q) / self.alpha)


class LogUniform(IntervalLaw):
    """exp(uniform): every factor between the limits equally likely."""

    relative_error = 1e-14

    def __init__(self, lower: float, upper: float):
        super().__init__(lower, upper)
        self.span = float(np.log1p(self.width / lower))

    def unit_pdf(self, u: Array, v: Array) -> Array:
        return np.asarray(self.width / (self.span * (self.lower + self.width * u)))

    def unit_cdf(self, u: Array, v: Array) -> Array:
        return np.log1p(u * (self.width / self.lower)) / self.span

    def unit_ccdf(self, u: Array, v: Array) -> Array:
        near = -np.log1p(-np.minimum(v, 0.5) * (self.width / self.upper))
        far = np.log(self.upper) - np.log(self.lower + self.width * u)
        return np.asarray(np.where(v < 0.5, near, far) / self.span)

    def unit_icdf(self, p: Array) -> Array:
        return np.asarray(np.expm1(p * self.span) * (self.lower / self.width))

    def unit_iccdf(self, q: Array) -> Array:
        return np.asarray(-np.expm1(-q * self.span) * (self.upper / self.width))

    def unit_moments(self) -> Moments:
        start = self.lower / self.width
        mean, variance, skewness, kurtosis = from_raw(
            lambda mp, k: (
                ((mp.mpf(self.upper) / self.width) ** k - mp.mpf(start) ** k)
                / (k * mp.log(mp.mpf(self.upper) / self.lower))
            ),
            digits=100,
        )
        return (mean - start, variance, skewness, kurtosis)


def _check_power(parameters: Parameters) -> None:
    positive(parameters, "shape")
    ascending(parameters, "lower", "upper")


def _check_kumaraswamy(parameters: Parameters) -> None:
    positive(parameters, "alpha", "beta")
    ascending(parameters, "lower", "upper")


def _check_log_uniform(parameters: Parameters) -> None:
    positive(parameters, "lower")
    ascending(parameters, "lower", "upper")


_UNIT = {"lower": 0.0, "upper": 1.0}

FAMILIES = (
    Family(
        key="power_function",
        title="Power-function distribution",
        kind="continuous",
        canonical_names=("shape", "lower", "upper"),
        parameter_sets=(ParameterSet(("shape", "lower", "upper"), _UNIT),),
        builder=PowerFunction,
        check=_check_power,
        symbols={"shape": "k", "lower": "a", "upper": "b"},
        density_latex=r"\frac{k}{b-a}\left(\frac{x-a}{b-a}\right)^{k-1}",
        usage="bounded quantities that crowd towards one limit; largest of several uniform ones",
        reference="Johnson, Kotz and Balakrishnan (1995), Continuous Univariate Distributions 2, ch. 25",
    ),
    Family(
        key="kumaraswamy",
        title="Kumaraswamy distribution",
        kind="continuous",
        canonical_names=("alpha", "beta", "lower", "upper"),
        parameter_sets=(ParameterSet(("alpha", "beta", "lower", "upper"), _UNIT),),
        builder=Kumaraswamy,
        check=_check_kumaraswamy,
        symbols={"alpha": r"\alpha", "beta": r"\beta", "lower": "a", "upper": "b"},
        density_latex=(
            r"\frac{\alpha\beta}{b-a}\,u^{\alpha-1}\left(1-u^{\alpha}\right)^{\beta-1}"
            r",\quad u=\frac{x-a}{b-a}"
        ),
        usage="bounded quantities, like beta with a closed distribution function",
        reference="Kumaraswamy (1980), Journal of Hydrology 46, 79-88",
    ),
    Family(
        key="log_uniform",
        title="Log-uniform distribution",
        kind="continuous",
        canonical_names=("lower", "upper"),
        parameter_sets=(ParameterSet(("lower", "upper")),),
        builder=LogUniform,
        check=_check_log_uniform,
        symbols={"lower": "a", "upper": "b"},
        density_latex=r"\frac{1}{x\,\ln(b/a)}",
        usage="positive quantities known only to an order of magnitude",
        reference="Hamming (1970), Bell System Technical Journal 49, 1609-1625",
    ),
)
