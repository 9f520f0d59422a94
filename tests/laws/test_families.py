"""Families against scipy.stats, handbook tables and JCGM 101; parameter sets and their errors."""

from __future__ import annotations

import numpy as np
import pytest
from family_cases import CONTINUOUS, DISCRETE, Case
from scipy import special, stats

from outspread.errors import LawError
from outspread.laws.law import Law
from outspread.laws.listing import family_lines
from outspread.laws.registry import FAMILIES

BODY = np.array([1e-6, 1e-3, 0.05, 0.2, 0.5, 0.8, 0.95, 0.999])


def law_of(key: str, **parameters: object) -> Law:
    family = FAMILIES[key]
    return family.build(family.canonical(parameters))


@pytest.mark.parametrize("case", CONTINUOUS, ids=str)
def test_continuous_family_agrees_with_scipy(case: Case) -> None:
    """pdf, cdf, ccdf at scipy's own quantiles and the quantiles themselves; scipy's tails are not trusted."""
    law = case.law()
    with np.errstate(all="ignore"):
        x = case.reference.ppf(BODY)
        expected = [f(x) for f in (case.reference.pdf, case.reference.cdf, case.reference.sf)]
    np.testing.assert_allclose(law.pdf(x), expected[0], rtol=1e-10)
    np.testing.assert_allclose(law.cdf(x), expected[1], rtol=1e-9, atol=1e-13)
    np.testing.assert_allclose(law.ccdf(x), expected[2], rtol=1e-9, atol=1e-13)
    np.testing.assert_allclose(law.icdf(BODY), x, rtol=1e-8, atol=1e-9)
    np.testing.assert_allclose(law.iccdf(1 - BODY), x, rtol=1e-7, atol=1e-8)


#: scipy takes seconds to integrate the moments of a von Mises law: they have a test of their own
MOMENTS = [case for case in (*CONTINUOUS, *DISCRETE) if str(case) != "von_mises-0-2"]


@pytest.mark.parametrize("case", MOMENTS, ids=str)
def test_moments_agree_with_scipy_or_do_not_exist(case: Case) -> None:
    """Mean, variance, skewness, kurtosis; where ours is inf or nan, scipy's must not be a finite number
    unless the order is at or above the known limit of existence."""
    law = case.law()
    expected = np.add(case.reference.stats("mvsk"), (0, 0, 0, 3))
    ours = np.array([law.mean(), law.variance(), law.skewness(), law.kurtosis()])
    for order, (value, reference) in enumerate(zip(ours, expected, strict=True), start=1):
        if law.moment_exists(order):
            if np.isfinite(reference):
                # scipy integrates some of these numerically, to about nine digits
                assert value == pytest.approx(reference, rel=2e-8, abs=2e-9)
        else:
            assert not np.isfinite(value)


@pytest.mark.parametrize("concentration", [0.3, 2.0, 40.0])
def test_von_mises_moments_are_those_of_its_fourier_series(concentration: float) -> None:
    """Density (1 + 2 sum r_j cos jx)/(2 pi), r_j = I_j/I_0 (DLMF 10.35.2), times x² and x⁴ term by term."""
    law = law_of("von_mises", location=0.7, concentration=concentration)
    j = np.arange(1, 200)
    ratio = (-1.0) ** j * special.ive(j, concentration) / special.ive(0, concentration)
    second = np.pi**2 / 3 + np.sum(4 * ratio / j**2)
    fourth = np.pi**4 / 5 + np.sum(ratio * (8 * np.pi**2 / j**2 - 48 / j**4.0))
    assert law.mean() == pytest.approx(0.7, abs=1e-14)
    assert law.variance() == pytest.approx(second, rel=1e-12)
    assert law.skewness() == pytest.approx(0.0, abs=1e-12)
    assert law.kurtosis() == pytest.approx(fourth / second**2, rel=1e-11)


@pytest.mark.parametrize("case", DISCRETE, ids=str)
def test_discrete_family_agrees_with_scipy(case: Case) -> None:
    """Masses, both tails and quantiles on the lattice; quantiles of exact steps come back."""
    law = case.law()
    atoms = law.atoms()
    k = atoms.values[:200]
    np.testing.assert_allclose(atoms.masses[:200], case.reference.pmf(k), rtol=1e-11)
    np.testing.assert_allclose(law.cdf(k), case.reference.cdf(k), rtol=1e-11, atol=1e-15)
    np.testing.assert_allclose(law.ccdf(k), case.reference.sf(k), rtol=1e-9, atol=1e-15)
    np.testing.assert_array_equal(law.cdf(k + 0.5), law.cdf(k))
    np.testing.assert_array_equal(law.pdf(k), 0)
    assert law.continuous_mass == 0
    assert np.sum(atoms.masses) == pytest.approx(1, abs=1e-12)
    assert np.all(np.diff(atoms.values) > 0)
    steps = k[law.cdf(k) < 0.999]
    np.testing.assert_array_equal(law.icdf(law.cdf(steps)), steps)
    steps = k[(law.ccdf(k) < 0.999) & (law.ccdf(k) > 0)]
    np.testing.assert_array_equal(law.iccdf(law.ccdf(steps)), steps)


@pytest.mark.parametrize(
    ("key", "parameters", "p", "expected", "digits"),
    [
        # Upper percentage points printed in Pearson and Hartley, Biometrika Tables (from memory).
        ("normal", {"mean": 0, "sd": 1}, 0.025, 1.959964, 6),
        ("chi_square", {"degrees_of_freedom": 10}, 0.05, 18.307, 3),
        ("student_t", {"degrees_of_freedom": 10}, 0.025, 2.228, 3),
        ("f", {"numerator_degrees_of_freedom": 3, "denominator_degrees_of_freedom": 12}, 0.05, 3.49, 2),
    ],
)
def test_handbook_percentage_points(
    key: str, parameters: dict[str, float], p: float, expected: float, digits: int
) -> None:
    """Printed tables, to their last digit."""
    assert round(float(law_of(key, **parameters).iccdf(p)), digits) == expected


def test_curvilinear_trapezoid_of_jcgm_101() -> None:
    """JCGM 101:2008, 6.4.3.3 (variance formula) and 6.4.3.4: 10.0 V ± 0.1 V, d = 0.05 V gives 0.060 V
    (the example from memory)."""
    law = law_of("curvilinear_trapezoidal", lower=9.9, upper=10.1, limit_half_width=0.05)
    assert law.mean() == pytest.approx(10.0, rel=1e-15)
    assert law.variance() == pytest.approx(0.2**2 / 12 + 0.05**2 / 9, rel=1e-13)
    assert round(law.standard_deviation(), 3) == 0.060
    assert law.support() == pytest.approx((9.85, 10.15))


def test_curvilinear_trapezoid_is_a_uniform_of_uncertain_limits() -> None:
    """Its cdf equals that of centre + W (2V - 1), W uniform on w ± d, averaged by quadrature over W."""
    a, b, d = 1.0, 4.0, 0.7
    law = law_of("curvilinear_trapezoidal", lower=a, upper=b, limit_half_width=d)
    nodes, weights = np.polynomial.legendre.leggauss(400)
    widths = 0.5 * (b - a) + d * nodes
    for x in (0.5, 1.2, 2.0, 3.9, 4.6):
        conditional = np.clip(0.5 + (x - 2.5) / (2 * widths), 0, 1)
        assert float(law.cdf(x)) == pytest.approx(0.5 * float(weights @ conditional), abs=1e-5)


def test_every_family_is_listed_and_described() -> None:
    """At least forty families; each has a symbol for each canonical parameter, usage and reference."""
    assert len(FAMILIES) >= 40
    text = "\n".join(family_lines())
    for key, family in FAMILIES.items():
        assert family.key == key
        assert key in text
        assert set(family.symbols) == set(family.canonical_names)
        assert family.usage
        assert family.reference
        for candidate in family.parameter_sets:
            assert str(candidate) in text


@pytest.mark.slow
def test_every_density_can_be_typeset() -> None:
    """The LaTeX of each density renders to SVG."""
    ziamath = pytest.importorskip("ziamath")
    for family in FAMILIES.values():
        assert "<svg" in ziamath.Latex(family.density_latex).svg()


@pytest.mark.parametrize(
    ("key", "given", "canonical"),
    [
        ("uniform", {"centre": 3, "half_width": 2}, {"lower": 1, "upper": 5}),
        ("exponential", {"mean": 4}, {"rate": 0.25}),
        ("gamma", {"shape": 3, "rate": 4}, {"shape": 3, "scale": 0.25}),
        ("gamma", {"mean": 6, "sd": 3}, {"shape": 4, "scale": 1.5}),
        ("hoyt", {"first_sd": 4, "second_sd": 3}, {"shape": 0.75, "spread": 25}),
        ("weibull", {"shape": 2, "scale": 3}, {"shape": 2, "scale": 3, "location": 0}),
        ("trapezoidal", {"lower": 0, "upper": 4, "top_ratio": 0.5},
         {"lower": 0, "top_lower": 1, "top_upper": 3, "upper": 4}),
        ("triangular", {"centre": 1, "half_width": 2}, {"lower": -1, "mode": 1, "upper": 3}),
    ],
)  # fmt: skip
def test_parameter_sets_lead_to_the_canonical_one(
    key: str, given: dict[str, float], canonical: dict[str, float]
) -> None:
    """Each set that the trade uses means the same law."""
    assert FAMILIES[key].canonical(given) == pytest.approx(canonical)
    law = law_of(key, **given)
    assert law.family == key
    assert dict(law.parameters) == pytest.approx(canonical)
    assert law.name == FAMILIES[key].title


def test_lognormal_by_mean_and_sd() -> None:
    """The law built from its mean and sd has that mean and sd."""
    law = law_of("lognormal", mean=5, sd=2)
    assert law.mean() == pytest.approx(5, rel=1e-14)
    assert law.standard_deviation() == pytest.approx(2, rel=1e-13)


@pytest.mark.parametrize("key", ["gumbel_max", "gumbel_min", "laplace", "logistic"])
def test_location_scale_families_by_mean_and_sd(key: str) -> None:
    """The law built from its mean and sd has that mean and sd."""
    law = law_of(key, mean=5, sd=2)
    assert law.mean() == pytest.approx(5, rel=1e-14)
    assert law.standard_deviation() == pytest.approx(2, rel=1e-13)


@pytest.mark.parametrize(
    "key",
    [key for key, family in FAMILIES.items() if any("quantiles" in s.names for s in family.parameter_sets)],
)
def test_two_quantiles_are_met(key: str) -> None:
    """A law given by two quantiles has these quantiles."""
    law = law_of(key, quantiles={0.05: 1.25, 0.95: 3.5})
    np.testing.assert_allclose(law.icdf([0.05, 0.95]), [1.25, 3.5], rtol=1e-12)


@pytest.mark.parametrize(
    ("key", "given", "blamed", "words"),
    [
        ("normal", {"mean": 0, "sd": -1}, "sd", "above 0"),
        ("normal", {"mean": 0}, None, "{mean, sd}"),
        ("normal", {"mean": 0, "sigma": 1}, "sigma", "{mean, sd}"),
        ("uniform", {"lower": 2, "upper": 1}, "upper", "above"),
        ("curvilinear_trapezoidal", {"lower": 0, "upper": 1, "limit_half_width": 0.6}, "limit_half_width",
         "half"),
        ("binomial", {"trials": 2.5, "probability": 0.1}, "trials", "whole number"),
        ("binomial", {"trials": 2, "probability": 1.1}, "probability", "from 0 to 1"),
        ("categorical", {"values": (1, 2), "probabilities": (0.5, 0.6)}, "probabilities", "add up to 1.1"),
        ("categorical", {"values": (1, 2), "probabilities": (0.5,)}, "probabilities", "as many"),
        ("normal", {"quantiles": {0.9: 1.0, 0.1: 2.0}}, "quantiles", "increasing"),
        ("hypergeometric", {"population": 5, "successes": 6, "draws": 1}, "successes", "at most"),
        ("nakagami", {"shape": 0.3, "spread": 1}, "shape", "0.5 or more"),
        ("normal", {"mean": float("nan"), "sd": 1}, "mean", "finite"),
    ],
)  # fmt: skip
def test_wrong_parameters_are_named_with_what_would_be_right(
    key: str, given: dict[str, object], blamed: str | None, words: str
) -> None:
    """LawError blames the parameter and says what would be right."""
    with pytest.raises(LawError) as caught:
        FAMILIES[key].canonical(given)
    assert caught.value.parameter == blamed
    assert words in caught.value.message


def test_categorical_values_are_sorted_and_merged() -> None:
    """Equal values add their probabilities."""
    law = law_of("categorical", values=(3, 1, 1), probabilities=(0.5, 0.25, 0.25))
    np.testing.assert_array_equal(law.atoms().values, [1, 3])
    np.testing.assert_allclose(law.atoms().masses, [0.5, 0.5])


@pytest.mark.parametrize(
    ("key", "given", "ends"),
    [
        ("chi_square", {"degrees_of_freedom": 1}, (True, False)),
        ("chi_square", {"degrees_of_freedom": 2}, (False, False)),
        ("gamma", {"shape": 0.9, "scale": 1}, (True, False)),
        ("arcsine", {"lower": 0, "upper": 1}, (True, True)),
        ("beta", {"alpha": 2, "beta": 0.5}, (False, True)),
        ("weibull", {"shape": 0.5, "scale": 1}, (True, False)),
    ],
)
def test_singular_ends_are_where_the_density_is_infinite(
    key: str, given: dict[str, float], ends: tuple[bool, bool]
) -> None:
    """`singular_ends` agrees with the density at the end points."""
    law = law_of(key, **given)
    assert law.singular_ends() == ends
    low, high = law.support()
    assert bool(np.isinf(law.pdf(low))) == ends[0]
    assert bool(np.isinf(law.pdf(high))) == ends[1]


@pytest.mark.parametrize(
    ("law", "reference"),
    [
        (law_of("poisson", mean=40.0), stats.poisson(40)),
        (law_of("binomial", trials=400, probability=0.1), stats.binom(400, 0.1)),
        (law_of("negative_binomial", successes=3.5, probability=0.2), stats.nbinom(3.5, 0.2)),
        (law_of("hypergeometric", population=500, successes=60, draws=80), stats.hypergeom(500, 60, 80)),
    ],
)
def test_discrete_tails_add_up_from_exact_masses(law: Law, reference: object) -> None:
    """ccdf far out equals the sum of masses written with log-gamma in mpmath, relative to itself."""
    import mpmath as mp

    atoms = law.atoms()
    with mp.workdps(40):
        last = atoms.values[-1]
        masses = [_exact_mass(law, k) for k in np.arange(atoms.values[0], last + 1)]
        index = np.searchsorted(atoms.values, law.iccdf([1e-3, 1e-30, 1e-100]))
        for i in index[atoms.values[index] < last - 10]:
            exact = mp.fsum(masses[i + 1 :])
            assert abs(float(law.ccdf(atoms.values[i])) / exact - 1) <= law.relative_error
            assert abs(float(atoms.masses[i]) / masses[i] - 1) <= law.relative_error


def _exact_mass(law: Law, k: float) -> object:
    import mpmath as mp

    given = {name: mp.mpf(value) for name, value in law.parameters.items()}
    k = mp.mpf(float(k))
    if law.family == "poisson":
        return mp.exp(k * mp.log(given["mean"]) - given["mean"] - mp.loggamma(k + 1))
    if law.family == "binomial":
        n, p = given["trials"], given["probability"]
        return mp.binomial(n, k) * p**k * (1 - p) ** (n - k)
    if law.family == "negative_binomial":
        r, p = given["successes"], given["probability"]
        return mp.gamma(k + r) / (mp.factorial(k) * mp.gamma(r)) * p**r * (1 - p) ** k
    n, marked, draws = given["population"], given["successes"], given["draws"]
    return mp.binomial(marked, k) * mp.binomial(n - marked, draws - k) / mp.binomial(n, draws)
