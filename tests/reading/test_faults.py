"""Every mistake that a model can hold is reported in full at its line and column."""

from __future__ import annotations

import pytest
from fault_cases import BASE, CASES, FOLDER, Edit, edited

from outspread.errors import ModelError
from outspread.reading.build import build_model
from outspread.reading.yaml_reader import read_yaml


def test_the_unedited_model_has_no_fault() -> None:
    """Each case differs from a right model by its edits alone."""
    assert build_model(read_yaml("m.yaml", BASE.encode()), FOLDER).title == "Gap"


@pytest.mark.parametrize(("edits", "expected"), [case[1:] for case in CASES], ids=[case[0] for case in CASES])
def test_fault(edits: list[Edit], expected: str) -> None:
    """The whole message, with its place, is as it stands in the table."""
    with pytest.raises(ModelError) as caught:
        build_model(read_yaml("m.yaml", edited(edits).encode()), FOLDER)
    assert str(caught.value).replace(str(FOLDER), "DATA") == expected


def test_names_of_the_cases_differ() -> None:
    """No case is shadowed by another one of the same name."""
    assert len({case[0] for case in CASES}) == len(CASES)
