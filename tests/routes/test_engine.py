"""The engine: outputs by the route of the plan, probabilities of events, and correlations, against scipy."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

from outspread.errors import DerivationError
from outspread.formula.parser import parse_event
from outspread.preparation import plan_model
from outspread.reading.build import read_mapping
from outspread.routes.engine import Engine

SUM, DIFFERENCE = stats.norm(3, np.sqrt(5)), stats.norm(-1, np.sqrt(5))


def engine(outputs: dict[str, str], route: str = "") -> Engine:
    described: dict[str, Any] = {
        "outspread": 1, "title": "A test",
        "inputs": {
            "a": {"unit": "1", "distribution": {"normal": {"mean": 1, "sd": 1}}},
            "b": {"unit": "1", "distribution": {"normal": {"mean": 2, "sd": 2}}},
        },
        "transformation": {"outputs": {
            name: {"formula": text, "unit": "1", **({"route": route} if route else {})}
            for name, text in outputs.items()
        }},
    }  # fmt: skip
    model = read_mapping(described)
    plan, laws = plan_model(model)
    return Engine(model, laws, plan)


@pytest.mark.parametrize("route", ["closed_form", "region_integral", "sampling"])
def test_every_route_gives_the_same_law_within_its_error(route: str) -> None:
    (found,) = engine({"s": "a + b"}, route).derive()
    assert found.route == route
    points = np.array([-2.0, 1.0, 3.5, 8.0])
    true = np.abs(found.law.cdf(points) - SUM.cdf(points))
    limit = found.law.estimate("cdf", points).error if route != "closed_form" else 1e-14  # type: ignore[attr-defined]
    assert np.all(true <= limit)
    assert found.mathematics


def test_events_in_one_and_in_two_outputs() -> None:
    """By scipy.stats: the difference is normal; with the sum it is jointly normal (multivariate_normal)."""
    pair = engine({"s": "a + b", "d": "a - b"})
    one = pair.probability(parse_event("s > 4"))
    assert abs(float(one.value) - SUM.sf(4)) <= float(one.error) + 1e-15
    two = pair.probability(parse_event("s < 3 and d < 0"))
    exact = stats.multivariate_normal([3, -1], [[5, -3], [-3, 5]]).cdf([3, 0])
    assert float(two.value) == pytest.approx(exact, abs=1e-7)  # scipy's own rule gives 1e-8


def test_the_correlation_of_two_outputs() -> None:
    """Cov(A + B, A - B) = 1 - 4, both variances 5."""
    found = engine({"s": "a + b", "d": "a - b"}).correlation("s", "d")
    assert not isinstance(found, str)
    assert abs(float(found.value) + 0.6) <= float(found.error) < 1e-9


def test_an_output_without_variance_has_no_correlation() -> None:
    found = engine({"s": "a + b", "q": "a/b"}).correlation("s", "q")
    assert found == "q has no variance, so there is no correlation"


def test_a_failure_names_its_output() -> None:
    with pytest.raises(DerivationError) as caught:
        engine({"s": "a + b", "r": "sqrt(a)"}).derive()
    assert caught.value.output == "r"
