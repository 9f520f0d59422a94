"""Verdicts, drivers and the register of assumptions."""

from __future__ import annotations

from typing import Any

import pytest

from outspread.evidence.drawing import draw_sample
from outspread.findings.assumptions import register
from outspread.findings.drivers import Shares, find_drivers
from outspread.findings.requirements import combined, judge
from outspread.findings.results import Absent, Driver, Figure, Finding, Verdict
from outspread.planning.plan import Plan, PlanStep
from outspread.reading.build import read_mapping
from outspread.reading.model import Model


@pytest.mark.parametrize(
    ("value", "sense", "verdict"),
    [
        (Figure(0.9991, 0.00004), "at_least", "met"),
        (Figure(0.9990, 0.00004), "at_least", "undecided"),
        (Figure(0.99904, 0.00004), "at_least", "undecided"),
        (Figure(0.9989, 0.00004), "at_least", "not met"),
        (Figure(0.999, 0.0), "at_least", "met"),  # exactly at the limit
        (Figure(0.999, 0.0), "at_most", "met"),
        (Figure(0.9991, 0.00004), "at_most", "not met"),
        (Figure(0.9989, 0.00004), "at_most", "met"),
        (Figure(0.9989, float("inf")), "at_most", "undecided"),
        (Absent("it does not exist"), "at_least", "undecided"),
    ],
)
def test_verdict(value: Finding, sense: str, verdict: str) -> None:
    """No limit within the error of a value is called met or not met."""
    assert judge(value, 0.999, sense) == verdict


def test_combined_verdict() -> None:
    """The worst counts."""

    def rows(*verdicts: str) -> tuple[Verdict, ...]:
        return tuple(Verdict("", verdict, "", Figure(0, 0), 0, "at_least") for verdict in verdicts)

    assert combined(rows("met", "met")) == "met"
    assert combined(rows("met", "undecided")) == "undecided"
    assert combined(rows("undecided", "not met")) == "not met"
    assert combined(()) == "met"


def model_of(formula: str, inputs: dict[str, Any], **more: Any) -> Model:
    named = {
        name: {"distribution": distribution, "basis": f"Basis of {name}"}
        for name, distribution in inputs.items()
    }
    return read_mapping(
        {
            "outspread": 1,
            "title": "T",
            "inputs": named,
            "transformation": {"outputs": {"y": {"formula": formula}}},
            **more,
        }
    )


def drivers_of(model: Model, count: int = 200_000) -> dict[str, Driver]:
    shares = Shares(model)
    draw_sample(model, observers=(shares,), count=count)
    rows = find_drivers(shares, {"y": Figure(1.0, 0.0)}, {"y": Figure(3.0, 0.0)})
    return {row.input: row for row in rows}


def normal(mean: float, sd: float) -> dict[str, Any]:
    return {"normal": {"mean": mean, "sd": sd}}


def assert_share(row: Driver, true: float) -> None:
    assert isinstance(row.share, Figure)
    assert abs(row.share.value - true) <= row.share.error
    assert row.share.error < 0.05


def test_shares_of_a_linear_formula() -> None:
    """3 a + 4 b with unit variances: shares 9/25 and 16/25 (elementary)."""
    rows = drivers_of(model_of("3 * a + 4 * b", {"a": normal(0, 1), "b": normal(5, 1)}))
    assert list(rows) == ["b", "a"]  # the largest first
    assert_share(rows["a"], 9 / 25)
    assert_share(rows["b"], 16 / 25)


def test_shares_of_ishigamis_function() -> None:
    """Ishigami and Homma (1990), a = 7, b = 0.1: first-order indices 0.3139, 0.4424 and 0 in closed form
    (Saltelli et al. 2008, Global Sensitivity Analysis: The Primer, from memory); not monotone."""
    angle = {"uniform": {"lower": -3.141592653589793, "upper": 3.141592653589793}}
    rows = drivers_of(
        model_of("sin(a) + 7 * sin(b)^2 + 0.1 * c^4 * sin(a)", {"a": angle, "b": angle, "c": angle})
    )
    pi4, pi8 = 3.141592653589793**4, 3.141592653589793**8
    total = 0.5 + 49 / 8 + 0.1 * pi4 / 5 + 0.01 * pi8 / 18
    assert_share(rows["a"], 0.5 * (1 + 0.1 * pi4 / 5) ** 2 / total)
    assert_share(rows["b"], 49 / 8 / total)
    assert_share(rows["c"], 0.0)


def test_share_of_a_discrete_input() -> None:
    """a + b with a two-point input of variance 0.21 and a normal one of variance 1: 0.21 / 1.21."""
    rows = drivers_of(model_of("a + b", {"a": {"bernoulli": {"probability": 0.3}}, "b": normal(0, 1)}))
    assert_share(rows["a"], 0.21 / 1.21)


def test_single_input_explains_all() -> None:
    """A function of one input: exactly 1."""
    rows = drivers_of(model_of("sin(a)", {"a": normal(0, 1)}), count=20_000)
    assert rows["a"].share == Figure(1.0, 0.0)


def test_heavy_tails_are_measured_by_ranks() -> None:
    """Where the variance does not exist, the ranks are explained, and the reason is said."""
    model = model_of("a + b", {"a": {"cauchy": {"location": 0, "scale": 1}}, "b": normal(0, 1)})
    shares = Shares(model)
    draw_sample(model, observers=(shares,), count=100_000)
    rows = find_drivers(shares, {"y": Absent("diverges")}, {"y": Absent("diverges")})
    assert [row.input for row in rows] == ["a", "b"]
    assert all("ranks" in row.measure and "does not exist" in row.measure for row in rows)
    assert isinstance(rows[0].share, Figure)
    assert 0.5 < rows[0].share.value < 1.0


PLAN = Plan((PlanStep("y", "y", "region_integral", "two inputs", ("a", "b")),))


def texts(model: Model) -> list[str]:
    rows = register(model, PLAN, ())
    assert [row.id for row in rows] == [f"A{n}" for n in range(1, len(rows) + 1)]
    return [f"{row.made_by}: {row.text}" for row in rows]


def test_register_of_assumptions() -> None:
    """Constants, bases, missing bases, truncation and independence, the model's first."""
    model = read_mapping(
        {
            "outspread": 1,
            "title": "T",
            "constants": {"k": {"value": 2, "basis": "Data sheet."}},
            "inputs": {
                "a": {
                    "unit": "mm",
                    "distribution": normal(0, 1),
                    "truncate": {"lower": -1},
                    "basis": "Measured",
                },
                "b": {"unit": "mm", "distribution": {"exponential": {"rate": 1}}},
            },
            "transformation": {"outputs": {"y": {"formula": "k * a + b", "unit": "mm"}}},
        }
    )
    assert texts(model) == [
        "model: The constant k is 2, without uncertainty: Data sheet.",
        "model: a follows a normal distribution: Measured.",
        "model: b follows an exponential distribution. The model states no basis for it, so that this is an"
        " assumption by itself.",
        "model: a never lies below -1 mm: its distribution is cut there, and what remains is scaled up to"
        " probability 1.",
        "compiler: a and b are independent: the model says nothing else.",
        "compiler: The second derivation by 1,000,000 draws is compared in a band in which a right answer"
        " stays with a probability of at least 99.99 %; agreement does not show that the model itself is"
        " right.",
    ]


def test_many_independent_pairs_are_one_sentence() -> None:
    """Five inputs have ten pairs: one sentence, with the stated dependence taken out."""
    five = {name: normal(0, 1) for name in "abcde"}
    said = texts(model_of("a + b + c + d + e", five))
    assert "compiler: All 5 inputs are independent of each other: the model says nothing else." in said
    entry = {"inputs": ["a", "b"], "copula": {"gaussian": {"pearson": 0.3}}}
    said = texts(model_of("a + b + c + d + e", five, dependence=[entry]))
    assert "model: a and b depend on each other by a Gaussian copula with Pearson correlation 0.3." in said
    expected = "those pairs apart whose dependence is stated"
    assert sum(expected in text for text in said) == 1
