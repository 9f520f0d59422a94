"""Pearson correlations under copulas against published closed forms; true errors stay within stated ones."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from outspread.errors import DerivationError, LawError
from outspread.laws.compound.mixture import MixtureLaw
from outspread.laws.dependence.build import build_copula, nearest_valid
from outspread.laws.dependence.clayton import ClaytonCopula
from outspread.laws.dependence.correlation import pearson_correlation
from outspread.laws.dependence.elliptical import GaussianCopula
from outspread.laws.dependence.families import pair_copula
from outspread.laws.dependence.matrices import smallest_eigenvalue
from outspread.laws.dependence.pearson import parameter_from_pearson, pearson_range
from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES


def law(family: str, **parameters: Any) -> Law:
    return FAMILIES[family].build(FAMILIES[family].canonical(parameters))


UNIFORM = law("uniform", lower=0, upper=1)
EXPONENTIAL = law("exponential", rate=1)
NORMAL = law("normal", mean=3, sd=0.5)
RAYLEIGH = law("rayleigh", scale=1)
GUMBEL_MAX = law("gumbel_max", location=0, scale=1)
LOGISTIC = law("logistic", location=0, scale=1)


def student(degrees: float) -> Law:
    return law("student_t", degrees_of_freedom=degrees, location=0, scale=1)


def lognormal(sd: float) -> Law:
    return law("lognormal", log_mean=0.2, log_sd=sd)


#: family, parameter, degrees of freedom, two laws, exact correlation, source
EXACT = [
    ("gaussian", 2 * math.sin(math.pi / 12), None, UNIFORM, UNIFORM, 0.5),  # Kruskal (1958)
    ("gaussian", 0.6, None, lognormal(0.5), lognormal(0.8),
     math.expm1(0.24) / math.sqrt(math.expm1(0.25) * math.expm1(0.64))),  # moments of the lognormal law
    ("gaussian", -0.9, None, lognormal(2.0), lognormal(0.3),
     math.expm1(-0.54) / math.sqrt(math.expm1(4.0) * math.expm1(0.09))),
    ("gaussian", 0.35, None, NORMAL, NORMAL, 0.35),
    ("gaussian", 0.7, None, law("bernoulli", probability=0.5), law("bernoulli", probability=0.5),
     2 / math.pi * math.asin(0.7)),  # Sheppard (1899)
    ("student_t", 0.5, 5.0, student(5), student(5), 0.5),  # the multivariate t itself
    ("student_t", -0.8, 2.5, student(2.5), student(2.5), -0.8),
    ("clayton", 1.0, None, LOGISTIC, LOGISTIC, 0.5),  # Gumbel (1961), JASA 56, 335: bivariate logistic
    ("gumbel", 2.0, None, GUMBEL_MAX, GUMBEL_MAX, 0.75),  # 1 - 1/θ²: Tiago de Oliveira (1980), from memory
    ("gumbel", 7.0, None, GUMBEL_MAX, GUMBEL_MAX, 1 - 1 / 49),
    ("gumbel", 1.01, None, GUMBEL_MAX, GUMBEL_MAX, 1 - 1 / 1.01**2),
]  # fmt: skip


@pytest.mark.parametrize("case", EXACT, ids=lambda case: f"{case[0]} {case[1]:g}")
def test_against_closed_forms(case: tuple[Any, ...]) -> None:
    family, parameter, degrees, first, second, exact = case
    found = pearson_correlation(pair_copula(family, parameter, degrees), first, second)
    assert abs(found.value - exact) <= found.error
    assert found.error < 5e-11
    turned = pearson_correlation(pair_copula(family, parameter, degrees), second, first)
    assert abs(turned.value - exact) <= turned.error


#: Liu and Der Kiureghian (1986), Probabilistic Engineering Mechanics 1, 105-112, tables 4 to 6, from memory:
#: F = (scores' correlation) / (correlation of the inputs) as a formula, and its largest error there
FACTORS = [
    (NORMAL, UNIFORM, lambda r: 1.023, 1e-3),
    (NORMAL, EXPONENTIAL, lambda r: 1.107, 1e-3),
    (NORMAL, RAYLEIGH, lambda r: 1.014, 1e-3),
    (NORMAL, GUMBEL_MAX, lambda r: 1.031, 1e-3),
    (UNIFORM, UNIFORM, lambda r: 1.047 - 0.047 * r * r, 1e-3),
    (UNIFORM, EXPONENTIAL, lambda r: 1.133 + 0.029 * r * r, 1e-3),
    (EXPONENTIAL, EXPONENTIAL, lambda r: 1.229 - 0.367 * r + 0.153 * r * r, 0.016),
    (RAYLEIGH, RAYLEIGH, lambda r: 1.028 - 0.029 * r, 2e-3),
    (GUMBEL_MAX, GUMBEL_MAX, lambda r: 1.064 - 0.069 * r + 0.005 * r * r, 1e-3),
]


@pytest.mark.parametrize("case", range(len(FACTORS)))
@pytest.mark.parametrize("target", [-0.4, 0.3, 0.8])
def test_against_published_factors(case: int, target: float) -> None:
    first, second, factor, largest = FACTORS[case]
    found = parameter_from_pearson("gaussian", target, first, second)
    assert found.value / target == pytest.approx(factor(target), rel=largest)
    assert found.error < 1e-10


@given(
    log_sds=st.tuples(st.floats(0.05, 1.5), st.floats(0.05, 1.5)), share=st.floats(-0.95, 0.95)
)
@settings(max_examples=15, deadline=None, derandomize=True)
def test_any_lognormal_pair(log_sds: tuple[float, float], share: float) -> None:
    """(e^{ρst} - 1)/√((e^{s²} - 1)(e^{t²} - 1)), at random spreads, by quadrature."""
    s, t = log_sds
    exact = math.expm1(share * s * t) / math.sqrt(math.expm1(s * s) * math.expm1(t * t))
    found = pearson_correlation(pair_copula("gaussian", share), lognormal(s), lognormal(t))
    assert abs(found.value - exact) <= found.error < 1e-10
    back = parameter_from_pearson("gaussian", exact, lognormal(s), lognormal(t))
    assert abs(back.value - share) <= back.error + 1e-15 / (s * t)


@pytest.mark.parametrize(("family", "degrees"), [
    ("gaussian", None), ("student_t", 4.0), ("clayton", None), ("gumbel", None), ("frank", None),
])  # fmt: skip
@pytest.mark.parametrize("target", [0.05, 0.6])
def test_solved_to_ten_digits(family: str, degrees: float | None, target: float) -> None:
    """The parameter found gives the correlation back, for an exponential and a triangular input."""
    second = law("triangular", lower=0, mode=0.3, upper=1)
    found = parameter_from_pearson(family, target, EXPONENTIAL, second, degrees_of_freedom=degrees)
    again = pearson_correlation(pair_copula(family, found.value, degrees), second, EXPONENTIAL)
    assert abs(again.value - target) <= again.error + 1e-12
    assert found.error < 1e-10 * max(1.0, abs(found.value))


@pytest.mark.parametrize(
    ("family", "target", "degrees", "margin", "exact"),
    [
        ("clayton", 0.5, None, LOGISTIC, 1.0),
        ("gumbel", 0.75, None, GUMBEL_MAX, 2.0),
        ("student_t", -0.6, 5.0, student(5), -0.6),
        ("gaussian", 0.9, None, UNIFORM, 2 * math.sin(0.15 * math.pi)),
    ],
)
def test_parameters_of_closed_forms(
    family: str, target: float, degrees: float | None, margin: Law, exact: float
) -> None:
    """The closed forms of the correlations above, read backwards: the error stated covers the true one."""
    found = parameter_from_pearson(family, target, margin, margin, degrees_of_freedom=degrees)
    assert abs(found.value - exact) <= found.error < 1e-10


def test_reachable_ranges() -> None:
    """Exponentials: down to 1 - π²/6 (Moran 1967, Biometrika 54, 385); lognormals by their moments."""
    reach = pearson_range("gaussian", EXPONENTIAL, EXPONENTIAL)
    assert abs(reach.low - (1 - math.pi**2 / 6)) <= reach.error < 1e-12
    assert abs(reach.high - 1.0) <= reach.error
    s, t = 1.0, 2.0
    size = math.sqrt(math.expm1(s * s) * math.expm1(t * t))
    reach = pearson_range("student_t", lognormal(s), lognormal(t))
    assert abs(reach.low - math.expm1(-s * t) / size) <= reach.error
    assert abs(reach.high - math.expm1(s * t) / size) <= reach.error
    assert pearson_range("clayton", UNIFORM, UNIFORM).low == 0.0
    assert pearson_range("frank", UNIFORM, UNIFORM, size=3).low == 0.0


@pytest.mark.parametrize(
    ("family", "target", "words"),
    [
        ("gaussian", -0.65, r"between -0\.644934 and 0\.999999"),
        ("clayton", -0.1, r"between 0 and 0\.999999"),
        ("frank", 1.0, "cannot be reached"),
    ],
)
def test_out_of_reach_is_named(family: str, target: float, words: str) -> None:
    with pytest.raises(LawError, match=words):
        parameter_from_pearson(family, target, EXPONENTIAL, EXPONENTIAL)


def test_no_variance_is_said() -> None:
    with pytest.raises(DerivationError, match=r"wind has no finite variance.*spearman"):
        parameter_from_pearson("gaussian", 0.3, student(2), UNIFORM, names=("wind", "load"))


def test_discrete_inputs_against_double_sums() -> None:
    """Poisson and binomial under a Frank copula: Σ Σ (C(F_i, G_j) - F_i G_j) over the steps (Hoeffding 1940),
    with C as published."""
    from scipy import stats

    theta = 3.0
    f = stats.poisson.cdf(np.arange(80), 4.0)
    g = stats.binom.cdf(np.arange(9), 9, 0.3)
    part = np.outer(np.expm1(-theta * f), np.expm1(-theta * g)) / np.expm1(-theta)
    exact = float(np.sum(-np.log1p(part) / theta - np.outer(f, g))) / math.sqrt(4.0 * 9 * 0.3 * 0.7)
    first, second = law("poisson", mean=4), law("binomial", trials=9, probability=0.3)
    found = pearson_correlation(pair_copula("frank", theta), first, second)
    assert abs(found.value - exact) <= found.error < 1e-11


def test_a_gap_in_the_density_is_a_jump_of_the_quantile() -> None:
    """Half of uniform(0, 1), half of uniform(4, 5), with a uniform: X = U/… by its own two branches.

    Cov = E X U under the Gaussian copula equals ∫ E(U | z) x(z) φ(z) dz with E(U | z) = Φ(ρz/√(2 - ρ²)).
    """
    from scipy import integrate, stats

    gap = MixtureLaw(
        [0.5, 0.5], (law("uniform", lower=0, upper=1), law("uniform", lower=4, upper=5))
    )
    rho = 0.7
    halves = (
        integrate.quad(
            lambda z, at=at: (at + 2 * stats.norm.cdf(z)) * stats.norm.cdf(rho * z / math.sqrt(2 - rho**2))
            * stats.norm.pdf(z),
            *ends, epsabs=1e-14, epsrel=1e-13,
        )[0]
        for at, ends in ((0.0, (-12, 0)), (3.0, (0, 12)))
    )  # fmt: skip
    exact = (sum(halves) - 2.5 * 0.5) / math.sqrt((1 / 12 + 4.0) / 12)
    found = pearson_correlation(pair_copula("gaussian", rho), gap, UNIFORM)
    assert abs(found.value - exact) <= found.error < 1e-11


@pytest.mark.parametrize(("family", "parameter"), [
    ("gaussian", 1 - 5e-7), ("gaussian", -1 + 5e-9), ("student_t", 1 - 5e-7), ("clayton", 300.0),
    ("gumbel", 300.0), ("frank", 3000.0),
])  # fmt: skip
def test_steep_dependence_on_a_jump_is_not_missed(family: str, parameter: float) -> None:
    """A quantile with a jump under nearly complete dependence: the conditional mean is a step. The integral
    over the other input first, whose jump is then an exact panel end, must agree within both errors."""
    gap = MixtureLaw([0.3, 0.7], (EXPONENTIAL, law("uniform", lower=4, upper=5)))
    many = law("binomial", trials=60, probability=0.4)
    copula = pair_copula(family, parameter, 3.0)
    found = pearson_correlation(copula, gap, EXPONENTIAL)
    turned = pearson_correlation(copula, EXPONENTIAL, gap)
    assert abs(found.value - turned.value) <= found.error + turned.error < 1e-11
    # between the reachable ends, and next to one of them
    reach = pearson_range("frank", many, EXPONENTIAL)
    strong = pearson_correlation(copula, many, EXPONENTIAL)
    near = reach.high if parameter > 0 else reach.low
    assert reach.low - strong.error <= strong.value <= reach.high + strong.error
    assert abs(strong.value - near) < 0.01


def test_rounding_of_a_far_mean_is_in_the_error() -> None:
    """A spread of 1e-9 of the mean: the quantiles themselves are known to seven digits of a spread."""
    far = law("uniform", lower=1e6, upper=1e6 + 1e-3)
    found = pearson_correlation(pair_copula("gaussian", 2 * math.sin(math.pi / 12)), far, far)
    assert abs(found.value - 0.5) <= found.error < 1e-4


# --- whole matrices ---------------------------------------------------------------------------------------


def test_matrix_solved_pair_by_pair() -> None:
    """Published case (Kruskal's 2 sin(πr/6) for uniforms) in a matrix of three."""
    given_matrix = np.array([[1.0, 0.5, -0.2], [0.5, 1.0, 0.1], [-0.2, 0.1, 1.0]])
    built = build_copula("gaussian", "pearson", given_matrix, [UNIFORM] * 3, ["a", "b", "c"])
    expected = 2 * np.sin(np.pi * given_matrix / 6)
    np.fill_diagonal(expected, 1.0)
    assert isinstance(built.copula, GaussianCopula)
    np.testing.assert_allclose(built.copula.matrix, expected, rtol=0, atol=built.parameter_error)
    assert built.parameter_error < 1e-10


@pytest.mark.parametrize("measure", ["normal_scores", "kendall", "spearman", "pearson"])
def test_matrix_that_cannot_be_is_answered(measure: str) -> None:
    wrong = np.array([[1.0, 0.85, -0.85], [0.85, 1.0, 0.85], [-0.85, 0.85, 1.0]])
    laws, names = [UNIFORM, UNIFORM, UNIFORM], ["a", "b", "c"]
    with pytest.raises(LawError, match=r"eigenvalue -0\.\d+\); the nearest valid matrix is \[\[1, 0\."):
        build_copula("gaussian", measure, wrong, laws, names)
    valid = nearest_valid("gaussian", measure, wrong, laws, names)
    assert smallest_eigenvalue(valid) > 0
    build_copula("gaussian", measure, valid, laws, names)


def test_singular_scores_are_explained() -> None:
    matrix = np.array([[1.0, 0.6, 0.8], [0.6, 1.0, 0.0], [0.8, 0.0, 1.0]])
    with pytest.raises(LawError, match=r"score of a - 0\.6 score of b - 0\.8 score of c does not vary"):
        build_copula("gaussian", "normal_scores", matrix, [UNIFORM] * 3, ["a", "b", "c"])


def test_one_strength_for_all_pairs() -> None:
    three = np.full((3, 3), 0.4) + 0.6 * np.eye(3)
    built = build_copula("clayton", "kendall", three, [UNIFORM, EXPONENTIAL, NORMAL], ["a", "b", "c"])
    assert isinstance(built.copula, ClaytonCopula)
    assert built.copula.parameter == pytest.approx(4 / 3, rel=1e-14)
    with pytest.raises(LawError, match="because their distributions differ"):
        build_copula("clayton", "pearson", three, [UNIFORM, EXPONENTIAL, UNIFORM], ["a", "b", "c"])
