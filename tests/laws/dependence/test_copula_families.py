"""Copulas against their published formulae at forty digits, against scipy, and against what makes a copula.

Formulae: Nelsen (2006), An Introduction to Copulas, table 4.1 and section 4.6. Every reference value is
computed here with mpmath from the definition C(u) = ψ(Σ ψ⁻¹(u_i)), by numerical differentiation of ψ.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from outspread.errors import LawError
from outspread.laws.dependence.clayton import ClaytonCopula
from outspread.laws.dependence.copula import Copula, IndependenceCopula
from outspread.laws.dependence.elliptical import GaussianCopula, StudentCopula
from outspread.laws.dependence.families import pair_copula
from outspread.laws.dependence.frank import FrankCopula
from outspread.laws.dependence.gumbel import GumbelCopula
from outspread.laws.dependence.levels import Levels

ARCHIMEDEAN: dict[str, Any] = {"clayton": ClaytonCopula, "gumbel": GumbelCopula, "frank": FrankCopula}
CASES = [
    ("clayton", 0.01), ("clayton", 1.3), ("clayton", 20.0),
    ("gumbel", 1.001), ("gumbel", 1.7), ("gumbel", 15.0),
    ("frank", 0.01), ("frank", 3.0), ("frank", 60.0),
]  # fmt: skip
MATRIX = np.array([[1.0, 0.6, -0.3], [0.6, 1.0, 0.2], [-0.3, 0.2, 1.0]])

COPULAS: dict[str, Copula] = {
    "independence": IndependenceCopula(3),
    "gaussian": GaussianCopula(MATRIX),
    "student_t, 4": StudentCopula(MATRIX, 4.0),
    "student_t, 0.7": StudentCopula(MATRIX, 0.7),
    "clayton": ClaytonCopula(3, 1.7),
    "gumbel": GumbelCopula(3, 2.2),
    "frank": FrankCopula(3, 6.0),
    "frank, falling": FrankCopula(2, -4.0),
    "gumbel, pair": GumbelCopula(2, 5.0),
}


def generator(family: str, theta: float) -> tuple[Callable[[Any], Any], Callable[[Any], Any]]:
    """ψ and ψ⁻¹ (Nelsen 2006, table 4.1, entries 1, 4 and 5)."""
    t = mpmath.mpf(theta)
    if family == "clayton":
        return lambda s: (1 + s) ** (-1 / t), lambda u: u**-t - 1
    if family == "gumbel":
        return lambda s: mpmath.exp(-(s ** (1 / t))), lambda u: (-mpmath.log(u)) ** t
    scale = -mpmath.expm1(-t)
    return (
        lambda s: -mpmath.log(1 - scale * mpmath.exp(-s)) / t,
        lambda u: -mpmath.log(-mpmath.expm1(-t * u) / scale),
    )


def exact_levels(levels: Levels) -> list[Any]:
    pairs = zip(levels.lower, levels.upper, strict=True)
    with mpmath.workdps(320):
        return [mpmath.mpf(float(a)) if a < 0.5 else 1 - mpmath.mpf(float(b)) for a, b in pairs]


def exact_conditional(family: str, theta: float, u: list[Any]) -> Any:
    """ψ^(k)(t_{k+1}) / ψ^(k)(t_k), by differences at 300 digits."""
    with mpmath.workdps(300):
        psi, inverse = generator(family, theta)
        below = sum(inverse(value) for value in u[:-1])
        k = len(u) - 1

        def derivative(t: Any) -> Any:
            return mpmath.diff(psi, t, k, h=t * mpmath.mpf(10) ** -50)

        return derivative(below + inverse(u[-1])) / derivative(below)


@pytest.mark.parametrize(("family", "theta"), CASES)
@pytest.mark.parametrize("size", [2, 3, 4])
def test_archimedean_conditionals_keep_both_ends(family: str, theta: float, size: int) -> None:
    """C(u_k | …) and its complement, each to 12 digits of itself, for levels from 1e-17 to 1 - 1e-17."""
    random = np.random.default_rng(size)
    copula = ARCHIMEDEAN[family](size, theta)
    for width in (2.0, 38.0):
        levels = Levels.from_log_odds(random.uniform(-width, width, size))
        found = copula.conditional(levels[: size - 1], levels[size - 1])
        exact = exact_conditional(family, theta, exact_levels(levels))
        with mpmath.workdps(320):
            complement = 1 - exact
        for value, reference in ((found.lower, exact), (found.upper, complement)):
            if reference > 1e-290:
                assert abs(float(value / reference - 1)) < 1e-12


@pytest.mark.parametrize(("family", "theta"), CASES)
def test_archimedean_density_is_the_derivative(family: str, theta: float) -> None:
    """c(u, v, w) = ψ'''(t) Π dψ⁻¹/du, at 300 digits."""
    levels = Levels.of(np.array([0.3, 0.55, 0.2]))
    with mpmath.workdps(300):
        psi, inverse = generator(family, theta)
        u = exact_levels(levels)
        total = sum(inverse(value) for value in u)
        step = mpmath.mpf(10) ** -50
        exact = mpmath.diff(psi, total, 3, h=total * step)
        for value in u:
            exact *= mpmath.diff(inverse, value, 1, h=value * step)
    found = float(ARCHIMEDEAN[family](3, theta).density(levels))
    assert found == pytest.approx(float(exact), rel=1e-12)


def test_frank_pair_with_negative_parameter() -> None:
    """∂C/∂u of the published C = -log(1 + (e^{-θu}-1)(e^{-θv}-1)/(e^{-θ}-1))/θ at θ = -4."""
    theta, u, v = (mpmath.mpf(x) for x in (-4, 0.3, 0.6))

    def joint(first: Any) -> Any:
        part = mpmath.expm1(-theta * first) * mpmath.expm1(-theta * v) / mpmath.expm1(-theta)
        return -mpmath.log1p(part) / theta

    with mpmath.workdps(40):
        exact = mpmath.diff(joint, u)
        density = mpmath.diff(
            lambda a, b: -mpmath.log1p(
                mpmath.expm1(-theta * a) * mpmath.expm1(-theta * b) / mpmath.expm1(-theta)
            ) / theta,
            (u, v), (1, 1),
        )  # fmt: skip
    levels = Levels.of(np.array([0.3, 0.6]))
    copula = FrankCopula(2, -4.0)
    assert float(copula.conditional(levels[:1], levels[1]).lower) == pytest.approx(float(exact), rel=1e-13)
    assert float(copula.density(levels)) == pytest.approx(float(density), rel=1e-12)


def test_gaussian_density_against_scipy() -> None:
    """c(u) = φ_R(z) / Π φ(z_i) with scipy's joint normal density."""
    from scipy import stats

    scores = np.array([[-1.2, 0.4, 3.0], [0.3, 0.1, 2.0], [2.0, -0.5, -1.0]])
    joint = stats.multivariate_normal(np.zeros(3), MATRIX).pdf(scores.T)
    expected = joint / np.prod(stats.norm.pdf(scores), axis=0)
    found = GaussianCopula(MATRIX).density(Levels.from_scores(scores))
    np.testing.assert_allclose(found, expected, rtol=1e-12)


@pytest.mark.parametrize("degrees", [0.7, 4.0, 50.0])
def test_student_density_against_scipy(degrees: float) -> None:
    """c(u) = t_{R,ν}(x) / Π t_ν(x_i) with scipy's multivariate t density."""
    from scipy import stats

    x = np.array([[-1.2, 0.4, 3.0], [0.3, 0.1, 2.0], [2.0, -0.5, -1.0]])
    joint = stats.multivariate_t(np.zeros(3), MATRIX, df=degrees).pdf(x.T)
    expected = joint / np.prod(stats.t.pdf(x, degrees), axis=0)
    levels = Levels.pair(stats.t.cdf(x, degrees), stats.t.sf(x, degrees))
    np.testing.assert_allclose(StudentCopula(MATRIX, degrees).density(levels), expected, rtol=1e-11)


def test_gaussian_conditional_far_in_both_tails() -> None:
    """Φ((z_2 - ρ z_1)/√(1-ρ²)) at 60 digits with z_1, z_2 from levels of 1e-10 and 1 - 1e-6."""
    levels = Levels.pair(np.array([1e-10, 1.0]), np.array([1.0, 1e-6]))
    found = pair_copula("gaussian", 0.9).conditional(levels[:1], levels[1])
    with mpmath.workdps(60):
        first, second = (
            -mpmath.sqrt(2) * mpmath.erfinv(1 - 2 * mpmath.mpf(tail)) for tail in (1e-10, 1e-6)
        )
        rho = mpmath.mpf(0.9)
        z = (-second - rho * first) / mpmath.sqrt(1 - rho**2)
        tail = mpmath.erfc(z / mpmath.sqrt(2)) / 2
    # 25 standard deviations out one ulp of the score is 25² ulp of the probability
    assert float(found.upper) == pytest.approx(float(tail), rel=1e-12)


def exact_student_tail(degrees: Any, t: Any) -> Any:
    """P(T > t) for t >= 0 by the incomplete beta function (Abramowitz and Stegun 1964, 26.7.1)."""
    inside = degrees / (degrees + t * t)
    return mpmath.betainc(degrees / 2, mpmath.mpf(1) / 2, 0, inside, regularized=True) / 2


@pytest.mark.parametrize("degrees", [0.7, 4.0, 50.0])
@pytest.mark.parametrize("rho", [0.5, -0.99])
def test_student_conditional_far_in_both_tails(degrees: float, rho: float) -> None:
    """T_{ν+1}((x_2 - ρ x_1)/√(1-ρ²) √((ν+1)/(ν+x_1²))) at 50 digits, levels of 1e-12 to 1 - 1e-9."""
    for pair in (((1e-12, 1.0), (1.0, 1e-9)), ((0.3, 0.7), (1e-6, 1.0)), ((0.2, 0.8), (0.9, 0.1))):
        levels = Levels.pair([end[0] for end in pair], [end[1] for end in pair])
        found = StudentCopula([[1.0, rho], [rho, 1.0]], degrees).conditional(levels[:1], levels[1])
        with mpmath.workdps(50):
            nu, r = mpmath.mpf(degrees), mpmath.mpf(rho)
            x = []
            for lower, upper in pair:
                tail = mpmath.mpf(min(lower, upper))
                # bracketed in log t, where the tail is nearly a line
                root = mpmath.findroot(
                    lambda s, nu=nu, tail=tail: mpmath.log(exact_student_tail(nu, mpmath.exp(s)) / tail),
                    (-5, 60), solver="anderson", tol=1e-80, maxsteps=400,
                )  # fmt: skip
                x.append(mpmath.exp(root) * (-1 if lower < upper else 1))
            t = (x[1] - r * x[0]) / mpmath.sqrt(1 - r * r) * mpmath.sqrt((nu + 1) / (nu + x[0] ** 2))
            tail = exact_student_tail(nu + 1, abs(t))
            exact = (tail, 1 - tail) if t < 0 else (1 - tail, tail)
        assert float(found.lower) == pytest.approx(float(exact[0]), rel=1e-12)
        assert float(found.upper) == pytest.approx(float(exact[1]), rel=1e-12)


@pytest.mark.parametrize("name", COPULAS)
def test_margins_are_uniform(name: str) -> None:
    """∫_0^1 C(v | u) du = v: what a copula is, by Gauss's rule over the score of u."""
    copula = COPULAS[name].margin([0, 1])
    base, weight = np.polynomial.legendre.leggauss(40)
    edges = np.linspace(-12.0, 12.0, 49)
    scores = (edges[:-1, None] + 0.25 * (base + 1.0)).ravel()
    weights = np.tile(0.25 * weight, 48) * np.exp(-0.5 * scores**2) / np.sqrt(2.0 * np.pi)
    given = Levels.from_scores(scores[None])
    for level in (1e-6, 0.03, 0.5, 0.97):
        found = copula.conditional(given, Levels.of(np.full(scores.size, level)))
        assert float(found.lower @ weights) == pytest.approx(level, rel=1e-9)
        assert float(found.upper @ weights) == pytest.approx(1.0 - level, rel=1e-9)


@pytest.mark.parametrize("name", COPULAS)
@given(odds=st.lists(st.floats(-30.0, 30.0), min_size=3, max_size=3))
@settings(max_examples=40, deadline=None, derandomize=True)
def test_rosenblatt_transform_and_its_inverse(name: str, odds: list[float]) -> None:
    """u -> w -> u restores both ends of every level; the density is the product of its conditionals."""
    copula = COPULAS[name]
    independent = Levels.from_log_odds(np.array(odds[: copula.size]))
    dependent = copula.inverse_rosenblatt(independent)
    smallest = min(float(np.min(dependent.lower)), float(np.min(dependent.upper)))
    if smallest < 1e-250:  # the floor of the levels has been reached
        return
    back = copula.rosenblatt(dependent)
    # rounding of u is magnified where u hardly moves with w; four digits are allowed for that
    np.testing.assert_allclose(back.log_odds(), independent.log_odds(), rtol=1e-10, atol=1e-10)
    assert np.isfinite(copula.log_density(dependent))


@pytest.mark.parametrize("name", COPULAS)
def test_conditional_density_is_the_derivative(name: str) -> None:
    """By a central difference of order four of the conditional distribution."""
    copula = COPULAS[name]
    k = copula.size - 1
    u = np.array([0.2, 0.7, 0.4])[: k + 1]
    step = 1e-3
    shifts = np.array([-2.0, -1.0, 1.0, 2.0]) * step
    given = Levels.of(np.repeat(u[:k, None], 4, axis=1))
    values = copula.conditional(given, Levels.of(u[k] + shifts)).lower
    slope = float(values @ np.array([1.0, -8.0, 8.0, -1.0])) / (12 * step)
    found = float(np.exp(copula.conditional_log_density(Levels.of(u[:k]), Levels.of(u[k]))))
    # the five-point difference itself is off by (step^4)/30 times the fifth derivative
    assert found == pytest.approx(slope, rel=1e-7)


@pytest.mark.parametrize(
    "copula",
    [*COPULAS.values(), StudentCopula(MATRIX, 0.2), StudentCopula(MATRIX, 1e6), ClaytonCopula(3, 1e-8),
     ClaytonCopula(3, 1000.0), GumbelCopula(3, 1.0001), GumbelCopula(3, 500.0), FrankCopula(3, 1e-8),
     FrankCopula(3, 2000.0), FrankCopula(2, -2000.0)],
    ids=lambda copula: f"{copula.family} {getattr(copula, 'parameter', '')}",
)  # fmt: skip
def test_the_ends_of_the_levels_break_nothing(copula: Copula) -> None:
    """Every combination of 0, 1e-300, 1e-100, 1e-10, 1/2, 1 - 1e-10, 1 - 1e-300 and 1: no level leaves
    [1e-300, 1], no density is undefined, and nothing warns (warnings are errors here)."""
    lower = np.array([0.0, 1e-300, 1e-100, 1e-10, 0.5, 1.0 - 1e-10, 1.0, 1.0])
    upper = np.array([1.0, 1.0, 1.0, 1.0 - 1e-10, 0.5, 1e-10, 1e-300, 0.0])
    which = np.array(np.meshgrid(*[np.arange(lower.size)] * copula.size)).reshape(copula.size, -1)
    levels = Levels.pair(lower[which], upper[which])
    assert not np.any(np.isnan(copula.log_density(levels)))
    for found in (copula.rosenblatt(levels), copula.inverse_rosenblatt(levels)):
        for end in (found.lower, found.upper):
            assert np.all((end >= 1e-300) & (end <= 1.0))


def test_shapes_are_kept() -> None:
    """Joint levels of any shape after the first axis."""
    levels = Levels.of(np.linspace(0.1, 0.9, 24).reshape(3, 2, 4))
    for copula in COPULAS.values():
        part = levels[: copula.size]
        assert copula.density(part).shape == (2, 4)
        assert copula.inverse_rosenblatt(copula.rosenblatt(part)).lower.shape == (copula.size, 2, 4)
        rows = (end.reshape(copula.size, -1) for end in (part.lower, part.upper))
        flat = copula.density(Levels(*rows))
        np.testing.assert_allclose(copula.density(part).ravel(), flat, rtol=1e-13)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: ClaytonCopula(2, 0.0), "above 0"),
        (lambda: ClaytonCopula(2, float("inf")), "above 0"),
        (lambda: GumbelCopula(2, 0.9), "at least 1"),
        (lambda: FrankCopula(2, 0.0), "other than 0"),
        (lambda: FrankCopula(3, -1.0), "above 0"),
        (lambda: GaussianCopula([[1.0, 1.0], [1.0, 1.0]]), "not positive definite"),
        (lambda: GaussianCopula([[1.0, 0.5], [0.4, 1.0]]), "symmetric"),
        (lambda: StudentCopula(np.eye(2), 0.01), "degrees of freedom"),
        (lambda: pair_copula("student_t", 0.5), "degrees_of_freedom"),
        (lambda: pair_copula("joe", 2.0), "no family"),
    ],
)
def test_what_is_no_copula_is_refused(make: Callable[[], Copula], words: str) -> None:
    with pytest.raises(LawError, match=words):
        make()


def test_limits_are_independence() -> None:
    """Clayton θ -> 0, Gumbel θ = 1, Frank θ -> 0, ρ = 0: the density tends to 1."""
    levels = Levels.of(np.array([[0.2, 0.9], [0.7, 0.01]]))
    for copula in (
        ClaytonCopula(2, 1e-12), GumbelCopula(2, 1.0), FrankCopula(2, 1e-12), FrankCopula(2, -1e-12),
        GaussianCopula(np.eye(2)),
    ):  # fmt: skip
        np.testing.assert_allclose(copula.density(levels), 1.0, rtol=1e-10)
    # a t copula of uncorrelated scores is not independence
    assert abs(float(StudentCopula(np.eye(2), 3.0).density(levels)[0]) - 1.0) > 0.01
