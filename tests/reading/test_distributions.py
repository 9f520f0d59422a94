"""Distributions become the families and numbers that their text states, in the unit of their input."""

from __future__ import annotations

import pytest

from outspread.errors import ModelError
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node
from outspread.laws.build import build_law
from outspread.reading.build import read_mapping
from outspread.reading.model import Distribution


def read(written: object, unit: str = "mm", **more: object) -> Distribution:
    """The distribution of the one input of a model; `truncate` and `constants` as the format has them."""
    given = {"unit": unit, "distribution": written}
    if "truncate" in more:
        given["truncate"] = more.pop("truncate")
    model = read_mapping(
        {
            "outspread": 1,
            "title": "T",
            "inputs": {"a": given},
            "transformation": {"outputs": {"s": {"formula": "a"}}},
            **more,
        }
    )
    distribution = model.inputs[0].distribution
    assert distribution is not None
    return distribution


def fault(written: object, **more: object) -> str:
    with pytest.raises(ModelError) as caught:
        read(written, **more)  # type: ignore[arg-type]
    return str(caught.value).removeprefix("model: inputs.a.")


# 1 cm^2 is 100 mm^2, 1/min is 60/h, 300 K is 26.85 degC: conversions by definition (SI brochure, 9th ed.).
@pytest.mark.parametrize(
    ("family", "parameters", "unit", "constant", "name", "value"),
    [
        ("normal", {"mean": 20, "sd": "c"}, "degC", {"value": 2, "unit": "K"}, "sd", 2.0),
        ("normal", {"mean": "c", "sd": 1}, "degC", {"value": 300, "unit": "K"}, "mean", 26.85),
        ("normal", {"mean": "c + 1", "sd": 1}, "mm", {"value": 2, "unit": "mm"}, "mean", 3.0),
        ("normal", {"mean": 10, "sd": "c"}, "dBm", {"value": 2, "unit": "dB"}, "sd", 2.0),
        ("exponential", {"rate": "c"}, "h", {"value": 2, "unit": "1/min"}, "rate", 120.0),
        ("nakagami", {"shape": 1, "spread": "c"}, "mm", {"value": 2, "unit": "cm^2"}, "spread", 200.0),
        ("gamma", {"shape": "c", "scale": 1}, "mm", {"value": 2}, "shape", 2.0),
        ("inverse_gaussian", {"mean": 1, "shape": "c"}, "mm", {"value": 2, "unit": "cm"}, "shape", 20.0),
        ("logit_normal", {"location": "c", "scale": 1}, "1", 3, "location", 3.0),
        ("normal", {"mean": "sqrt(c)^2/c", "sd": 1}, "1", 3, "mean", 1.0),
    ],
)
def test_constants_as_parameters(
    family: str, parameters: object, unit: str, constant: object, name: str, value: float
) -> None:
    """A constant is converted to the unit in which the parameter of that family stands."""
    distribution = read({family: parameters}, unit=unit, constants={"c": constant})
    assert distribution.parameters[name] == pytest.approx(value, rel=1e-14)


def test_a_bare_constant_is_no_length() -> None:
    """A number without a unit where a length is wanted is refused rather than guessed."""
    assert "result is a plain number, and a result in mm is wanted" in fault(
        {"normal": {"mean": 1, "sd": "c"}}, constants={"c": 2}
    )


@pytest.mark.parametrize("formula", ["c + 1", "2*(c + 1) - c", "max(c, 1)"])
def test_a_number_that_could_be_in_either_unit_is_refused(formula: str) -> None:
    """Beside 2 cm, the 1 in a parameter in mm could be a millimetre or a centimetre."""
    constants = {"c": {"value": 2, "unit": "cm"}}
    message = fault({"normal": {"mean": formula, "sd": 1}}, constants=constants)
    assert "1 is a plain number, and c is in cm; write the number as a constant with a unit" in message
    message = fault({"normal": {"mean": 1, "sd": 1}}, truncate={"lower": formula}, constants=constants)
    assert "1 is a plain number, and c is in cm; write the number as a constant with a unit" in message


@pytest.mark.parametrize(
    ("written", "parameters"),
    [
        ({"observations": {"mean": 1, "sd": 2, "count": 5}}, {"mean": 1.0, "sd": 2.0, "count": 5.0}),
        ({"table": {"x": [0, 1, 2], "pdf": [0, 1, 0]}}, {"x": (0.0, 1.0, 2.0), "pdf": (0.0, 1.0, 0.0)}),
        ({"table": {"x": [0, 2], "cdf": [0, 1]}}, {"x": (0.0, 2.0), "cdf": (0.0, 1.0)}),
        (
            {"histogram": {"edges": [0, 1, 2], "counts": [4, 5]}},
            {"edges": (0.0, 1.0, 2.0), "counts": (4.0, 5.0)},
        ),
        ({"sample": {"values": [3, 1, 2]}}, {"values": (3.0, 1.0, 2.0)}),
        ({"normal": {"quantiles": {0.05: 1, 0.95: 2}}}, {"quantiles": {0.05: 1.0, 0.95: 2.0}}),
        (
            {"categorical": {"values": [0, 2], "probabilities": [0.25, 0.75]}},
            {"values": (0.0, 2.0), "probabilities": (0.25, 0.75)},
        ),
    ],
)
def test_parameters_that_are_no_single_numbers(written: object, parameters: object) -> None:
    """Lists and points come through in order, and a law can be built of them."""
    distribution = read(written)
    assert dict(distribution.parameters) == parameters
    build_law(distribution)


def test_density() -> None:
    """Constants are put into the formula, and an open side of the support is infinite."""
    distribution = read({"density": {"formula": "k*exp(-k*x)", "lower": 0}}, constants={"k": 2})
    density = distribution.parameters["density"]
    assert isinstance(density, Node)
    assert float(compile_numpy(density, ["x"])(0.0)) == 2.0
    assert (distribution.parameters["lower"], distribution.parameters["upper"]) == (0.0, float("inf"))


def test_mixture() -> None:
    distribution = read(
        {
            "mixture": {
                "weights": [0.25, 0.75],
                "distributions": [{"normal": {"mean": 0, "sd": 1}}, {"uniform": {"lower": 0, "upper": 1}}],
            }
        }
    )
    assert distribution.parameters["weights"] == (0.25, 0.75)
    assert [part.family for part in distribution.components] == ["normal", "uniform"]


@pytest.mark.parametrize(
    ("written", "message"),
    [
        (
            {"density": {"formula": "3*x", "lower": 0, "upper": 1}},
            "distribution.density.formula: the density integrates to 1.5 from 0 to 1, "
            "and 1 would be right: divide it by 1.5",
        ),
        (
            {"density": {"formula": "x", "lower": -1, "upper": 1}},
            "distribution.density.formula: the density is -1 at x = -1, "
            "and 0 or more everywhere would be right",
        ),
        (
            {"table": {"x": [0, 1, 2], "pdf": [0, 3, 0]}},
            "distribution.table.pdf: the tabulated density integrates to 3, and 1 would be right",
        ),
        (
            {"observations": {"mean": 1, "sd": 2, "count": 1}},
            "distribution.observations.count: count is 1, and a whole number from 2 on would be right",
        ),
        (
            {"normal": {"quantiles": {"low": 1, "0.95": 2}}},
            "distribution.normal.quantiles.low: `low` is no probability; write one such as 0.05",
        ),
        (
            {"normal": {"quantiles": {"0.5": 1, "0.50": 2}}},
            "distribution.normal.quantiles.0.50: the probability `0.50` occurs twice; "
            "give two different ones",
        ),
    ],
)
def test_what_makes_no_distribution(written: object, message: str) -> None:
    assert fault(written) == message


@pytest.mark.parametrize(
    ("written", "limits"),
    [
        ({"normal": {"mean": 0, "sd": 1}}, {"lower": 1e9}),
        ({"uniform": {"lower": 0, "upper": 1}}, {"lower": 1.5}),
        ({"uniform": {"lower": 0, "upper": 1}}, {"lower": 1}),
        ({"exponential": {"rate": 1}}, {"upper": 0}),
        ({"exponential": {"rate": 1}}, {"upper": -1}),
        ({"poisson": {"mean": 1}}, {"upper": -1}),
        ({"sample": {"values": [1, 2]}}, {"lower": 3}),
    ],
)
def test_truncation_that_leaves_nothing(written: object, limits: object) -> None:
    """Limits where the distribution has no probability, or none that a number can hold."""
    assert "the limits leave probability 0" in fault(written, truncate=limits)


def test_truncation_of_a_distribution_that_is_wrong_itself() -> None:
    """Only the cause is reported."""
    assert fault({"normal": {"mean": 0, "sd": -1}}, truncate={"lower": 0}) == (
        "distribution.normal.sd: sd is -1, and a number above 0 would be right"
    )


def test_truncation_to_one_atom() -> None:
    """A count can be cut to its smallest value."""
    assert read({"poisson": {"mean": 1}}, unit="1", truncate={"upper": 0}).upper == 0.0


def test_truncation_in_a_far_tail_is_right() -> None:
    """P(5 < Z < 6) is 2.9e-7: little, but not nothing."""
    distribution = read({"normal": {"mean": 0, "sd": 1}}, truncate={"lower": 5, "upper": 6})
    assert (distribution.lower, distribution.upper) == (5.0, 6.0)


def test_truncation_by_a_constant() -> None:
    distribution = read(
        {"normal": {"mean": 0, "sd": 1}}, truncate={"lower": "c"}, constants={"c": {"value": 1, "unit": "cm"}}
    )
    assert (distribution.lower, distribution.upper) == (10.0, None)
