"""Maps and laws shared by the tests of inverse and Jacobian; it asserts nothing."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from outspread.formula.parser import parse
from outspread.laws.build import build_law
from outspread.laws.law import Array, Law
from outspread.reading.model import Distribution
from outspread.routes.derived import JointLaw
from outspread.routes.jacobian import NotPossible, derive_joint, input_density


def law(family: str, **parameters: float) -> Law:
    return build_law(Distribution(family, parameters))


def normal(mean: float = 0.0, sd: float = 1.0) -> Law:
    return law("normal", mean=mean, sd=sd)


def uniform(lower: float = 0.0, upper: float = 1.0) -> Law:
    return law("uniform", lower=lower, upper=upper)


def exponential(rate: float = 1.0) -> Law:
    return law("exponential", rate=rate)


def gamma(shape: float, scale: float = 1.0) -> Law:
    return law("gamma", shape=shape, scale=scale)


def derive(
    formulas: Mapping[str, str],
    laws: Mapping[str, Law],
    correlation: Sequence[Sequence[float]] | None = None,
    *,
    written: bool = True,
) -> JointLaw | NotPossible:
    outputs = {name: parse(text) for name, text in formulas.items()}
    return derive_joint(outputs, laws, input_density(laws, correlation), {}, written=written)


def joint(
    formulas: Mapping[str, str],
    laws: Mapping[str, Law],
    correlation: Sequence[Sequence[float]] | None = None,
    *,
    written: bool = True,
) -> JointLaw:
    found = derive(formulas, laws, correlation, written=written)
    assert isinstance(found, JointLaw), found
    return found


def draws(laws: Mapping[str, Law], count: int, seed: int) -> Array:
    """Independent draws of the inputs, shape (n, count)."""
    generator = np.random.default_rng(seed)
    return np.stack([one.icdf(generator.uniform(size=count)) for one in laws.values()])


#: name -> (formulas, laws): every map of these tests that a formula of published mathematics covers or that
#: the two ways of inverting must agree on
MAPS: dict[str, tuple[dict[str, str], dict[str, Law]]] = {
    "affine": ({"a": "2*x - y + 1", "b": "x/4 + 3*y"}, {"x": normal(1.0, 2.0), "y": uniform(-1.0, 2.0)}),
    "pairwise sums": (
        {"U": "X1 + X2", "V": "X2 + X3", "W": "X1 + X3"},
        {"X1": exponential(1.0), "X2": exponential(2.0), "X3": exponential(3.0)},
    ),
    "polar": ({"R": "hypot(x, y)", "T": "atan2(y, x)"}, {"x": normal(), "y": normal()}),
    "Box-Muller": (
        {"z1": "sqrt(-2*log(u))*cos(2*pi*v)", "z2": "sqrt(-2*log(u))*sin(2*pi*v)"},
        {"u": uniform(), "v": uniform()},
    ),
    "sum and share": ({"s": "x + y", "t": "x/(x + y)"}, {"x": gamma(2.0, 1.5), "y": gamma(3.5, 1.5)}),
    "sum and ratio": ({"s": "x + y", "r": "x/y"}, {"x": exponential(0.5), "y": exponential(0.5)}),
    "product and ratio": ({"p": "x*y", "q": "x/y"}, {"x": normal(), "y": normal()}),
    "square and cube": ({"a": "x^2", "b": "y^3"}, {"x": normal(), "y": normal()}),
    "squares and one": ({"r": "x^2 + y^2", "b": "x"}, {"x": normal(), "y": normal()}),
    "order statistics": ({"a": "min(x, y)", "b": "max(x, y)"}, {"x": normal(), "y": normal()}),
    "product and sum": ({"p": "x*y", "s": "x + y"}, {"x": uniform(0.0, 2.0), "y": uniform(0.5, 3.0)}),
    "complex square": ({"a": "x^2 - y^2", "b": "2*x*y"}, {"x": normal(), "y": normal()}),
    "spherical": (
        {"r": "sqrt(x^2 + y^2 + z^2)", "t": "acos(z/sqrt(x^2 + y^2 + z^2))", "p": "atan2(y, x)"},
        {"x": normal(), "y": normal(), "z": normal()},
    ),
    "sine": ({"a": "sin(x)", "b": "y - x"}, {"x": uniform(-4.0, 7.0), "y": normal()}),
    "absolute value and whole part": (
        {"a": "abs(x)", "b": "y + floor(x)"},
        {"x": uniform(-1.5, 2.5), "y": normal()},
    ),
    "decibels": ({"a": "decibel(x)", "b": "decibel(x/y)"}, {"x": gamma(2.0), "y": gamma(3.0)}),
}
