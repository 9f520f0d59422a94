"""Truncation, mixtures, stated densities, tables, histograms, samples and observations."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy import stats

from outspread.errors import LawError
from outspread.formula.parser import parse
from outspread.laws.build import CONSTRUCTIONS, build_law
from outspread.laws.law import Law
from outspread.reading.model import Distribution

LEVELS = np.array([1e-12, 1e-6, 0.01, 0.3, 0.5, 0.8, 0.999])


def law_of(
    family: str,
    given: dict[str, object],
    components: tuple[Distribution, ...] = (),
    lower: float | None = None,
    upper: float | None = None,
) -> Law:
    return build_law(Distribution(family, given, components, lower, upper))


def density(text: str, lower: float, upper: float) -> Law:
    return law_of("density", {"density": parse(text), "lower": lower, "upper": upper})


NORMAL = {"mean": 0.0, "sd": 1.0}


def test_truncated_normal_has_the_moments_of_the_textbook() -> None:
    """Mean and variance of a normal cut on both sides (Johnson, Kotz and Balakrishnan 1, eq. 13.134-135)."""
    law = law_of("normal", {"mean": 3.0, "sd": 2.0}, lower=2.0, upper=8.0)
    a, b = -0.5, 2.5
    mass = mp.ncdf(b) - mp.ncdf(a)
    delta = (mp.npdf(a) - mp.npdf(b)) / mass
    variance = 1 + (a * mp.npdf(a) - b * mp.npdf(b)) / mass - delta**2
    assert law.mean() == pytest.approx(float(3 + 2 * delta), rel=1e-13)
    assert law.variance() == pytest.approx(float(4 * variance), rel=1e-12)
    assert law.name == "Truncated normal distribution"
    assert law.support() == (2.0, 8.0)
    reference = stats.truncnorm(a, b, 3, 2)
    np.testing.assert_allclose(law.icdf(LEVELS), reference.ppf(LEVELS), rtol=1e-10)


@pytest.mark.parametrize(("lower", "upper"), [(0.0, None), (20.0, 20.5), (-3.0, 3.0), (None, -8.0)])
def test_truncation_keeps_relative_accuracy_beside_the_cuts(lower: float | None, upper: float | None) -> None:
    """cdf and ccdf of a cut normal law against mpmath, where the cut leaves almost nothing too."""
    law = law_of("normal", NORMAL, lower=lower, upper=upper)
    low, high = law.support()
    with mp.workdps(60):
        bottom = mp.mpf(low) if np.isfinite(low) else -mp.inf
        top = mp.mpf(high) if np.isfinite(high) else mp.inf

        def mass(a: object, b: object) -> object:
            with mp.workdps(400):
                return (mp.erfc(a / mp.sqrt(2)) - mp.erfc(b / mp.sqrt(2))) / 2

        whole = mass(bottom, top)
        for p in (1e-9, 1e-3, 0.4, 0.9):
            for x in (float(law.icdf(p)), float(law.iccdf(p))):
                below, above = mass(bottom, mp.mpf(x)) / whole, mass(mp.mpf(x), top) / whole
                assert abs(float(law.cdf(x)) / below - 1) < law.relative_error
                assert abs(float(law.ccdf(x)) / above - 1) < law.relative_error


def test_quantiles_next_to_a_cut_are_not_rounded_away() -> None:
    """A standard normal cut at 0: the quantile at 1e-200 is 1e-200 sqrt(pi/2)."""
    law = law_of("normal", NORMAL, lower=0.0)
    assert float(law.icdf(1e-200)) == pytest.approx(1e-200 * np.sqrt(np.pi / 2), rel=1e-14)


@pytest.mark.parametrize("family", ["normal", "lognormal"])
def test_what_an_elementary_bound_promises_is_there(family: str) -> None:
    """Where a law surely meets an interval, scipy finds more than 0.1 of it there; not all are left open."""
    names, published = (
        (("mean", "sd"), stats.norm(1.5, 0.4))
        if family == "normal"
        else (("log_mean", "log_sd"), stats.lognorm(0.4, scale=np.exp(1.5)))
    )
    law = law_of(family, dict(zip(names, (1.5, 0.4), strict=True)))
    edges = [-np.inf, -3.0, 0.0, *published.ppf([1e-9, 0.01, 0.2, 0.4, 0.6, 0.8, 0.99, 1 - 1e-9]), np.inf]
    sure = [(a, b) for a in edges for b in edges if law.surely_meets(a, b)]
    assert all(published.cdf(b) - published.cdf(a) > 0.1 for a, b in sure)
    assert (edges[4], edges[9]) in sure
    assert (edges[5], edges[9]) not in sure
    assert not law.surely_meets(edges[9], edges[4])


def test_truncating_a_discrete_law_renormalises_its_atoms() -> None:
    """Zero-truncated Poisson: mean λ / (1 - exp(-λ)); the limits themselves stay."""
    law = law_of("poisson", {"mean": 3.0}, lower=1.0)
    assert law.mean() == pytest.approx(3 / (1 - np.exp(-3)), rel=1e-13)
    assert law.continuous_mass == 0
    assert law.atoms().values[0] == 1


def test_truncating_a_cauchy_gives_it_moments() -> None:
    """Cut on both sides it has a mean and a variance; cut on one side it has none."""
    law = law_of("cauchy", {"location": 0.0, "scale": 1.0}, lower=-1.0, upper=1.0)
    assert law.mean() == pytest.approx(0, abs=1e-14)
    assert law.variance() == pytest.approx(4 / np.pi - 1, rel=1e-12)
    assert law.moment_exists(2)
    assert not law_of("cauchy", {"location": 0.0, "scale": 1.0}, lower=0.0).moment_exists(1)


def test_truncation_that_leaves_nothing_is_refused() -> None:
    """The limits miss the support, or are in the wrong order."""
    with pytest.raises(LawError, match="limits that meet the distribution"):
        law_of("uniform", {"lower": 0.0, "upper": 1.0}, lower=2.0)
    with pytest.raises(LawError, match="upper above lower"):
        law_of("normal", NORMAL, lower=1.0, upper=0.0)


def _mixture() -> Law:
    parts = (
        Distribution("normal", NORMAL),
        Distribution("uniform", {"lower": 0.0, "upper": 3.0}),
        Distribution("poisson", {"mean": 2.0}),
    )
    return law_of("mixture", {"weights": (0.5, 0.3, 0.2)}, parts)


def test_mixture_adds_its_parts() -> None:
    """pdf, cdf, ccdf, atoms and moments are the weighted ones; breaks are the uniform's ends."""
    law = _mixture()
    x = np.array([-9.0, -1.0, 0.0, 0.5, 2.0, 5.0, 30.0])
    cdf = 0.5 * stats.norm.cdf(x) + 0.3 * stats.uniform(0, 3).cdf(x) + 0.2 * stats.poisson(2).cdf(x)
    np.testing.assert_allclose(law.cdf(x), cdf, rtol=1e-12)
    sf = 0.5 * stats.norm.sf(x) + 0.3 * stats.uniform(0, 3).sf(x) + 0.2 * stats.poisson(2).sf(x)
    np.testing.assert_allclose(law.ccdf(x), sf, rtol=1e-11)
    assert law.breaks() == (0.0, 3.0)
    assert law.continuous_mass == pytest.approx(0.8)
    assert float(law.atoms().masses[2]) == pytest.approx(0.2 * stats.poisson(2).pmf(2), rel=1e-13)
    assert law.mean() == pytest.approx(0.3 * 1.5 + 0.2 * 2, rel=1e-14)
    second = 0.5 * 1 + 0.3 * 3 + 0.2 * 6
    assert law.variance() == pytest.approx(second - law.mean() ** 2, rel=1e-14)


def test_mixture_quantiles_cross_and_stop_at_atoms() -> None:
    """icdf inverts the continuous stretches and stays on an atom while the level lies within its jump."""
    law = _mixture()
    for k in (0.0, 1.0, 2.0):
        below, reached = float(law.cdf(np.nextafter(k, -1))), float(law.cdf(k))
        for share in (0.01, 0.5, 0.99):
            assert float(law.icdf(below + share * (reached - below))) == k
    for p in (1e-200, 1e-5, 0.1, 0.9):
        x = float(law.icdf(p))
        if x not in (0.0, 1.0, 2.0, 3.0, 4.0):
            assert float(law.cdf(x)) == pytest.approx(p, rel=1e-12)


def test_mixture_weights_are_checked() -> None:
    """They add up to 1, none is negative, and there is one for each part."""
    part = Distribution("normal", NORMAL)
    for weights, words in (((0.5, 0.6), "add up to 1.1"), ((-0.5, 1.5), "0 or more"), ((1.0,), "as many")):
        with pytest.raises(LawError, match=words):
            law_of("mixture", {"weights": weights}, (part, part))


@pytest.mark.parametrize(
    ("text", "lower", "upper", "reference"),
    [
        ("6*x*(1-x)", 0, 1, stats.beta(2, 2)),
        ("exp(-x)", 0, np.inf, stats.expon()),
        ("exp(-x^2/2)/sqrt(2*pi)", -np.inf, np.inf, stats.norm()),
        ("1/(pi*(1+x^2))", -np.inf, np.inf, stats.cauchy()),
        ("0.5*exp(-abs(x-0.1234))", -np.inf, np.inf, stats.laplace(0.1234)),
        ("100*exp(-1e4*(x-3)^2)/sqrt(pi)", -np.inf, np.inf, stats.norm(3, 0.01 / np.sqrt(2))),
        ("1/(2*sqrt(x))", 0, 1, stats.powerlaw(0.5)),
    ],
)
def test_density_by_formula_agrees_with_the_law_it_states(
    text: str, lower: float, upper: float, reference: object
) -> None:
    """cdf, quantiles and moments of a typed density equal those of the family in scipy."""
    law = density(text, lower, upper)
    x = reference.ppf(LEVELS[1:])
    np.testing.assert_allclose(law.cdf(x), reference.cdf(x), rtol=1e-11)
    np.testing.assert_allclose(law.ccdf(x), reference.sf(x), rtol=1e-11)
    np.testing.assert_allclose(law.pdf(x), reference.pdf(x), rtol=1e-11)
    if law.moment_exists(2):
        assert law.mean() == pytest.approx(float(reference.mean()), rel=1e-12, abs=1e-13)
        assert law.variance() == pytest.approx(float(reference.var()), rel=1e-11)


def test_density_by_formula_knows_its_kinks_poles_and_tails() -> None:
    """Kinks come from the formula, infinite ends are marked, a power-law tail has no mean."""
    assert density("abs(x)", -1, 1).breaks() == (0.0,)
    assert density("if(x<0.3, 1/0.6, 1/1.4)", 0, 1).breaks() == pytest.approx((0.3,))
    assert density("1/(pi*sqrt((x-1)*(2-x)))", 1, 2).singular_ends() == (True, True)
    assert not density("1/(pi*(1+x^2))", -np.inf, np.inf).moment_exists(1)
    assert density("2/x^3", 1, np.inf).moment_order == pytest.approx(2)


def test_density_tails_are_relative() -> None:
    """A typed exponential density at probability 1e-200, and a typed Cauchy one beyond 1e150."""
    law = density("exp(-x)", 0, np.inf)
    assert float(law.ccdf(460.0)) == pytest.approx(float(mp.exp(-460)), rel=law.relative_error)
    law = density("1/(pi*(1+x^2))", -np.inf, np.inf)
    assert float(law.ccdf(1e200)) == pytest.approx(1e-200 / np.pi, rel=1e-12)
    assert float(law.icdf(1e-200)) == pytest.approx(-1e200 / np.pi, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("x", "integrates to 0.5 from 0 to 1"),
        ("1/x", "diverges"),
        ("x - 0.5", "is -0.5 at x"),
        ("2*y", "names 'y'"),
        ("log(x - 2)", "has no value"),
        ("0*x", "is 0 everywhere"),
    ],
)
def test_wrong_densities_are_refused(text: str, words: str) -> None:
    """The message says the integral, or where the density is negative or undefined."""
    with pytest.raises(LawError, match=words) as caught:
        density(text, 0, 1)
    assert caught.value.parameter == "density"


def test_tables_and_histograms() -> None:
    """A tabulated triangle is the triangular law; a histogram spreads each bin's share evenly."""
    law = law_of("table", {"x": (0.0, 1.0, 3.0), "pdf": (0.0, 2 / 3, 0.0)})
    reference = stats.triang(1 / 3, 0, 3)
    x = np.array([1e-9, 0.3, 1.0, 2.2, 2.9])
    np.testing.assert_allclose(law.cdf(x), reference.cdf(x), rtol=1e-13)
    np.testing.assert_allclose(law.ccdf(x), reference.sf(x), rtol=1e-9)
    np.testing.assert_allclose(law.icdf(law.cdf(x)), x, rtol=1e-12)
    np.testing.assert_allclose(law.iccdf(law.ccdf(x[1:])), x[1:], rtol=1e-12)
    assert law.skewness() == pytest.approx(float(reference.stats("s")), rel=1e-12)
    assert law.kurtosis() == pytest.approx(3 + float(reference.stats("k")), rel=1e-12)
    law = law_of("table", {"x": (1.0, 2.0, 5.0), "cdf": (0.0, 0.25, 1.0)})
    np.testing.assert_allclose(law.cdf([1.5, 2, 3.5]), [0.125, 0.25, 0.625])
    law = law_of("histogram", {"edges": (0.0, 1.0, 2.0, 5.0), "counts": (1.0, 0.0, 3.0)})
    np.testing.assert_allclose(law.cdf([0.5, 1.5, 2.0, 3.5]), [0.125, 0.25, 0.25, 0.625])
    np.testing.assert_allclose(law.icdf([0.25, 0.5]), [1.0, 3.0])
    assert law.breaks() == (1.0, 2.0)
    assert float(law.between(0.5, 3.5)) == pytest.approx(0.5)


@pytest.mark.parametrize(
    ("family", "given", "words"),
    [
        ("table", {"x": (0.0, 1.0), "pdf": (1.0, 2.0)}, "integrates to 1.5"),
        ("table", {"x": (0.0, 1.0), "cdf": (0.1, 1.0)}, "from 0 to 1"),
        ("table", {"x": (0.0, 1.0, 2.0), "cdf": (0.0, 1.0, 0.5)}, "falls from 1 to 0.5"),
        ("table", {"x": (0.0, 0.0), "pdf": (1.0, 1.0)}, "does not increase"),
        ("table", {"x": (0.0, 1.0), "pdf": (-1.0, 3.0)}, "0 or more"),
        ("table", {"x": (0.0, 1.0)}, "write {x, pdf} or {x, cdf}"),
        ("histogram", {"edges": (0.0, 1.0), "counts": (1.0, 2.0)}, "one more edge"),
        ("sample", {"values": ()}, "empty"),
        ("observations", {"mean": 1.0, "sd": 1.0, "count": 1.0}, "from 2 on"),
        ("nornal", {"mean": 1.0}, "no family 'nornal'"),
    ],
)
def test_wrong_constructions_are_refused(family: str, given: dict[str, object], words: str) -> None:
    """Each message says what would be right."""
    with pytest.raises(LawError, match=words):
        law_of(family, given)


def test_sample_gives_every_value_the_same_probability() -> None:
    """Equal values are put together; the quantile is the smallest value that reaches the level."""
    law = law_of("sample", {"values": (3.0, 1.0, 2.0, 1.0)})
    np.testing.assert_array_equal(law.atoms().values, [1, 2, 3])
    np.testing.assert_allclose(law.atoms().masses, [0.5, 0.25, 0.25])
    np.testing.assert_array_equal(law.icdf([0.5, 0.51, 0.75, 0.76]), [1, 2, 2, 3])
    assert law.variance() == pytest.approx(np.var([3, 1, 2, 1]))


def test_observations_are_the_t_law_of_jcgm_101() -> None:
    """JCGM 101:2008, 6.4.9.2-6.4.9.4: degrees n - 1, mean x̄, variance (n-1)/(n-3) s²/n."""
    law = law_of("observations", {"mean": 10.0, "sd": 2.0, "count": 8.0})
    assert law.family == "student_t"
    assert law.mean() == 10
    assert law.variance() == pytest.approx(7 / 5 * 4 / 8, rel=1e-14)


def test_every_construction_can_be_built() -> None:
    """The list shown to the user holds what `build_law` knows."""
    assert set(CONSTRUCTIONS) == {"observations", "mixture", "density", "table", "histogram", "sample"}
