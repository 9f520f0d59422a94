"""Functions kept on panels against scipy.stats, whose functions they were built from, and mpmath far out."""

from __future__ import annotations

from collections.abc import Callable

import mpmath as mp
import numpy as np
import pytest
from scipy import stats

from outspread.laws.law import Array, Estimates
from outspread.laws.tabulated import Tabulated
from outspread.numerics.panels import expand, panels_over

LAWS = {
    "normal": stats.norm(2.0, 3.0),
    "pole at 0": stats.gamma(0.4),
    "power tails": stats.t(3),
    "bounded": stats.beta(2, 3.5),
    "uniform": stats.uniform(0.0, 2.0),
    "three magnitudes wide": stats.lognorm(2.5),
}


def exact(function: Callable[[Array], Array]) -> Callable[[Array], Estimates]:
    def evaluate(y: Array) -> Estimates:
        with np.errstate(all="ignore"):
            value = np.nan_to_num(function(y), posinf=0.0)
        return Estimates(value, 1e-15 * value)

    return evaluate


def table(law: stats.rv_frozen) -> Tabulated:
    functions = {"cdf": exact(law.cdf), "ccdf": exact(law.sf), "pdf": exact(law.pdf)}
    centre = float(law.median())
    scale = float(law.ppf(0.84) - law.ppf(0.16))
    low, high = law.support()
    return Tabulated(lambda kind, y: functions[kind](y), (float(low), float(high)), (), centre, scale, 1.0)


@pytest.mark.parametrize("name", LAWS)
def test_values_lie_within_their_error_in_both_tails(name: str) -> None:
    law = LAWS[name]
    kept = table(law)
    levels = np.concatenate([10.0 ** -np.arange(1.0, 14.0, 0.7), np.linspace(0.02, 0.5, 40)])
    # next to a finite upper end neighbouring numbers lie a share of the distance to it apart
    high = levels[levels > 1e-4] if np.isfinite(law.support()[1]) else levels
    y = np.unique(np.concatenate([law.ppf(levels), law.isf(high)]))
    for kind, function in (("cdf", law.cdf), ("ccdf", law.sf), ("pdf", law.pdf)):
        found, true = kept(kind, y), function(y)
        assert np.all(np.abs(found.value - true) <= found.error + 4e-15 * true)
        small = true < 0.6 if kind != "pdf" else np.ones(y.size, bool)
        assert float(np.max(found.error[small] / true[small])) < 2e-11


def test_a_tail_keeps_its_digits_at_1e_minus_200() -> None:
    kept = table(LAWS["normal"])
    y = np.array([2.0 - 3.0 * 30.0])
    with mp.workdps(30):
        true = float(mp.ncdf(-30))
    assert kept("cdf", y).value[0] == pytest.approx(true, rel=1e-12)


def test_a_kink_that_no_knot_marks_is_closed_in_on() -> None:
    def kinked(y: Array) -> Estimates:
        value = 1.0 + np.abs(y - np.sqrt(2.0))
        return Estimates(value, 1e-15 * value)

    found = expand(kinked, panels_over((), 0.0, 4.0, 1.0, 1.0))
    y = np.linspace(0.0, 4.0, 4001)
    result = found(y)
    assert np.all(np.abs(result.value - kinked(y).value) <= result.error + 1e-15)
    assert float(result.error.max()) < 1e-11
    assert min(panel.upper - panel.lower for panel in found.panels) < 1e-10


def test_where_no_series_holds_the_error_says_so() -> None:
    """Noise of one percent that the values do not admit to."""

    def noisy(y: Array) -> Estimates:
        value = 1.0 + 0.01 * np.sin(1e9 * y)
        return Estimates(value, np.zeros(y.size))

    found = expand(noisy, panels_over((), 0.0, 1.0, 0.5, 1.0))
    y = np.random.Generator(np.random.PCG64(5)).random(2000)
    result = found(y)
    assert np.all(np.abs(result.value - noisy(y).value) <= result.error)


def test_outside_the_panels_there_is_nothing() -> None:
    kept = table(LAWS["bounded"])
    y = np.array([-1.0, 2.0])
    assert kept("pdf", y).value.tolist() == [0.0, 0.0]
