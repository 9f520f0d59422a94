"""Laws made from values alone, against the scipy distribution that supplies the values."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

from outspread.laws.derived import DerivedLaw
from outspread.laws.law import Array, Atoms, Estimates

LEVELS = np.array([1e-250, 1e-100, 1e-30, 1e-9, 0.01, 0.3])


def derived(frozen: Any) -> DerivedLaw:
    def evaluate(kind: str, y: Array) -> Estimates:
        with np.errstate(all="ignore"):
            value = {"pdf": frozen.pdf, "cdf": frozen.cdf, "ccdf": frozen.sf}[kind](y)
        return Estimates(value, 1e-13 * value)

    # scipy's quantiles of the beta law fail at 1e-250
    levels = LEVELS[2:] if np.isfinite(frozen.support()[1]) else LEVELS
    nodes = np.unique(np.concatenate([frozen.ppf(levels), frozen.isf(levels)]))
    return DerivedLaw(evaluate, tuple(float(end) for end in frozen.support()), nodes)


KNOWN = {"normal": stats.norm(2, 3), "exponential": stats.expon(), "beta": stats.beta(2, 5),
         "lognormal": stats.lognorm(0.5), "gumbel": stats.gumbel_r()}  # fmt: skip


@pytest.mark.parametrize("name", KNOWN)
def test_quantiles_and_moments(name: str) -> None:
    frozen, law = KNOWN[name], derived(KNOWN[name])
    levels = np.array([1e-12, 1e-3, 0.2, 0.5, 0.9])
    for upper, exact in ((False, frozen.ppf(levels)), (True, frozen.isf(levels))):
        quantile = law.estimate_quantile(levels, upper=upper)
        assert np.all(np.abs(quantile.value - exact) <= quantile.error + 1e-13 * np.abs(exact))
        np.testing.assert_allclose(quantile.value, exact, rtol=1e-10)
    mean, variance, skewness, excess = (float(m) for m in frozen.stats("mvsk"))
    exact = np.array([mean, variance**0.5, skewness, excess + 3])
    moments = law.moment_estimates()
    assert np.all(np.abs(moments.value - exact) <= moments.error + 1e-14 * np.abs(exact))
    np.testing.assert_allclose(moments.value, exact, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize(("degrees", "finite"), [(1, 0), (2, 1), (3, 2), (4, 3), (5, 4)])
def test_moments_exist_up_to_the_tail_exponent(degrees: int, finite: int) -> None:
    """Student's t with k degrees of freedom has the moments below k; the next even one diverges."""
    law = derived(stats.t(degrees))
    assert [tail.exponent for tail in law.tails()] == [degrees, degrees]
    assert int(np.isfinite(law.moment_estimates().value).sum()) == finite


def test_levels_outside_are_no_quantiles_and_the_ends_are_the_support() -> None:
    law = derived(KNOWN["beta"])
    assert np.isnan(law.icdf([-0.1, 1.1, np.nan])).all()
    assert law.icdf([0.0, 1.0]).tolist() == [0.0, 1.0]
    assert law.iccdf([0.0, 1.0]).tolist() == [1.0, 0.0]


def test_a_discrete_law_is_its_atoms() -> None:
    """binom(3, 1/2): masses 1, 3, 3, 1 eighths."""
    masses = np.array([1, 3, 3, 1]) / 8
    atoms = Atoms(np.arange(4.0), masses, np.zeros(4))
    law = DerivedLaw(lambda kind, y: Estimates(0 * y, 0 * y), (0.0, 3.0), np.zeros(0), atoms, 0.0)
    assert law.cdf([-1, 0, 0.5, 2, 3]).tolist() == [0, 0.125, 0.125, 0.875, 1]
    assert law.ccdf([-1, 0, 0.5, 2, 3]).tolist() == [1, 0.875, 0.875, 0.125, 0]
    assert law.icdf([0.1, 0.125, 0.126, 0.5, 0.9]).tolist() == [0, 0, 1, 1, 3]
    assert (law.mean(), law.variance()) == pytest.approx((1.5, 0.75), rel=1e-12)
