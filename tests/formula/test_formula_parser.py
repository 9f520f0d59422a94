"""The reader: grammar, every error with its place, limits. The grammar is that of the model format."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from random_formulas import conditions, formulas, leaves

from outspread.errors import FormulaError
from outspread.formula.parser import check_names, parse, parse_event
from outspread.formula.text import to_text
from outspread.formula.tree import Apply, Name, Node, Number, walk

X, Y, A, B, C, D = (Name(name) for name in "xyabcd")
ONE, TWO, THREE = (Number(float(n)) for n in (1, 2, 3))


def op(operator: str, *arguments: Node) -> Apply:
    return Apply(operator, arguments)


GRAMMAR = {
    "a + b - c": op("add", A, B, op("negate", C)),
    "a - b - c": op("add", A, op("negate", B), op("negate", C)),
    "a + (b + c)": op("add", A, B, C),
    "a - (b + c)": op("add", A, op("negate", op("add", B, C))),
    "a * b * c": op("multiply", A, B, C),
    "a * b / c * d": op("multiply", op("divide", op("multiply", A, B), C), D),
    "a / b / c": op("divide", op("divide", A, B), C),
    "a / (b * c)": op("divide", A, op("multiply", B, C)),
    "-x^2": op("negate", op("power", X, TWO)),
    "(-x)^2": op("power", op("negate", X), TWO),
    "-a * b": op("multiply", op("negate", A), B),
    "a * -b": op("multiply", A, op("negate", B)),
    "2^-1": op("power", TWO, op("negate", ONE)),
    "2^-x^2": op("power", TWO, op("negate", op("power", X, TWO))),
    "a^b^c": op("power", A, op("power", B, C)),
    "(a^b)^c": op("power", op("power", A, B), C),
    "a**b": op("power", A, B),
    "+a": A,
    "a - -b": op("add", A, op("negate", op("negate", B))),
    "sqrt(x)": op("sqrt", X),
    "max(a, b, c)": op("max", A, B, C),
    "atan2(y, x)": op("atan2", Y, X),
    "if(a < b, 1, x)": op("if", op("less", A, B), ONE, X),
    "pi": Number(math.pi),
    "1e-3": Number(1e-3),
    ".5": Number(0.5),
    "6.02e23": Number(6.02e23),
    "a\n + b": op("add", A, B),
}
EVENTS = {
    "a < b": op("less", A, B),
    "a <= b": op("less_equal", A, B),
    "a > b": op("greater", A, B),
    "a >= b": op("greater_equal", A, B),
    "a == b": op("equal", A, B),
    "a != b": op("not_equal", A, B),
    "1 < a < 2": op("and", op("less", ONE, A), op("less", A, TWO)),
    "1 < a <= b < 2": op("and", op("less", ONE, A), op("less_equal", A, B), op("less", B, TWO)),
    "not a < b and c > d": op("and", op("not", op("less", A, B)), op("greater", C, D)),
    "a < b and c > d or x > y": op(
        "or", op("and", op("less", A, B), op("greater", C, D)), op("greater", X, Y)
    ),
    "a < b and (c > d or x > y)": op(
        "and", op("less", A, B), op("or", op("greater", C, D), op("greater", X, Y))
    ),
    "a + b < 2 * c": op("less", op("add", A, B), op("multiply", TWO, C)),
    "not (a < b or c < d)": op("not", op("or", op("less", A, B), op("less", C, D))),
}


@pytest.mark.parametrize("text", GRAMMAR)
def test_a_formula_becomes_the_tree_of_the_grammar(text: str) -> None:
    assert parse(text) == GRAMMAR[text]


@pytest.mark.parametrize("text", EVENTS)
def test_an_event_becomes_the_tree_of_the_grammar(text: str) -> None:
    assert parse_event(text) == EVENTS[text]


@pytest.mark.parametrize("text", [*GRAMMAR, *EVENTS])
def test_every_node_knows_the_text_that_it_came_from(text: str) -> None:
    read = parse if text in GRAMMAR else parse_event
    for part in walk(read(text)):
        assert isinstance(part, Number | Name | Apply)
        start, end = part.span
        assert 0 <= start < end <= len(text)
        if isinstance(part, Name):
            assert text[start:end] == part.name
        if isinstance(part, Number):
            assert text[start:end] == part.text


# text, the offending part, words of the message that say what is wrong, and what would be right
ERRORS = [
    ("", "", "is empty", "such as a + b"),
    ("   ", "   ", "is empty", "such as a + b"),
    ("2x", "2x", "operator is missing between 2 and x", "2*x"),
    ("a b", "b", "operator is missing between a and b", "a*b"),
    ("a (b)", "a", "not a function", "a*(...)"),
    ("a +", "+", "ends behind +", "number or a name"),
    ("a * / b", "/", "is missing behind *", "found /"),
    ("* a", "*", "is missing", "found *"),
    ("(a + b", "(", "never closed", "write the )"),
    ("a + b)", ")", "closes nothing", "remove it"),
    ("()", "()", "are empty", "number or a name"),
    ("a, b", ",", "comma stands outside", "1.5"),
    ("1,5 * a", ",", "comma stands outside", "1.5"),
    ("a = b", "=", "no meaning", "=="),
    ("a & b", "&", "no meaning", "and"),
    ("[a]", "[", "no meaning", "("),
    ("a × b", "×", "no meaning", "write *"),
    ("x²", "²", "no meaning", "^2"),
    ("a ≤ b", "≤", "no meaning", "<="),
    ("5 % a", "%", "no meaning", "/100"),
    ("a # b", "#", "no meaning", "letters"),
    ("__import__('os')", "'", "no meaning", "names"),
    ("sin", "sin", "its arguments are missing", "sin(x)"),
    ("sin + 1", "sin", "its arguments are missing", "sin(x)"),
    ("sin()", "sin()", "takes 1 argument and has 0", "sin(x)"),
    ("sin(a, b)", "sin(a, b)", "takes 1 argument and has 2", "sin(x)"),
    ("atan2(a)", "atan2(a)", "takes 2 arguments and has 1", "atan2(y, x)"),
    ("max()", "max()", "takes at least 1 argument and has 0", "max(a, b)"),
    ("if(a < b, 1)", "if(a < b, 1)", "takes 3 arguments and has 2", "if(condition, a, b)"),
    ("sinn(x)", "sinn", "not a function", "did you mean sin?"),
    ("Sqrt(x)", "Sqrt", "not a function", "did you mean sqrt?"),
    ("1 + ln(x)", "ln", "not a function", "log(x)"),
    ("arcsin(x)", "arcsin", "not a function", "asin(x)"),
    ("pow(x, 2)", "pow", "not a function", "a^b"),
    ("(a < b) + 1", "(a < b)", "condition stands in a sum", "if(condition, 1, 0)"),
    ("2 * (a < b)", "(a < b)", "condition stands in a product", "if(condition, 1, 0)"),
    ("-(a < b)", "(a < b)", "condition stands behind a - sign", "if(condition, 1, 0)"),
    ("a^(a < b)", "(a < b)", "condition stands in an exponent", "if(condition, 1, 0)"),
    ("sqrt(a < b)", "a < b", "condition stands in sqrt", "if(condition, 1, 0)"),
    ("a < (b < c)", "(b < c)", "condition stands in a comparison", "if(condition, 1, 0)"),
    ("a < b and 3", "3", "number stands beside and", "a > 0"),
    ("a and b < 3", "a", "number stands beside and", "a > 0"),
    ("not a", "a", "number stands behind not", "a > 0"),
    ("if(3, a, b)", "3", "number stands as the first argument of if", "a > 0"),
    ("if(a < b, a < c, b)", "a < c", "condition stands as one branch", "if(condition, 1, 0)"),
    ("if(a < b, a < c, a > c)", "a < c", "condition stands as a branch", "if(condition, 1, 0)"),
    ("and a", "and", "missing before and", "condition"),
    ("a < b", "a < b", "formula is a condition", "if(condition, 1, 0)"),
    ("x + 1/0", "1/0", "divides by zero", "finite"),
    ("x/(1 - 1)", "x/(1 - 1)", "divides by zero", "must not be 0"),
    ("x * sqrt(-1)", "sqrt(-1)", "not a real number", "finite"),
    ("log(0) + x", "log(0)", "not a real number", "finite"),
    ("0^-1", "0^-1", "divides by zero", "finite"),
    ("x + 9^9^9", "9^9^9", "too large", "finite"),
    ("10^400", "10^400", "too large", "finite"),
    ("gamma(200)", "gamma(200)", "too large", "finite"),
    ("exp(1000) * x", "exp(1000)", "too large", "finite"),
    ("1e400", "1e400", "too large", "1.8e308"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "part", "wrong", "right"), ERRORS, ids=[case[0] for case in ERRORS])
def test_an_error_says_what_is_wrong_and_what_would_be_right_and_points_at_it(
    text: str, part: str, wrong: str, right: str
) -> None:
    with pytest.raises(FormulaError) as caught:
        parse(text)
    error = caught.value
    assert error.text == text
    assert text[error.start : error.end] == part
    assert wrong in error.message
    assert right in error.message


def test_an_event_must_be_a_condition() -> None:
    with pytest.raises(FormulaError, match=r"event is a number.*compare it") as caught:
        parse_event("a + b")
    assert (caught.value.start, caught.value.end) == (0, 5)


@pytest.mark.parametrize(
    "text",
    ["(" * 9_000 + "1" + ")" * 9_000, "-" * 15_000 + "x", "not " * 4_000 + "a < b", "sqrt(" * 2_000,
     "a^" * 5_000 + "a",
     "a/" * 5_000 + "a", "(1 + " * 150 + "a" + ")" * 150, "x<(" * 3_000],
    ids=["parentheses", "signs", "not", "calls", "powers", "quotients", "sums", "comparisons"],
)  # fmt: skip
def test_deep_nesting_is_refused_with_a_clear_error(text: str) -> None:
    with pytest.raises(FormulaError, match="nested deeper than 100 levels; split it into named steps"):
        parse(text)


def test_nesting_up_to_the_limit_is_read() -> None:
    assert parse("(" * 100 + "a" + ")" * 100) == A
    assert parse("sqrt(" * 99 + "a" + ")" * 99)
    assert parse("(1 - " * 49 + "a" + ")" * 49)


def test_ten_thousand_parentheses_are_refused_by_length_or_depth() -> None:
    with pytest.raises(FormulaError, match="limit"):
        parse("(" * 10_000 + "1" + ")" * 10_000)


def test_long_text_is_refused() -> None:
    with pytest.raises(FormulaError, match="20,005 characters"):
        parse("a" * 20_005)


def test_a_sum_of_five_thousand_terms_is_read_flat() -> None:
    node = parse("+".join(["a"] * 5_000))
    assert isinstance(node, Apply)
    assert len(node.arguments) == 5_000


def test_unknown_names_are_reported_with_a_near_miss() -> None:
    text = "bore - shft"
    with pytest.raises(FormulaError, match="shft is not defined; did you mean shaft") as caught:
        check_names(parse(text), ["bore", "shaft"], text)
    assert text[caught.value.start : caught.value.end] == "shft"
    with pytest.raises(FormulaError, match="q is not defined; write one of bore, shaft"):
        check_names(parse("q"), ["bore", "shaft"], "q")
    check_names(parse("bore - shaft"), ["bore", "shaft"], "bore - shaft")


@given(formulas)
@settings(max_examples=300, deadline=None, derandomize=True)
def test_a_formula_written_as_text_reads_back_as_the_same_tree(node: Node) -> None:
    text = to_text(node)
    try:
        read = parse(text)
    except FormulaError as error:  # constant parts without a value are refused by design
        assert any(word in error.message for word in ("divides by zero", "too large", "not a real number"))  # noqa: PT017
        return
    assert read == node


@given(conditions(leaves))
@settings(max_examples=200, deadline=None, derandomize=True)
def test_a_condition_written_as_text_reads_back_as_the_same_tree(node: Node) -> None:
    assert parse_event(to_text(node)) == node
