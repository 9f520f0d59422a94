"""However a right model is damaged, reading gives a model or faults with places, never anything else."""

from __future__ import annotations

import copy
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
import yaml
from fault_cases import BASE, FOLDER
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from outspread.errors import ModelError
from outspread.reading.build import build_model, read_mapping
from outspread.reading.model import Model
from outspread.reading.starting import starting_model
from outspread.reading.yaml_reader import read_yaml

RICH = (
    BASE
    + """\
dependence:
  - inputs: [bore, shaft]
    copula: {gaussian: {pearson: 0.3}}
constants: {play: {value: 1e-3, unit: mm}, share: 2}
accuracy: {digits: 8, seed: 1, time_limit: 60 s}
record: {number: SK-1}
cautions: [Calm water only.]
"""
)
RICH = RICH.replace("sd: 0.005}}", "sd: 0.005}}\n    truncate: {lower: 41.9, upper: 42.1}")
WIDE = """\
outspread: 1
title: Every way to state a distribution
constants: {k: 2}
inputs:
  a:
    distribution:
      mixture: {weights: [0.5, 0.5], distributions: [{gamma: {shape: 2, scale: 1}}, {poisson: {mean: 3}}]}
  b: {distribution: {density: {formula: k*x, lower: 0, upper: 1}}}
  c: {distribution: {table: {x: [0, 1, 2], pdf: [0, 1, 0]}}}
  d: {distribution: {histogram: {edges: [0, 1, 3], counts: [1, 2]}}, truncate: {upper: k}}
  e: {distribution: {sample: {file: a.csv, column: gap}}}
  f: {distribution: {normal: {mean: 2*a + 1, sd: exp(b)}}}
  g: {distribution: {observations: {mean: 1, sd: 2, count: 4}}}
  h: {distribution: {lognormal: {quantiles: {"0.05": 1, "0.95": 3}}}}
  i: {}
  j: {}
dependence:
  - inputs: [c, g, h]
    copula: {gaussian: {kendall: [[1, 0.1, 0.2], [0.1, 1, 0.3], [0.2, 0.3, 1]]}}
  - inputs: [i, j]
    joint_density: {density: 4*i*j, support: "0 < i and i < 1 and 0 < j and j < 1"}
transformation:
  where: {t: a + b*c, u: {formula: t - d/e, unit: "1"}}
  outputs: {y: {formula: "if(u > 0, f + g, h)*i/j", route: sampling}, z: {formula: y^2}}
requirements:
  - {name: One, event: y > 0 and not (z < 1), probability: {at_least: 0.1, at_most: 0.9}}
  - {name: Two, quantile: {output: z, at: 0.5, at_least: 0, at_most: 9}}
readings: {coverage: [0.9], quantiles: [0.5], probabilities: ["y < z"], values: {y: [0, 1]}}
"""
TEXTS = [RICH, WIDE, starting_model("spring")]
PIECES = [
    "{", "}", "[", "]", ":", ": ", ",", "-", "- ", "\n", "\n  ", "\t", "'", '"', "#", "&a ", "*a", "!t ",
    "|", ">", "?", "%", "@", "~", "null", "true", "1e999", "-1", "0", "1e-3", "012", ".nan", "mm", "kg",
    "bore", "and", "if(", ")", "^", "**", "/0", "é", "\u2028", "\ufeff", "\x00", "\x85", "---\n", "...\n",
    "<<", "normal", "gamma", "mean", "=",
]  # fmt: skip

CALM = settings(deadline=None, max_examples=80, suppress_health_check=[HealthCheck.too_slow])


def outcome(reading: Callable[[], Model]) -> Model | ModelError:
    """The model or the error; other exceptions pass through and fail the test."""
    try:
        return reading()
    except ModelError as error:
        return error


def read(source: bytes) -> Model | ModelError:
    """The model or its faults; every fault has a place and words."""
    result = outcome(lambda: build_model(read_yaml("m.yaml", source), FOLDER))
    if isinstance(result, ModelError):
        assert result.faults
        for fault in result.faults:
            assert fault.message.strip()
            assert fault.place.file
            assert fault.place.line >= 0
    return result


@CALM
@given(data=st.data())
def test_text_with_pieces_put_in_and_cut_out(data: st.DataObject) -> None:
    text = data.draw(st.sampled_from(TEXTS))
    for _ in range(data.draw(st.integers(1, 4))):
        start = data.draw(st.integers(0, len(text)))
        end = min(len(text), start + data.draw(st.sampled_from([0, 0, 1, 2, 5, 20, 100])))
        piece = data.draw(st.sampled_from(PIECES) | st.text(max_size=3))
        text = text[:start] + piece + text[end:]
    read(text.encode("utf-8", "surrogatepass"))


@CALM
@given(data=st.data())
def test_bytes_that_are_changed(data: st.DataObject) -> None:
    source = bytearray(data.draw(st.sampled_from(TEXTS)).encode())
    for _ in range(data.draw(st.integers(1, 5))):
        source[data.draw(st.integers(0, len(source) - 1))] = data.draw(st.integers(0, 255))
    read(bytes(source))


@CALM
@given(
    source=st.binary(max_size=200) | st.text(max_size=200).map(lambda text: text.encode("utf-8", "replace"))
)
def test_any_bytes(source: bytes) -> None:
    assert isinstance(read(source), ModelError)


VALUES: st.SearchStrategy[Any] = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5) | st.sampled_from(PIECES),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(PIECES), inner, max_size=3),
    max_leaves=4,
)


def places(value: Any) -> list[tuple[Any, Any]]:
    """Every container with each key or index in it."""
    found: list[tuple[Any, Any]] = []
    if isinstance(value, dict | list):
        for key in list(value) if isinstance(value, dict) else range(len(value)):
            found.append((value, key))
            found.extend(places(value[key]))
    return found


@CALM
@given(data=st.data())
def test_mapping_with_values_and_keys_replaced(data: st.DataObject) -> None:
    model = copy.deepcopy(data.draw(st.sampled_from([yaml.safe_load(text) for text in TEXTS])))
    for _ in range(data.draw(st.integers(1, 3))):
        container, key = data.draw(st.sampled_from(places(model)))
        if key not in container and isinstance(container, dict):
            continue
        if isinstance(container, list) and key >= len(container):
            continue
        action = data.draw(st.sampled_from(["replace", "remove", "rename"]))
        if action == "replace":
            container[key] = data.draw(VALUES)
        elif action == "remove" or isinstance(container, list):
            del container[key]
        else:
            container[data.draw(st.sampled_from(PIECES))] = container.pop(key)
        if not places(model):
            break
    result = outcome(lambda: read_mapping(model))
    assert isinstance(result, Model) or result.faults


@pytest.mark.parametrize("text", TEXTS)
def test_the_undamaged_texts_are_right(text: str) -> None:
    assert isinstance(read(text.encode()), Model)


def test_a_mapping_that_contains_itself() -> None:
    loop: dict[str, Any] = {}
    loop["a"] = loop
    with pytest.raises(ModelError, match="nested more than 40 levels deep"):
        read_mapping(loop)


def test_files_in_the_way_of_a_folder(tmp_path: Path) -> None:
    """A CSV name that leads through a file is no crash."""
    (tmp_path / "a.csv").write_text("x\n1\n")
    text = RICH.replace("{normal: {mean: 42, sd: 0.005}}", "{sample: {file: a.csv/b.csv, column: x}}")
    with pytest.raises(ModelError, match=r"there is no file `a\.csv/b\.csv` beside the model"):
        build_model(read_yaml("m.yaml", text.encode()), tmp_path)
