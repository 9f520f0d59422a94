"""Kendall's and Spearman's correlation of a copula, and the parameter that gives one of them.

Kendall: Clayton θ/(θ+2), Gumbel 1 - 1/θ, Frank 1 - 4(1 - D_1(θ))/θ with Debye's function (Genest 1987,
Biometrika 74, 549–555; Nelsen 2006, section 5.1), Gaussian and Student t (2/π) asin ρ (Lindskog, McNeil and
Schmock 2003). Spearman: Gaussian (6/π) asin(ρ/2) (Kruskal 1958), Frank 1 - 12(D_1 - D_2)/θ, Gumbel by one
integral of its dependence function, Clayton and Student t by quadrature. Pearson's is `pearson`'s.
"""

from __future__ import annotations

import math

import numpy as np

from outspread.errors import LawError
from outspread.laws.dependence.correlation import level_correlation
from outspread.laws.dependence.families import ELLIPTICAL
from outspread.laws.dependence.solving import Solved, solve_parameter
from outspread.laws.law import Array
from outspread.numerics.quadrature import Index, integrate

#: B_2, B_4, …, over the factorial of the index
_TERMS = 30


def kendall(family: str, parameter: float) -> float:
    """Kendall's correlation of a pair; `parameter` is ρ for gaussian and student_t, else the family's θ."""
    if family in ELLIPTICAL:
        return 2.0 / math.pi * math.asin(parameter)
    if family == "clayton":
        return parameter / (parameter + 2.0)
    if family == "gumbel":
        return (parameter - 1.0) / parameter
    return _frank_kendall(parameter)


def spearman(family: str, parameter: float, degrees_of_freedom: float | None = None) -> Solved:
    """Spearman's correlation of a pair, with an error bound."""
    if family == "gaussian":
        return Solved(6.0 / math.pi * math.asin(0.5 * parameter), 4e-16)
    if family == "frank":
        return Solved(_frank_spearman(parameter), 2e-15)
    if family == "gumbel":
        return _gumbel_spearman(parameter)
    return level_correlation(family, parameter, degrees_of_freedom)


def parameter_from_kendall(family: str, tau: float, size: int = 2) -> Solved:
    """The parameter with Kendall's correlation `tau`, to rounding. Raises LawError out of its range."""
    check_rank(family, "kendall", tau, size)
    if family in ELLIPTICAL:
        value = math.sin(0.5 * math.pi * tau)
        return Solved(value, 4e-16)
    if family == "clayton":
        value = 2.0 * tau / (1.0 - tau)
    elif family == "gumbel":
        value = 1.0 / (1.0 - tau)
    else:
        return solve_parameter(family, tau, lambda theta: Solved(_frank_kendall(theta), 2e-15))
    return Solved(value, 1e-15 * value / (1.0 - tau))


def parameter_from_spearman(
    family: str, rho: float, size: int = 2, degrees_of_freedom: float | None = None
) -> Solved:
    """The parameter with Spearman's correlation `rho` and a bound on its error.

    Closed for the Gaussian copula, else solved to the last digits that the quadrature knows. Raises LawError
    out of the family's range.
    """
    check_rank(family, "spearman", rho, size)
    if family == "gaussian":
        return Solved(2.0 * math.sin(math.pi * rho / 6.0), 4e-16)
    return solve_parameter(family, rho, lambda theta: spearman(family, theta, degrees_of_freedom))


def check_rank(family: str, measure: str, value: float, size: int) -> None:
    """Raise LawError where no copula of the family has this rank correlation (Nelsen 2006, chapter 5)."""
    positive = family in ("clayton", "gumbel") or (family == "frank" and size > 2)
    lowest_in = family in ELLIPTICAL or family == "gumbel"
    low = 0.0 if positive else -1.0
    inside = low < value < 1.0 or (value == low and family == "gumbel")
    inside &= value != 0.0 or lowest_in
    if not inside:
        words = "from 0 to below 1" if family == "gumbel" else f"strictly between {low:g} and 1"
        if not positive and not lowest_in:
            words += " other than 0"
        raise LawError(f"a {family} copula of {size} inputs has no {measure} {value:g}; write one {words}")


# --- Frank: Debye's functions -----------------------------------------------------------------------------


def _debye_integral(power: int, x: float) -> float:
    """∫_0^x t^n / (e^t - 1) dt for n = 1, 2 and x >= 2."""
    k = np.arange(1, 40)
    decay = np.exp(-k * x)
    if power == 1:
        return float(math.pi**2 / 6.0 - np.sum(decay * (x / k + 1.0 / k**2)))
    zeta = 1.2020569031595942854
    return float(2.0 * zeta - np.sum(decay * (x * x / k + 2.0 * x / k**2 + 2.0 / k**3)))


def _even_zetas() -> Array:
    """2 ζ(2k) for k = 1 …: |B_2k| / (2k)! = 2 ζ(2k) / (2π)^{2k}."""
    k = np.arange(1, _TERMS + 1)
    whole = np.arange(1, 60)[:, None]
    zetas = np.sum(whole ** (-2.0 * k), axis=0)
    zetas[0], zetas[1] = math.pi**2 / 6.0, math.pi**4 / 90.0
    zetas[2], zetas[3] = math.pi**6 / 945.0, math.pi**8 / 9450.0
    return np.asarray(2.0 * zetas)


def _bernoulli_series(x: float, weights: Array) -> float:
    """Σ B_2k x^{2k} / (2k)! w_k, |x| < 2π."""
    k = np.arange(1, _TERMS + 1)
    return float(np.sum((-1.0) ** (k + 1) * _even_zetas() * (x / (2.0 * math.pi)) ** (2 * k) * weights))


def _frank_kendall(theta: float) -> float:
    x = max(abs(theta), 1e-300)
    k = np.arange(1, _TERMS + 1)
    if x < 2.0:
        size = 4.0 / x * _bernoulli_series(x, 1.0 / (2 * k + 1))
    else:
        size = 1.0 - 4.0 / x * (1.0 - _debye_integral(1, x) / x)
    return math.copysign(size, theta)


def _frank_spearman(theta: float) -> float:
    x = max(abs(theta), 1e-300)
    k = np.arange(1, _TERMS + 1)
    if x < 2.0:
        size = 12.0 / x * _bernoulli_series(x, k / ((2 * k + 1) * (k + 1)))
    else:
        first, second = _debye_integral(1, x) / x, 2.0 * _debye_integral(2, x) / (x * x)
        size = 1.0 - 12.0 / x * (first - second)
    return math.copysign(size, theta)


# --- Gumbel: its dependence function -----------------------------------------------------------------------


def _gumbel_spearman(theta: float) -> Solved:
    """12 ∫ (1 + A(t))^{-2} dt - 3 = 6 ∫_0^{1/2} (1 - A)(3 + A) / (1 + A)² dt (Hürlimann 2003), with
    A = (t^θ + (1 - t)^θ)^{1/θ}."""

    def integrand(t: Array, owner: Index) -> Array:
        with np.errstate(under="ignore"):
            log_a = np.log1p(-t) + np.log1p((t / (1.0 - t)) ** theta) / theta
        a = np.exp(log_a)
        return np.asarray(-np.expm1(log_a) * (3.0 + a) / (1.0 + a) ** 2)

    edges = np.array([0.0, 1e-3, 0.1, 0.3, 0.5])
    owner = np.zeros(len(edges) - 1, np.int64)
    found = integrate(integrand, edges[:-1], edges[1:], owner, 1, relative=1e-14)
    return Solved(float(6.0 * found.value[0, 0]), float(6.0 * found.error[0, 0]) + 1e-15)
