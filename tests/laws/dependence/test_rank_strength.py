"""Kendall's and Spearman's correlations against published formulae, mpmath, and the copulas themselves."""

from __future__ import annotations

import math
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from outspread.errors import LawError
from outspread.laws.dependence.correlation import level_correlation
from outspread.laws.dependence.families import pair_copula
from outspread.laws.dependence.levels import Levels
from outspread.laws.dependence.rank_strength import (
    kendall,
    parameter_from_kendall,
    parameter_from_spearman,
    spearman,
)

FAMILIES = ["gaussian", "student_t", "clayton", "gumbel", "frank"]


def debye(order: int, x: float) -> Any:
    """D_n(x) = n / x^n ∫_0^x t^n / (e^t - 1) dt (Abramowitz and Stegun 1964, 27.1.1), at 40 digits."""
    with mpmath.workdps(40):
        inner = mpmath.quad(lambda t: t**order / mpmath.expm1(t), mpmath.linspace(0, x, 9))
        return order / mpmath.mpf(x) ** order * inner


@pytest.mark.parametrize("theta", [1e-6, 0.3, 1.9, 2.1, 7.0, 40.0, 900.0])
def test_frank_by_debye_functions(theta: float) -> None:
    """τ = 1 - 4 (1 - D_1)/θ and ρ_S = 1 - 12 (D_1 - D_2)/θ (Genest 1987, Biometrika 74, 549)."""
    with mpmath.workdps(40):
        t = mpmath.mpf(theta)
        tau = 1 - 4 / t * (1 - debye(1, theta))
        rho = 1 - 12 / t * (debye(1, theta) - debye(2, theta))
    assert kendall("frank", theta) == pytest.approx(float(tau), rel=5e-14)
    assert spearman("frank", theta).value == pytest.approx(float(rho), rel=5e-14)
    assert kendall("frank", -theta) == -kendall("frank", theta)


def test_clayton_spearman_at_one() -> None:
    """C = uv/(u + v - uv): ρ_S = 4π² - 39 (Nelsen 2006, section 5.1.2, for the family of Ali, Mikhail and
    Haq at its end; from memory)."""
    found = spearman("clayton", 1.0)
    assert abs(found.value - (4 * math.pi**2 - 39)) <= found.error < 1e-12


@pytest.mark.parametrize("theta", [1.0, 1.05, 2.0, 9.0, 80.0])
def test_gumbel_spearman(theta: float) -> None:
    """12 ∫ (1 + A)^{-2} dt - 3 (Nelsen 2006, exercise 5.9) by mpmath, and Pearson's of the levels."""
    with mpmath.workdps(30):
        t = mpmath.mpf(theta)
        exact = 24 * mpmath.quad(
            lambda w: (1 + (w**t + (1 - w) ** t) ** (1 / t)) ** -2, [0, 0.1, 0.25, 0.4, 0.45, 0.5]
        ) - 3  # fmt: skip
    found = spearman("gumbel", theta)
    assert abs(found.value - float(exact)) <= found.error + 1e-15
    other = level_correlation("gumbel", theta)
    assert abs(other.value - float(exact)) <= other.error < 2e-12


@pytest.mark.parametrize(("family", "theta"), [("frank", 5.0), ("frank", -12.0), ("gaussian", 0.7)])
def test_quadrature_agrees_with_closed_forms(family: str, theta: float) -> None:
    """Pearson's of the levels against Debye's functions and (6/π) asin(ρ/2) (Kruskal 1958)."""
    found = level_correlation(family, theta)
    assert abs(found.value - spearman(family, theta).value) <= found.error < 2e-12


@pytest.mark.parametrize(("rho", "degrees"), [(0.5, 3.0), (-0.8, 1.0), (0.3, 30.0)])
def test_student_spearman(rho: float, degrees: float) -> None:
    """(6/π) E asin(ρ √(S_2 S_3 / ((S_1 + S_2)(S_1 + S_3)))) with independent gamma S of shape ν/2.

    Heinen and Valdesogo (2020), Journal of Multivariate Analysis 179, 104650, give this mixture form (from
    memory); here by 200³ points of Gauss's rule in the levels of S.
    """
    from scipy import special

    base, weight = np.polynomial.legendre.leggauss(120)
    # levels graded towards both ends: p = t² (3 - 2t)
    t = 0.5 * (base + 1.0)
    p, w = t * t * (3 - 2 * t), 0.5 * weight * 6 * t * (1 - t)
    s = special.gammaincinv(degrees / 2, p)
    share = np.sqrt(s[None, :] / (s[:, None] + s[None, :]))
    means = np.array([w @ np.arcsin(rho * np.outer(row, row)) @ w for row in share])
    expected = 6 / math.pi * float(w @ means)
    found = spearman("student_t", rho, degrees)
    assert found.value == pytest.approx(expected, abs=2e-6)
    assert found.error < 1e-12


@pytest.mark.parametrize(
    ("family", "theta"),
    [("clayton", 2.0), ("gumbel", 1.8), ("frank", 4.0), ("frank", -4.0), ("gaussian", 0.5)],
)
def test_kendall_belongs_to_the_copula(family: str, theta: float) -> None:
    """τ = 1 - 4 ∫∫ C_u C_v du dv (Nelsen 2006, theorem 5.1.5) from the copula's own conditionals."""
    base, weight = np.polynomial.legendre.leggauss(200)
    t = 0.5 * (base + 1.0)
    u, w = t * t * (3 - 2 * t), 0.5 * weight * 6 * t * (1 - t)
    first, second = (grid.ravel() for grid in np.meshgrid(u, u, indexing="ij"))
    copula = pair_copula(family, theta)
    given = Levels.of(first[None])
    of_first = copula.conditional(given, Levels.of(second)).lower.reshape(200, 200)
    found = 1.0 - 4.0 * float(w @ (of_first * of_first.T) @ w)  # exchangeable: C_v is the transpose
    assert found == pytest.approx(kendall(family, theta), abs=3e-7)


@pytest.mark.parametrize("family", FAMILIES)
@given(strength=st.floats(0.005, 0.97), falling=st.booleans())
@settings(max_examples=25, deadline=None, derandomize=True)
def test_kendall_and_its_parameter(family: str, strength: float, falling: bool) -> None:
    """The parameter found gives the strength back, within its stated error."""
    tau = -strength if falling and family not in ("clayton", "gumbel") else strength
    found = parameter_from_kendall(family, tau)
    assert kendall(family, found.value) == pytest.approx(tau, rel=1e-12)
    assert found.error < 1e-10 * max(abs(found.value), 1.0)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("rho", [0.02, 0.5, 0.95])
def test_spearman_and_its_parameter(family: str, rho: float) -> None:
    """To ten digits, with a bound that says so."""
    degrees = 5.0 if family == "student_t" else None
    found = parameter_from_spearman(family, rho, degrees_of_freedom=degrees)
    assert spearman(family, found.value, degrees).value == pytest.approx(rho, abs=2e-13)
    assert found.error < 1e-10 * max(abs(found.value), 1.0)


@pytest.mark.parametrize(
    ("family", "tau", "size"),
    [("clayton", -0.1, 2), ("clayton", 0.0, 2), ("gumbel", -0.1, 2), ("frank", 0.0, 2), ("frank", -0.2, 3),
     ("gaussian", 1.0, 2), ("clayton", 1.0, 2)],
)  # fmt: skip
def test_out_of_range_is_named(family: str, tau: float, size: int) -> None:
    with pytest.raises(LawError, match=r"write one (strictly between|from 0 to below)"):
        parameter_from_kendall(family, tau, size)
    with pytest.raises(LawError, match=r"write one (strictly between|from 0 to below)"):
        parameter_from_spearman(family, tau, size)
