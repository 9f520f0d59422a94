"""The model that a user starts from, and the demo models, read without a fault."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from outspread.reading.build import read_model
from outspread.reading.starting import starting_model
from outspread.resources import read_text, resource

MODELS = sorted((Path(__file__).resolve().parents[2] / "models").glob("*.yaml"))


@pytest.mark.parametrize(
    ("name", "title"),
    [
        ("spring-force", "Spring force"),
        ("gap", "Gap"),
        ("gap.yaml", "Gap"),
        ("12", "12"),
        ("true", "True"),
        ("no", "No"),
        ("1e5", "1e5"),
        ("a_b.c", "A b c"),
    ],
)
def test_starting_model(name: str, title: str, tmp_path: Path) -> None:
    """It reads cleanly whatever plain name it gets, and is titled after it."""
    file = tmp_path / "m.yaml"
    file.write_text(starting_model(name), encoding="utf-8")
    assert read_model(file).title == title


def test_the_schema_is_named_for_editors(tmp_path: Path) -> None:
    text = starting_model("gap", schema="../schema/model-1.schema.json")
    assert text.startswith("# yaml-language-server: $schema=../schema/model-1.schema.json\n# A model")
    assert starting_model("gap").startswith("# A model")
    (tmp_path / "m.yaml").write_text(text, encoding="utf-8")
    assert read_model(tmp_path / "m.yaml").title == "Gap"


@pytest.mark.parametrize("name", ["", "a b", "../a", "a/b", "-a", "é", "a\n", "x" * 101, "{a}"])
def test_a_name_that_is_no_file_name(name: str) -> None:
    with pytest.raises(ValueError, match="is no name for a model; use letters, digits"):
        starting_model(name)


@pytest.mark.parametrize("file", MODELS, ids=[file.stem for file in MODELS])
def test_demo_model(file: Path) -> None:
    model = read_model(file)
    assert model.outputs
    assert model.requirements


def test_there_are_demo_models() -> None:
    assert len(MODELS) >= 6


def test_shipped_files_are_found() -> None:
    """Schema and models are reached through one helper, in a checkout as in a wheel."""
    assert read_text("schema", "model-1.schema.json").startswith("{")
    assert resource("models").is_dir()
    with pytest.raises(FileNotFoundError, match="lacks its folder 'nothing'"):
        resource("nothing")


def test_an_installed_package_carries_its_own_files(tmp_path: Path) -> None:
    """In the layout of the wheel, away from the repository, the packaged schema is the one in use."""
    root = Path(__file__).resolve().parents[2]
    package = tmp_path / "outspread"
    shutil.copytree(root / "compiler" / "outspread", package, ignore=shutil.ignore_patterns("__pycache__"))
    shutil.copytree(root / "schema", package / "schema")
    code = (
        "import sys; from outspread.reading.build import read_model; "
        "from outspread.resources import resource; "
        "print(resource('schema'), read_model(sys.argv[1]).title)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(MODELS[0])],
        capture_output=True, text=True, check=True, cwd=tmp_path,
        env={"PYTHONPATH": str(tmp_path), "HOME": str(tmp_path)},
    )  # fmt: skip
    assert done.stdout.startswith(f"{package / 'schema'} ")
