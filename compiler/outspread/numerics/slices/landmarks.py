"""Values of a formula at which its law may not be smooth: those at corners of the inputs' ranges, at kinks,
poles and critical points. They grade panels and state nothing, so that one too many does no harm."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from outspread.errors import DerivationError
from outspread.formula.calculus import derivative, nonsmooth
from outspread.formula.evaluate import compile_numpy
from outspread.formula.tree import Node, Number, names, substitute
from outspread.laws.law import Array, Law
from outspread.numerics.slices.isolate import Isolator
from outspread.numerics.slices.problem import Combinations
from outspread.numerics.slices.solve import PARAMETER

MOST = 60
_MOST_COMBINATIONS = 12
_SAME = 1e-12


def landmarks(
    expression: Node,
    laws: Mapping[str, Law],
    grids: Mapping[str, Array],
    marks: Mapping[str, Array],
    combos: Combinations,
    spots: Sequence[float] = (),
) -> tuple[float, ...]:
    """Values at all pairs of marks of the two inputs, ends of their supports included, and at the turning
    points along each mark; none where they are too many to be of use."""  # fmt: skip
    found = list(spots)
    if combos.count > _MOST_COMBINATIONS:
        return ()
    first, second = grids
    places = {name: _places(laws[name], marks[name]) for name in grids}
    for pick in range(combos.count):
        fixed = {name: Number(float(value[pick])) for name, value in combos.values.items()}
        formula = substitute(expression, fixed)
        function = compile_numpy(formula, (first, second))
        one, two = np.meshgrid(places[first], places[second])
        with np.errstate(all="ignore"):
            found += np.ravel(np.asarray(function(one.ravel(), two.ravel()), float)).tolist()
        for name, other in ((first, second), (second, first)):
            for place in places[name][np.isfinite(places[name])].tolist():
                along = substitute(formula, {name: Number(place)})
                found += _turning_values(along, other, grids[other])
    values = np.array(found)
    values = np.unique(values[np.isfinite(values)])
    if values.size > 1:
        gap = np.diff(values) > _SAME * np.maximum(np.abs(values[1:]), np.abs(values[:-1]))
        values = values[np.append(True, gap)]
    return tuple(values.tolist()) if values.size <= MOST else ()


def _places(law: Law, marks: Array) -> Array:
    return np.unique(np.concatenate([law.support(), law.breaks(), marks]))


def _turning_values(along: Node, name: str, grid: Array) -> list[float]:
    """Values of a formula of one input where its slope changes sign or jumps."""
    points: list[float] = []
    for node in (derivative(along, name), *nonsmooth(along, name)):
        if names(node) != (name,):
            continue
        try:
            roots = Isolator(node, Number(0.0), "less_equal", name, grid, PARAMETER).boundaries({}, 1)[0]
        except DerivationError:
            continue
        if roots.size <= MOST:
            points += roots.tolist()
    with np.errstate(all="ignore"):
        values = np.asarray(compile_numpy(along, (name,))(np.array(points, float)), float)
    return [value for value in np.ravel(values).tolist() if np.isfinite(value)] if points else []
