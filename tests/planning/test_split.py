"""How formulas fall into parts: what gets a law of its own, and what is given where nothing does."""

from __future__ import annotations

import pytest

from outspread.formula.parser import parse
from outspread.formula.text import to_text
from outspread.formula.tree import names
from outspread.laws.build import build_law
from outspread.laws.law import Law
from outspread.numerics.slices.problem import Scores
from outspread.planning.plan import PlanStep
from outspread.planning.split import Part, Splitter
from outspread.planning.tree import TreePlanner, expanded
from outspread.reading.model import Distribution


def law(family: str, **parameters: float) -> Law:
    return build_law(Distribution(family, parameters))


LAWS = {name: law("uniform", lower=1.0, upper=2.0) for name in "abcdefgh"}


def split(text: str, linked: dict[str, str] | None = None) -> Part:
    return Splitter(LAWS, linked or {}, LAWS, dict.fromkeys(LAWS, "uniform")).split("y", parse(text))


def written(part: Part) -> list[str]:
    """The parts, each after those it needs, and the whole."""
    below = [line for own in part.parts for line in written(own)]
    return [*below, f"{part.name} = {to_text(part.expression)}"]


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("a + b", ["y = a + b"]),
        ("a + b + c + d", ["part_1 = a + b", "part_2 = c + d", "y = part_1 + part_2"]),
        ("(a + b)*c", ["part_1 = a + b", "y = part_1*c"]),
        ("sqrt((a - b)^2 + c)", ["part_2 = (a - b)^2", "part_1 = part_2 + c", "y = sqrt(part_1)"]),
        ("2*a*b - c", ["part_1 = 2*a*b", "y = part_1 - c"]),
        ("a/(a + b + c)", ["part_1 = b + c", "y = a/(a + part_1)"]),
        ("a*b + a*c", ["y = a*b + a*c"]),
        ("max(a, b, min(c, d))", ["part_1 = max(a, b)", "part_2 = min(c, d)", "y = max(part_1, part_2)"]),
        ("3 + a*b + 4", ["y = 3 + a*b + 4"]),
    ],
)
def test_parts_share_no_input(text: str, wanted: list[str]) -> None:
    assert written(split(text)) == wanted


@pytest.mark.parametrize("text", ["(a + b)*c/(d - e) + f*g", "min(a, b, c, d, e + f)", "(a - b)^2/(c - d)*e"])
def test_put_together_the_parts_are_the_formula(text: str) -> None:
    """Of every input each occurrence is kept, and each part's inputs are its own."""
    part = split(text)
    assert sorted(part.inputs()) == sorted(set(names(parse(text))))
    found = [set(own.inputs()) for own in part.parts]
    assert sum(map(len, found)) == len(set().union(*found))
    assert "part_" not in to_text(expanded(part))


def test_inputs_that_depend_on_each_other_stay_together() -> None:
    assert written(split("a + b + c", {"a": "a", "c": "a"})) == ["part_1 = a + c", "y = part_1 + b"]


def test_a_thousand_terms_make_a_shallow_tree() -> None:
    terms = [f"x{i}" for i in range(1000)]
    part = Splitter(terms, {}, terms, {}).split("y", parse(" + ".join(terms)))

    def depth(own: Part) -> int:
        return 1 + max((depth(below) for below in own.parts), default=0)

    assert depth(part) == 10
    assert len(written(part)) == 999


def planned(text: str, any_work: bool = False, scores: Scores | None = None) -> PlanStep | None:
    used = {name: LAWS[name] for name in LAWS}
    return TreePlanner(used, scores, lambda node, laws, given: None).plan("y", parse(text), any_work)


def test_an_input_that_recurs_is_given_where_that_is_asked_for() -> None:
    text = "(a + b)*c/(a + d)"
    assert planned(text) is None  # much would have to be done anew for each value of a
    step = planned(text, any_work=True)
    assert step is not None
    assert (step.route, step.outer) == ("conditioning", ("a",))
    (inner,) = step.substeps
    assert inner.route == "region_integral"
    assert inner.derives.endswith("given a")


def test_what_stays_entangled_is_left_to_sampling() -> None:
    assert planned("a*b*c + a*d*e + b*d + c*e + a", any_work=True) is None
