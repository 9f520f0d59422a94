"""Sampling with one input integrated exactly: the stated error holds on laws that are known exactly."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from outspread.formula.parser import parse, parse_event
from outspread.laws.build import build_law
from outspread.laws.law import Law
from outspread.numerics.slices.problem import Scores
from outspread.reading.model import Distribution
from outspread.routes.sampling import derive_sampled, sampled_probability

SEED = 20260401


def normal(mean: float = 0.0, sd: float = 1.0) -> Law:
    return build_law(Distribution("normal", {"mean": mean, "sd": sd}))


FOUR = {name: normal() for name in "abcd"}
SUM = parse("a + b + c + d")
CORRELATED = Scores(("a", "b"), np.array([[1.0, 0.7], [0.7, 1.0]]))


@pytest.mark.parametrize("inner", ["d", ""])
@pytest.mark.parametrize("scores", [None, CORRELATED], ids=["independent", "correlated"])
def test_a_sum_of_four_normals(inner: str, scores: Scores | None) -> None:
    """Normal with variance 4, and 4 + 2 * 0.7 where two of them are correlated (scipy.stats.norm)."""
    law, evaluations = derive_sampled(SUM, FOUR, scores, inner, SEED)
    exact = stats.norm(scale=np.sqrt(4 if scores is None else 5.4))
    points = np.array([-5.0, -2.0, 0.0, 1.0, 6.0])
    for kind, reference in (("cdf", exact.cdf), ("ccdf", exact.sf)):
        estimate = law.estimate(kind, points)
        assert np.all(np.abs(estimate.value - reference(points)) <= estimate.error)
        assert np.all(estimate.error < (1e-3 if inner else 1e-2))
    if inner:
        density = law.estimate("pdf", points)
        assert np.all(np.abs(density.value - exact.pdf(points)) <= density.error)
    moments = law.moment_estimates()
    assert np.all(np.abs(moments.value - [0, exact.std(), 0, 3]) <= moments.error)
    assert evaluations > 0


def test_the_same_seed_gives_the_same_law_and_another_seed_another_one() -> None:
    points = np.array([-1.0, 0.5, 3.0])
    one, two, other = (derive_sampled(SUM, FOUR, None, "d", seed)[0].cdf(points) for seed in (1, 1, 2))
    assert one.tolist() == two.tolist()
    assert one.tolist() != other.tolist()


def test_an_atom_is_measured() -> None:
    """max(A + B + C, 0) of standard normals is 0 with probability 1/2."""
    laws = {name: normal() for name in "abc"}
    law, _ = derive_sampled(parse("max(a + b + c, 0)"), laws, None, "c", SEED)
    assert law.atoms().values.tolist() == [0.0]
    assert abs(law.atoms().masses[0] - 0.5) <= law.atoms().errors[0]


def test_a_moment_that_does_not_exist_is_not_sampled() -> None:
    """(A + B) / C of normals is a Cauchy law."""
    laws = {name: normal() for name in "abc"}
    law, _ = derive_sampled(parse("(a + b)/c"), laws, None, "a", SEED)
    assert np.isnan(law.mean())


def test_the_probability_of_an_event() -> None:
    """P(A > 0 and B > 0) = 1/4 + asin(rho) / (2 pi) (Sheppard 1899)."""
    value, error = sampled_probability(parse_event("a > 0 and b > 0"), FOUR, CORRELATED, SEED)
    assert abs(value - (0.25 + np.arcsin(0.7) / (2 * np.pi))) <= error < 5e-3
