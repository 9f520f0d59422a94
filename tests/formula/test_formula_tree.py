"""Walking and replacing: order, sharing and depth."""

from __future__ import annotations

from outspread.formula.linear import size
from outspread.formula.parser import parse
from outspread.formula.tree import Apply, Name, Node, Number, names, occurrences, rebuild, substitute


def doubled(times: int) -> Node:
    """2**times references to x, shared at every level."""
    node: Node = Name("x")
    for _ in range(times):
        node = Apply("multiply", (node, node))
    return node


def test_names_come_in_order_of_first_occurrence() -> None:
    assert names(parse("b + sin(a)*b - c/a")) == ("b", "a", "c")
    assert occurrences(parse("b + sin(a)*b - c/a"), "b") == 2


def test_names_are_replaced_and_the_rest_is_kept_as_it_is() -> None:
    node = parse("x + sin(y)")
    assert substitute(node, {"x": Number(2.0)}) == parse("2 + sin(y)")
    assert isinstance(node, Apply)
    replaced = substitute(node, {"x": Number(2.0)})
    assert isinstance(replaced, Apply)
    assert replaced.arguments[1] is node.arguments[1]
    assert substitute(node, {"z": Number(2.0)}) is node


def test_a_replacement_is_not_walked_again() -> None:
    assert substitute(parse("x + y"), {"x": Name("y"), "y": Name("x")}) == parse("y + x")
    assert rebuild(parse("x*x"), lambda part: parse("x + 1") if part == Name("x") else None) == parse(
        "(x + 1)*(x + 1)"
    )


def test_parts_that_are_shared_are_handled_once() -> None:
    node = doubled(200)
    assert names(node) == ("x",)
    replaced = substitute(node, {"x": Name("y")})
    assert names(replaced) == ("y",)
    assert size(replaced) == 2**201 - 1


def test_depth_is_not_limited_by_recursion() -> None:
    node: Node = Name("x")
    for _ in range(20_000):
        node = Apply("sin", (node,))
    assert names(substitute(node, {"x": Name("y")})) == ("y",)
