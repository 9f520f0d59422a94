"""What a report shows of inverses: the same value, in the form that a person would write."""

from __future__ import annotations

import numpy as np
import pytest

from outspread.formula.calculus import derivative
from outspread.formula.evaluate import compile_numpy
from outspread.formula.latex import to_latex
from outspread.formula.parser import parse
from outspread.formula.tree import Name, names
from outspread.routes.jacobian.branches import branches_for
from outspread.routes.readable import readable


@pytest.mark.parametrize(
    ("formula", "inverse", "slope"),
    [
        ("hypot(x, z)", r"\sqrt{\left(v - x\right)\,\left(v + x\right)}",
         r"\frac{v}{\sqrt{\left(v - x\right)\,\left(v + x\right)}}"),
        ("1.012*x + 0.041*z + 0.35", r"\frac{v - 1.012\,x - 0.35}{0.041}", r"\frac{1}{0.041}"),
        ("-0.036*x - 0.987*z", r"-\frac{v + 0.036\,x}{0.987}", r"-\frac{1}{0.987}"),
        ("0.78*x - z", r"0.78\,x - v", "-1"),
        ("x + z", "v - x", "1"),
        ("4*z - x", r"\frac{v + x}{4}", "0.25"),
        ("x * exp(z / 0.3)", r"0.3\,\ln\!\left(\frac{v}{x}\right)", r"\frac{0.3}{v}"),
    ],
)  # fmt: skip
def test_inverses_read_as_a_person_would_write_them(formula: str, inverse: str, slope: str) -> None:
    """Equal terms collected, quotients left as quotients, no minus before a bracket."""
    tree = parse(formula)
    found = branches_for(tree, "z", Name("v"))
    assert found is not None
    value = readable(found[0].value, tree)
    assert to_latex(value, {}) == inverse
    assert to_latex(readable(derivative(value, "v"), tree), {}) == slope


@pytest.mark.parametrize(
    "formula", ["(x^2 + 0.7) * z", "x / (1.3*z - 2.1)", "sqrt(0.41*z) - 3.7*x", "tanh(z/0.37)"]
)
def test_the_value_stays(formula: str) -> None:
    """The rewritten inverse has the value of the one that was found, to rounding."""
    tree = parse(formula)
    found = branches_for(tree, "z", Name("v"))
    assert found
    x, v = np.array([0.31, 1.7, 2.9]), np.array([0.12, 0.55, 0.93])
    for branch in found:
        used = names(branch.value)
        at = [{"x": x, "v": v}[name] for name in used]
        right = compile_numpy(branch.value, used)(*at)
        np.testing.assert_allclose(compile_numpy(readable(branch.value, tree), used)(*at), right, rtol=2e-15)
