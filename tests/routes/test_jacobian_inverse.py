"""Inverses: single names by `solve_for`, systems by elimination, and the search without a formula."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from jacobian_maps import MAPS, draws, joint, normal, uniform

from outspread.formula.evaluate import compile_numpy
from outspread.formula.parser import parse
from outspread.formula.tree import Name, names
from outspread.routes.jacobian import solve_for
from outspread.routes.jacobian.affine import affine_map
from outspread.routes.jacobian.branches import branches_for
from outspread.routes.jacobian.elimination import solve_system

#: expression in x (and known a) -> (values of x to come back to, number of branches)
SINGLE = {
    "a + 3*x": ([-2.0, 5.0], 1),
    "a/(x - 4)": ([-2.0, 5.0], 1),
    "(x + a)^2": ([-9.0, 4.0], 2),
    "(x + a)^3": ([-9.0, 4.0], 1),
    "x^-2": ([-9.0, 4.0], 2),
    "x^2.5": ([0.3, 4.0], 1),
    "a^x": ([-0.3, 4.0], 1),
    "x^a": ([0.3, 4.0], 1),
    "abs(x - 1)": ([-0.3, 4.0], 2),
    "sqrt(x)": ([0.3, 4.0], 1),
    "exp(-x)": ([-0.3, 4.0], 1),
    "log(2*x)": ([0.3, 4.0], 1),
    "log10(x)": ([0.3, 4.0], 1),
    "hypot(x, a)": ([-0.3, 4.0], 2),
    "hypot(x, a, 2)": ([-0.3, 4.0], 2),
    "sin(x/2)": ([-8.0, 0.3, 40.0], 2),
    "cos(x)": ([-8.0, 0.3, 40.0], 2),
    "tan(x)": ([-8.0, 0.3, 40.0], 1),
    "asin(x)": ([-0.3, 0.9], 1),
    "acos(x)": ([-0.3, 0.9], 1),
    "atan(x)": ([-0.3, 20.0], 1),
    "atan2(x, a)": ([-0.3, 20.0], 1),
    "atan2(a, x)": ([-0.3, 20.0], 1),
    "sinh(x)": ([-3.0, 2.0], 1),
    "cosh(x)": ([-3.0, 2.0], 2),
    "tanh(x)": ([-3.0, 2.0], 1),
    "decibel(x)": ([0.1, 2.0], 1),
    "from_decibel(x - a)": ([-3.0, 2.0], 1),
    "max(x, 0)": ([0.5, 2.0], 1),
}


@pytest.mark.parametrize("text", SINGLE)
def test_solve_for_comes_back_to_the_value(text: str) -> None:
    """Some branch with some integer k gives back the x put in; every k solves the equation."""
    expression, a = parse(text), 1.7
    values, count = SINGLE[text]
    branches = branches_for(expression, "x", Name("t"))
    assert branches is not None
    assert solve_for(expression, "x", Name("t")) == [branch.value for branch in branches]
    assert len(branches) == count
    forward = compile_numpy(expression, ("x", "a"))
    for x in values:
        t = float(forward(x, a))
        reached = []
        for branch in branches:
            integers = range(-30, 31) if branch.parameters else [0]
            solve = compile_numpy(branch.value, ("t", "a", "k"))
            held = [compile_numpy(one, ("t", "a", "k"))(t, a, 0.0) for one in branch.conditions]
            if all(held):
                found = [float(solve(t, a, float(k))) for k in integers]
                reached += found
                again = [float(forward(value, a)) for value in found[len(found) // 2 : len(found) // 2 + 2]]
                np.testing.assert_allclose(again, t, rtol=1e-9, atol=1e-12)
        assert min(abs(value - x) for value in reached) <= 1e-12 * (1.0 + abs(x))


@pytest.mark.parametrize("text", ["x + x^3", "erf(x)", "gamma(x)", "floor(x)", "a + 1", "sign(x)"])
def test_solve_for_says_where_it_has_no_inverse(text: str) -> None:
    """Names that occur twice or not at all, and operators without an inverse here, give None."""
    assert solve_for(parse(text), "x", Name("t")) is None


def test_the_integer_parameter_avoids_names_in_use() -> None:
    """With k an input, the integer is called k1."""
    found = branches_for(parse("sin(k*x)"), "x", Name("t"))
    assert found is not None
    assert {one.name for branch in found for one in branch.parameters} == {"k1"}
    assert set(names(found[0].value)) == {"t", "k", "k1"}


def test_an_affine_map_is_recognised_exactly() -> None:
    """(2x - y + 1, x/4 + 3y): determinant 25/4, inverse in exact fractions; a product of inputs is none."""
    found = affine_map([parse("2*x - y + 1"), parse("x/4 + 3*y")], ("x", "y"))
    assert found is not None
    assert found.determinant == 6.25
    assert [[float(v) for v in row] for row in found.inverse] == [[0.48, 0.16], [-0.04, 0.32]]
    assert [float(v) for v in found.offset] == [1.0, 0.0]
    assert affine_map([parse("x*y"), parse("x")], ("x", "y")) is None
    assert affine_map([parse("x + y"), parse("2*x + 2*y")], ("x", "y")) is None


@pytest.mark.parametrize(
    ("formulas", "branches"),
    [
        (["x + y", "x/(x + y)"], 1),
        (["x + y", "x/y"], 1),
        (["x*y", "x + y"], 2),
        (["x^2 + y^2", "x^2 - y^2"], 4),
        (["exp(x) + y", "exp(x) - y"], 1),
        (["sqrt(x) + sqrt(y)", "sqrt(x) - sqrt(y)"], 1),
        (["log(x/y)", "x*y"], 2),
        (["3*hypot(x, 2*y)", "atan2(2*y, x)"], 2),
        (["x + y + z", "(x + y)/(x + y + z)", "x/(x + y)"], 1),
        (["r*sin(t)*cos(p)", "r*sin(t)*sin(p)", "r*cos(t)"], 4),
        (["x/(x + y)", "y/(x + z)", "z"], 1),
    ],
)
def test_elimination_solves_the_usual_systems(formulas: list[str], branches: int) -> None:
    """Put back into the formulas, some branch satisfies them at random inputs."""
    expressions = [parse(text) for text in formulas]
    unknowns = tuple(dict.fromkeys(name for one in expressions for name in names(one)))
    targets = tuple(f"T{i}" for i in range(len(formulas)))
    found = solve_system([(one, Name(t)) for one, t in zip(expressions, targets, strict=True)], unknowns)
    assert found is not None
    assert len(found) == branches
    inputs = np.random.default_rng(4).uniform(0.2, 1.5, size=(len(unknowns), 20))
    outputs = [compile_numpy(one, unknowns)(*inputs) for one in expressions]
    best = np.full(20, np.inf)
    for solution in found:
        integers = tuple(parameter.name for parameter in solution.parameters)
        values = [
            compile_numpy(solution.values[name], (*targets, *integers))(*outputs, *(0.0 for _ in integers))
            for name in unknowns
        ]
        best = np.fmin(best, np.max(np.abs(np.array(values) - inputs), axis=0))
    assert np.max(best) <= 1e-11


@pytest.mark.parametrize("name", MAPS)
def test_written_and_searched_inverse_agree(name: str) -> None:
    """The same density to 1e-11 by the formulas of the inverse and by branch and prune without them."""
    formulas, laws = MAPS[name]
    inputs = draws(laws, 10, seed=31)
    points = np.stack([compile_numpy(parse(text), tuple(laws))(*inputs) for text in formulas.values()])
    written = joint(formulas, laws).pdf(points)
    searched = joint(formulas, laws, written=False).pdf(points)
    np.testing.assert_allclose(searched, written, rtol=1e-11)
    assert np.all(written > 0.0)


def test_a_map_without_a_written_inverse_is_searched() -> None:
    """x³ + x + y and y - exp(x): one solution; against the elementary density at that solution."""
    laws = {"x": normal(), "y": normal()}
    found = joint({"a": "x^3 + x + y", "b": "y - exp(x)"}, laws)
    x, y = draws(laws, 20, seed=5)
    value = found.pdf(np.stack([x**3 + x + y, y - np.exp(x)]))
    expected = np.exp(-(x * x + y * y) / 2) / (2 * math.pi) / (3 * x * x + 1 + np.exp(x))
    np.testing.assert_allclose(value, expected, rtol=1e-9)
    assert any("Krawczyk" in one.text for one in found.mathematics)


def test_every_solution_of_a_searched_map_counts() -> None:
    """x³ - 3x + 0y and y: three real roots for |a| < 2, found against numpy's roots of the cubic."""
    laws = {"x": uniform(-3.0, 3.0), "y": uniform(0.0, 1.0)}
    found = joint({"a": "x^3 - 3*x + y", "b": "y*exp(x/50)"}, laws)
    a, b = 0.6, 0.5
    grid = np.linspace(-3.0, 3.0, 200_001)  # sign changes of the eliminated equation in x alone
    residual = grid**3 - 3 * grid + b * np.exp(-grid / 50) - a
    at = np.flatnonzero(np.sign(residual[1:]) != np.sign(residual[:-1]))
    assert at.size == 3
    expected = 0.0
    for x in grid[at]:
        for _ in range(5):
            slope = 3 * x * x - 3 - b / 50 * np.exp(-x / 50)
            x = x - (x**3 - 3 * x + b * np.exp(-x / 50) - a) / slope
        expected += 1 / 6 / abs((3 * x * x - 3) * np.exp(x / 50) - b * np.exp(-x / 50) * np.exp(x / 50) / 50)
    assert found.pdf(np.array([[a], [b]]))[0] == pytest.approx(expected, rel=1e-12)


@settings(max_examples=25, deadline=None)
@given(st.lists(st.integers(-5, 5), min_size=4, max_size=4), st.integers(0, 2**32 - 1))
def test_linear_maps_of_normals_are_normal(entries: list[int], seed: int) -> None:
    """Any regular integer matrix gives the density |det|⁻¹ φ(inverse), whatever the order of the inputs."""
    p, q, r, s = entries
    determinant = p * s - q * r
    if determinant == 0:
        return
    laws = {"x": normal(), "y": normal()}
    formulas = {"a": f"{p}*x + {q}*y", "b": f"{r}*x + {s}*y"}
    if any(name not in names(parse(" + ".join(formulas.values()))) for name in laws):
        return
    x, y = np.random.default_rng(seed).normal(size=(2, 5))
    points = np.array([p * x + q * y, r * x + s * y])
    expected = np.exp(-(x * x + y * y) / 2) / (2 * math.pi) / abs(determinant)
    np.testing.assert_allclose(joint(formulas, laws).pdf(points), expected, rtol=1e-11)
    swapped = joint(formulas, {"y": laws["y"], "x": laws["x"]})
    np.testing.assert_allclose(swapped.pdf(points), expected, rtol=1e-11)
