"""Draws of whole inputs: truncation, mixtures, formulas, data, dependence; and the streams of numbers."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pytest
import scipy.stats as st

from outspread.errors import DerivationError
from outspread.evidence.dependence import draw_group, score_matrix
from outspread.evidence.drawing import FIRST_STREAM, SECOND_STREAM, draw_sample, generator_for
from outspread.evidence.marginals import draw
from outspread.formula.parser import parse, parse_event
from outspread.reading.build import read_mapping
from outspread.reading.model import Dependence, Distribution, Input

COUNT = 100_000
LIMIT = 2.225 / np.sqrt(COUNT)  # 99.99 % of Kolmogorov's law


def generator() -> np.random.Generator:
    return np.random.Generator(np.random.PCG64(3))


def distance(draws: np.ndarray, cdf: Any) -> float:
    return float(st.kstest(draws, cdf).statistic)


def normal(lower: float | None = None, upper: float | None = None) -> Distribution:
    return Distribution("normal", {"mean": 0.0, "sd": 1.0}, lower=lower, upper=upper)


@pytest.mark.parametrize(
    ("lower", "upper"),
    [(-1.0, 2.0), (0.5, None), (None, -1.5), (4.5, None), (None, -6.0), (3.6, 3.7), (-8.0, -7.5)],
)
def test_truncation(lower: float | None, upper: float | None) -> None:
    """By rejection, and far out through quantiles: both follow scipy's truncated normal law."""
    draws = draw(normal(lower, upper), generator(), COUNT)
    ends = (-np.inf if lower is None else lower, np.inf if upper is None else upper)
    assert distance(draws, st.truncnorm(*ends).cdf) < LIMIT
    assert draws.min() >= ends[0]
    assert draws.max() <= ends[1]


def test_truncation_that_cannot_be_drawn_is_said() -> None:
    """A family without a quantile of its own here, cut where nearly nothing is left."""
    cut = Distribution("rice", {"offset": 1.0, "scale": 1.0}, lower=9.0)
    with pytest.raises(DerivationError, match="cannot be drawn yet"):
        draw(cut, generator(), 1000)


def test_mixture() -> None:
    """The mixture's distribution function is the weighted sum."""
    parts = (normal(), Distribution("uniform", {"lower": 1.0, "upper": 3.0}))
    mixture = Distribution("mixture", {"weights": (0.3, 0.7)}, parts)
    draws = draw(mixture, generator(), COUNT)
    assert distance(draws, lambda x: 0.3 * st.norm.cdf(x) + 0.7 * st.uniform.cdf(x, 1, 2)) < LIMIT


@pytest.mark.parametrize(
    ("text", "lower", "upper", "cdf"),
    [
        ("3 * x^2", 0.0, 1.0, lambda x: x**3),
        ("0.5 / sqrt(x)", 0.0, 1.0, np.sqrt),  # a pole at the end
        ("exp(-x)", 0.0, np.inf, st.expon.cdf),
        ("1 / (pi * (1 + x^2))", -np.inf, np.inf, st.cauchy.cdf),
    ],
)
def test_density_by_formula(text: str, lower: float, upper: float, cdf: Any) -> None:
    """Rejection under a step function, on finite and infinite supports."""
    stated = {"density": parse(text), "lower": lower, "upper": upper}
    draws = draw(Distribution("density", stated), generator(), COUNT)
    assert distance(draws, cdf) < LIMIT


def linear(x: tuple[float, ...], cdf: tuple[float, ...]) -> Callable[[np.ndarray], np.ndarray]:
    """The distribution function that joins these points by straight lines."""
    return lambda at: np.interp(at, x, cdf)


def test_data() -> None:
    """Table: straight lines; histogram: level classes; sample: its values; observations: scaled t."""
    table = Distribution("table", {"x": (0.0, 1.0, 3.0), "pdf": (0.0, 2 / 3, 0.0)})
    assert distance(draw(table, generator(), COUNT), st.triang(1 / 3, 0, 3).cdf) < LIMIT
    points = Distribution("table", {"x": (0.0, 1.0, 3.0), "cdf": (0.0, 0.7, 1.0)})
    assert distance(draw(points, generator(), COUNT), linear((0, 1, 3), (0, 0.7, 1))) < LIMIT
    histogram = Distribution("histogram", {"edges": (0.0, 1.0, 4.0), "counts": (3.0, 1.0)})
    assert distance(draw(histogram, generator(), COUNT), linear((0, 1, 4), (0, 0.75, 1))) < LIMIT
    sample = Distribution("sample", {"values": (1.0, 2.0, 2.0, 5.0)})
    drawn = draw(sample, generator(), COUNT)
    assert np.mean(drawn == 2.0) == pytest.approx(0.5, abs=LIMIT)
    # JCGM 101:2008, 6.4.9.2: mean + sd / sqrt(n) * t with n - 1 degrees of freedom
    seen = Distribution("observations", {"mean": 10.0, "sd": 2.0, "count": 5.0})
    assert distance(draw(seen, generator(), COUNT), st.t(4, 10, 2 / np.sqrt(5)).cdf) < LIMIT


def test_conditional_input() -> None:
    """A normal whose mean is another input: the sum of two normals (elementary)."""
    child = Distribution("normal", {"mean": parse("2 * bias + 1"), "sd": 0.5})
    bias = generator().standard_normal(COUNT)
    draws = draw(child, np.random.Generator(np.random.PCG64(4)), COUNT, {"bias": bias})
    assert distance(draws, st.norm(1, np.sqrt(4.25)).cdf) < LIMIT


def pair(first: Distribution, second: Distribution, **entry: Any) -> dict[str, np.ndarray]:
    inputs: Mapping[str, Input] = {"a": Input("a", first), "b": Input("b", second)}
    strength = entry.pop("strength")
    stated = Dependence(("a", "b"), "copula", matrix=((1.0, strength), (strength, 1.0)), **entry)
    return draw_group(stated, inputs, generator(), COUNT)


EXPONENTIAL = Distribution("exponential", {"rate": 2.0})
LOGNORMAL = Distribution("lognormal", {"log_mean": 0.1, "log_sd": 0.5})


@pytest.mark.parametrize(
    ("family", "measure", "strength", "parameters"),
    [
        ("gaussian", "kendall", 0.4, {}),
        ("gaussian", "kendall", -0.7, {}),
        ("student_t", "kendall", 0.4, {"degrees_of_freedom": 3.0}),
        ("clayton", "kendall", 0.5, {}),
        ("gumbel", "kendall", 0.5, {}),
    ],
)
def test_copulas_keep_marginals_and_kendalls_tau(
    family: str, measure: str, strength: float, parameters: Mapping[str, Any]
) -> None:
    """Marginals as stated; Kendall's tau as asked for (scipy.stats.kendalltau; spread below 0.0035)."""
    drawn = pair(
        EXPONENTIAL, LOGNORMAL, family=family, measure=measure, strength=strength, parameters=parameters
    )
    assert distance(drawn["a"], st.expon(scale=0.5).cdf) < LIMIT
    assert distance(drawn["b"], st.lognorm(0.5, scale=np.exp(0.1)).cdf) < LIMIT
    assert st.kendalltau(drawn["a"], drawn["b"]).statistic == pytest.approx(strength, abs=0.0105)


@pytest.mark.parametrize("strength", [5.736283, -5.736283])
def test_frank_copula(strength: float) -> None:
    """Parameter 5.736283 has Kendall's tau 0.5 (Nelsen 2006, section 5.1; Debye function by mpmath)."""
    drawn = pair(EXPONENTIAL, LOGNORMAL, family="frank", measure="parameter", strength=strength)
    tau = st.kendalltau(drawn["a"], drawn["b"]).statistic
    assert tau == pytest.approx(0.5 * np.sign(strength), abs=0.0105)
    assert distance(drawn["b"], st.lognorm(0.5, scale=np.exp(0.1)).cdf) < LIMIT


@pytest.mark.parametrize("second", [LOGNORMAL, EXPONENTIAL, normal()])
def test_pearson_of_the_inputs_themselves(second: Distribution) -> None:
    """The correlation asked for is that of the inputs, not of their scores (spread below 0.006)."""
    drawn = pair(LOGNORMAL, second, family="gaussian", measure="pearson", strength=0.6)
    assert np.corrcoef(drawn["a"], drawn["b"])[0, 1] == pytest.approx(0.6, abs=0.02)


def test_scores_of_an_exponential_pair() -> None:
    """Pearson 0.5 of two exponentials under a Gaussian copula: the score correlation by quadrature.

    E[XY] is the integral of log Phi(-z) log Phi(-w) over two normal scores with the correlation found.
    """
    entry = Dependence(("a", "b"), "copula", "gaussian", "pearson", ((1.0, 0.5), (0.5, 1.0)))
    score = score_matrix(entry, [EXPONENTIAL, EXPONENTIAL])[0, 1]
    nodes, weights = np.polynomial.hermite_e.hermegauss(80)
    weights = weights / weights.sum()
    z = nodes[:, None]
    w = score * z + np.sqrt(1 - score**2) * nodes[None, :]
    moment = np.sum(weights[:, None] * weights * st.norm.logsf(z) * st.norm.logsf(w))
    assert moment - 1.0 == pytest.approx(0.5, abs=1e-6)


def test_jointly_normal_inputs() -> None:
    """A Gaussian copula over normals is the joint normal law: the difference is normal."""
    drawn = pair(normal(), normal(), family="gaussian", measure="pearson", strength=0.3)
    assert distance(drawn["a"] - drawn["b"], st.norm(0, np.sqrt(1.4)).cdf) < LIMIT


MODEL = {
    "outspread": 1,
    "title": "Two parts",
    "inputs": {
        "a": {"unit": "mm", "distribution": {"normal": {"mean": 1, "sd": 0.1}}},
        "b": {"unit": "mm", "distribution": {"normal": {"mean": 2, "sd": 0.2}}},
    },
    "transformation": {
        "outputs": {"s": {"formula": "a + b", "unit": "mm"}, "d": {"formula": "a - b", "unit": "mm"}}
    },
}


def test_sample_of_a_model() -> None:
    """Outputs follow their formulas, joint events are counted, observers see every batch."""
    batches: list[int] = []
    sample = draw_sample(
        read_mapping(MODEL),
        count=COUNT,
        observers=[lambda number, values: batches.append(values["a"].size)],
        events={"s > 3 and d < -1": parse_event("s > 3 and d < -1")},
    )
    assert sample.count == COUNT
    assert batches == [COUNT // 20] * 20
    assert distance(sample.outputs["s"], st.norm(3, np.sqrt(0.05)).cdf) < LIMIT
    # both are normal with equal spread and correlation (0.01 - 0.04) / 0.05 = -0.6: the orthant formula
    orthant = 0.25 + np.arcsin(0.6) / (2 * np.pi)  # P(s > mean, d < mean) with -d
    assert sample.events["s > 3 and d < -1"] == pytest.approx(orthant, abs=LIMIT)


def test_streams_are_apart_and_repeatable() -> None:
    """The same numbers on every run; other numbers for each batch and for the second stream."""
    first = generator_for(1, FIRST_STREAM, 0).random(4)
    assert np.array_equal(first, generator_for(1, FIRST_STREAM, 0).random(4))
    others = [
        generator_for(1, FIRST_STREAM, 1),
        generator_for(1, SECOND_STREAM, 0),
        generator_for(2, FIRST_STREAM, 0),
    ]
    assert all(not np.array_equal(first, other.random(4)) for other in others)
