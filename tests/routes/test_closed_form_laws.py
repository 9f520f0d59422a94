"""The laws that only closed forms need, against mpmath and exact fractions, in both tails."""

from __future__ import annotations

from fractions import Fraction
from itertools import product
from math import factorial, sqrt
from typing import Any

import mpmath
import numpy as np
import pytest
from closed_form_cases import chi_square, exponential, gamma, law, lognormal, normal, pair, uniform
from scipy import stats

from outspread.formula.parser import parse
from outspread.laws.extremes import IndependentExtreme
from outspread.laws.law import Law
from outspread.laws.normal_product import NormalProduct
from outspread.laws.transformed import EXP_MAP, LOG_MAP, AffineLaw, Transformed, power_map
from outspread.laws.uniform_sum import UniformSum
from outspread.routes.closed_form import recognise


def exact_uniform_sum(widths: list[Fraction], x: Fraction) -> Fraction:
    """P(Σ w U <= x) by inclusion and exclusion, exactly (Feller 1971, vol. II, I.9; from memory)."""
    total = Fraction(0)
    for chosen in product((0, 1), repeat=len(widths)):
        rest = x - sum((w for w, c in zip(widths, chosen, strict=True) if c), Fraction(0))
        if rest > 0:
            total += (-1) ** sum(chosen) * rest ** len(widths)
    volume = Fraction(factorial(len(widths)))
    for width in widths:
        volume *= width
    return total / volume


WIDTHS = [
    [Fraction(1)] * 2,
    [Fraction(1)] * 5,
    [Fraction(3, 10)] * 12,
    [Fraction(1), Fraction(1, 10), Fraction(2)],
    [Fraction(1), Fraction(1, 1000), Fraction(1), Fraction(7, 3)],
    [Fraction(1), Fraction(2), Fraction(3), Fraction(5), Fraction(8), Fraction(13)],
]


@pytest.mark.parametrize("widths", WIDTHS, ids=str)
def test_sums_of_uniforms_are_accurate_relative_to_themselves(widths: list[Fraction]) -> None:
    """cdf and ccdf against exact fractions, from 1e-6 of the width to the middle."""
    own = UniformSum(tuple(sorted(widths)))
    total = sum(widths)
    for numerator in (1, 50, 3_333, 77_777, 123_456, 333_333, 499_999, 500_000):
        x = float(total * Fraction(numerator, 1_000_000))
        exact = float(exact_uniform_sum(widths, Fraction(x)))
        assert float(own.cdf(x)) == pytest.approx(exact, rel=1e-12)
        mirrored = Fraction(float(own.total) - x)
        below = float(exact_uniform_sum(widths, Fraction(own.total) - mirrored))
        assert float(own.ccdf(float(mirrored))) == pytest.approx(below, rel=1e-11)


@pytest.mark.parametrize("widths", WIDTHS, ids=str)
def test_quantiles_of_sums_of_uniforms_invert_their_tails(widths: list[Fraction]) -> None:
    own = UniformSum(tuple(widths))
    p = np.array([1e-60, 1e-12, 1e-3, 0.2, 0.5, 0.7, 0.999])
    np.testing.assert_allclose(own.cdf(own.icdf(p)), p, rtol=1e-11)
    assert own.icdf(0.0) == 0.0
    assert own.icdf(1.0) == own.total


#: (correlation r, x, P(Z1 Z2 > x), P(Z1 Z2 <= -x)), the tails to 20 digits by mpmath 1.3 at 28 digits, from
#: the conditional law of Z1 Z2 given Z1 = z, which is normal: for x > 0, r and x being the doubles,
#:     far = exp(x/(1 + r))                       # quad's tolerance is absolute
#:     tail = quad(lambda z: far*npdf(z)*erfc((x/z - r*z)/sqrt(2*(1 - r*r))), edges)/far
#: with edges 0, sqrt(x)/2^k for k = 1, 3, ..., 23 and sqrt(x) + k sqrt(1 - r*r)/4 for k = 0, 2, ..., 60.
#: The other tail is that of -r.
PRODUCT_TAILS = [
    (0.0, 0.01, 0.48178900708551414094, 0.48178900708551414094),
    (0.0, 3.0, 0.0098192987215468905567, 0.0098192987215468905567),
    (0.0, 20.0, 1.7853416833472950395e-10, 1.7853416833472950395e-10),
    (0.0, 300.0, 1.1833248245985856523e-132, 1.1833248245985856523e-132),
    (-0.7, 0.01, 0.23082203560678948448, 0.72417717252197379751),
    (-0.7, 3.0, 2.9452550150736580959e-6, 0.054779946119142256979),
    (-0.7, 20.0, 2.951243256423771243e-31, 1.130862405461954723e-6),
    (0.95, 0.01, 0.86280916330723423973, 0.067854978953217399024),
    (0.95, 3.0, 0.078189448575290549489, 9.9631046565152688217e-29),
    (0.95, 20.0, 5.845536122346711664e-6, 8.5264407203714173683e-177),
    (0.99, 0.01, 0.90424905716509878907, 0.0099973271179342756779),
    (0.99, 3.0, 0.082239217527035144837, 1.1828408130180564114e-133),
]


@pytest.mark.parametrize(("correlation", "x", "upper", "lower"), PRODUCT_TAILS)
def test_products_of_normals_agree_with_mpmath(
    correlation: float, x: float, upper: float, lower: float
) -> None:
    """Both tails against digits of mpmath, the density against Craig's (1936; from memory)."""
    own = NormalProduct(correlation)
    assert float(own.ccdf(x)) == pytest.approx(upper, rel=1e-13)
    assert float(own.cdf(-x)) == pytest.approx(lower, rel=1e-13)
    assert float(own.cdf(x)) == pytest.approx(1 - upper, rel=1e-13)
    r, rest = mpmath.mpf(correlation), 1 - mpmath.mpf(correlation) ** 2
    for v in (x, -x):
        bessel = mpmath.besselk(0, abs(v) / rest)
        density = mpmath.exp(r * v / rest) * bessel / (mpmath.pi * mpmath.sqrt(rest))
        assert float(own.pdf(v)) == pytest.approx(float(density), rel=1e-12)


@pytest.mark.parametrize("correlation", [0.0, -0.7, 0.95, -0.99])
def test_quantiles_of_products_of_normals_invert_both_tails(correlation: float) -> None:
    """From the far tail to the middle and on both sides of 0, where P(Z1 Z2 > 0) = 1/2 + arcsin(r)/pi."""
    own = NormalProduct(correlation)
    p = np.concatenate((10.0 ** np.arange(-300, 0, 7), np.arange(0.1, 1.0, 0.07), [1 - 1e-6]))
    np.testing.assert_allclose(own.cdf(own.icdf(p)), p, rtol=1e-12)
    np.testing.assert_allclose(own.ccdf(own.iccdf(p)), p, rtol=1e-12)
    assert np.all(np.diff(own.icdf(p)) > 0)
    positive = 0.5 + np.arcsin(correlation) / np.pi
    assert own.ccdf(0.0) == pytest.approx(positive, rel=1e-13)
    assert abs(own.iccdf(positive)) < 1e-14
    np.testing.assert_array_equal(own.icdf([0.0, 1.0, -0.1, 1.1]), [-np.inf, np.inf, np.nan, np.nan])


TRANSFORMED = [
    pytest.param(
        Transformed(exponential(1), power_map(3.0), (0, np.inf), singular=(True, False)),
        stats.weibull_min(1 / 3),
        id="cube of an exponential",
    ),
    pytest.param(
        Transformed(exponential(2), EXP_MAP, (1, np.inf), moment_order=2.0), stats.pareto(2), id="pareto"
    ),
    pytest.param(
        Transformed(exponential(6), EXP_MAP, (1, np.inf), moment_order=6.0), stats.pareto(6), id="pareto 6"
    ),
    pytest.param(
        Transformed(gamma(2.5, 1), power_map(-1.0), (0, np.inf), moment_order=2.5),
        stats.invgamma(2.5),
        id="reciprocal gamma",
    ),
    pytest.param(Transformed(gamma(2.5, 1), LOG_MAP, (-np.inf, np.inf)), stats.loggamma(2.5), id="log-gamma"),
    pytest.param(Transformed(normal(0.1, 0.4), EXP_MAP, (0, np.inf)), stats.lognorm(0.4, scale=np.exp(0.1)),
                 id="lognormal"),
    pytest.param(AffineLaw(gamma(2, 1), 3.0, -1.0), stats.gamma(2, -1, 3), id="affine"),
]  # fmt: skip


@pytest.mark.parametrize(("own", "published"), TRANSFORMED)
def test_transformed_laws_agree_with_scipy(own: Law, published: Any) -> None:
    """Tails, density and moments of monotone maps whose law scipy.stats knows."""
    y = published.ppf(np.array([1e-4, 0.01, 0.3, 0.7, 0.99, 0.9999]))
    np.testing.assert_allclose(own.cdf(y), published.cdf(y), rtol=1e-11)
    np.testing.assert_allclose(own.ccdf(y), published.sf(y), rtol=1e-11)
    np.testing.assert_allclose(own.pdf(y), published.pdf(y), rtol=1e-11)
    mean, variance, skewness, kurtosis = (float(v) for v in published.stats(moments="mvsk"))
    expected = np.array([mean, variance, skewness, kurtosis + 3])
    got = np.array([own.mean(), own.variance(), own.skewness(), own.kurtosis()])
    exists = np.isfinite(got)
    assert exists[0]
    np.testing.assert_allclose(got[exists], expected[exists], rtol=1e-9)


def test_a_negative_factor_swaps_the_tails() -> None:
    """P(1 - 2 X <= y) is P(X >= (1 - y)/2), in the far tails too."""
    own = AffineLaw(normal(0, 1), -2.0, 1.0)
    assert float(own.cdf(-39.0)) == pytest.approx(stats.norm.sf(20.0), rel=1e-12)
    assert float(own.ccdf(41.0)) == pytest.approx(stats.norm.cdf(-20.0), rel=1e-12)
    assert float(own.icdf(1e-100)) == pytest.approx(1 - 2 * stats.norm.isf(1e-100), rel=1e-12)


@pytest.mark.parametrize("scale", [0.1, -0.1, -3.0])
def test_affine_maps_of_counts_keep_their_atoms(scale: float) -> None:
    """cdf, ccdf and quantiles of scale*N + 0.7 at and between the atoms, by adding up scipy's masses."""
    own = AffineLaw(law("poisson", mean=3), scale, 0.7)
    atoms = own.atoms()
    k = np.arange(40)
    values = 0.7 + scale * k
    masses = stats.poisson(3).pmf(k)
    for y in [*values[:8], *(values[:8] + 0.03)]:
        assert float(own.cdf(y)) == pytest.approx(masses[values <= y + 1e-12].sum(), rel=1e-12)
        assert float(own.ccdf(y)) == pytest.approx(masses[values > y + 1e-12].sum(), rel=1e-12)
    assert np.all(np.diff(atoms.values) > 0)
    for p in (0.001, 0.2, 0.5, 0.9):
        order = np.argsort(values)
        expected = values[order][np.searchsorted(np.cumsum(masses[order]), p)]
        assert float(own.icdf(p)) == pytest.approx(expected, rel=1e-12)
    for k_value in (0, 1, 4):
        p = float(own.cdf(0.7 + scale * k_value))
        assert float(own.icdf(p)) == pytest.approx(0.7 + scale * k_value, rel=1e-12)


def test_extremes_keep_both_tails() -> None:
    """max and min of three different laws against the product formula in mpmath, 50 digits."""
    laws = (normal(0, 1), exponential(1), gamma(2, 0.5))
    mpmath.mp.dps = 50

    def ccdf(y: float) -> list[Any]:
        y = mpmath.mpf(y)
        gamma_tail = mpmath.gammainc(2, 2 * y, mpmath.inf) if y > 0 else 1
        return [mpmath.ncdf(-y), mpmath.exp(-max(y, 0)), gamma_tail]

    largest = IndependentExtreme(laws, largest=True)
    smallest = IndependentExtreme(laws, largest=False)
    for y in (1e-9, 0.1, 1.0, 4.0, 12.0, 30.0):
        tails = ccdf(y)
        below = mpmath.fprod(1 - tail for tail in tails)
        above = mpmath.fprod(tails)
        assert float(largest.cdf(y)) == pytest.approx(float(below), rel=1e-11)
        assert float(largest.ccdf(y)) == pytest.approx(float(1 - below), rel=1e-11)
        assert float(smallest.ccdf(y)) == pytest.approx(float(above), rel=1e-11)
        assert float(smallest.cdf(y)) == pytest.approx(float(1 - above), rel=1e-11)
    mpmath.mp.dps = 15
    p = np.array([1e-200, 1e-12, 0.3, 0.9])
    for extreme in (largest, smallest):
        np.testing.assert_allclose(extreme.cdf(extreme.icdf(p)), p, rtol=1e-11)
        np.testing.assert_allclose(extreme.ccdf(extreme.iccdf(p)), p, rtol=1e-11)


def test_the_largest_of_two_dice_counts_its_atoms() -> None:
    """P(max = k) = (2k - 1)/36 for two dice (elementary)."""
    die = law("discrete_uniform", lower=1, upper=6)
    largest = IndependentExtreme((die, die), largest=True)
    atoms = largest.atoms()
    np.testing.assert_array_equal(atoms.values, np.arange(1.0, 7.0))
    np.testing.assert_allclose(atoms.masses, (2 * np.arange(1, 7) - 1) / 36, rtol=1e-12)
    np.testing.assert_array_equal(largest.icdf(np.array([1e-9, 0.5, 0.99])), [1.0, 5.0, 6.0])
    assert largest.mean() == pytest.approx(161 / 36, rel=1e-12)


def derived(text: str, laws: dict[str, Law], dependence: Any = None) -> Law:
    form = recognise(parse(text), laws, dependence)
    assert form is not None
    return form.law


def test_a_correlated_pair_turns_to_a_hoyt_radius() -> None:
    """P(hypot > y) of a correlated, unequal pair against mpmath quadrature over the angle (polar form)."""
    s, t, rho = 0.7, 1.9, 0.6
    own = derived("hypot(x, y)", {"x": normal(0, s), "y": normal(0, t)}, pair("x", "y", rho))
    mpmath.mp.dps = 30

    def survival(radius: float) -> float:
        determinant = mpmath.mpf(1) - mpmath.mpf("0.6") ** 2
        a, b = 1 / mpmath.mpf("0.7") ** 2, 1 / mpmath.mpf("1.9") ** 2
        c = mpmath.mpf("0.6") / (mpmath.mpf("0.7") * mpmath.mpf("1.9"))

        def along(angle: Any) -> Any:
            cosine, sine = mpmath.cos(angle), mpmath.sin(angle)
            q = (a * cosine**2 - 2 * c * cosine * sine + b * sine**2) / determinant
            return mpmath.exp(-q * mpmath.mpf(radius) ** 2 / 2) / q

        scale = mpmath.sqrt(a * b / determinant) / mpmath.pi
        return float(scale * mpmath.quad(along, mpmath.linspace(0, mpmath.pi, 17)))

    for radius in (0.001, 0.5, 2.0, 6.0, 15.0):
        assert float(own.ccdf(radius)) == pytest.approx(survival(radius), rel=1e-11)
    mpmath.mp.dps = 15


def test_rice_far_tail_agrees_with_mpmath() -> None:
    """Marcum's Q at 1e-12 and beyond by mpmath quadrature of Rice's density (Rice 1945, eq. 3.10-11)."""
    own = derived("sqrt((x - 1)^2 + y^2)", {"x": normal(3, 0.5), "y": normal(0, 0.5)})
    mpmath.mp.dps = 30
    nu, sigma = mpmath.mpf(2), mpmath.mpf("0.5")

    def density(r: Any) -> Any:
        return (
            r / sigma**2 * mpmath.exp(-(r**2 + nu**2) / (2 * sigma**2)) * mpmath.besseli(0, r * nu / sigma**2)
        )

    for r in (2.5, 4.0, 6.0, 9.0):
        exact = float(mpmath.quad(density, [r + mpmath.mpf(k) / 4 for k in range(13)] + [r + 6, r + 12]))
        assert float(own.ccdf(r)) == pytest.approx(exact, rel=1e-11)
    for r in (1e-3, 0.1, 1.0):
        exact = float(mpmath.quad(density, mpmath.linspace(0, r, 5)))
        assert float(own.cdf(r)) == pytest.approx(exact, rel=1e-11)
    mpmath.mp.dps = 15


def test_product_of_powers_of_uniforms_in_the_far_tail() -> None:
    """P(U^2 V^2 <= z) = sqrt(z) (1 - ln(z)/2) at z = 1e-100 (elementary)."""
    own = derived("u^2*v^2", {"u": uniform(0, 1), "v": uniform(0, 1)})
    z = 1e-100
    assert float(own.cdf(z)) == pytest.approx(sqrt(z) * (1 - np.log(z) / 2), rel=1e-12)


def test_moments_that_do_not_exist_are_said_not_to() -> None:
    """1/Z² has no mean, F(·, 3) no variance, a half-Cauchy none at all (JKB, from memory)."""
    assert derived("x^-2", {"x": normal(0, 1)}).mean() == np.inf
    ratio = derived("(a/5)/(b/3)", {"a": chi_square(5), "b": chi_square(3)})
    assert ratio.mean() == pytest.approx(3.0, rel=1e-12)
    assert ratio.variance() == np.inf
    assert derived("abs(x/y)", {"x": normal(0, 1), "y": normal(0, 1)}).mean() == np.inf
    power = derived("(a/b)^2", {"a": chi_square(5), "b": chi_square(3)})
    assert power.mean() == np.inf
    product_law = derived("m*n", {"m": lognormal(0, 0.5), "n": lognormal(0.2, 0.8)})
    assert product_law.mean() == pytest.approx(np.exp(0.2 + 0.89 / 2), rel=1e-12)


@pytest.mark.parametrize("y", [-1500.0, -800.0, -41.5, -39.0, -3.0, 0.7])
def test_logarithms_of_gammas_keep_their_lower_tail(y: float) -> None:
    """P(ln G <= y) for shape 1/2 against mpmath's incomplete gamma, where e^y underflows too."""
    own = derived("log(g)", {"g": gamma(0.5, 1)})
    mpmath.mp.dps = 30
    exact = float(mpmath.gammainc(0.5, 0, mpmath.exp(y), regularized=True))
    mpmath.mp.dps = 15
    assert float(own.cdf(y)) == pytest.approx(exact, rel=1e-12)
    if exact > 1e-300:
        assert float(own.icdf(exact)) == pytest.approx(y, rel=1e-11)


@pytest.mark.parametrize("y", [-900.0, -45.0, -42.0, -1.0, 2.0, 41.0, 44.0, 700.0])
def test_logarithms_of_quotients_keep_both_tails(y: float) -> None:
    """P(ln(A/B) <= y) and its complement against mpmath's incomplete beta (A: 1, B: 3 degrees of freedom)."""
    own = derived("log(a/b)", {"a": chi_square(1), "b": chi_square(3)})
    mpmath.mp.dps = 700
    v = mpmath.exp(y)
    below = mpmath.betainc(0.5, 1.5, 0, v / (1 + v), regularized=True)
    assert float(own.cdf(y)) == pytest.approx(float(below), rel=1e-12)
    assert float(own.ccdf(y)) == pytest.approx(float(1 - below), rel=1e-11)
    mpmath.mp.dps = 15


def test_moments_of_logarithms_are_polygamma_values() -> None:
    """E ln G = digamma(a), variance trigamma(a) (JKB vol. 2, ch. 22; from memory), shape 1/2."""
    own = derived("log(g)", {"g": gamma(0.5, 1)})
    assert own.mean() == pytest.approx(float(mpmath.digamma(0.5)), rel=1e-11)
    assert own.variance() == pytest.approx(float(mpmath.polygamma(1, 0.5)), rel=1e-11)
