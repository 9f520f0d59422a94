"""Coverage intervals and modes against published values and values that follow from symmetry or monotony."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.stats as st
from borrowed import Borrowed
from scipy.optimize import brentq

from outspread.findings.intervals import interval, shortest, symmetric
from outspread.findings.modes import mode
from outspread.findings.results import Absent, Coverage, Figure


def ends(found: Coverage) -> tuple[float, float]:
    assert isinstance(found.lower, Figure)
    assert isinstance(found.upper, Figure)
    return found.lower.value, found.upper.value


def assert_holds(found: Coverage, lower: float, upper: float) -> None:
    """Both ends lie within their own stated errors of the true ones, and these errors are small."""
    assert isinstance(found.lower, Figure)
    assert isinstance(found.upper, Figure)
    assert abs(found.lower.value - lower) <= found.lower.error + 1e-300
    assert abs(found.upper.value - upper) <= found.upper.error
    assert max(found.lower.error, found.upper.error) <= 1e-8 * (upper - lower)


def test_shortest_of_a_comparison_loss() -> None:
    """Comparison loss X1^2 + X2^2 with x1 = 0.010, in 1e-6: JCGM 101:2008, 9.4.2.2, prints [0, 367] (from
    memory); a scaled noncentral chi-square law, whose interval begins at 0 because its density falls.

    The precise ends are those of the case in tests/reference/open.json with the same source.
    """
    law = Borrowed(st.ncx2(2, 4.0, scale=25.0))
    lower, upper = ends(shortest(law, 0.95))
    assert (round(lower), round(upper)) in {(0, 366), (0, 367)}
    assert upper == pytest.approx(366.0052897467762414, rel=1e-9)


def test_shortest_of_a_larger_comparison_loss() -> None:
    """The same with x1 = 0.050: JCGM 101:2008 prints [1590, 3543], a flat optimum found by sampling."""
    found = shortest(Borrowed(st.ncx2(2, 100.0, scale=25.0)), 0.95)
    lower, upper = ends(found)
    assert (lower, upper) == pytest.approx((1590, 3543), abs=8)
    assert (lower, upper) == pytest.approx((1593.569668673148578, 3548.569813823026914), rel=1e-8)


@pytest.mark.parametrize("p", [0.5, 0.9, 0.95, 0.999])
def test_symmetric_unimodal_laws_have_one_interval(p: float) -> None:
    """For a symmetric unimodal density the shortest interval is the symmetric one (JCGM 101:2008, 5.3.4)."""
    for frozen in (st.norm(3.0, 2.0), st.t(5.0), st.beta(2.0, 2.0)):
        law = Borrowed(frozen)
        true = frozen.ppf((1 - p) / 2), frozen.isf((1 - p) / 2)
        assert_holds(shortest(law, p), *true)
        assert_holds(symmetric(law, p), *true)


def test_triangle_has_the_interval_of_equal_density() -> None:
    """Triangle on [0, 1] with mode m: equal density cuts both sides at the share sqrt(1 - p) (elementary)."""
    m, p = 0.3, 0.95
    cut = np.sqrt(1 - p)
    assert_holds(shortest(Borrowed(st.triang(m), breaks=(m,)), p), m * cut, 1 - (1 - m) * cut)


def test_falling_density_starts_at_its_end() -> None:
    """A falling density has its shortest interval from the lower end: exponential [0, -log(1 - p)]."""
    assert_holds(shortest(Borrowed(st.expon()), 0.9), 0.0, np.log(10.0))
    law = Borrowed(st.chi2(1), singular=(True, False))
    assert_holds(shortest(law, 0.95), 0.0, 3.841458820694125958361375437)


def test_gamma_interval_solves_the_equations_of_equal_density() -> None:
    """Gamma with shape 2: f(a) = f(b) and F(b) - F(a) = p, solved here by another method."""
    frozen, p = st.gamma(2.0), 0.9
    a = brentq(lambda a: frozen.pdf(a) - frozen.pdf(frozen.ppf(frozen.cdf(a) + p)), 1e-9, 0.4, xtol=1e-15)
    assert_holds(shortest(Borrowed(frozen), p), a, frozen.ppf(frozen.cdf(a) + p))


class Mixed(Borrowed):
    """Two normals with unequal weights; quantiles by bisection."""

    def __init__(self, weight: float, apart: float, sd: float = 1.0):
        super().__init__(st.norm())
        self.weight, self.parts = weight, (st.norm(-apart), st.norm(apart, sd))

    def _sum(self, name: str, x: object) -> np.ndarray:
        one, two = (getattr(part, name)(x) for part in self.parts)
        return np.asarray(self.weight * one + (1 - self.weight) * two)

    def pdf(self, x):
        return self._sum("pdf", x)

    def cdf(self, x):
        return self._sum("cdf", x)

    def ccdf(self, x):
        return self._sum("sf", x)

    def _search(self, p, name, sign):
        p = np.asarray(p, float)
        low, high = np.full(p.shape, -60.0), np.full(p.shape, 60.0)
        for _ in range(90):
            middle = 0.5 * (low + high)
            left = sign * (self._sum(name, middle) - p) < 0
            low, high = np.where(left, middle, low), np.where(left, high, middle)
        return np.where((p <= 0) | (p >= 1), np.where(sign * (p - 0.5) < 0, -np.inf, np.inf), high)

    def icdf(self, p):
        return self._search(p, "cdf", 1.0)

    def iccdf(self, q):
        return self._search(q, "sf", -1.0)


def test_bimodal_law_takes_the_heavier_peak() -> None:
    """With two peaks the global minimum counts, not the nearest local one: here the narrow right peak."""
    found = shortest(Mixed(0.5, 6.0, sd=0.5), 0.4)
    lower, upper = ends(found)
    half = st.norm.ppf(0.9) * 0.5  # all of it from the narrow part, which holds 0.4 of its 0.5
    assert (lower, upper) == pytest.approx((6 - half, 6 + half), abs=1e-6)


def test_two_equal_peaks_are_not_unique() -> None:
    """Two intervals of one length: the program says so instead of choosing one."""
    found = shortest(Mixed(0.5, 6.0), 0.4)
    assert isinstance(found.lower, Absent)
    assert "not unique" in found.lower.because


def test_constant_density_is_not_unique() -> None:
    """Every interval of a uniform law with one probability is equally short."""
    found = shortest(Borrowed(st.uniform()), 0.95)
    assert isinstance(found.lower, Absent)
    assert "constant" in found.lower.because


def test_discrete_interval() -> None:
    """Binomial(10, 1/2): [2, 8] holds 1002/1024 = 0.978, and no shorter one reaches 0.95 (by counting)."""
    law = Borrowed(st.binom(10, 0.5), atoms=tuple(range(11)))
    assert ends(shortest(law, 0.95)) == (2.0, 8.0)
    geometric = Borrowed(st.geom(0.5), atoms=tuple(range(1, 60)))
    assert ends(shortest(geometric, 0.9)) == (1.0, 4.0)  # 15/16, while three points hold 7/8


def test_unknown_kind_is_refused() -> None:
    """Only the two kinds of the standard exist."""
    with pytest.raises(ValueError, match="symmetric"):
        interval(Borrowed(st.norm()), 0.95, "central")
    with pytest.raises(ValueError, match="between 0 and 1"):
        interval(Borrowed(st.norm()), 1.0, "shortest")


@pytest.mark.parametrize(
    ("law", "true"),
    [
        (Borrowed(st.norm(1.0, 2.0)), 1.0),
        (Borrowed(st.gamma(3.0, scale=2.0)), 4.0),  # (shape - 1) scale
        (Borrowed(st.lognorm(0.5)), np.exp(-0.25)),  # exp(mu - sigma^2)
        (Borrowed(st.expon()), 0.0),
        (Borrowed(st.triang(0.3), breaks=(0.3,)), 0.3),
        (Borrowed(st.gumbel_r(1.0, 2.0)), 1.0),
        (Borrowed(st.beta(3.0, 2.0)), 2.0 / 3.0),  # (a - 1)/(a + b - 2)
        (Borrowed(st.binom(10, 0.3), atoms=tuple(range(11))), 3.0),
    ],
)
def test_mode(law: Borrowed, true: float) -> None:
    """The mode of textbook laws, within its stated error."""
    found = mode(law)
    assert isinstance(found, Figure)
    assert abs(found.value - true) <= found.error
    assert found.error <= 2e-8 * max(abs(true), 1.0)


@pytest.mark.parametrize(
    ("law", "reason"),
    [
        (Borrowed(st.uniform()), "constant"),
        (Borrowed(st.trapezoid(0.25, 0.75), breaks=(0.25, 0.75)), "constant"),
        (Borrowed(st.chi2(1), singular=(True, False)), "unbounded"),
        (Mixed(0.5, 6.0), "equal peaks"),
        (Borrowed(st.poisson(4.0), atoms=tuple(range(60))), "3, 4 are equally probable"),
    ],
)
def test_mode_that_does_not_exist_says_why(law: Borrowed, reason: str) -> None:
    """No single point is called the mode where there is none."""
    found = mode(law)
    assert isinstance(found, Absent)
    assert reason in found.because
