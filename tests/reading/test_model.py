"""A right model becomes the values that its text states."""

from __future__ import annotations

import hashlib
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import yaml

from outspread.errors import ModelError, Place
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, names
from outspread.reading.build import build_model, read_mapping, read_model
from outspread.reading.model import Accuracy, Model, Readings
from outspread.reading.yaml_reader import read_yaml

# The example of the format's own description.
BEARING = r"""outspread: 1                          # format of this file
title: Clearance between the winch bearing and its shaft
purpose: Shows that the bearing can be assembled cold.
record: {number: SK-TN-014, revision: C, status: for review}   # free text, printed in the title block

constants:
  expansion: {value: 11.5e-6, unit: 1/K, symbol: \alpha, basis: Handbook value for carbon steel}

inputs:
  bore:
    symbol: D                         # LaTeX, for the report; default made from the name
    unit: mm
    description: Bearing bore, as delivered
    distribution: {normal: {mean: 42.020, sd: 0.004}}
    basis: Capability study, 125 parts, 2025-03      # where the distribution comes from
  shaft:
    unit: mm
    distribution: {normal: {mean: 42.000, sd: 0.005}}
    truncate: {lower: 41.985, upper: 42.015}         # sorted at inspection
    basis: Inspection record
  cooling: {unit: K, distribution: {uniform: {lower: 0, upper: 30}}, basis: Yard temperature log}

dependence:                           # what is not listed is independent, and the report says so
  - inputs: [bore, shaft]
    copula: {gaussian: {pearson: 0.3}}

transformation:
  where:                              # named steps, in any order; no cycles
    shrink: expansion * cooling * shaft
  outputs:
    clearance:
      formula: bore - shaft + shrink
      unit: mm
      description: Diametral clearance at assembly

requirements:
  - name: The parts can be assembled
    event: clearance > 0.002          # numbers are in the outputs' units; and / or / not may join
    probability: {at_least: 0.999}
  - name: The fit is not sloppy
    quantile: {output: clearance, at: 0.99, at_most: 0.045}

readings:                             # what is stated beside the standard set
  coverage: [0.95, 0.99]              # intervals, probabilistically symmetric and shortest
  quantiles: [0.001, 0.5, 0.999]
  probabilities: ["clearance < 0"]
  values: {clearance: [0.0, 0.01]}    # pdf, cdf and ccdf at these points

accuracy: {digits: 8, seed: 20260401, time_limit: 60 s}
"""

SMALL = {
    "outspread": 1,
    "title": "Sum",
    "inputs": {
        "a": {"unit": "mm", "distribution": {"normal": {"mean": 1, "sd": 0.1}}},
        "b": {"unit": "cm", "distribution": {"uniform": {"lower": 0, "upper": 1}}},
    },
    "transformation": {"outputs": {"s": {"formula": "a + b", "unit": "mm"}}},
}


@pytest.fixture(scope="module")
def bearing(tmp_path_factory: pytest.TempPathFactory) -> Model:
    file = tmp_path_factory.mktemp("models") / "bearing.yaml"
    file.write_text(BEARING, encoding="utf-8")
    return read_model(file)


def value(node: Node, **given: float) -> float:
    """The tree's value at the given inputs."""
    return float(compile_numpy(node, list(given))(*given.values()))


def small(**changes: object) -> dict[str, object]:
    return {**SMALL, **changes}


def test_head(bearing: Model) -> None:
    assert bearing.title == "Clearance between the winch bearing and its shaft"
    assert bearing.purpose == "Shows that the bearing can be assembled cold."
    assert dict(bearing.record) == {"number": "SK-TN-014", "revision": "C", "status": "for review"}
    assert bearing.sha256 == hashlib.sha256(BEARING.encode()).hexdigest()
    assert bearing.source == BEARING.encode()


def test_constant(bearing: Model) -> None:
    (constant,) = bearing.constants
    assert (constant.name, constant.value, constant.unit) == ("expansion", 11.5e-6, "1/K")
    assert (constant.symbol, constant.basis) == (r"\alpha", "Handbook value for carbon steel")


def test_inputs(bearing: Model) -> None:
    bore, shaft, cooling = bearing.inputs
    assert (bore.name, bore.unit, bore.symbol) == ("bore", "mm", "D")
    assert bore.description == "Bearing bore, as delivered"
    assert bore.basis == "Capability study, 125 parts, 2025-03"
    assert bore.place.line == 10
    assert bore.distribution is not None
    assert bore.distribution.family == "normal"
    assert dict(bore.distribution.parameters) == {"mean": 42.02, "sd": 0.004}
    assert shaft.distribution is not None
    assert (shaft.distribution.lower, shaft.distribution.upper) == (41.985, 42.015)
    assert cooling.distribution is not None
    assert dict(cooling.distribution.parameters) == {"lower": 0.0, "upper": 30.0}


def test_dependence(bearing: Model) -> None:
    (entry,) = bearing.dependence
    assert (entry.inputs, entry.kind, entry.family, entry.measure) == (
        ("bore", "shaft"), "copula", "gaussian", "pearson",
    )  # fmt: skip
    assert entry.matrix == ((1.0, 0.3), (0.3, 1.0))


def test_output_has_steps_and_constants_put_in(bearing: Model) -> None:
    """42.02 - 42 + 11.5e-6/K * 20 K * 42 mm, worked out by hand."""
    (output,) = bearing.outputs
    assert (output.text, output.unit) == ("bore - shaft + shrink", "mm")
    assert set(names(output.expression)) == {"bore", "shaft", "cooling"}
    assert value(output.expression, bore=42.02, shaft=42.0, cooling=20.0) == pytest.approx(0.02966, rel=1e-9)
    (step,) = bearing.steps
    assert (step.name, step.text, step.unit) == ("shrink", "expansion * cooling * shaft", "mm")


def test_requirements(bearing: Model) -> None:
    assembled, sloppy = bearing.requirements
    assert (assembled.kind, assembled.text) == ("probability", "clearance > 0.002")
    assert (assembled.at_least, assembled.at_most) == (0.999, None)
    assert assembled.event is not None
    assert value(assembled.event, clearance=0.003) == 1.0
    assert value(assembled.event, clearance=0.001) == 0.0
    assert (sloppy.kind, sloppy.output, sloppy.at, sloppy.at_most) == ("quantile", "clearance", 0.99, 0.045)


def test_readings_and_accuracy(bearing: Model) -> None:
    assert bearing.readings.coverage == (0.95, 0.99)
    assert bearing.readings.quantiles == (0.001, 0.5, 0.999)
    assert [text for text, _ in bearing.readings.probabilities] == ["clearance < 0"]
    assert dict(bearing.readings.values) == {"clearance": (0.0, 0.01)}
    assert bearing.accuracy == Accuracy(digits=8, seed=20260401, time_limit=60.0)


def test_defaults() -> None:
    model = read_mapping(SMALL)
    assert model.readings == Readings()
    assert model.accuracy == Accuracy()
    assert model.file == "model"


def test_factors_go_in_where_scales_differ() -> None:
    """2 mm + 3 cm is 32 mm."""
    (output,) = read_mapping(SMALL).outputs
    assert value(output.expression, a=2.0, b=3.0) == 32.0


def test_a_mapping_and_its_yaml_give_the_same_model() -> None:
    document = yaml.safe_load(BEARING.replace("11.5e-6", "0.0000115"))
    one, other = read_mapping(document), read_mapping(document)
    assert one == other
    assert [entry.name for entry in one.inputs] == ["bore", "shaft", "cooling"]
    assert one.accuracy.time_limit == 60.0


def test_places_of_a_mapping_are_key_paths() -> None:
    with pytest.raises(ModelError) as caught:
        read_mapping(small(titel=3, transformation={"outputs": {"s": {"formula": "a + c"}}}))
    assert (
        str(caught.value)
        == "model: titel: unknown key `titel` at the top of the model; did you mean `title`?"
    )
    with pytest.raises(ModelError) as caught:
        read_mapping(small(transformation={"outputs": {"s": {"formula": "a + b + c"}}}))
    assert str(caught.value) == (
        "model: transformation.outputs.s.formula: `c` is not defined; "
        "inputs, constants, steps and outputs: `a`, `b` and `s`\n    a + b + c\n            ^"
    )


@pytest.mark.parametrize(
    ("value", "message"),
    [
        (10**400, "this number is too large; the largest is 1.7e308"),
        (float("inf"), "inf is no finite number; leave out a limit that does not exist"),
        (1j, "a value of type `complex` cannot stand in a model; use numbers, text, lists and mappings"),
        ({1, 2}, "a value of type `set` cannot stand in a model; use numbers, text, lists and mappings"),
    ],
)
def test_python_values_that_no_file_could_hold(value: object, message: str) -> None:
    with pytest.raises(ModelError) as caught:
        read_mapping(small(accuracy={"seed": value}))
    assert str(caught.value) == f"model: accuracy.seed: {message}"


def test_numpy_values_and_tuples_are_taken() -> None:
    """Arrays count as lists, numpy's numbers as numbers."""
    readings = {"quantiles": np.array([0.1, 0.5]), "coverage": (np.float64(0.9),)}
    model = read_mapping(small(readings=readings, accuracy={"digits": np.int64(6)}))
    assert (model.readings.quantiles, model.readings.coverage) == ((0.1, 0.5), (0.9,))
    assert model.accuracy.digits == 6


def test_constants_as_parameters_are_converted_to_the_input_s_unit() -> None:
    """A play of 2 mm is 0.2 cm for an input in cm; a factor on it stays a factor."""
    model = read_mapping(
        small(
            constants={"play": {"value": 2, "unit": "mm"}, "share": 0.5},
            inputs={
                "a": {"unit": "mm", "distribution": {"normal": {"mean": "2*play + 1", "sd": "share*play"}}},
                "b": {"unit": "cm", "distribution": {"uniform": {"lower": 0, "upper": "play"}}},
            },
        )
    )
    first, second = (entry.distribution for entry in model.inputs)
    assert first is not None
    assert second is not None
    assert dict(first.parameters) == {"mean": 5.0, "sd": 1.0}
    assert dict(second.parameters) == {"lower": 0.0, "upper": pytest.approx(0.2, rel=1e-15)}


def test_a_parameter_of_other_inputs_is_a_formula() -> None:
    """The mean of b follows a: 3 mm is 0.3 cm."""
    model = read_mapping(
        small(
            inputs={
                "a": {"unit": "mm", "distribution": {"normal": {"mean": 1, "sd": 0.1}}},
                "b": {"unit": "cm", "distribution": {"normal": {"mean": "a", "sd": 0.1}}},
            }
        )
    )
    distribution = model.inputs[1].distribution
    assert distribution is not None
    mean = distribution.parameters["mean"]
    assert isinstance(mean, Node)
    assert value(mean, a=3.0) == pytest.approx(0.3, rel=1e-15)


def test_a_parent_of_a_used_input_is_used() -> None:
    """An input that only shapes another one's distribution is no leftover."""
    model = read_mapping(
        small(
            inputs={
                "a": {"distribution": {"normal": {"mean": 1, "sd": 0.1}}},
                "b": {"distribution": {"normal": {"mean": "a", "sd": 0.1}}},
            },
            transformation={"outputs": {"s": {"formula": "2*b"}}},
        )
    )
    assert [entry.name for entry in model.inputs] == ["a", "b"]


def test_outputs_may_use_outputs() -> None:
    model = read_mapping(
        small(transformation={"outputs": {"t": {"formula": "2*s", "unit": "mm"}, "s": {"formula": "a + b"}}})
    )
    assert [output.name for output in model.outputs] == ["t", "s"]
    assert value(model.outputs[0].expression, a=2.0, b=3.0) == 64.0


TWO_OUTPUTS = {"outputs": {"s": {"formula": "a", "unit": "mm"}, "t": {"formula": "b", "unit": "cm"}}}


@pytest.mark.parametrize(
    ("event", "given", "holds"),
    [
        ("s > t", {"s": 15.0, "t": 1.0}, True),
        ("s > t", {"s": 5.0, "t": 1.0}, False),
        ("s > 2*t", {"s": 15.0, "t": 1.0}, False),
        ("s > 3 and t > 2", {"s": 4.0, "t": 2.5}, True),
        ("s > 3 and t > 2", {"s": 4.0, "t": 1.5}, False),
    ],
)
def test_event_over_outputs_in_different_units(event: str, given: dict[str, float], holds: bool) -> None:
    """15 mm exceed 1 cm; beside one output a number is in that output's unit."""
    model = read_mapping(small(transformation=TWO_OUTPUTS, readings={"probabilities": [event]}))
    ((_, node),) = model.readings.probabilities
    assert bool(value(node, **given)) is holds


@pytest.mark.parametrize("event", ["s - t > 1", "s > t + 1", "not (max(s, t) < 3)", "s < 1 + 2*t"])
def test_event_with_a_number_that_could_be_in_either_unit(event: str) -> None:
    with pytest.raises(ModelError, match="`s` is in mm and `t` in cm, so that the number could be in either"):
        read_mapping(small(transformation=TWO_OUTPUTS, readings={"probabilities": [event]}))


def test_steps_that_double_are_stopped_before_they_fill_the_memory() -> None:
    """Sixty steps, each the square of the one before, would make 2^60 parts."""
    where = {"s0": "a", **{f"s{i}": f"s{i - 1} * s{i - 1}" for i in range(1, 61)}}
    inputs = {"a": {"distribution": {"normal": {"mean": 1, "sd": 0.1}}}}
    with pytest.raises(ModelError) as caught:
        read_mapping(
            small(inputs=inputs, transformation={"where": where, "outputs": {"s": {"formula": "s60"}}})
        )
    assert len(caught.value.faults) == 1
    assert "at most 20,000 parts are possible; use fewer steps within steps" in str(caught.value)


def test_a_long_chain_of_steps_is_stopped() -> None:
    """Five hundred steps, each one deeper, are refused at the first that is too deep."""
    where = {"s0": "a", **{f"s{i}": f"sin(s{i - 1})" for i in range(1, 500)}}
    inputs = {"a": {"distribution": {"normal": {"mean": 1, "sd": 0.1}}}}
    with pytest.raises(ModelError) as caught:
        read_mapping(
            small(inputs=inputs, transformation={"where": where, "outputs": {"s": {"formula": "s499"}}})
        )
    assert [fault.message for fault in caught.value.faults] == [
        "with its steps put in, `s200` has 201 levels, and at most 200 levels are possible; "
        "use fewer steps within steps"
    ]


@pytest.mark.parametrize(
    ("changes", "safety"),
    [
        ({}, False),
        ({"title": "Strength of the line"}, True),
        ({"purpose": "Shows that the pressure stays low."}, True),
        ({"title": "Download time"}, False),
        ({"title": "Strength of the line", "safety": False}, False),
        ({"safety": True}, True),
    ],
)
def test_safety(changes: dict[str, object], safety: bool) -> None:
    """A model that speaks of loads or strength is one on which safety may hang, unless it says otherwise."""
    assert read_mapping(small(**changes)).safety is safety


def test_cautions_are_kept() -> None:
    assert read_mapping(small(cautions=["Holds for calm water."])).cautions == ("Holds for calm water.",)


@pytest.mark.parametrize(
    ("written", "seconds"),
    [("60 s", 60.0), ("5 min", 300.0), ("1 h", 3600.0), (90, 90.0), ("0.5s", 0.5), ("2e1", 20.0)],
)
def test_time_limit(written: object, seconds: float) -> None:
    assert read_mapping(small(accuracy={"time_limit": written})).accuracy.time_limit == seconds


def test_numbers_may_stand_where_text_is_wanted() -> None:
    """A title `2025`, a revision `1.10` and a unit `1` are taken as written."""
    text = (
        "outspread: 1\ntitle: 2025\nrecord: {revision: 1.10}\n"
        "inputs: {a: {unit: 1, distribution: {normal: {mean: 0, sd: 1}}}}\n"
        "transformation: {outputs: {s: {formula: a}}}\n"
    )
    model = build_model(read_yaml("m", text.encode()), Path())
    assert (model.title, dict(model.record), model.inputs[0].unit) == ("2025", {"revision": "1.10"}, "1")


def test_csv_columns_and_their_bytes_are_kept(tmp_path: Path) -> None:
    source = 'day,"wind, m/s"\n1,3.5\n\n2,4.25\n'
    (tmp_path / "wind.csv").write_text(source, encoding="utf-8-sig")
    (tmp_path / "m.yaml").write_text(
        "outspread: 1\ntitle: Wind\ninputs:\n"
        "  a: {distribution: {sample: {file: wind.csv, column: 'wind, m/s'}}}\n"
        "  b: {}\n  c: {}\ndependence:\n  - inputs: [b, c]\n"
        "    joint_sample: {file: wind.csv, columns: {b: day, c: 'wind, m/s'}}\n"
        "transformation: {outputs: {s: {formula: a + b*c}}}\n",
        encoding="utf-8",
    )
    model = read_model(tmp_path / "m.yaml")
    assert model.inputs[0].distribution is not None
    assert dict(model.inputs[0].distribution.parameters) == {"values": (3.5, 4.25)}
    assert model.dependence[0].kind == "joint_sample"
    assert dict(model.dependence[0].parameters) == {"columns": ((1.0, 2.0), (3.5, 4.25))}
    assert dict(model.data) == {"wind.csv": (tmp_path / "wind.csv").read_bytes()}
    assert model.inputs[1].distribution is None


def test_a_link_out_of_the_folder_is_not_followed(tmp_path: Path) -> None:
    """A symbolic link beside the model does not open files elsewhere."""
    secret = tmp_path / "secret.csv"
    secret.write_text("x\n1\n")
    folder = tmp_path / "models"
    folder.mkdir()
    (folder / "x.csv").symlink_to(secret)
    (folder / "m.yaml").write_text(
        "outspread: 1\ntitle: T\ninputs: {a: {distribution: {sample: {file: x.csv, column: x}}}}\n"
        "transformation: {outputs: {s: {formula: a}}}\n"
    )
    with pytest.raises(ModelError, match="lies outside the model's folder"):
        read_model(folder / "m.yaml")


@pytest.mark.parametrize(
    ("name", "message"),
    [
        (
            "none.yaml",
            "there is no such file; give the path of a model, or write one with `outspread new NAME`",
        ),
        (".", "this is a folder; give the path of a model file in it"),
        ("a\0b", "the file cannot be read (embedded null byte); check its name and its permissions"),
    ],
)
def test_files_that_cannot_be_read(
    name: str, message: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    with pytest.raises(ModelError) as caught:
        read_model(name)
    assert str(caught.value) == f"{name}: {message}"


def test_reading_loads_no_heavy_library(tmp_path: Path) -> None:
    """A process that reads a model with truncation has none of the slow libraries in it."""
    file = tmp_path / "bearing.yaml"
    file.write_text(BEARING, encoding="utf-8")
    code = (
        "import sys; from outspread.reading.build import read_model; read_model(sys.argv[1]); "
        "heavy = 'scipy.special scipy.stats scipy.optimize sympy matplotlib weasyprint ziamath'.split(); "
        "print([name for name in heavy if name in sys.modules])"
    )
    environment = {"PYTHONPATH": str(Path(__file__).resolve().parents[2] / "compiler"), "HOME": str(tmp_path)}
    done = subprocess.run(
        [sys.executable, "-c", code, str(file)], capture_output=True, text=True, env=environment, check=True
    )
    assert done.stdout == "[]\n"


def test_the_same_text_gives_the_same_model_at_another_place(tmp_path: Path) -> None:
    """Nothing of the machine gets into a model but the file's name, which places carry."""
    file = tmp_path / "bearing.yaml"
    file.write_text(BEARING, encoding="utf-8")
    assert read_model(str(file)) == read_model(file)
    assert read_model(file).inputs[0].place == Place(str(file), 10, 3)
