"""Every continuous family against mpmath, in both tails and the body, relative to itself.

The law's own `relative_error` is the tolerance: it must never be smaller than the true error.
"""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
import references
from references import DIGITS

from outspread.laws.law import Law
from outspread.laws.registry import FAMILIES

EPSILON = float(np.finfo(float).eps)

FAST: list[tuple[str, dict[str, float]]] = [
    ("normal", {"mean": 0, "sd": 1}),
    ("normal", {"mean": 42.02, "sd": 0.004}),
    ("lognormal", {"log_mean": 0.3, "log_sd": 0.5}),
    ("uniform", {"lower": -1.5, "upper": 2}),
    ("triangular", {"lower": 0, "mode": 1, "upper": 4}),
    ("trapezoidal", {"lower": 0, "top_lower": 1, "top_upper": 2.5, "upper": 4}),
    ("curvilinear_trapezoidal", {"lower": -2, "upper": 3, "limit_half_width": 0.5}),
    ("arcsine", {"lower": 0, "upper": 3}),
    ("beta", {"alpha": 2, "beta": 0.5}),
    ("beta", {"alpha": 40, "beta": 60}),
    ("power_function", {"shape": 2.5}),
    ("kumaraswamy", {"alpha": 2, "beta": 3.5}),
    ("log_uniform", {"lower": 0.01, "upper": 100}),
    ("cauchy", {"location": 1, "scale": 2}),
    ("half_cauchy", {"scale": 2}),
    ("student_t", {"degrees_of_freedom": 4.5, "location": 1, "scale": 2}),
    ("student_t", {"degrees_of_freedom": 60}),
    ("laplace", {"location": 1, "scale": 2}),
    ("logistic", {"location": 1, "scale": 2}),
    ("exponential", {"rate": 0.25}),
    ("weibull", {"shape": 1.5, "scale": 2}),
    ("weibull", {"shape": 8, "scale": 2, "location": 0.5}),
    ("rayleigh", {"scale": 3}),
    ("gompertz", {"shape": 0.1, "scale": 2}),
    ("gamma", {"shape": 0.5, "scale": 2}),
    ("gamma", {"shape": 3.2, "scale": 2}),
    ("gamma", {"shape": 250, "scale": 2}),
    ("chi_square", {"degrees_of_freedom": 7}),
    ("chi", {"degrees_of_freedom": 3.5}),
    ("maxwell", {"scale": 2}),
    ("nakagami", {"shape": 3, "spread": 4}),
    ("inverse_gamma", {"shape": 2.5, "scale": 3}),
    ("f", {"numerator_degrees_of_freedom": 3, "denominator_degrees_of_freedom": 12}),
    ("half_normal", {"scale": 2}),
    ("folded_normal", {"location": 1.5, "scale": 2}),
    ("levy", {"location": 0, "scale": 2}),
    ("birnbaum_saunders", {"shape": 0.5, "scale": 3}),
    ("logit_normal", {"location": 0.3, "scale": 1.2}),
    ("inverse_gaussian", {"mean": 2, "shape": 3}),
    ("inverse_gaussian", {"mean": 1, "shape": 0.2}),
    ("gumbel_max", {"location": 1, "scale": 2}),
    ("gumbel_min", {"location": 1, "scale": 2}),
    ("frechet", {"shape": 2.5, "scale": 2}),
    ("generalised_extreme_value", {"location": 1, "scale": 2, "shape": 0.2}),
    ("generalised_extreme_value", {"location": 0, "scale": 1, "shape": -0.3}),
    ("pareto", {"shape": 2.5, "scale": 3}),
    ("lomax", {"shape": 5.5, "scale": 2}),
    ("generalised_pareto", {"location": 1, "scale": 2, "shape": 0.2}),
    ("generalised_pareto", {"location": 0, "scale": 1, "shape": -0.4}),
    ("burr", {"inner_shape": 2, "outer_shape": 3, "scale": 2}),
    ("log_logistic", {"shape": 5.5, "scale": 2}),
    ("von_mises", {"location": 0, "concentration": 2}),
    ("rice", {"offset": 3, "scale": 2}),
    ("noncentral_chi_square", {"degrees_of_freedom": 4, "noncentrality": 10}),
]

SLOW: list[tuple[str, dict[str, float]]] = [
    ("lognormal", {"log_mean": -2, "log_sd": 1.7}),
    ("beta", {"alpha": 0.3, "beta": 0.4}),
    ("beta", {"alpha": 300, "beta": 2}),
    ("beta", {"alpha": 5000, "beta": 2000}),
    ("power_function", {"shape": 0.4}),
    ("kumaraswamy", {"alpha": 0.5, "beta": 0.7}),
    ("student_t", {"degrees_of_freedom": 0.5}),
    ("student_t", {"degrees_of_freedom": 1}),
    ("student_t", {"degrees_of_freedom": 1000}),
    ("weibull", {"shape": 0.6, "scale": 2}),
    ("weibull", {"shape": 50, "scale": 2}),
    ("gompertz", {"shape": 5, "scale": 1}),
    ("gamma", {"shape": 0.05, "scale": 2}),
    ("gamma", {"shape": 25, "scale": 2}),
    ("gamma", {"shape": 50, "scale": 2}),
    ("gamma", {"shape": 3000, "scale": 2}),
    ("gamma", {"shape": 100000, "scale": 2}),
    ("chi", {"degrees_of_freedom": 200}),
    ("inverse_gamma", {"shape": 6, "scale": 1}),
    ("f", {"numerator_degrees_of_freedom": 1, "denominator_degrees_of_freedom": 5}),
    ("f", {"numerator_degrees_of_freedom": 100, "denominator_degrees_of_freedom": 7}),
    ("folded_normal", {"location": -6, "scale": 1}),
    ("birnbaum_saunders", {"shape": 0.02, "scale": 1}),
    ("birnbaum_saunders", {"shape": 2, "scale": 1}),
    ("inverse_gaussian", {"mean": 1, "shape": 200}),
    ("frechet", {"shape": 6, "scale": 1}),
    ("burr", {"inner_shape": 0.7, "outer_shape": 9, "scale": 1}),
    ("von_mises", {"location": 1, "concentration": 200}),
    ("rice", {"offset": 0, "scale": 1}),
    ("skew_normal", {"location": 1, "scale": 2, "shape": 3}),
    ("skew_normal", {"location": 0, "scale": 1, "shape": -0.5}),
    ("hoyt", {"shape": 0.3, "spread": 2}),
    ("hoyt", {"shape": 1, "spread": 2}),
    ("noncentral_chi_square", {"degrees_of_freedom": 1, "noncentrality": 2}),
    ("noncentral_chi_square", {"degrees_of_freedom": 30, "noncentrality": 200}),
]

CASES = [
    *(pytest.param(family, given, id=f"{family}-{i}") for i, (family, given) in enumerate(FAST)),
    *(
        pytest.param(family, given, id=f"{family}-slow-{i}", marks=pytest.mark.slow)
        for i, (family, given) in enumerate(SLOW)
    ),
]
LEVELS = (1e-285, 1e-200, 1e-100, 1e-12, 1e-3, 0.3)


def _points(law: Law, upper: bool) -> list[tuple[float, float]]:
    """(p, quantile) for the levels whose quantile is a double strictly inside, clear of underflow."""
    low, high = law.support()
    levels = np.array(LEVELS)
    quantiles = law.iccdf(levels) if upper else law.icdf(levels)
    return [
        (p, float(x))
        for p, x in zip(LEVELS, quantiles, strict=True)
        if low < x < high and np.isfinite(x) and (x == 0 or abs(x) > 1e-290)
    ]


@pytest.mark.parametrize(("family", "given"), CASES)
def test_tails_hold_their_stated_relative_error(family: str, given: dict[str, float]) -> None:
    """cdf, ccdf and pdf differ from mpmath (50 digits) by less than `relative_error`, in both tails."""
    entry = FAMILIES[family]
    canonical = entry.canonical(given)
    law = entry.build(canonical)
    reference = getattr(references, family)(**canonical)
    seen = 0
    with mp.workdps(DIGITS):
        for upper in (False, True):
            exact_tail = reference.ccdf if upper else reference.cdf
            for p, x in _points(law, upper):
                exact = exact_tail(mp.mpf(x))
                if exact < 1e-290:
                    continue
                value = float((law.ccdf if upper else law.cdf)(x))
                assert abs(value / exact - 1) <= law.relative_error, (upper, p, x)
                density, exact_density = float(law.pdf(x)), reference.pdf(mp.mpf(x))
                if exact_density > 1e-290:
                    assert abs(density / exact_density - 1) <= law.relative_error, (upper, p, x)
                # a quantile is right to rounding: p may move by the change over one ulp of x
                slack = 3 * EPSILON * abs(x) * exact_density / exact
                assert abs(p / exact - 1) <= law.relative_error + slack, (upper, p, x)
                seen += 1
    assert seen >= 4


def test_every_continuous_family_is_covered() -> None:
    """No family escapes the comparison with mpmath."""
    tested = {family for family, _ in FAST + SLOW}
    assert tested == {key for key, family in FAMILIES.items() if family.kind == "continuous"}


@pytest.mark.parametrize(
    ("family", "given"),
    [
        ("normal", {"mean": 0, "sd": 1}),
        ("exponential", {"rate": 1}),
        ("weibull", {"shape": 1.5, "scale": 1}),
        ("lognormal", {"log_mean": 0, "log_sd": 1}),
        ("gumbel_max", {"location": 0, "scale": 1}),
        ("pareto", {"shape": 2, "scale": 1}),
        ("cauchy", {"location": 0, "scale": 1}),
        ("logistic", {"location": 0, "scale": 1}),
        ("laplace", {"location": 0, "scale": 1}),
        ("rayleigh", {"scale": 1}),
    ],
)
def test_elementary_families_reach_1e_12_at_1e_200(family: str, given: dict[str, float]) -> None:
    """The elementary families keep twelve digits at probability 1e-200 and do not underflow at 1e-300."""
    entry = FAMILIES[family]
    canonical = entry.canonical(given)
    law = entry.build(canonical)
    reference = getattr(references, family)(**canonical)
    with mp.workdps(DIGITS):
        x = float(law.iccdf(1e-200))
        assert abs(float(law.ccdf(x)) / reference.ccdf(mp.mpf(x)) - 1) < 1e-12
        x = float(law.iccdf(1e-300))
        assert 0.9e-300 < float(law.ccdf(x)) < 1.1e-300
