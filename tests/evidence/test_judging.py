"""The comparison of laws with draws: right laws pass, wrong ones are caught, the band is Massart's."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
import pytest
import scipy.stats as st

from outspread.evidence.drawing import Sample
from outspread.evidence.judging import (
    band,
    comparison_points,
    judge_atoms,
    judge_density,
    judge_event,
    judge_law,
    judge_output,
    judge_sample,
    judge_symbolic,
)
from outspread.laws.build import build_law
from outspread.laws.law import Array, Law
from outspread.reading.model import Distribution
from outspread.routes.derived import DerivedOutput, SymbolicDensity

LABEL = "plain sampling"


def law_of(family: str, **parameters: object) -> Law:
    return build_law(Distribution(family, parameters))


def draws_of(frozen: object, count: int = 1_000_000) -> Array:
    generator = np.random.Generator(np.random.PCG64(11))
    return np.asarray(frozen.rvs(size=count, random_state=generator), float)  # type: ignore[attr-defined]


class Faulty(Law):
    """A law with a fault put in on purpose: its distribution function is moved where `change` says."""

    def __init__(self, right: Law, cdf: float = 0.0, pdf: float = 0.0, mass: float = 0.0):
        self.right, self.moved, self.scaled = right, cdf, 1.0 + pdf
        self.relative_error = right.relative_error

    def support(self) -> tuple[float, float]:
        return self.right.support()

    def pdf(self, x: npt.ArrayLike) -> Array:
        return self.right.pdf(x) * self.scaled

    def cdf(self, x: npt.ArrayLike) -> Array:
        value = self.right.cdf(x)
        return np.clip(value + self.moved * 4 * value * (1 - value), 0, 1)

    def ccdf(self, x: npt.ArrayLike) -> Array:
        return 1.0 - self.cdf(x)

    def icdf(self, p: npt.ArrayLike) -> Array:
        return self.right.icdf(p)

    def iccdf(self, q: npt.ArrayLike) -> Array:
        return self.right.iccdf(q)

    def mean(self) -> float:
        return self.right.mean()

    def variance(self) -> float:
        return self.right.variance()

    def skewness(self) -> float:
        return self.right.skewness()

    def kurtosis(self) -> float:
        return self.right.kurtosis()


def test_band_is_massarts() -> None:
    """n = 10^6, 99.99 %: sqrt(ln(2 / 1e-4) / (2 10^6)) = sqrt(9.903487552536127e-6 / 2) (mpmath)."""
    assert band(1_000_000) == pytest.approx(math.sqrt(9.903487552536127e-6 / 2), rel=1e-9)
    assert band(100, 0.95) == pytest.approx(
        0.13581015, rel=1e-7
    )  # 1.3581015/sqrt(n): Kolmogorov's 95 % point


@pytest.mark.parametrize(
    ("law", "frozen"),
    [
        (law_of("normal", mean=2, sd=3), st.norm(2, 3)),
        (law_of("cauchy", location=0, scale=1), st.cauchy()),
        (law_of("exponential", rate=2), st.expon(scale=0.5)),
        (law_of("beta", alpha=0.3, beta=0.4), st.beta(0.3, 0.4)),
        (law_of("poisson", mean=3), st.poisson(3)),
        (law_of("binomial", trials=168, probability=0.021), st.binom(168, 0.021)),
    ],
)
def test_right_laws_agree(law: Law, frozen: object) -> None:
    """A right law stays inside the band, and its largest difference is far from zero: it was looked at."""
    found = judge_sample("y", law, draws_of(frozen), LABEL)
    assert found.agrees
    assert found.points >= 12
    assert 1e-5 < found.largest_difference < found.allowed < 0.00223
    assert all(abs(difference) <= found.largest_difference for _, difference in found.curve)


def test_supremum_is_that_of_scipy() -> None:
    """What is seen at the chosen points comes close to the supremum over all draws (scipy's kstest)."""
    draws = draws_of(st.norm(2, 3), 20_000)
    found = judge_sample("y", law_of("normal", mean=2, sd=3), draws, LABEL)
    true = st.kstest(draws, st.norm(2, 3).cdf).statistic
    assert found.largest_difference <= true + 1e-12
    assert found.largest_difference >= 0.8 * true


@pytest.mark.parametrize("moved", [0.003, -0.003])
def test_a_distribution_function_wrong_by_a_third_of_a_percent_is_caught(moved: float) -> None:
    """A fault of 0.3 % in the cdf lies outside the band of 10^6 draws."""
    wrong = Faulty(law_of("normal", mean=0, sd=1), cdf=moved)
    found = judge_sample("y", wrong, draws_of(st.norm()), LABEL)
    assert not found.agrees
    assert found.largest_difference > found.allowed
    assert "outside the band" in found.note


def test_a_narrow_fault_between_the_first_points_is_caught() -> None:
    """The bound holds between the points that are looked at first: a step hidden there does not escape."""

    class Stepped(Faulty):
        def cdf(self, x: npt.ArrayLike) -> Array:
            x = np.asarray(x, float)
            value = self.right.cdf(x)  # flat on a stretch that holds 0.006, at its lower end's level
            low, high = st.norm.ppf(0.5003), st.norm.ppf(0.5063)
            return np.where((x > low) & (x < high), 0.5003, value)

    found = judge_sample("y", Stepped(law_of("normal", mean=0, sd=1)), draws_of(st.norm()), LABEL)
    assert not found.agrees


def test_undefined_formula_disagrees() -> None:
    """Draws at which the formula is undefined are no agreement."""
    draws = draws_of(st.norm(), 1000)
    draws[:7] = np.nan
    found = judge_sample("y", law_of("normal", mean=0, sd=1), draws, LABEL)
    assert not found.agrees
    assert "undefined in 7" in found.note


def test_atoms_survive_rounding_of_the_formula() -> None:
    """0.1 + 0.2 is not 0.3 in binary: a draw there is taken to be at the atom."""
    law = law_of("categorical", values=(0.3, 0.5), probabilities=(0.25, 0.75))
    generator = np.random.Generator(np.random.PCG64(5))
    draws = np.where(generator.random(100_000) < 0.25, 0.1 + 0.2, 0.5)
    assert draws.min() != 0.3
    assert judge_sample("y", law, draws, LABEL).agrees
    assert judge_atoms("y", law, draws, LABEL)[0].agrees
    wrong = law_of("categorical", values=(0.3, 0.5), probabilities=(0.27, 0.73))
    assert not judge_sample("y", wrong, draws, LABEL).agrees
    assert not judge_atoms("y", wrong, draws, LABEL)[0].agrees


@pytest.mark.parametrize(
    "law",
    [
        law_of("normal", mean=2, sd=3),
        law_of("cauchy", location=0, scale=1),
        law_of("chi_square", degrees_of_freedom=1),
        law_of("beta", alpha=0.5, beta=0.5),
        law_of("curvilinear_trapezoidal", lower=0, upper=2, limit_half_width=0.25),
    ],
)
def test_density_integrates_to_the_distribution_function(law: Law) -> None:
    """Right densities pass with differences near rounding, singular ends included; a scaled one is caught."""
    found = judge_density("y", law)
    assert found.agrees
    assert found.points >= 6
    assert found.largest_difference < 1e-9
    assert not judge_density("y", Faulty(law, pdf=1e-6)).agrees


def test_closed_form_against_numeric_law() -> None:
    """Two laws are compared within the sum of their stated errors; one part in 10^9 is seen."""
    right = law_of("normal", mean=0, sd=1)
    assert judge_law("y", right, law_of("normal", mean=0, sd=1)).agrees
    assert judge_law("y", right, law_of("normal", mean=0, sd=1)).points == 200
    assert not judge_law("y", right, law_of("normal", mean=0, sd=1 + 1e-9)).agrees


def test_symbolic_density_is_compared() -> None:
    """A formula that equals the density passes, a formula with a wrong factor does not."""
    law = law_of("normal", mean=0, sd=1)
    right = SymbolicDensity("", lambda y: np.exp(-0.5 * y * y) / math.sqrt(2 * math.pi))
    assert judge_symbolic("y", law, right).agrees
    wrong = SymbolicDensity("", lambda y: np.exp(-0.5 * y * y) / math.sqrt(2 * 3.1416))
    assert not judge_symbolic("y", law, wrong).agrees


def test_all_comparisons_of_an_output_come_in_a_fixed_order() -> None:
    """Sample, atoms, density, numeric law, symbolic density."""
    law = law_of("normal", mean=0, sd=1)
    symbolic = SymbolicDensity("", lambda y: np.exp(-0.5 * y * y) / math.sqrt(2 * math.pi))
    derived = DerivedOutput("y", "closed_form", law, symbolic=symbolic, numeric=law)
    sample = Sample({"y": draws_of(st.norm())}, LABEL, {"a and b": 0.25})
    rows = judge_output(derived, sample)
    assert [row.against for row in rows] == [
        LABEL,
        "the integral of the density",
        "the numeric law, for the closed form",
        "the symbolic density",
    ]
    assert all(row.agrees for row in rows)
    assert judge_event("a and b", 0.2515, 1e-4, sample).agrees
    assert not judge_event("a and b", 0.2525, 1e-4, sample).agrees


def test_comparison_points_reach_both_tails() -> None:
    """200 points from 1e-6 to 1 - 1e-6."""
    points = comparison_points(law_of("normal", mean=0, sd=1))
    assert points.size == 200
    assert st.norm.cdf(points[0]) == pytest.approx(1e-6, rel=1e-9)
    assert st.norm.sf(points[-1]) == pytest.approx(1e-6, rel=1e-9)


def test_comparison_points_avoid_atoms_breaks_and_ends() -> None:
    """A density may be anything at these, so nothing is compared there."""
    law = law_of("triangular", lower=0, mode=1, upper=3)
    assert not set(comparison_points(law).tolist()) & {0.0, 1.0, 3.0}
    discrete = law_of("binomial", trials=5, probability=0.5)
    assert comparison_points(discrete).size == 0
