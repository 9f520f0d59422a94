"""Probabilities of rectangles of jointly normal scores; every true error must lie within the stated one."""

from __future__ import annotations

import itertools
import json
import math
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from outspread.errors import LawError
from outspread.laws.dependence.bivariate import bivariate_fast, bivariate_rectangle, trivariate_rectangle
from outspread.laws.dependence.families import pair_copula
from outspread.laws.dependence.levels import Levels
from outspread.laws.dependence.one_factor import factor_loadings, one_factor_rectangle
from outspread.laws.dependence.orthants import orthant
from outspread.laws.dependence.randomised import randomised_rectangle
from outspread.laws.dependence.rectangles import rectangle_probability
from outspread.laws.law import Array

INF = math.inf
REFERENCE = json.loads((Path(__file__).parents[2] / "reference" / "open.json").read_text(encoding="utf-8"))


def case(number: str) -> dict[str, Any]:
    return next(entry for entry in REFERENCE if entry["id"].startswith(number))


def equal(size: int, rho: float) -> Array:
    return np.full((size, size), rho) + (1.0 - rho) * np.eye(size)


def random_correlation(seed: int, size: int, extra: int = 2) -> Array:
    loads = np.random.default_rng(seed).normal(size=(size, size + extra))
    covariance = loads @ loads.T
    scale = np.sqrt(np.diag(covariance))
    matrix = covariance / np.outer(scale, scale)
    matrix = 0.5 * (matrix + matrix.T)
    np.fill_diagonal(matrix, 1.0)
    return matrix


# --- two scores -------------------------------------------------------------------------------------------


@pytest.mark.parametrize("rho", [-1.0, -0.999999, -0.7, 0.0, 0.5, 0.95, 1.0 - 1e-12, 1.0])
def test_sheppards_quadrant(rho: float) -> None:
    """P(X > 0, Y > 0) = 1/4 + asin(ρ)/2π (Sheppard 1899); asin by mpmath, near -1 relative to itself."""
    with mpmath.workdps(40):
        exact = mpmath.mpf(1) / 4 + mpmath.asin(mpmath.mpf(rho)) / (2 * mpmath.pi)
    found = bivariate_rectangle(np.zeros((2, 1)), np.full((2, 1), INF), np.array([rho]))
    assert abs(float(found.value[0] - exact)) <= found.error[0] + 1e-300
    assert found.error[0] <= 2e-14 * float(exact) + 1e-300


def exact_lower(b: float, c: float, rho: float) -> Any:
    """P(X <= b, Y <= c) = ∫_{-∞}^b φ(x) Φ((c - ρx)/√(1-ρ²)) dx, Gauss at 40 digits in short panels."""
    with mpmath.workdps(40):
        high, other, r = mpmath.mpf(b), mpmath.mpf(c), mpmath.mpf(rho)
        scale = mpmath.sqrt(1 - r * r)

        def integrand(x: Any) -> Any:
            return mpmath.npdf(x) * mpmath.erfc(-(other - r * x) / scale / mpmath.sqrt(2)) / 2

        steps = [*(0.04 * k for k in range(60)), 3, 3.5, 4, 5, 6.5, 8, 11, 15, 20]
        points = {high - mpmath.mpf(step) for step in steps}
        middle = other / r if r else mpmath.mpf(0)
        points |= {middle + k * scale for k in (-9, -4, -1.5, 0, 1.5, 4, 9) if middle + k * scale < high}
        return mpmath.quad(integrand, sorted(points), method="gauss-legendre")


@pytest.mark.parametrize(
    ("b", "c", "rho"),
    [(-1.0, 0.5, 0.3), (-7.0, -6.0, 0.9), (-2.73, -6.24, -0.8), (1.5, -4.9, -0.95), (-3.7, -2.3, 0.9999),
     (-8.0, -8.0, -0.3), (0.7, 0.9, 0.99)],
)  # fmt: skip
def test_two_scores_far_in_the_tails(b: float, c: float, rho: float) -> None:
    """Relative to itself down to 1e-60, against mpmath."""
    exact = exact_lower(b, c, rho)
    ends = np.array([[b], [c]])
    found = bivariate_rectangle(np.full((2, 1), -INF), ends, np.array([rho]))
    true = abs(float(found.value[0] - exact))
    assert true <= found.error[0]
    assert found.error[0] <= 3e-13 * float(exact)
    fast = float(bivariate_fast(np.array([b]), np.array([c]), np.array([rho]))[0])
    assert abs(float(fast - exact)) <= 2e-15


@given(
    b=st.floats(-6.0, 6.0), c=st.floats(-6.0, 6.0), rho=st.floats(-0.9999, 0.9999),
    widths=st.tuples(st.floats(0.01, 5.0), st.floats(0.01, 5.0)),
)  # fmt: skip
@settings(max_examples=60, deadline=None, derandomize=True)
def test_two_ways_to_a_rectangle_agree(b: float, c: float, rho: float, widths: tuple[float, float]) -> None:
    """The integral over one side equals the one over the other, and the four corners' signed sum."""
    low, high = np.array([b, c]), np.array([b + widths[0], c + widths[1]])
    first = bivariate_rectangle(low[:, None], high[:, None], np.array([rho]))
    second = bivariate_rectangle(low[::-1, None], high[::-1, None], np.array([rho]))
    assert abs(first.value[0] - second.value[0]) <= first.error[0] + second.error[0]
    x = np.array([high[0], low[0], high[0], low[0]])
    y = np.array([high[1], high[1], low[1], low[1]])
    corners = bivariate_fast(x, y, np.full(4, rho)) @ np.array([1.0, -1.0, -1.0, 1.0])
    assert abs(first.value[0] - corners) <= first.error[0] + 4 * 2e-15


# --- three scores -----------------------------------------------------------------------------------------


def test_published_trivariate_orthant() -> None:
    """o34: 1/8 + Σ asin(ρ)/4π (David 1953, Biometrika 40, 458)."""
    reference = case("o34")
    exact = float(reference["checks"][0]["precise"])
    found = rectangle_probability(np.zeros(3), np.full(3, INF), reference["dependence"]["matrix"])
    assert abs(found.value - exact) <= found.error < 1e-14


@given(seed=st.integers(0, 10**6), extra=st.integers(0, 4))
@settings(max_examples=15, deadline=None, derandomize=True)
def test_any_trivariate_orthant(seed: int, extra: int) -> None:
    matrix = random_correlation(seed, 3, extra)
    exact = 0.125 + float(np.sum(np.arcsin(matrix[np.triu_indices(3, 1)]))) / (4 * math.pi)
    found = trivariate_rectangle(np.zeros(3), np.full(3, INF), matrix)
    assert abs(found.value[0] - exact) <= found.error[0] + 1e-16
    assert found.error[0] < 1e-12
    other = orthant(np.zeros((3, 1)), matrix[:, :, None])
    assert abs(other.value[0] - exact) <= other.error[0]
    assert other.error[0] < 1e-12


def test_trivariate_tail_against_mpmath() -> None:
    """One common factor (ρ = 1/4 each): ∫ φ(f) Φ((f/2 - 6)/√(3/4))³ df at 30 digits; about 1e-24."""
    with mpmath.workdps(30):
        exact = mpmath.quad(
            lambda f: mpmath.npdf(f)
            * (mpmath.erfc((6 - f / 2) / mpmath.sqrt(mpmath.mpf(3) / 4) / mpmath.sqrt(2)) / 2) ** 3,
            mpmath.linspace(-6, 22, 29),
        )
    found = trivariate_rectangle(np.full(3, 6.0), np.full(3, INF), equal(3, 0.25))
    assert abs(float(found.value[0] - exact)) <= found.error[0] <= 1e-12 * float(exact)


@pytest.mark.parametrize("closeness", [1e-2, 1e-5, 1e-8])
@pytest.mark.parametrize("opposed", [False, True])
def test_nearly_singular_matrices(closeness: float, opposed: bool) -> None:
    """Three scores that almost repeat one another, with limits that leave a slit: ∫ φ(f) Π Φ(…) df by mpmath
    in panels as wide as the slit."""
    loadings = 1.0 - closeness * np.array([1.1, 2.0, 0.7])
    if opposed:
        loadings[0] *= -1.0
    width = math.sqrt(closeness)
    limits = np.array([-0.3 + 2.0 * width if opposed else 0.5, 0.3, 0.31])
    matrix = np.outer(loadings, loadings)
    np.fill_diagonal(matrix, 1.0)
    with mpmath.workdps(30):

        def integrand(f: Any) -> Any:
            sides = (
                (mpmath.mpf(float(b)) - mpmath.mpf(float(w)) * f) / mpmath.sqrt(1 - mpmath.mpf(float(w)) ** 2)
                for b, w in zip(limits, loadings, strict=True)
            )
            return mpmath.npdf(f) * mpmath.fprod(mpmath.erfc(-z / mpmath.sqrt(2)) / 2 for z in sides)

        near = [0.3 + 0.7 * k * width for k in range(-25, 26)]
        points = sorted({-12, -5, -3, -2, -1, 3, 6, 12, *near, *(p for p in (0.0, 0.15, 0.45, 0.7, 1.0))})
        exact = mpmath.quad(integrand, points, method="gauss-legendre")
    ends = np.full(3, -INF), limits
    common = one_factor_rectangle(*ends, loadings)
    assert abs(float(common.value[0] - exact)) <= common.error[0]
    found = trivariate_rectangle(*ends, matrix)
    # the matrix itself is rounded: one ulp of a correlation moves the slit's probability by this much
    rounding = 2.3e-16 / width
    assert abs(float(found.value[0] - exact)) <= found.error[0] + rounding
    path = orthant(limits[:, None], matrix[:, :, None])
    if closeness >= 1e-5:
        assert abs(float(path.value[0] - exact)) <= path.error[0] + rounding


# --- more scores ------------------------------------------------------------------------------------------


@pytest.mark.parametrize("size", [4, 5, 6])
def test_orthants_of_equal_correlation(size: int) -> None:
    """ρ = 1/2: 1/(n + 1) (Kendall and Stuart, Advanced Theory of Statistics, from memory), two ways."""
    found = orthant(np.zeros((size, 1)), equal(size, 0.5)[:, :, None])
    assert abs(found.value[0] - 1 / (size + 1)) <= found.error[0] < 1e-12
    common = one_factor_rectangle(np.zeros(size), np.full(size, INF), np.full(size, math.sqrt(0.5)))
    assert abs(common.value[0] - 1 / (size + 1)) <= common.error[0] < 1e-14


@pytest.mark.parametrize("check", [0, 1])
def test_published_central_box(check: int) -> None:
    """o08: four scores with ρ = 0.9 within ±2 and ±1, by the common factor and by sixteen orthants."""
    reference = case("o08")
    limit, exact = reference["checks"][check]["at"], float(reference["checks"][check]["precise"])
    matrix = np.array(reference["dependence"]["matrix"])
    found = rectangle_probability(np.full(4, -limit), np.full(4, limit), matrix)
    assert abs(found.value - exact) <= found.error < 1e-12
    total = 0.0
    for signs in np.ndindex(2, 2, 2, 2):
        ends = np.where(np.array(signs) == 1, -1.0, 1.0) * limit
        total += (-1.0) ** sum(signs) * float(orthant(ends[:, None], matrix[:, :, None]).value[0])
    assert total == pytest.approx(exact, abs=1e-12)


@given(
    loadings=st.lists(st.floats(0.1, 0.99), min_size=4, max_size=5),
    signs=st.lists(st.booleans(), min_size=5, max_size=5),
    limits=st.lists(st.floats(-2.0, 3.0), min_size=5, max_size=5),
)
@settings(max_examples=20, deadline=None, derandomize=True)
def test_orthants_against_one_factor(loadings: list[float], signs: list[bool], limits: list[float]) -> None:
    """Unequal loadings of both signs: two methods that share nothing but Φ, errors within the stated ones."""
    size = len(loadings)
    own = np.array(loadings) * np.where(signs[:size], 1.0, -1.0)
    matrix = np.outer(own, own)
    np.fill_diagonal(matrix, 1.0)
    ends = np.array(limits[:size])
    common = one_factor_rectangle(np.full(size, -INF), ends, own)
    path = orthant(ends[:, None], matrix[:, :, None])
    assert abs(common.value[0] - path.value[0]) <= common.error[0] + path.error[0]
    assert path.error[0] < 1e-10
    found = factor_loadings(matrix)
    if found is not None:
        np.testing.assert_allclose(np.outer(found, found)[~np.eye(size, dtype=bool)],
                                   matrix[~np.eye(size, dtype=bool)], rtol=0, atol=1e-15)  # fmt: skip


@pytest.mark.parametrize("size", [4, 5])
def test_general_matrices_against_scipy(size: int) -> None:
    """scipy's own integration over boxes, which is good to six digits here."""
    from scipy import stats

    matrix = random_correlation(size, size)
    low, high = np.full(size, -1.0), np.linspace(0.5, 2.0, size)
    law = stats.multivariate_normal(np.zeros(size), matrix, seed=1, maxpts=2_000_000, abseps=1e-8, releps=0.0)
    expected = float(law.cdf(high, lower_limit=low))
    found = rectangle_probability(low, high, matrix)
    assert found.method == "quadrature"
    assert found.error < 1e-10
    assert found.value == pytest.approx(expected, abs=3e-7)


def test_sampling_states_errors_that_hold() -> None:
    """Twenty scores with one common factor: sampled, against the exact integral; 25 seeds and cases."""
    failed = 0
    boxes = [
        (20, 0.5, 0.0, INF), (20, 0.9, -1.0, 2.0), (8, 0.3, -INF, 1.0), (12, 0.6, 1.0, INF),
        (20, 0.3, 2.0, INF),
    ]  # fmt: skip
    for seed, (size, rho, low, high) in enumerate(boxes * 5):
        ends = np.full(size, low), np.full(size, high)
        exact = one_factor_rectangle(*ends, np.full(size, math.sqrt(rho)))
        found = randomised_rectangle(*ends, equal(size, rho), seed=seed, points=2**10)
        failed += abs(float(found.value) - exact.value[0]) > float(found.error)
        assert float(found.error) < 0.05 * exact.value[0]
    assert failed == 0  # one stated error in ten thousand may be exceeded


def test_sampling_reaches_five_digits_of_a_probability() -> None:
    """Twenty scores, ρ = 1/2, all positive: 1/21."""
    found = randomised_rectangle(
        np.zeros(20), np.full(20, INF), equal(20, 0.5), absolute=1e-5, relative=0.0, seed=7
    )
    assert abs(float(found.value) - 1 / 21) <= float(found.error) <= 1e-5


def test_sampling_depends_on_its_seed_alone() -> None:
    first, again, other = (
        float(randomised_rectangle(np.zeros(9), np.ones(9), equal(9, 0.4), seed=seed, points=2**10).value)
        for seed in (3, 3, 4)
    )
    assert first == again != other


def test_studentised_range() -> None:
    """o15: P(range/s < q) = E 5 P(0 < X_i - X_1 <= q s for the others), four scores with ρ = 1/2 each, over
    the chi law of s with 10 degrees of freedom."""
    from scipy import stats

    reference = case("o15")["checks"][0]
    q, exact = reference["at"], float(reference["precise"])
    base, weight = np.polynomial.legendre.leggauss(24)
    edges = np.linspace(0.02, 3.0, 7)
    total = 0.0
    for left, right in itertools.pairwise(edges):
        half = 0.5 * (right - left)
        for s, w in zip(left + half * (base + 1), half * weight, strict=True):
            limit = np.full(4, q * s / math.sqrt(2))
            inner = rectangle_probability(np.zeros(4), limit, equal(4, 0.5)).value
            total += w * 5 * inner * stats.chi.pdf(s * math.sqrt(10), 10) * math.sqrt(10)
    assert total == pytest.approx(exact, abs=1e-10)


def test_independent_groups_are_factors() -> None:
    """Two pairs and a score that is free: the product of Sheppard's quadrants."""
    matrix = np.eye(5)
    matrix[0, 1] = matrix[1, 0] = 0.5
    matrix[3, 4] = matrix[4, 3] = -0.3
    low, high = np.array([0.0, 0.0, -INF, 0.0, 0.0]), np.full(5, INF)
    exact = (0.25 + math.asin(0.5) / (2 * math.pi)) * (0.25 + math.asin(-0.3) / (2 * math.pi))
    found = rectangle_probability(low, high, matrix)
    assert abs(found.value - exact) <= found.error < 1e-14
    assert rectangle_probability([0, 1], [1, 1], np.eye(2)).value == 0.0


def test_refusals() -> None:
    singular = np.array([[1.0, 0.6, 0.8], [0.6, 1.0, 0.0], [0.8, 0.0, 1.0]])
    with pytest.raises(LawError, match="not positive definite"):
        rectangle_probability(np.zeros(3), np.ones(3), singular)
    with pytest.raises(LawError, match="symmetric with ones"):
        rectangle_probability(np.zeros(2), np.ones(2), [[1, 0.2], [0.3, 1]])
    with pytest.raises(LawError, match="one lower and one upper limit"):
        rectangle_probability(np.zeros(3), np.ones(3), np.eye(2))
    with pytest.raises(LawError, match="not a number"):
        rectangle_probability([math.nan, 0], np.ones(2), np.eye(2))


# --- sums under a copula: the conditional distributions in use ----------------------------------------------


def test_sum_of_uniforms_under_a_gaussian_copula() -> None:
    """o21: P(X + Y <= 1/2) = ∫_0^{1/2} C(1/2 - u | u) du."""
    reference = case("o21")
    rho = reference["dependence"]["normal_score_correlation"][0][1]
    exact = float(next(c["precise"] for c in reference["checks"] if c["quantity"] == "cdf"))
    copula = pair_copula("gaussian", rho)
    base, weight = np.polynomial.legendre.leggauss(40)
    edges = np.concatenate([[0.0], 0.25 * 0.1 ** np.arange(14, -1, -1.0)])
    edges = np.concatenate([edges, 0.5 - edges[-2::-1]])
    half = 0.5 * np.diff(edges)
    u = (edges[:-1, None] + half[:, None] * (base + 1)).ravel()
    inner = copula.conditional(Levels.of(u[None]), Levels.of(0.5 - u)).lower
    assert float(inner @ (half[:, None] * weight).ravel()) == pytest.approx(exact, abs=1e-13)


def test_sum_of_lognormals_under_a_gaussian_copula() -> None:
    """o39: P(X + Y <= 3) = ∫ φ(z) C(F_Y(3 - e^{z/2}) | Φ(z)) dz."""
    from scipy import stats

    exact = float(
        next(c["precise"] for c in case("o39")["checks"] if c["quantity"] == "cdf" and c["output"] == "S")
    )
    copula = pair_copula("gaussian", 0.6)
    base, weight = np.polynomial.legendre.leggauss(40)
    end = 2 * math.log(3.0)
    edges = np.concatenate([np.arange(-12.0, 2.0), end - 0.1 ** np.arange(0.7, 14.0, 1.0), [end]])
    half = 0.5 * np.diff(edges)
    z = (edges[:-1, None] + half[:, None] * (base + 1)).ravel()
    other = (np.log(np.maximum(3.0 - np.exp(0.5 * z), 1e-300)) - 0.2) / 0.8
    inner = copula.conditional(Levels.from_scores(z[None]), Levels.from_scores(other)).lower
    total = float((inner * stats.norm.pdf(z)) @ (half[:, None] * weight).ravel())
    assert total == pytest.approx(exact, abs=1e-13)
