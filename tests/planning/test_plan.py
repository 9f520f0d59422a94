"""Plans of small models: which route is taken and why, what a forced route costs, what is refused."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from outspread.errors import DerivationError
from outspread.planning.dependence import normal_scores
from outspread.planning.printing import plan_lines
from outspread.preparation import build_laws, plan_model
from outspread.reading.build import read_mapping
from outspread.reading.model import Model

NORMAL = {"normal": {"mean": 0, "sd": 1}}
LOGNORMAL = {"lognormal": {"log_mean": 0, "log_sd": 0.5}}
UNIFORM = {"uniform": {"lower": 1, "upper": 2}}
POISSON = {"poisson": {"mean": 3}}


def model(formula: str, route: str = "", copula: dict[str, Any] | None = None, **inputs: Any) -> Model:
    output = {"formula": formula, "unit": "1", **({"route": route} if route else {})}
    document: dict[str, Any] = {
        "outspread": 1, "title": "A test",
        "inputs": {name: {"unit": "1", "distribution": described} for name, described in inputs.items()},
        "transformation": {"outputs": {"y": output}},
    }  # fmt: skip
    if copula:
        document["dependence"] = [{"inputs": ["a", "b"], "copula": copula}]
    return read_mapping(document)


def route(described: Model) -> str:
    return plan_model(described)[0].step("y").route


def test_the_route_follows_from_the_structure() -> None:
    assert route(model("a + b", a=NORMAL, b=NORMAL)) == "closed_form"
    assert route(model("sin(a)", a=NORMAL)) == "change_of_variables"
    assert route(model("n*a", a=UNIFORM, n=POISSON)) == "change_of_variables"
    assert route(model("sin(a)*b", a=NORMAL, b=UNIFORM)) == "region_integral"
    assert route(model("n*m", n=POISSON, m=POISSON)) == "enumeration"
    assert route(model("sin(a)*b + c", a=NORMAL, b=UNIFORM, c=NORMAL)) == "region_integral"
    assert route(model("a*b + b*c + c*a", a=NORMAL, b=UNIFORM, c=NORMAL)) == "sampling"


def test_printed_lines_give_the_reason_and_what_was_ruled_out() -> None:
    plan, _ = plan_model(model("sin(a)*b", a=NORMAL, b=UNIFORM))
    assert plan_lines(plan) == [
        "the law of y: region integral",
        "  because two continuous inputs: the region where the formula stays below a value",
        "  inputs: a, b",
        "  exact in b; integrated over: a",
        "  limits: the formula is solved for b in closed form",
        "  not by closed form: no known closed form fits this formula and these families",
        "  not by sampling: a route with a deterministic error bound applies",
    ]


def test_a_forced_route_is_taken_and_its_cost_named() -> None:
    step = plan_model(model("a + b", "region_integral", a=NORMAL, b=NORMAL))[0].step("y")
    assert step.route == "region_integral"
    assert step.reason.startswith("the model asks for this route, though closed form would be more accurate")
    assert route(model("a + b", "sampling", a=NORMAL, b=NORMAL)) == "sampling"


def test_a_route_that_does_not_lead_there_is_refused() -> None:
    with pytest.raises(DerivationError, match="cannot be derived by change of variables"):
        plan_model(model("a + b", "change_of_variables", a=NORMAL, b=NORMAL))


def test_a_dependence_that_is_not_derived_yet_is_refused() -> None:
    clayton = {"clayton": {"kendall": 0.3}}
    with pytest.raises(DerivationError, match=r"clayton copula \(a, b\) cannot be derived"):
        plan_model(model("a + b", copula=clayton, a=NORMAL, b=NORMAL))


def scores(measure: str, value: float, left: Any, right: Any) -> float:
    described = model("a + b", copula={"gaussian": {measure: value}}, a=left, b=right)
    found = normal_scores(described, build_laws(described))
    assert found is not None
    return found.between("a", "b")


def test_correlations_of_normal_scores() -> None:
    """Kruskal (1958): rho_s = 6/pi asin(rho/2), tau = 2/pi asin(rho); two lognormals: the law of exp."""
    assert scores("normal_scores", 0.4, UNIFORM, NORMAL) == 0.4
    assert scores("spearman", 6 / np.pi * np.arcsin(0.2), UNIFORM, NORMAL) == pytest.approx(0.4, rel=1e-12)
    assert scores("kendall", 2 / np.pi * np.arcsin(0.4), UNIFORM, NORMAL) == pytest.approx(0.4, rel=1e-12)
    assert scores("pearson", 0.4, NORMAL, NORMAL) == 0.4
    pearson = np.expm1(0.4 * 0.25) / np.expm1(0.25)
    assert scores("pearson", float(pearson), LOGNORMAL, LOGNORMAL) == pytest.approx(0.4, rel=1e-12)
    # uniform and normal: Pearson's is sqrt(3/pi) of the scores' (Liu and Der Kiureghian 1986, table 3: 1.023)
    assert scores("pearson", 0.4 * (3 / np.pi) ** 0.5, UNIFORM, NORMAL) == pytest.approx(0.4, rel=1e-11)


def test_a_correlation_out_of_reach_names_the_range() -> None:
    with pytest.raises(DerivationError, match="cannot be reached"):
        scores("pearson", -0.95, LOGNORMAL, LOGNORMAL)
