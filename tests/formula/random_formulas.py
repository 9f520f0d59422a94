"""Hypothesis strategies for formula trees as the reader makes them, shared by the tests of this folder."""

from __future__ import annotations

from hypothesis import strategies as st

from outspread.formula.tree import Apply, Name, Node, Number, add, multiply

NAMES = ("x", "y", "z")

numbers = st.one_of(
    st.integers(0, 9).map(lambda n: Number(float(n), str(n))),
    st.sampled_from(["0.5", "2.25", "1e-3", "11.5e-6", "0.1"]).map(lambda t: Number(float(t), t)),
)
leaves = st.one_of(st.sampled_from(NAMES).map(Name), numbers)

ONE = ("sqrt", "exp", "log", "log10", "abs", "sin", "cos", "atan", "sinh", "cosh", "tanh", "erf", "decibel",
       "from_decibel", "asin", "acos", "tan", "gamma")  # fmt: skip
STEPS = ("sign", "floor", "ceil")
COMPARED = ("less", "less_equal", "greater", "greater_equal", "equal", "not_equal")


def _flat(operator: str, parts: list[Node]) -> Node:
    return add(*parts) if operator == "add" else multiply(*parts)


def conditions(inner: st.SearchStrategy[Node]) -> st.SearchStrategy[Node]:
    simple = st.builds(lambda o, a, b: Apply(o, (a, b)), st.sampled_from(COMPARED), inner, inner)
    joined = st.builds(
        lambda o, parts: Apply(o, tuple(parts)),
        st.sampled_from(["and", "or"]),
        st.lists(simple, min_size=2, max_size=3),
    )
    return st.one_of(
        simple, joined, joined.map(lambda c: Apply("not", (c,))), simple.map(lambda c: Apply("not", (c,)))
    )


def _grown(inner: st.SearchStrategy[Node]) -> st.SearchStrategy[Node]:
    few = st.lists(inner, min_size=2, max_size=3)
    return st.one_of(
        st.builds(_flat, st.sampled_from(["add", "multiply"]), few),
        st.builds(
            lambda o, a, b: Apply(o, (a, b)), st.sampled_from(["divide", "power", "atan2"]), inner, inner
        ),
        inner.map(lambda a: Apply("negate", (a,))),
        st.builds(lambda a, n: Apply("power", (a, Number(float(n), str(n)))), inner, st.integers(0, 5)),
        st.builds(lambda o, a: Apply(o, (a,)), st.sampled_from(ONE + STEPS), inner),
        st.builds(lambda o, parts: Apply(o, tuple(parts)), st.sampled_from(["min", "max", "hypot"]), few),
        st.builds(lambda c, a, b: Apply("if", (c, a, b)), conditions(inner), inner, inner),
    )


formulas = st.recursive(leaves, _grown, max_leaves=12)
