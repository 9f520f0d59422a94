"""What `outspread.derive` returns: laws with their errors, intervals, joint questions, plan and results."""

from __future__ import annotations

import threading
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import scipy.stats as st

import outspread
from outspread.derivation import time_limit
from outspread.errors import DerivationError, FormulaError, ModelError

MODEL: dict[str, Any] = {
    "outspread": 1,
    "title": "Two parts",
    "inputs": {
        "a": {"unit": "mm", "distribution": {"normal": {"mean": 1, "sd": 0.3}}},
        "b": {"unit": "mm", "distribution": {"normal": {"mean": 2, "sd": 0.4}}},
    },
    "transformation": {
        "outputs": {"s": {"formula": "a + b", "unit": "mm"}, "d": {"formula": "a - b", "unit": "mm"}}
    },
}
SUM = st.norm(3.0, 0.5)


@pytest.fixture(scope="module")
def derivation() -> outspread.Derivation:
    return outspread.derive(MODEL)


def test_laws_by_name(derivation: outspread.Derivation) -> None:
    """A mapping of outputs, in the model's order; a wrong name lists the right ones."""
    assert list(derivation) == ["s", "d"]
    assert len(derivation) == 2
    with pytest.raises(KeyError, match="the outputs are s, d"):
        derivation["t"]


def test_law_methods(derivation: outspread.Derivation) -> None:
    """The sum of normals by scipy.stats.norm, each value within the error that the law states."""
    law = derivation["s"]
    x = np.array([1.0, 2.5, 3.0, 4.4])
    p = np.array([1e-9, 0.025, 0.5, 0.9])
    assert law.pdf(x) == pytest.approx(SUM.pdf(x), rel=1e-10)
    assert law.cdf(x) == pytest.approx(SUM.cdf(x), rel=1e-10)
    assert law.ccdf(x) == pytest.approx(SUM.sf(x), rel=1e-10)
    assert law.icdf(p) == pytest.approx(SUM.ppf(p), rel=1e-10)
    assert law.iccdf(p) == pytest.approx(SUM.isf(p), rel=1e-10)
    assert (law.mean(), law.standard_deviation()) == pytest.approx((3.0, 0.5), rel=1e-10)
    assert (law.skewness(), law.kurtosis()) == pytest.approx((0.0, 3.0), abs=1e-9)
    assert law.support() == (-np.inf, np.inf)
    assert law.atoms().values.size == 0
    assert np.max(np.abs(law.cdf(x) - SUM.cdf(x))) <= law.error < 1e-9
    assert law.relative_error < 1e-9


def test_intervals(derivation: outspread.Derivation) -> None:
    """Both kinds coincide for a normal law; a third kind is refused."""
    ends = (SUM.ppf(0.025), SUM.isf(0.025))
    assert derivation["s"].interval(0.95) == pytest.approx(ends, rel=1e-10)
    assert derivation["s"].interval(0.95, "shortest") == pytest.approx(ends, rel=1e-8)
    with pytest.raises(ValueError, match="symmetric"):
        derivation["s"].interval(0.95, "central")


def test_joint_questions(derivation: outspread.Derivation) -> None:
    """s and d are jointly normal: correlation (0.09 - 0.16) / 0.25 = -0.28; density and orthant by scipy."""
    joint = st.multivariate_normal([3.0, -1.0], [[0.25, -0.07], [-0.07, 0.25]])
    point = {"d": -0.7, "s": 2.8}
    assert derivation.joint_pdf(point) == pytest.approx(joint.pdf([2.8, -0.7]), rel=1e-9)
    assert derivation.correlation("s", "d") == pytest.approx(-0.28, rel=1e-6)
    orthant = 0.25 + np.arcsin(-0.28) / (2 * np.pi)  # Sheppard's formula
    assert derivation.probability("s > 3 and d > -1") == pytest.approx(orthant, abs=1e-5)
    assert derivation.probability("s > 3.5") == pytest.approx(SUM.sf(3.5), rel=1e-8)


def test_faults_in_questions(derivation: outspread.Derivation) -> None:
    """An event over something else is no event; an unknown joint law is said."""
    with pytest.raises(FormulaError):
        derivation.probability("t > 3")
    with pytest.raises(FormulaError):
        derivation.probability("s >")
    with pytest.raises(KeyError):
        derivation.joint_pdf({"s": 1.0, "t": 2.0})


def test_plan_and_results(derivation: outspread.Derivation) -> None:
    """The results hold every output with its evidence, all of it in agreement."""
    assert [step.output for step in derivation.plan.steps] == ["s", "d"]
    assert [row.name for row in derivation.results.outputs] == ["s", "d"]
    assert {row.output for row in derivation.results.evidence} >= {"s", "d"}
    assert all(row.agrees for row in derivation.results.evidence)


def test_path_and_mapping_are_alike(derivation: outspread.Derivation, tmp_path: Path) -> None:
    """The same model from a file gives the same figures."""
    import json

    path = tmp_path / "m.yaml"
    path.write_text(json.dumps(MODEL), encoding="utf-8")
    other = outspread.derive(path)
    assert other.results.outputs == derivation.results.outputs


def test_wrong_model_is_a_model_error() -> None:
    """Every fault at once, as one exception of the project."""
    with pytest.raises(ModelError):
        outspread.derive({"outspread": 1, "title": "T"})


def test_time_limit_off_the_main_thread() -> None:
    """Where no timer can interrupt, the limit is looked at whenever progress is said."""
    caught: list[str] = []

    def work() -> None:
        try:
            with time_limit(0.0, None) as say:
                say("something")
        except DerivationError as error:
            caught.append(str(error))

    thread = threading.Thread(target=work)
    thread.start()
    thread.join()
    assert caught
    assert "time limit of 0 s" in caught[0]
